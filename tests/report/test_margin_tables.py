"""Margins of a loop as Markdown: figures with their frequencies, guarantees, poles, where limits come from."""

from __future__ import annotations

import copy
import math
from typing import Any

from linverify.report import text as terminal
from linverify.report.details import blocks
from linverify.report.wire import plain, restored


def met(value: float, unit: str = "", error: float = 0.0, frequency: float | None = None) -> dict[str, Any]:
    found: dict[str, Any] = {"value": value, "unit": unit, "error": error}
    return found if frequency is None else {**found, "frequency": frequency}


DISK = {**met(0.4, "", 0.0, 2.0), "guaranteed": {"gain_down": 0.6667, "gain_up": 1.5, "phase": 22.62}}
LOOP: dict[str, Any] = {
    "loop": "ride",
    "controller": "pid kp 0.8 rad/m",
    "broken_at": "plant_input",
    "measures": ["ride_height"],
    "moves": ["fore_flap"],
    "inside": ["damper"],
    "delay": {"value": 0.03, "unit": "s"},
    "sample": {"value": 0.01, "unit": "s"},
    "frequency_unit": "rad/s",
    "stable": True,
    "channels": [
        {
            "channel": "fore_flap",
            "gain_up": met(2.0, "", 1e-9, 5.5),
            "gain_down": met(0.0),
            "phase": met(44.9, "deg", 0.02, 1.9),
            "delay": met(0.41, "s", 0.0, 1.9),
            "sensitivity_peak": met(1.9953, "", 0.0, 3.3),
            "complementary_peak": met(1.5, "", 0.0, 2.2),
            "disk": DISK,
            "crossovers": [{"frequency": 1.9, "phase": 44.9}, {"frequency": 7.5, "phase": -60.0}],
            "phase_crossings": [{"frequency": 5.5, "gain": 2.0}],
        }
    ],
    "all_channels": {
        "sensitivity_peak": met(2.2, "", 0.0, 3.0),
        "disk": {"input": DISK, "both": {**DISK, "value": 0.2}},
    },
    "steps": [
        {
            "channel": "ride_height", "overshoot": met(12.0, "%"), "settling": met(3.4, "s"), "within": 2.0,
            "final": met(1.0),
        }
    ],
    "closed_loop_poles": [
        {"real": -1.0, "imag": 2.0, "natural_frequency": 2.236, "damping": 0.447, "time_constant": 1.0},
        {"real": -1.0, "imag": -2.0, "natural_frequency": 2.236, "damping": 0.447, "time_constant": 1.0},
    ],
    "unmoved_poles": [
        {"real": 0.0, "imag": 0.0, "natural_frequency": 0.0, "states": {"heading": 0.97, "roll": 0.03}, "excused": True}
    ],
    "limits": [
        {"word": "gain_margin", "text": "six_db_45_deg", "rule": "six_db_45_deg", "source": "common practice",
         "caution": "no published source"},
        {"word": "crossover", "text": "1 to 4 rad/s"},
    ],
}  # fmt: skip


def told(margins: Any) -> str:
    return "\n\n".join(blocks({"margins": restored(plain(margins))}, {}, "s"))


def cells(text: str, start: str) -> list[str]:
    (line, *_) = (line for line in text.splitlines() if line.startswith(f"| {start}"))
    return [cell.strip() for cell in line.strip("|").split("|")]


def test_a_loop_says_what_it_is() -> None:
    text = told(LOOP)
    assert cells(text, "controller")[1] == "pid kp 0.8 rad/m"
    assert cells(text, "declared dead time")[1] == "0.03 s"
    assert cells(text, "sample time")[1] == "0.01 s"
    assert cells(text, "loops closed inside")[1] == "damper"
    assert cells(text, "broken")[1] == "at the plant's input"
    assert cells(text, "closed loop")[1] == "stable"


def test_margins_stand_with_the_frequency_they_were_met_at() -> None:
    (_, up, down, phase, delay, ms, mt) = cells(told(LOOP).split("Margins, one channel")[1], "fore_flap")
    assert up == "6.021 dB (factor 2) at 5.5 rad/s"
    assert down == "no limit"
    assert phase == "44.9 deg +- 0.02 deg at 1.9 rad/s"
    assert delay == "0.41 s at 1.9 rad/s"
    assert ms == "6 dB (factor 1.995) at 3.3 rad/s"
    assert mt.startswith("3.522 dB (factor 1.5)")


