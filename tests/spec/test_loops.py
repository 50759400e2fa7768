"""Loops bound to a plant: every controller in the plant's units, every limit as a ratio, an angle or a time."""

from __future__ import annotations

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import scipy.io
from loop_mistakes import A_FILE, PLANT, SLOW, STEPPING, js, npz, one, required, scheduled, two
from test_loops_bad import bound

from linverify import Plant
from linverify.core.errors import Place
from linverify.core.loop import Controller, Limit, Loop, Moved
from linverify.core.model import Array
from linverify.core.realize import pid, trapezoidal

DEGREE = math.pi / 180.0


def loops_of(folder: Path, loops: str, files: dict[str, Any] | None = None, plant: Plant = PLANT) -> dict[str, Loop]:
    told, found = bound(folder, plant, loops, files or {})
    assert told == []
    return dict(found.loops)


def controller(folder: Path, loops: str, files: dict[str, Any] | None = None, plant: Plant = PLANT) -> Controller:
    return loops_of(folder, loops, files, plant)["a"].controller


def limits(folder: Path, words: str, plant: Plant = PLANT) -> dict[str, Limit]:
    return {limit.word: limit for limit in loops_of(folder, required(words), plant=plant)["a"].require}


def close(found: Array, due: object) -> None:
    np.testing.assert_allclose(found, np.array(due, dtype=float), rtol=1e-13, atol=0.0)


def test_a_loop_with_all_its_words(tmp_path: Path) -> None:
    words = (
        "sample: 10 ms, delay: 30 ms, leaves: [speed], break: plant_output, require: {gain_margin: 6 dB}, "
        "confirm: nonlinear"
    )
    loop = loops_of(tmp_path, one("{gain: 2}", more=words))["a"]
    assert (loop.name, loop.place) == ("a", Place("spec.yaml", 2, 3))
    assert (loop.measures, loop.moves) == (("pitch",), (Moved("fore_flap"),))
    assert (loop.sample, loop.delay) == (0.01, 0.03)
    assert (loop.leaves, loop.break_at, loop.confirm) == (("speed",), "plant_output", True)
    assert [limit.word for limit in loop.require] == ["gain_margin"]
    assert loop.controller.text == "{gain: 2}"


def test_what_is_left_out(tmp_path: Path) -> None:
    loop = loops_of(tmp_path, one())["a"]
    assert (loop.sample, loop.delay, loop.leaves, loop.within, loop.require) == (None, 0.0, (), (), ())
    assert (loop.break_at, loop.confirm) == ("plant_input", False)


# gains and their units


def test_pid_gains_are_converted(tmp_path: Path) -> None:
    words = "{pid: {kp: 0.8 deg/cm, ki: 12 deg/m/min, kd: 0.5 rad*s/m, filter: 20 ms}}"
    found = controller(tmp_path, one(words, "[ride_height]"))
    due = pid(80.0 * DEGREE, 0.2 * DEGREE, 0.5, 0.02)
    for one_found, one_due in zip((found.A, found.B, found.C, found.D), due, strict=True):
        close(one_found, one_due)
    assert found.step is None


def test_numbers_without_a_unit_are_in_those_of_the_plant(tmp_path: Path) -> None:
    found = controller(tmp_path, one("{pid: {kp: 3, ki: 5}}", "[ride_height]", "[aft_flap]"))
    close(found.D, [[3.0]])  # deg/m
    close(found.C @ found.B, [[5.0]])
    found = controller(tmp_path, one("{pid: {kp: 3 rad/m}}", "[ride_height]", "[aft_flap]"))
    close(found.D, [[3.0 / DEGREE]])


def test_time_counts_in_the_time_unit_of_the_plant(tmp_path: Path) -> None:
    words = "{pid: {ki: 0.2 1/s, kd: 3 s, filter: 30 s}}"
    found = controller(tmp_path, one(words, more="sample: 6 s, delay: 3 s"), plant=SLOW)
    due = trapezoidal(*pid(0.0, 12.0, 0.05, 0.5), 0.1)
    for one_found, one_due in zip((found.A, found.B, found.C, found.D), due, strict=True):
        close(one_found, one_due)
    assert found.step == pytest.approx(0.1, rel=1e-15)


