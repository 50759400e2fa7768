"""Seeded losses of margin in the demo's loops: each fails with the right figures, and the loops as they are pass.

What is right is worked out in `demo_loops` and `loop_algebra`, without the library's numerics.
"""

from __future__ import annotations

import math
import re
import shutil
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path as File

import numpy as np
import pytest
from faults.demo_loops import (
    DEMO,
    Current,
    Delivered,
    Product,
    Rail,
    Stepped,
    Water,
    converter,
    from_json,
    from_table,
    ride,
    scheduled,
)
from faults.loop_algebra import closed_right, unstable_poles

from linverify.checks.judge import judge
from linverify.core.case import Options
from linverify.core.verdict import Sense, Status, Verdict
from linverify.spec.bind import load

Made = Stepped | Water | Product | Current | Rail
Edits = Sequence[tuple[str, str, str]]  # file, text, what stands in its place

SPECS = {"foil_ferry": "autopilot", "juice_pasteurizer": "control", "buoy_converter": "regulator"}
SIX_DB = 10.0 ** (6.0 / 20.0)
BASIC = {
    "gain margin (upwards)": (SIX_DB, math.inf),
    "gain margin (downwards)": (SIX_DB, math.inf),
    "phase margin": (math.radians(45.0), math.inf),
}
# what each loop has to keep, in the plant's units
LIMITS: dict[str, dict[str, tuple[float, float]]] = {
    "ride": BASIC | {
        "delay margin": (0.1, math.inf),
        "disk margin": (0.5, math.inf),
        "sensitivity peak": (0.0, SIX_DB),
        "crossover": (1.0, 4.0),
        "overshoot": (0.0, 0.4),
    },
    "water": BASIC,
    "product": BASIC | {"delay margin": (10.0, math.inf), "settling to 5 %": (0.0, 1200.0)},
    "current": BASIC | {"phase margin": (math.radians(40.0), math.inf), "sensitivity peak": (0.0, 2.0)},
    "rail": BASIC | {"disk margin": (0.7, math.inf), "crossover": (40.0 * math.pi, 400.0 * math.pi)},
}  # fmt: skip
UNITS: dict[str, Callable[[float], float]] = {
    "dB": lambda value: 10.0 ** (value / 20.0),
    "deg": math.radians,
    "ms": lambda value: 1e-3 * value,
    "min": lambda value: 60.0 * value,
    "Hz": lambda value: 2.0 * math.pi * value,
    "%": lambda value: 0.01 * value,
}
TIGHT = 1e-6  # relative, of what is known in closed form
LOOSE = 1e-4  # and of what is read off a step response
STEPS = ("overshoot", "settling to 5 %")


def judged(folder: File, demo: str, point: str, checks: Sequence[str], edits: Edits = ()) -> dict[str, Verdict]:
    """Verdicts on a demo spec with some texts replaced."""
    shutil.copytree(DEMO / demo, folder / demo, ignore=shutil.ignore_patterns("__pycache__", "pinned"))
    for name, old, new in edits:
        file = folder / demo / name
        text = file.read_text(encoding="utf-8")
        assert old in text, f"{name} has no {old!r}"
        file.write_text(text.replace(old, new), encoding="utf-8")
    (case,) = (case for case in load(folder / demo / f"{SPECS[demo]}.yaml", folder) if case.point == point)
    return {ask.name: judge(case, ask, Options()) for ask in case.checks if ask.name in checks}


def held_to(found: Verdict, loop: str, made: Made) -> list[str]:
    """The names of limits that are lost, after holding every figure of a stable loop to what is worked out."""
    told = made.told()
    assert {figure.what for figure in found.figures} == set(LIMITS[loop])
    lost = []
    for figure in found.figures:
        low, high = LIMITS[loop][figure.what]
        value, known = UNITS.get(figure.unit, float)(figure.worst), told[figure.what]
        if figure.what in STEPS:
            error = UNITS.get(figure.unit, float)(figure.error)
            assert error <= 0.005 * value
            assert value == pytest.approx(known, rel=LOOSE, abs=error), figure.what
        else:
            assert value == pytest.approx(known, rel=TIGHT), figure.what
        kept = low <= known <= high
        assert figure.status is (Status.PASS if kept else Status.FAIL), figure.what
        limits = (figure.low if figure.sense is Sense.RANGE else None, figure.limit)
        ends = [UNITS.get(figure.unit, float)(each) for each in limits if each is not None]
        assert ends == pytest.approx([each for each in (low, high) if 0.0 < each < math.inf])
        if not kept:
            lost.append(figure.what)
    return lost