def test_disk_margins_stand_with_what_they_guarantee() -> None:
    text = told(LOOP).split("Disk margins")[1]
    (_, margin, gain, phase) = cells(text, "fore_flap")
    assert margin == "0.4 at 2 rad/s"
    assert gain == "-3.52 to +3.52 dB (factor 0.6667 to 1.5)"
    assert phase == "+-22.62 deg"
    assert cells(text, "all, at both")[1] == "0.2 at 2 rad/s"


def test_a_disk_margin_of_two_allows_any_factor() -> None:
    disk = {**met(2.0, "", 0.0, 2.0), "guaranteed": {"gain_down": 0.0, "gain_up": math.inf, "phase": 90.0}}
    text = told({**LOOP, "channels": [{**LOOP["channels"][0], "disk": disk}]}).split("Disk margins")[1]
    assert cells(text, "fore_flap")[2:] == ["any factor above 0", "+-90 deg"]


def test_every_crossing_is_listed() -> None:
    text = told(LOOP).split("Crossings:")[1].split("Step of")[0]
    rows = [[cell.strip() for cell in line.strip("|").split("|")] for line in text.splitlines() if "fore_flap" in line]
    assert rows == [
        ["fore_flap", "gain is one", "1.9 rad/s", "44.9 deg more lag"],
        ["fore_flap", "gain is one", "7.5 rad/s", "60 deg more lead"],
        ["fore_flap", "phase is -180 deg", "5.5 rad/s", "gain times 2"],
    ]
    assert "The nearest of them are the margins" in text
    assert "Crossings: none." in told({**LOOP, "channels": [{"channel": "fore_flap", "gain_up": met(math.inf)}]})


def test_poles_steps_and_what_is_not_moved() -> None:
    text = told(LOOP)
    poles = text.split("Closed-loop poles, per s:")[1].split("Poles that")[0]
    assert poles.count("-1 +- 2j") == 1  # a pair stands in one row
    assert cells(text.split("Poles that this loop does not move")[1], "0 ")[1:] == [
        "heading 97 %, roll 3 %", "left to others",
    ]  # fmt: skip
    assert cells(text.split("Step of the set point")[1], "ride_height")[1:] == ["12 %", "3.4 s", "2 %", "1"]


def test_ready_made_limits_say_where_they_come_from() -> None:
    both = [LOOP["limits"][0], {**LOOP["limits"][0], "word": "phase_margin"}, LOOP["limits"][1]]
    text = told({**LOOP, "limits": both}).split("Ready-made limits")[1]
    assert cells(text, "six_db_45_deg") == [
        "six_db_45_deg", "gain margin, phase margin", "common practice", "no published source",
    ]  # fmt: skip
    assert text.count("no published source") == 1
    assert "crossover" not in text
    assert "Ready-made" not in told({**LOOP, "limits": LOOP["limits"][1:]})


def test_what_stands_between_loop_and_plant_is_told() -> None:
    way = {
        "lags": {"fore_flap": {"value": 0.06, "unit": "s"}},
        "late": {"fore_flap": {"value": 0.1, "unit": "s"}},
        "old": {"ride_height": {"value": 0.2, "unit": "s"}},
    }
    text = told({**LOOP, **way})
    assert cells(text, "lags of actuators")[1] == "fore_flap 0.06 s"
    assert cells(text, "dead times of inputs")[1] == "fore_flap 0.1 s"
    assert cells(text, "dead times of measurements")[1] == "ride_height 0.2 s"


def test_a_continuous_loop_with_dead_time_says_that_not_all_poles_are_listed() -> None:
    continuous = {word: value for word, value in LOOP.items() if word != "sample"}
    late = {"late": {"fore_flap": {"value": 0.1, "unit": "s"}}}
    plain = {word: value for word, value in continuous.items() if word != "delay"}
    assert "infinitely many" in told(continuous)
    assert "infinitely many" in told({**plain, **late})
    assert "infinitely many" not in told(plain)
    assert "infinitely many" not in told(LOOP)  # sampled: its dead time is states