@pytest.mark.parametrize(
    ("measures", "moves", "written", "due"),
    [
        ("pitch", "fore_flap", "80 %", 0.8),  # an angle for an angle
        ("pitch", "aft_flap", "0.5", 0.5),  # deg/rad, bare: the plant's
        ("pitch", "aft_flap", "0.5 deg/deg", 0.5 / DEGREE),
        ("heat", "thrust", "2 kN/degC", 2000.0),
        ("heat", "thrust", "9 N/degF", 16.2),
        ("load", "thrust", "2 N", 0.02),  # a plain number, of which the plant has per cents
        ("load", "thrust", "2 N/%", 2.0),
        ("speed", "thrust", "1 kN/kn", 1000.0 / (1852.0 / 3600.0)),
    ],
)
def test_gains_of_many_units(tmp_path: Path, measures: str, moves: str, written: str, due: float) -> None:
    close(controller(tmp_path, one(f"{{gain: {written}}}", f"[{measures}]", f"[{moves}]")).D, [[due]])


def test_static_gains_by_rows_of_what_is_moved(tmp_path: Path) -> None:
    words = "{gain: [[1 deg/m, 2], [3 deg/m, 4 deg/deg]]}"
    found = controller(tmp_path, one(words, "[ride_height, pitch]", "[fore_flap, aft_flap]"))
    close(found.D, [[DEGREE, 2.0], [3.0, 4.0 / DEGREE]])
    assert (found.A.shape, found.B.shape, found.C.shape) == ((0, 0), (0, 2), (2, 0))
    assert not found.D.flags.writeable


@pytest.mark.parametrize(
    ("written", "measures", "moves", "due"),
    [
        ("[1, 2]", "[pitch, load]", "[thrust]", [[1.0, 2.0]]),
        ("[1, 2]", "[pitch]", "[thrust, fore_flap]", [[1.0], [2.0]]),
        ("3", "[pitch]", "[thrust]", [[3.0]]),
        ("[[3]]", "[pitch]", "[thrust]", [[3.0]]),
    ],
)
def test_a_line_of_gains_has_the_shape_of_the_loop(
    tmp_path: Path, written: str, measures: str, moves: str, due: list[list[float]]
) -> None:
    close(controller(tmp_path, one(f"{{gain: {written}}}", measures, moves)).D, due)
    close(controller(tmp_path, one(f"{{D: {written}}}", measures, moves)).D, due)


# other forms


def test_num_and_den_highest_power_first(tmp_path: Path) -> None:
    found = controller(tmp_path, one("{num: [2, 3], den: [4, 5]}"))
    for s in (0.3j, 2.0 + 1j):
        value = (found.C @ np.linalg.solve(s * np.eye(1) - found.A, found.B + 0j) + found.D)[0, 0]
        assert value == pytest.approx((2 * s + 3) / (4 * s + 5), rel=1e-14)


def test_matrices_and_their_zero_d(tmp_path: Path) -> None:
    found = controller(tmp_path, one("{A: [[1, 2], [3, 4]], B: [5, 6], C: [7, 8]}"))
    close(found.A, [[1, 2], [3, 4]])
    close(found.B, [[5], [6]])
    close(found.C, [[7, 8]])
    close(found.D, [[0]])
    found = controller(
        tmp_path, one("{A: -1, B: [2 , 3], C: [[4], [5]], D: [[1, 2], [3, 4]]}", "[pitch, load]", "[thrust, aft_flap]")
    )
    close(found.B, [[2, 3]])
    close(found.C, [[4], [5]])
    close(found.D, [[1, 2], [3, 4]])


def test_sampled_controllers_are_difference_equations_as_written(tmp_path: Path) -> None:
    found = controller(tmp_path, one("{num: [2], den: [1, -0.5]}", more="sample: 10 ms"))
    assert found.step == 0.01
    close(found.A, [[0.5]])
    close(found.C @ found.B, [[2.0]])
    found = controller(tmp_path, one("{A: 0.5, B: 1, C: 1}", more="sample: 10 ms"))
    close(found.A, [[0.5]])


def test_a_sampled_pid_is_made_by_the_trapezoidal_rule_and_says_so(tmp_path: Path) -> None:
    found = controller(tmp_path, one("{pid: {kp: 1, ki: 2}}", more="sample: 10 ms"))
    close(found.A, [[1.0]])
    close(found.C @ found.B, [[0.02]])
    close(found.D, [[1.01]])
    assert found.text == "{pid: {kp: 1, ki: 2}}; a difference equation by the trapezoidal rule at 0.01 s"