@dataclass(frozen=True)
class Fault:
    """A demo with a fault. made: the loop as it then is; lost: limits that it breaks, empty where it is unstable."""

    demo: str
    loop: str
    point: str
    edits: Edits
    made: Made
    lost: tuple[str, ...] = ()


AUTO, CONTROL, REGULATOR, GAINS = "autopilot.yaml", "control.yaml", "regulator.yaml", "gains.csv"
KN24 = from_json(DEMO / "foil_ferry" / "models" / "kn24.json")
KN34 = from_json(DEMO / "foil_ferry" / "models" / "cruise-34kn.json")
SLOW = from_table(DEMO / "juice_pasteurizer" / "models.csv", "slow")
DRAINED = from_json(DEMO / "buoy_converter" / "models" / "drained.json")
AT_24, AT_34 = ride(KN24, **scheduled(24.0)), ride(KN34, **scheduled(34.0))
WATER, PRODUCT = Water(SLOW), Product(SLOW)
CURRENT = Current(DRAINED)
RAIL = Rail(DRAINED, CURRENT)
ROW_34, ROW_26, ROW_20 = "34,24,9,10", "26,30,10,14", "20,36,12,16"


def ferry(point: str, edits: Edits, made: Stepped, *lost: str) -> Fault:
    return Fault("foil_ferry", "ride", point, edits, made, lost)


def juice(loop: str, edits: Edits, made: Made, *lost: str) -> Fault:
    return Fault("juice_pasteurizer", loop, "slow", [(CONTROL, old, new) for old, new in edits], made, lost)


def buoy(loop: str, edits: Edits, made: Made, *lost: str) -> Fault:
    return Fault("buoy_converter", loop, "drained", [(REGULATOR, old, new) for old, new in edits], made, lost)


def times(loop: Stepped, factor: float) -> Stepped:
    return replace(loop, kp=factor * loop.kp, ki=factor * loop.ki, kd=factor * loop.kd)


def columns(unit: str, line: str = "[deg/m],ki [deg/m/s],kd [deg*s/m]") -> tuple[str, str, str]:
    return GAINS, line, line.replace("deg", unit)


def delayed(text: str) -> tuple[str, str, str]:
    return AUTO, "delay: 20 ms", f"delay: {text}"


KD = (AUTO, "        kd: {table: gains.csv, over: speed, column: kd}\n        filter: 50 ms\n", "")
FLAP, VALVE = "fore_flap: {lag: 60 ms", "actuators:\n  steam_valve: {lag: 30 s}\n\nloops:"
PI = "{kp: 0.6, ki: 1.8 1/min}"
RAIL_PI = "{kp: 0.3 A/V, ki: 300 A/V/s}"
COIL = "    sample: 20 us\n    delay: 10 us"