def test_a_delay_margin_that_nobody_asked_for_is_not_passed_off_as_none() -> None:
    channel = {word: value for word, value in LOOP["channels"][0].items() if word != "delay"}
    without = {**LOOP, "channels": [channel]}
    assert cells(told(without).split("Margins, one channel")[1], "fore_flap")[4] == "not asked for"
    asked = {**without, "limits": [{"word": "delay_margin", "text": "80 ms"}]}
    assert cells(told(asked).split("Margins, one channel")[1], "fore_flap")[4] == "-"


def test_errors_of_factors_stand_beside_the_factor_and_limits_at_infinity_read_as_such() -> None:
    channel = {
        **LOOP["channels"][0],
        "gain_up": met(2.0, "", 0.01, 5.5),
        "sensitivity_peak": met(1.0, "", 0.0, math.inf),
    }
    (_, up, _, _, _, ms, _) = cells(told({**LOOP, "channels": [channel]}).split("Margins, one channel")[1], "fore_flap")
    assert up == "6.021 dB (factor 2 +- 0.01) at 5.5 rad/s"
    assert ms == "0 dB (factor 1) in the limit of high frequency"


def test_poles_stand_slowest_first_and_those_not_moved_say_what_becomes_of_them() -> None:
    poles = [{"real": -value, "imag": 0.0, "natural_frequency": value} for value in (9.0, 0.5, 3.0)]
    text = told({**LOOP, "closed_loop_poles": poles}).split("Closed-loop poles")[1]
    assert text.index("-0.5") < text.index("-3") < text.index("-9")
    rows = [{"real": -2.0, "imag": 0.0, "states": {"x": 1.0}}, {"real": 0.3, "imag": 0.0, "states": {"y": 1.0}}]
    text = told({**LOOP, "unmoved_poles": rows}).split("Poles that this loop does not move")[1]
    assert cells(text, "-2")[2] == "stable"
    assert cells(text, "0.3")[2] == "not stable"


def test_margins_carry_the_caution() -> None:
    assert terminal.CAUTION in told(LOOP)


def test_an_unstable_loop_shows_its_poles_and_no_margins() -> None:
    unstable = {key: value for key, value in LOOP.items() if key not in ("channels", "all_channels", "steps")}
    text = told({**unstable, "stable": False})
    assert cells(text, "closed loop")[1] == "unstable"
    assert "Closed-loop poles" in text
    assert "Margins, one channel" not in text
    assert "Crossings" not in text


def test_whatever_is_missing_or_odd_is_survived() -> None:
    for word in LOOP:
        for value in (None, [], {}, "odd", 3.0, [1.0], {"a": {"b": [1]}}, math.nan):
            assert told({**copy.deepcopy(LOOP), word: value})
        assert told({key: own for key, own in LOOP.items() if key != word})
    channel = LOOP["channels"][0]
    for word in channel:
        for value in (None, "odd", math.inf, {"value": math.nan, "unit": ""}, {"value": "x"}, [3]):
            assert told({**LOOP, "channels": [{**channel, word: value}]})


def test_what_was_tried_on_the_plant_is_told() -> None:
    tried = [
        {"change": "gain times 1.9 (0.9 of the margin upwards)", "signal": "fore_flap", "must": "rest",
         "status": "pass", "became": "comes to rest", "growth": -0.12, "unit": "1/s", "periods": 24},
        {"change": "gain times 2.1", "signal": "fore_flap", "must": "grow", "status": "undecided",
         "became": "cannot be followed", "growth": None, "unit": "1/s", "periods": 0},
    ]  # fmt: skip
    text = "\n\n".join(blocks({"margins": LOOP, "confirmed": tried}, {}, "s")).split("tried on the nonlinear")[1]
    assert cells(text, "gain times 1.9")[1:] == ["fore_flap", "come to rest", "comes to rest", "-0.12 1/s", "pass"]
    assert cells(text, "gain times 2.1")[4] == "-"