@pytest.mark.parametrize(("filter_time", "rings"), [("4 ms", True), ("6 ms", False)])
def test_a_filter_that_is_too_fast_for_its_sample_time_rings(tmp_path: Path, filter_time: str, rings: bool) -> None:
    found = controller(tmp_path, one(f"{{pid: {{kd: 1, filter: {filter_time}}}}}", more="sample: 10 ms"))
    assert bool(found.A[0, 0] < 0.0) is rings
    assert found.text.endswith("; its filter is shorter than half the sample time, and rings") is rings


def test_around_a_difference_equation_the_step_is_that_of_the_plant(tmp_path: Path) -> None:
    assert controller(tmp_path, one("{gain: 1}"), plant=STEPPING).step == 0.02
    loop = loops_of(tmp_path, one("{gain: 1}", more="sample: 60 ms, delay: 40 ms"), plant=STEPPING)["a"]
    assert (loop.sample, loop.delay) == (pytest.approx(0.06, rel=1e-15), pytest.approx(0.04, rel=1e-15))


# schedules


@pytest.mark.parametrize(("speed", "due"), [("[kn]", 1.0 + 2.0 * (15.0 * 3600.0 / 1852.0 - 20.0) / 20.0), ("", 0.5)])
def test_a_scheduled_gain_lies_on_the_line_between_its_rows(tmp_path: Path, speed: str, due: float) -> None:
    table = f"speed {speed},kp [deg/m]\n" + ("20,1\n40,3\n" if speed else "10,0\n20,1\n90,1\n")
    loops, files = scheduled("table: gains.csv, over: speed", table)
    told, found = bound(tmp_path, PLANT, loops, files)
    assert told == []
    close(found.loops["a"].controller.D, [[due * DEGREE]])
    assert found.files == (tmp_path / "gains.csv",)
    assert found.loops["a"].controller.text.endswith(
        f"; kp = {due * DEGREE:.6g} rad/m ({due:.6g} deg/m) at speed = 15 m/s"
    )


@pytest.mark.parametrize(
    ("over", "at"), [("speed", 15.0), ("mass", 38_000.0), ("heat", 20.0)]
)  # held, a parameter, and a state that stays at its start
def test_what_may_be_scheduled_over(tmp_path: Path, over: str, at: float) -> None:
    table = f"{over},b,a\n{at - 5},1,3\n{at + 5},2,5\n"
    words = "{num: [{table: t.csv, over: OVER, column: b}], den: [1, {table: t.csv, over: OVER, column: a}]}"
    found = controller(tmp_path, one(words.replace("OVER", over)), {"t.csv": table})
    close(found.A, [[-4.0]])
    close(found.C @ found.B, [[1.5]])


@pytest.mark.parametrize(("at", "due"), [(15.0, 2.0), (10.0, 1.0), (20.0, 3.0)])
def test_rows_themselves_are_hit_exactly(tmp_path: Path, at: float, due: float) -> None:
    table = f"speed,k\n{at - 15.0 + 10.0},1\n{at},2\n{at + 5.0},3\n" if at == 15.0 else "speed,k\n15,DUE\n"
    found = controller(tmp_path, one("{gain: {table: t.csv, over: speed}}"), {"t.csv": table.replace("DUE", str(due))})
    assert found.D[0, 0] == due


def test_entries_of_matrices_may_be_scheduled(tmp_path: Path) -> None:
    words = "{gain: [[{table: gains.csv, over: speed, column: ki}, 0]]}"
    found = controller(tmp_path, one(words, "[pitch, load]"), {"gains.csv": "speed,kp,ki\n10,0,1\n20,0,3\n"})
    close(found.D, [[2.0, 0.0]])


# cascades


def test_a_loop_moves_the_set_point_of_another_one(tmp_path: Path) -> None:
    outer = loops_of(tmp_path, two("moves: [inner.set_point.ride_height], with: [inner]"))["outer"]
    assert outer.moves == (Moved("ride_height", "inner"),)
    assert str(outer.moves[0]) == "inner.set_point.ride_height"
    assert outer.within == ("inner",)


def test_gains_onto_a_set_point_have_its_unit(tmp_path: Path) -> None:
    text = two("moves: [inner.set_point.ride_height], with: [inner]").replace("kp: 1", "kp: 3 cm/deg", 1)
    close(loops_of(tmp_path, text)["outer"].controller.D, [[0.03 / DEGREE]])


def test_two_loops_may_move_the_same_input(tmp_path: Path) -> None:
    found = loops_of(tmp_path, two("moves: [fore_flap], with: [inner]"))
    assert [loop.moves for loop in found.values()] == [(Moved("fore_flap"),)] * 2