FAULTS = {
    # sampled, scheduled, behind an actuator, with dead time
    "ride, gain doubled": ferry("kn24", [(GAINS, ROW_20, "20,72,24,32"), (GAINS, ROW_26, "26,60,20,28")],
                                times(AT_24, 2.0), "crossover"),
    "ride, gain three times": ferry("cruise-34kn", [(GAINS, ROW_34, "34,72,27,30")], times(AT_34, 3.0),
                                    "gain margin (upwards)", "phase margin", "delay margin", "disk margin",
                                    "sensitivity peak", "crossover", "overshoot"),
    "ride, gain eight times": ferry("cruise-34kn", [(GAINS, ROW_34, "34,192,72,80")], times(AT_34, 8.0)),
    "ride, 300 ms of dead time": ferry("cruise-34kn", [delayed("300 ms")], replace(AT_34, delay=0.3),
                                       "gain margin (upwards)", "phase margin", "delay margin", "disk margin",
                                       "sensitivity peak", "overshoot"),
    "ride, 95 ms of dead time": ferry("cruise-34kn", [delayed("95 ms")], replace(AT_34, delay=0.095),
                                      "phase margin"),
    "ride, 600 ms of dead time": ferry("cruise-34kn", [delayed("600 ms")], replace(AT_34, delay=0.6)),
    "ride, no derivative gain": ferry("cruise-34kn", [KD], replace(AT_34, kd=0.0), "gain margin (downwards)",
                                      "phase margin", "delay margin", "disk margin", "sensitivity peak", "overshoot"),
    "ride, sign flipped": ferry("kn24", [(GAINS, ROW_20, "20,-36,-12,-16"), (GAINS, ROW_26, "26,-30,-10,-14")],
                                times(AT_24, -1.0)),
    "ride, sample time 400 ms": ferry("cruise-34kn", [(AUTO, "sample: 20 ms", "sample: 400 ms")],
                                      replace(AT_34, sample=0.4), "gain margin (upwards)", "phase margin",
                                      "disk margin", "sensitivity peak", "overshoot"),
    "ride, gains of 20 kn at 34 kn": ferry("cruise-34kn", [(GAINS, ROW_34, "34,36,12,16")],
                                           ride(KN34, **scheduled(20.0)), "crossover"),
    "ride, actuator ten times slower": ferry("kn24", [(AUTO, FLAP, "fore_flap: {lag: 600 ms")],
                                             ride(KN24, **scheduled(24.0), lag=0.6),
                                             "phase margin", "disk margin", "sensitivity peak", "overshoot"),
    "ride, gains in rad": ferry("kn24", [columns("rad")], times(AT_24, 180.0 / math.pi)),
    "ride, derivative gain in rad": ferry("kn24", [columns("rad", "kd [deg*s/m]")],
                                          replace(AT_24, kd=AT_24.kd * 180.0 / math.pi)),
    # a cascade with dead time
    "water, sign flipped": juice("water", [("gain: [[0.1]]", "gain: [[-0.1]]")], replace(WATER, gain=-0.1)),
    "water, sixty times, slow valve": juice("water", [("gain: [[0.1]]", "gain: [[6]]"), ("loops:", VALVE)],
                                            replace(WATER, gain=6.0, lag=30.0), "phase margin"),
    "product, gain doubled": juice("product", [(PI, "{kp: 1.2, ki: 3.6 1/min}")], replace(PRODUCT, kp=1.2, ki=0.06),
                                   "gain margin (upwards)", "phase margin"),
    "product, gain three times": juice("product", [(PI, "{kp: 1.8, ki: 5.4 1/min}")],
                                       replace(PRODUCT, kp=1.8, ki=0.09)),
    "product, dead time doubled": juice("product", [("delay: 5 s", "delay: 10 s")], replace(PRODUCT, delay=10.0),
                                        "phase margin"),
    "product, dead time a minute": juice("product", [("delay: 5 s", "delay: 1 min")], replace(PRODUCT, delay=60.0)),
    "product, no proportional gain": juice("product", [(PI, "{ki: 1.8 1/min}")], replace(PRODUCT, kp=0.0),
                                           "gain margin (upwards)", "phase margin"),
    "product, sign flipped": juice("product", [(PI, "{kp: -0.6, ki: -1.8 1/min}")],
                                   replace(PRODUCT, kp=-0.6, ki=-0.03)),
    "product, inner sign flipped": juice("product", [("gain: [[0.1]]", "gain: [[-0.1]]")],
                                         replace(PRODUCT, gain=-0.1)),
    "product, inner loop hardly closed": juice("product", [("gain: [[0.1]]", "gain: [[0.01]]")],
                                               replace(PRODUCT, gain=0.01), "phase margin"),
    "product, sampled every 20 s": juice("product", [("delay: 5 s", "delay: 5 s\n    sample: 20 s")],
                                         PRODUCT.sampled(20.0), "phase margin"),
    "product, sampled every 40 s": juice("product", [("delay: 5 s", "delay: 5 s\n    sample: 40 s")],
                                         PRODUCT.sampled(40.0), "gain margin (upwards)", "phase margin"),
    "product, per second for per minute": juice("product", [("ki: 1.8 1/min", "ki: 1.8 1/s")],
                                                replace(PRODUCT, ki=1.8)),
    "product, valve with a lag of 30 s": juice("product", [("loops:", VALVE)], replace(PRODUCT, lag=30.0),
                                               "gain margin (upwards)", "phase margin", "settling to 5 %"),
    # two sampled loops
    "current, gain seven times": buoy("current", [("0.02 1/A", "0.14 1/A")], replace(CURRENT, gain=0.14),
                                      "phase margin", "sensitivity peak"),
    "current, gain twenty times": buoy("current", [("0.02 1/A", "0.4 1/A")], replace(CURRENT, gain=0.4)),
    "current, ten times the dead time": buoy("current", [("delay: 10 us", "delay: 100 us")],
                                             replace(CURRENT, delay=100e-6),
                                             "gain margin (upwards)", "sensitivity peak"),
    "current, 250 us of dead time": buoy("current", [("delay: 10 us", "delay: 250 us")],
                                         replace(CURRENT, delay=250e-6)),
    "current, sample time doubled three times": buoy("current", [(COIL, COIL.replace("20 us", "160 us"))],
                                                     replace(CURRENT, sample=160e-6),
                                                     "gain margin (upwards)", "sensitivity peak"),
    "current, sample time doubled four times": buoy("current", [(COIL, COIL.replace("20 us", "320 us"))],
                                                    replace(CURRENT, sample=320e-6)),
    "current, sign flipped": buoy("current", [("0.02 1/A", "-0.02 1/A")], replace(CURRENT, gain=-0.02)),
    "current, per mA for per A": buoy("current", [("0.02 1/A", "0.02 1/mA")], replace(CURRENT, gain=20.0)),
    "rail, gain ten times": buoy("rail", [(RAIL_PI, "{kp: 3 A/V, ki: 3000 A/V/s}")],
                                 replace(RAIL, kp=3.0, ki=3e3), "crossover"),
    "rail, gain a hundred times": buoy("rail", [(RAIL_PI, "{kp: 30 A/V, ki: 30000 A/V/s}")],
                                       replace(RAIL, kp=30.0, ki=3e4)),
    "rail, integral gain ten times": buoy("rail", [("300 A/V/s", "3000 A/V/s")], replace(RAIL, ki=3e3),
                                          "phase margin", "disk margin", "crossover"),
    "rail, sign flipped": buoy("rail", [(RAIL_PI, "{kp: -0.3 A/V, ki: -300 A/V/s}")],
                               replace(RAIL, kp=-0.3, ki=-300.0)),
    "rail, every hundredth sample, integral gain ten times": buoy(
        "rail", [("20 us\n    require: {rule", "2 ms\n    require: {rule"), ("300 A/V/s", "3 A/V/ms")],
        replace(RAIL, times=100, ki=3e3)),
    "rail, per ms for per s": buoy("rail", [("300 A/V/s", "300 A/V/ms")], replace(RAIL, ki=3e5)),
    "rail, inner gain of another coil": buoy("rail", [("0.02 1/A", "0.002 1/A")],
                                             replace(RAIL, current=replace(CURRENT, gain=0.002)), "crossover"),
    "rail, inner loop unstable": buoy("rail", [("0.02 1/A", "0.4 1/A")],
                                      replace(RAIL, current=replace(CURRENT, gain=0.4))),
}  # fmt: skip