# files


def a_file(**other: Any) -> dict[str, str]:
    """Two signals in, two out, in another order and in other units than those of the loop."""
    words: dict[str, Any] = {
        "A": [[-1, 2], [0, -3]],
        "B": [[1, 2], [3, 4]],
        "C": [[5, 6], [7, 8]],
        "D": [[1, 2], [3, 4]],
        "inputs": ["pitch", "ride_height"],
        "outputs": ["thrust", "fore_flap"],
        "units": {"pitch": "deg", "ride_height": "cm", "fore_flap": "deg", "thrust": "kN"},
        "time_unit": "min",
    }
    return {"c.json": json.dumps(words | other)}


def test_files_are_read_by_name_and_in_their_units(tmp_path: Path) -> None:
    text = one("{file: c.json}", "[ride_height, pitch]", "[fore_flap, thrust]")
    found = controller(tmp_path, text, a_file())
    e = np.array([100.0, 1.0 / DEGREE])  # cm a m, deg a rad
    v = np.array([[DEGREE], [1000.0]])
    close(found.A, np.array([[-1, 2], [0, -3]]) / 60.0)
    close(found.B, np.array([[2, 1], [4, 3]]) * e / 60.0)
    close(found.C, v * np.array([[7, 8], [5, 6]]))
    close(found.D, v * np.array([[4, 3], [2, 1]]) * e)
    assert found.text == "{file: c.json}: c.json"


def test_the_sample_time_of_a_file(tmp_path: Path) -> None:
    own = js(dt=0.01)
    assert controller(tmp_path, one("{file: c.json}"), own).step == 0.01
    assert controller(tmp_path, one("{file: c.json}", more="sample: 10 ms"), own).step == 0.01
    found = controller(tmp_path, one("{file: c.json}"), js(dt=10, time_unit="ms"))
    assert found.step == pytest.approx(0.01, rel=1e-15)
    close(found.A, A_FILE["A"])  # a difference equation is not per time
    assert controller(tmp_path, one("{file: c.json}"), js(dt=0)).step is None
    assert controller(tmp_path, one("{file: c.json}"), js(dt=0.02), STEPPING).step == 0.02


def test_a_file_of_static_gains_fits_any_sample_time(tmp_path: Path) -> None:
    gains = js(A=None, B=None, C=None, D=[[3]])
    assert controller(tmp_path, one("{file: c.json}", more="sample: 10 ms"), gains).step == 0.01
    close(controller(tmp_path, one("{file: c.json}"), gains).D, [[3.0]])


def test_files_of_other_formats(tmp_path: Path) -> None:
    due = controller(tmp_path, one("{file: c.json}"), js())
    found = controller(tmp_path, one("{file: c.npz}"), npz())
    scipy.io.savemat(tmp_path / "c.mat", A_FILE)
    of_mat = controller(tmp_path, one("{file: c.mat}"))
    for word in "ABCD":
        close(getattr(found, word), getattr(due, word))
        close(getattr(of_mat, word), getattr(due, word))


def test_a_file_for_each_point_and_a_file_of_all_points(tmp_path: Path) -> None:
    told, found = bound(tmp_path, PLANT, one('{file: "{point}.json"}'), {"kn30.json": js()["c.json"]})
    assert told == []
    assert found.files == (tmp_path / "kn30.json",)
    close(found.loops["a"].controller.A, A_FILE["A"])
    both = {"c.json": json.dumps({"points": {"kn20": A_FILE, "kn30": {**A_FILE, "A": [[-5, 0], [0, -6]]}}})}
    close(controller(tmp_path, one("{file: c.json}"), both).A, [[-5, 0], [0, -6]])


def test_a_file_names_the_set_points_that_it_moves(tmp_path: Path) -> None:
    text = two("moves: [inner.set_point.ride_height], with: [inner]").replace("{pid: {kp: 1}}", "{file: c.json}", 1)
    files = js(outputs=["inner.set_point.ride_height"], units={"inner.set_point.ride_height": "cm"})
    close(loops_of(tmp_path, text, files)["outer"].controller.C, [[0.01, 0.01]])


# objects


OBJECT = """
import numpy as np


class Designed:
    A, B, C, D = np.array([[-1.0]]), np.array([[2.0]]), np.array([[3.0]]), 0

    def __init__(self, dt=None, labels=None):
        self.dt = dt
        if labels:
            self.input_labels = labels

    def __call__(self, s):
        raise AssertionError("a response is not what is asked for")


class Two(Designed):
    B, D = np.array([[1.0, 2.0]]), np.zeros((1, 2))


four = (-1, 2, 3, 4)
five = (-1, 2, 3, 4, 0.01)
words = {"A": [[-1]], "B": [[1, 2]], "C": [[3]], "inputs": ["load", "pitch"]}
thing = Designed()
sampled = Designed(0.01)
labelled = Two(labels=["load", "pitch"])
foreign = Two(labels=["u[0]", "u[1]"])


def made(at):
    return 0, 0, 0, at["speed"] + at["mass"] + at["heat"]


def words_of(at):
    return {"A": -1, "B": 1, "C": 1, "dt": 0.01}
"""


@pytest.mark.parametrize("name", ["four", "thing"])
def test_objects_of_several_kinds(tmp_path: Path, name: str) -> None:
    found = controller(tmp_path, one(f'{{object: "ctl.py:{name}"}}'), {"ctl.py": OBJECT})
    close(found.A, [[-1]])
    close(found.B, [[2]])
    close(found.C, [[3]])
    close(found.D, [[4 if name == "four" else 0]])
    assert found.step is None


@pytest.mark.parametrize("name", ["five", "sampled", "words_of"])
def test_objects_bring_their_sample_time(tmp_path: Path, name: str) -> None:
    assert controller(tmp_path, one(f'{{object: "ctl.py:{name}"}}'), {"ctl.py": OBJECT}).step == 0.01
    found = controller(tmp_path, one(f'{{object: "ctl.py:{name}"}}', more="sample: 10 ms"), {"ctl.py": OBJECT})
    assert found.step == 0.01


def test_four_matrices_are_at_the_sample_time_of_the_loop(tmp_path: Path) -> None:
    found = controller(tmp_path, one('{object: "ctl.py:four"}', more="sample: 10 ms"), {"ctl.py": OBJECT})
    assert found.step == 0.01


def test_an_object_without_sample_time_is_not_taken_for_a_sampled_one(tmp_path: Path) -> None:
    told, _ = bound(tmp_path, PLANT, one('{object: "ctl.py:thing"}', more="sample: 10 ms"), {"ctl.py": OBJECT})
    assert ["continuous" in str(each) for each in told] == [True]


@pytest.mark.parametrize(("name", "due"), [("words", [[2, 1]]), ("labelled", [[2, 1]]), ("foreign", [[1, 2]])])
def test_objects_that_name_their_signals(tmp_path: Path, name: str, due: list[list[float]]) -> None:
    found = controller(tmp_path, one(f'{{object: "ctl.py:{name}"}}', "[pitch, load]"), {"ctl.py": OBJECT})
    close(found.B, due)


def test_a_function_gets_the_values_of_the_operating_point(tmp_path: Path) -> None:
    told, found = bound(tmp_path, PLANT, one('{object: "ctl.py:made"}'), {"ctl.py": OBJECT})
    assert told == []
    close(found.loops["a"].controller.D, [[15.0 + 38_000.0 + 20.0]])
    assert found.files == (tmp_path / "ctl.py",)


# limits


def test_limits_in_the_units_of_the_plant(tmp_path: Path) -> None:
    words = (
        "gain_margin: 6 dB, phase_margin: 45 deg, delay_margin: 80 ms, disk_margin: 0.4, sensitivity_peak: 6 dB, "
        "complementary_peak: 2.5, crossover: [1 rad/s, 0.5 Hz], damping: {min: 0.4}, overshoot: 25 %, settling: 4 s"
    )
    found = limits(tmp_path, words)
    sides = {word: (limit.low, limit.high) for word, limit in found.items()}
    inf = math.inf
    assert sides == {
        "gain_margin": (10.0**0.3, inf),
        "phase_margin": (pytest.approx(math.pi / 4, rel=1e-15), inf),
        "delay_margin": (0.08, inf),
        "disk_margin": (0.4, inf),
        "sensitivity_peak": (-inf, 10.0**0.3),
        "complementary_peak": (-inf, 2.5),
        "crossover": (1.0, pytest.approx(math.pi, rel=1e-15)),
        "damping": (0.4, inf),
        "overshoot": (-inf, 0.25),
        "settling": (-inf, 4.0),
    }
    assert {limit.within for limit in found.values()} == {0.02}
    assert found["phase_margin"].place == Place("spec.yaml", 2, 117)
    assert found["crossover"].text == "[1 rad/s, 0.5 Hz]"