def with_entry(model: Delivered, row: str, column: str, value: float) -> Delivered:
    """With one entry of A changed."""
    A = model.A.copy()
    A[model.states.index(row), model.states.index(column)] = value
    return replace(model, A=A)


KN24_FILE, PITCH = "models/kn24.json", -4.0  # instead of -13.5 1/s
FAULTS |= {
    "ride, pitch hardly damped": Fault(
        "foil_ferry", "ride", "kn24", [(KN24_FILE, "-13.5294", str(PITCH))],
        ride(with_entry(KN24, "pitch_rate", "pitch_rate", PITCH), **scheduled(24.0)),
        ("phase margin", "delay margin", "disk margin", "sensitivity peak", "overshoot"),
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", FAULTS)
def test_a_lost_margin_fails_with_the_right_figures(tmp_path: File, name: str) -> None:
    fault = FAULTS[name]
    check = f"margins.{fault.loop}"
    found = judged(tmp_path, fault.demo, fault.point, [check], fault.edits)[check]
    assert found.status is Status.FAIL, found.reason
    if fault.lost:
        assert closed_right(fault.made.loop()) == 0
        assert sorted(held_to(found, fault.loop, fault.made)) == sorted(fault.lost)
        assert all(f"{what} is " in found.reason for what in fault.lost)
        return
    poles = unstable_poles(fault.made.loop())
    assert poles
    assert not found.figures
    listed = [complex(pole["real"], pole["imag"]) for pole in found.details["margins"]["closed_loop_poles"]]
    told = [complex(float(a), float(b or 0.0)) for a, b in re.findall(r"pole (\S+)(?: \+- (\S+)j)? per", found.reason)]
    for pole in poles:
        assert min(abs(each - pole) for each in listed) <= TIGHT * abs(pole)
        assert min(abs(each - pole) for each in told) <= 1e-3 * abs(pole)
    assert len(told) == len(poles)
    flipped = "sign flipped" in name and "inner" not in name
    assert ("with the opposite sign it would be stable" in found.reason) == flipped


RIGHT = {
    "ride, kn24": Fault("foil_ferry", "ride", "kn24", (), AT_24),
    "ride, cruise-34kn": Fault("foil_ferry", "ride", "cruise-34kn", (), AT_34),
    "water": juice("water", (), WATER),
    "product": juice("product", (), PRODUCT),
    "current": buoy("current", (), CURRENT),
    "rail": buoy("rail", (), RAIL),
}


@pytest.mark.parametrize("name", RIGHT)
def test_the_loops_as_they_are_pass_with_the_right_figures(tmp_path: File, name: str) -> None:
    right = RIGHT[name]
    check = f"margins.{right.loop}"
    found = judged(tmp_path, right.demo, right.point, [check])[check]
    assert found.status is Status.PASS, found.reason
    assert closed_right(right.made.loop()) == 0
    assert held_to(found, right.loop, right.made) == []


def damping(model: Delivered, low: float, high: float) -> float:
    """The smallest damping ratio of the modes whose natural frequency lies in between."""
    poles = np.linalg.eigvals(model.A)
    return min(-pole.real / abs(pole) for pole in poles if low < abs(pole) < high)


def slowest(model: Delivered) -> float:
    return float(-1.0 / np.linalg.eigvals(model.A).real.max())


def doubling(model: Delivered) -> float:
    return math.log(2.0) / float(np.linalg.eigvals(model.A).real.max())


@dataclass(frozen=True)
class Lost:
    """A fault that `modes` finds. what: the figure begins with that; value, limit: in its unit."""

    demo: str
    point: str
    edits: Edits
    what: str
    value: float
    limit: float


LOSSLESS = dict.fromkeys(("battery_resistance", "coil_resistance", "switch_resistance", "capacitor_resistance"), 1e-3)
PARAMETERS = ", ".join(f"{name}: {value} ohm" for name, value in LOSSLESS.items())
DERIVED = [
    (REGULATOR, 'local_models: {source: "models/{point}.json"}', "local_models: {source: derive}"),
    (REGULATOR, "\nenvelope:", f"parameters: {{{PARAMETERS}}}\n\nenvelope:"),
]
RINGING = converter(LOSSLESS, 24.0, 11.2, 1.5)
FILTER = (300.0 * 2.0 * math.pi, 1000.0 * 2.0 * math.pi)
MODES = {
    "filter, resistance in the delivered model": Lost(
        "buoy_converter", "drained", [("models/drained.json", "-1189.04", "-237.8")], "filter: damping ratio",
        damping(with_entry(DRAINED, "coil_current", "coil_current", -237.8), *FILTER), 0.05,
    ),
    "filter, resistances of the plant": Lost(
        "buoy_converter", "drained", DERIVED, "filter: damping ratio", damping(RINGING, *FILTER), 0.05,
    ),
    "warm-up, heat lost by the water": Lost(
        "juice_pasteurizer", "slow", [("models.csv", "slow,A,water,water,-0.0183009", "slow,A,water,water,-0.0173009")],
        "warm-up: time constant", slowest(with_entry(SLOW, "water", "water", -0.0173009)) / 60.0, 5.0,
    ),
    "ferry, pitch driven instead of damped": Lost(
        "foil_ferry", "kn24", [(KN24_FILE, "-13.5294", "13.5294")], "time to double",
        doubling(with_entry(KN24, "pitch_rate", "pitch_rate", 13.5294)), 5.0,
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", MODES)
def test_lost_damping_fails_with_the_right_figure(tmp_path: File, name: str) -> None:
    lost = MODES[name]
    found = judged(tmp_path, lost.demo, lost.point, ["modes"], lost.edits)["modes"]
    assert found.status is Status.FAIL, found.reason
    figure = min(
        (each for each in found.figures if each.what.startswith(lost.what) and each.status is Status.FAIL),
        key=lambda each: each.headroom,
    )
    assert figure.worst == pytest.approx(lost.value, rel=1e-5)
    assert figure.limit == lost.limit
    assert (lost.value < lost.limit) == (figure.sense is Sense.LOWER)


def test_modes_as_they_are_pass_with_the_right_figures(tmp_path: File) -> None:
    found = judged(tmp_path / "a", "buoy_converter", "drained", ["modes"])["modes"]
    assert found.status is Status.PASS
    assert found.figures[0].worst == pytest.approx(damping(DRAINED, *FILTER), rel=1e-6)
    found = judged(tmp_path / "b", "juice_pasteurizer", "slow", ["modes"])["modes"]
    assert found.status is Status.PASS
    (figure,) = (each for each in found.figures if each.what.startswith("warm-up"))
    assert figure.worst == pytest.approx(slowest(SLOW) / 60.0, rel=1e-5)


def test_a_loop_around_a_plant_that_has_lost_its_damping(tmp_path: File) -> None:
    """Slopes are derived from the changed plant; the current loop gives the filter its damping back, and passes."""
    found = judged(tmp_path, "buoy_converter", "drained", ["margins.current"], DERIVED)["margins.current"]
    made = replace(CURRENT, model=RINGING)
    assert found.status is Status.PASS, found.reason
    assert closed_right(made.loop()) == 0
    assert held_to(found, "current", made) == []