@pytest.mark.parametrize(
    ("words", "told"),
    [
        ("gain_margin: 6 dB", "6 dB"),
        ("gain_margin: 2", "2"),
        ("phase_margin: 45 deg", "45 deg"),
        ("phase_margin: 0.5 rad", "0.5 rad"),
        ("delay_margin: 80 ms", "80 ms"),
        ("overshoot: 25 %", "25 %"),
        ("overshoot: 250 %", "250 %"),
        ("overshoot: 0.25", "0.25"),
        ("sensitivity_peak: 6 dB", "6 dB"),
        ("crossover: [3 Hz, 60 rad/s]", "3 Hz"),
        ("settling: 0.5 min", "0.5 min"),
        ("disk_margin: 0.4", "0.4"),
    ],
)
def test_limits_are_told_as_written(tmp_path: Path, words: str, told: str) -> None:
    (limit,) = limits(tmp_path, words).values()
    side = limit.low if math.isfinite(limit.low) else limit.high
    assert (limit.shown.told_ratio(side) if limit.shown else f"{side:g}") == told


def test_times_and_frequencies_count_in_the_time_unit_of_the_plant(tmp_path: Path) -> None:
    found = limits(tmp_path, "delay_margin: 6 s, crossover: [1 rad/s, 2 Hz], settling: 2, rule: six_db_45_deg", SLOW)
    assert found["delay_margin"].low == pytest.approx(0.1, rel=1e-15)
    assert found["crossover"].low == pytest.approx(60.0, rel=1e-15)
    assert found["crossover"].high == pytest.approx(240.0 * math.pi, rel=1e-15)
    assert found["settling"].high == 2.0


def test_settling_to_another_band(tmp_path: Path) -> None:
    found = limits(tmp_path, "settling: {time: 4 s, within: 5 %}")["settling"]
    assert (found.high, found.within, found.text) == (4.0, 0.05, "{time: 4 s, within: 5 %}")
    assert limits(tmp_path, "settling: {time: 4 s}")["settling"].within == 0.02


def test_both_sides_of_damping(tmp_path: Path) -> None:
    found = limits(tmp_path, "damping: {min: 0.3, max: 0.8}")["damping"]
    assert (found.low, found.high) == (0.3, 0.8)


def test_a_rule_brings_limits_with_source_and_caution(tmp_path: Path) -> None:
    found = limits(tmp_path, "rule: six_db_45_deg")
    assert {word: limit.low for word, limit in found.items()} == {
        "gain_margin": 10.0**0.3,
        "phase_margin": pytest.approx(math.pi / 4),
    }
    for limit in found.values():
        assert limit.rule == "six_db_45_deg"
        assert "common practice" in limit.source
        assert limit.caution
        assert limit.place == Place("spec.yaml", 2, 90)


PRACTICE = "common practice, no published source"
BY_RULE = "6 dB by six_db_45_deg"


@pytest.mark.parametrize(
    ("own", "low", "text", "rule"),
    [
        ("8 dB", 10.0**0.4, f"8 dB, and {BY_RULE} ({PRACTICE})", ""),
        ("4 dB", 10.0**0.3, f"{BY_RULE}, and 4 dB", "six_db_45_deg"),
        ("6 dB", 10.0**0.3, f"{BY_RULE}, and 6 dB", "six_db_45_deg"),
    ],
)
def test_the_stricter_of_a_rule_and_an_own_word_holds_and_both_are_told(
    tmp_path: Path, own: str, low: float, text: str, rule: str
) -> None:
    found = limits(tmp_path, f"gain_margin: {own}, rule: six_db_45_deg")["gain_margin"]
    assert (found.low, found.text, found.rule) == (low, text, rule)
    assert found.source == (PRACTICE if rule else "")
    assert found.place.column == (109 if rule else 97)


def test_two_rules_hold_together(tmp_path: Path) -> None:
    found = limits(tmp_path, "rule: [six_db_45_deg, flight_control_structural_operating_speeds]")
    assert found["gain_margin"].low == pytest.approx(10.0**0.4)
    assert found["phase_margin"].low == pytest.approx(math.pi / 3)
    assert found["gain_margin"].rule == "flight_control_structural_operating_speeds"
    assert found["gain_margin"].text == (
        f"8 dB by flight_control_structural_operating_speeds, and {BY_RULE} ({PRACTICE})"
    )
