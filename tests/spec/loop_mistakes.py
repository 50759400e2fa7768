"""Loops with one mistake each, beside a plant and loops that are right.

Each case: the plant, what stands behind `loops:`, and the files beside the spec.
"""

from __future__ import annotations

import io
import json
from typing import Any

import numpy as np

from linverify import Plant

UNITS: dict[str, Any] = {
    "states": {"speed": "m/s", "pitch": "rad", "ride_height": "m", "heat": "degC"},
    "inputs": {"fore_flap": "rad", "aft_flap": "deg", "thrust": "N"},
    "outputs": {"ride_height": "m", "pitch": "rad", "load": "%"},
    "parameters": {"mass": (38_000.0, "kg")},
}


def ferry(**other: Any) -> Plant:
    """Nobody calls its functions: loops are bound from names and units alone."""
    return Plant(**(UNITS | other), dynamics=lambda t, x, u, p: x, measurement=lambda t, x, u, p: x[:3])


PLANT, STEPPING, SLOW = ferry(), ferry(step=0.02), ferry(time_unit="min")

PID = "{pid: {kp: 1}}"
RIGHT = "a: {controller: {pid: {kp: 1}}, measures: [pitch], moves: [fore_flap]}"
GAINS = "speed [kn],kp [deg/m],ki\n20,1,5\n40,3,7\n"
A_FILE = {"A": [[-1, 0], [0, -2]], "B": [[1], [1]], "C": [[1, 1]], "inputs": ["pitch"], "outputs": ["fore_flap"]}
OBJECT = "import numpy as np\n\n\ndef dc(at):\n    return %s\n\n\nfixed = %s\n"


def one(controller: str = PID, measures: str = "[pitch]", moves: str = "[fore_flap]", more: str = "") -> str:
    """One loop called `a`."""
    tail = f", {more}" if more else ""
    return f"a: {{controller: {controller}, measures: {measures}, moves: {moves}{tail}}}"


def two(outer: str, inner: str = "") -> str:
    """A loop `outer` with these further words, and a loop `inner`."""
    tail, inside = (f", {each}" if each else "" for each in (outer, inner))
    first = f"outer: {{controller: {PID}, measures: [pitch]{tail}}}"
    return f"{first}\n  inner: {{controller: {PID}, measures: [ride_height], moves: [fore_flap]{inside}}}"


def required(words: str) -> str:
    """One loop with these limits."""
    return one(more=f"require: {{{words}}}")


def js(**other: Any) -> dict[str, str]:
    """A file of a controller; a word that is None is left out."""
    return {"c.json": json.dumps({word: value for word, value in (A_FILE | other).items() if value is not None})}


def npz(**arrays: Any) -> dict[str, bytes]:
    """The same as an archive."""
    buffer = io.BytesIO()
    np.savez(buffer, **{word: np.array(value) for word, value in (A_FILE | arrays).items()})
    return {"c.npz": buffer.getvalue()}


def scheduled(
    words: str = "table: gains.csv, over: speed, column: kp", table: str = GAINS
) -> tuple[str, dict[str, str]]:
    """A loop whose kp is scheduled."""
    return one(f"{{pid: {{kp: {{{words}}}}}}}", "[ride_height]"), {"gains.csv": table}


def made(returned: str = "0", fixed: str = "0", name: str = "dc", more: str = "") -> tuple[str, dict[str, str]]:
    """A loop whose controller is a Python object."""
    return one(f'{{object: "ctl.py:{name}"}}', more=more), {"ctl.py": OBJECT % (returned, fixed)}


FILE = one("{file: c.json}")

SIMPLE: dict[str, str] = {
    # words and forms
    "word_unknown": one(more="mesures: [pitch]"),
    "controller_missing": "a: {measures: [pitch], moves: [fore_flap]}",
    "measures_missing": "a: {controller: {gain: 1}, moves: [fore_flap]}",
    "controller_text": one("pid"),
    "controller_empty": one("{}"),
    "controller_unknown": one("{pdi: {kp: 1}}"),
    "controller_two_forms": one("{pid: {kp: 1}, gain: 2}"),
    "controller_num_alone": one("{num: [1]}"),
    "controller_without_c": one("{A: [[1]], B: [[1]]}"),
    "measures_empty": one(measures="[]"),
    "moves_empty": one(moves="[]"),
    "measures_twice": one(measures="[pitch, pitch]"),
    "loop_text": "a: pid",
    "loop_name": "'a b': {controller: {gain: 1}, measures: [pitch], moves: [fore_flap]}",
    "break_word": one(more="break: plant_inputs"),
    "confirm_word": one(more="require: {gain_margin: 6 dB}, confirm: true"),
    "confirm_alone": one(more="confirm: nonlinear"),
    # names
    "measures_unknown": one(measures="[pich]"),
    "measures_input": one(measures="[fore_flap]"),
    "moves_unknown": one(moves="[fore_flop]"),
    "moves_output": one(moves="[pitch]"),
    "moves_loop": two("moves: [inner], with: [inner]"),
    "leaves_unknown": one(more="leaves: [spede]"),
    "leaves_output": one(more="leaves: [load]"),
    # cascades
    "with_unknown": two("moves: [aft_flap], with: [iner]"),
    "with_itself": one(more="with: [a]"),
    "with_circle": two("moves: [aft_flap], with: [inner]", "with: [outer]"),
    "moves_measured_inside": two("moves: [ride_height], with: [inner]"),
    "set_point_of_what": two("moves: [inner.set_point], with: [inner]"),
    "set_point_not_with": two("moves: [inner.set_point.ride_height]"),
    "set_point_unknown_loop": two("moves: [iner.set_point.ride_height], with: [inner]"),
    "set_point_signal": two("moves: [inner.set_point.pitch], with: [inner]"),
    "set_point_own": one(moves="[a.set_point.pitch]"),
    # pid
    "pid_empty": one("{pid: {}}"),
    "pid_filter_alone": one("{pid: {kp: 1, filter: 20 ms}}"),
    "pid_no_filter": one("{pid: {kp: 1, kd: 1}}"),
    "pid_filter_zero": one("{pid: {kd: 1, filter: 0 s}}"),
    "pid_unit": one("{pid: {kp: 0.8 rad}}", "[ride_height]"),
    "pid_unit_ki": one("{pid: {ki: 0.8 rad/m}}", "[ride_height]"),
    "pid_unit_kd": one("{pid: {kd: 0.8 rad/m, filter: 1 s}}", "[ride_height]"),
    "pid_unit_none": one("{pid: {kp: 0.8 furlongs}}"),
    "pid_unit_hertz": one("{pid: {ki: 2 Hz}}"),
    "pid_list": one("{pid: {kp: [1]}}"),
    "pid_nan": one("{pid: {kp: .nan}}"),
    "pid_two_signals": one(measures="[pitch, ride_height]"),
    # num and den
    "rational_empty": one("{num: [], den: [1, 2]}"),
    "rational_improper": one("{num: [1, 0, 0], den: [1, 2]}"),
    "rational_zero": one("{num: [1], den: [0, 0]}"),
    "rational_unit": one("{num: [1 rad], den: [1, 2]}"),
    "rational_number": one("{num: 1, den: [1, 2]}"),
    "rational_rows": one("{num: [[1]], den: [1, 2]}"),
    "rational_moves_two": one("{num: [1], den: [1, 2]}", moves="[fore_flap, aft_flap]"),
    "rational_inf": one("{num: [1], den: [.inf, 2]}"),
    "rational_huge": one("{num: [1e300], den: [1e-300, 1]}"),
    # matrices
    "gain_shape": one("{gain: [[1, 2]]}"),
    "gain_swapped": one("{gain: [[1, 2]]}", moves="[fore_flap, aft_flap]"),
    "gain_number": one("{gain: 1}", moves="[fore_flap, aft_flap]"),
    "gain_ragged": one("{gain: [[1, 2], [3]]}", "[pitch, ride_height]", "[fore_flap, aft_flap]"),
    "gain_mixed": one("{gain: [[1, 2], 3]}", "[pitch, ride_height]", "[fore_flap, aft_flap]"),
    "gain_unit": one("{gain: [[1 deg/m, 2 N]]}", "[ride_height, pitch]"),
    "gain_empty_row": one("{gain: [[]]}"),
    "matrix_not_square": one("{A: [[1, 2]], B: [[1]], C: [[1]]}"),
    "matrix_b_rows": one("{A: [[1, 2], [3, 4]], B: [[1, 1]], C: [[1, 1]]}"),
    "matrix_c_size": one("{A: [[1, 2], [3, 4]], B: [1, 1], C: [1, 2, 3]}"),
    "matrix_d_size": one("{A: 1, B: 1, C: 1, D: [1, 2]}"),
    "matrix_unit": one("{A: 1 rad, B: 1, C: 1}"),
    # times
    "sample_zero": one(more="sample: 0 s"),
    "sample_unit": one(more="sample: 10 m"),
    "delay_negative": one(more="delay: -1 ms"),
    "delay_unit": one(more="delay: 3 deg"),
    # limits
    "gain_margin_zero": required("gain_margin: 0 dB"),
    "gain_margin_ratio": required("gain_margin: 0.5"),
    "gain_margin_unit": required("gain_margin: 6 deg"),
    "gain_margin_spelt": required("gain_margin: 6 db"),
    "gain_margin_huge": required("gain_margin: 1e9 dB"),
    "phase_margin_large": required("phase_margin: 190 deg"),
    "phase_margin_bare": required("phase_margin: 45"),
    "phase_margin_zero": required("phase_margin: 0 deg"),
    "phase_margin_unit": required("phase_margin: 6 dB"),
    "delay_margin_zero": required("delay_margin: 0 s"),
    "delay_margin_unit": required("delay_margin: 80 deg"),
    "disk_margin_large": required("disk_margin: 2.5"),
    "disk_margin_unit": required("disk_margin: 3 dB"),
    "sensitivity_low": required("sensitivity_peak: -1 dB"),
    "complementary_zero": required("complementary_peak: 0"),
    "crossover_order": required("crossover: [4 rad/s, 1 rad/s]"),
    "crossover_mixed": required("crossover: [4 rad/s, 0.1 Hz]"),
    "crossover_zero": required("crossover: [0 Hz, 1 Hz]"),
    "crossover_unit": required("crossover: [1 deg, 4 deg]"),
    "crossover_fast": one(more="sample: 100 ms, require: {crossover: [1 rad/s, 40 rad/s]}"),
    "damping_large": required("damping: {min: 1.2}"),
    "damping_word": required("damping: {least: 0.4}"),
    "overshoot_large": required("overshoot: 1001 %"),
    "overshoot_plain": required("overshoot: 25"),
    "overshoot_unit": required("overshoot: 3 m"),
    "settling_band": required("settling: {time: 4 s, within: 100 %}"),
    "settling_no_time": required("settling: {within: 5 %}"),
    "settling_unit": required("settling: 4 m"),
    "require_word": required("gain_margins: 6 dB"),
    "rule_unknown": required("rule: six_db_45deg"),
    "rule_of_modes": required("rule: phugoid_level_1"),
    "rule_twice": required("rule: [six_db_45_deg, six_db_45_deg]"),
    "rule_empty": required("rule: []"),
}  # fmt: skip

CASES: dict[str, tuple[Plant, str, dict[str, Any]]] = {
    **{name: (PLANT, loops, {}) for name, loops in SIMPLE.items()},
    # difference equations
    "step_sample": (STEPPING, one(more="sample: 30 ms"), {}),
    "step_delay": (STEPPING, one(more="delay: 30 ms"), {}),
    "step_file": (STEPPING, FILE, js()),
    "step_object": (STEPPING, *made("{'A': 1, 'B': 1, 'C': 1}")),
    # schedules
    "schedule_word": (PLANT, *scheduled("table: gains.csv, over: speed, colum: kp")),
    "schedule_no_over": (PLANT, *scheduled("table: gains.csv")),
    "schedule_file": (PLANT, *scheduled("table: gain.csv, over: speed")),
    "schedule_over_unknown": (PLANT, *scheduled("table: gains.csv, over: sped, column: kp")),
    "schedule_over_found": (PLANT, *scheduled("table: gains.csv, over: pitch, column: kp")),
    "schedule_over_no_column": (PLANT, *scheduled("table: gains.csv, over: mass, column: kp")),
    "schedule_column_unknown": (PLANT, *scheduled("table: gains.csv, over: speed, column: kd")),
    "schedule_column_over": (PLANT, *scheduled("table: gains.csv, over: speed, column: speed")),
    "schedule_columns": (PLANT, *scheduled("table: gains.csv, over: speed")),
    "schedule_outside": (PLANT, *scheduled(table="speed [kn],kp\n20,1\n25,2\n")),
    "schedule_order": (PLANT, *scheduled(table="speed,kp\n20,1\n10,2\n")),
    "schedule_twice": (PLANT, *scheduled(table="speed,kp\n10,1\n10,2\n20,3\n")),
    "schedule_unit": (PLANT, *scheduled(table="speed [kn],kp [kN]\n20,1\n40,2\n")),
    "schedule_unit_over": (PLANT, *scheduled(table="speed [kg],kp\n20,1\n40,2\n")),
    "schedule_rows": (PLANT, *scheduled(table="speed,kp\n")),
    "schedule_short": (PLANT, *scheduled(table="speed,kp\n10,1\n20\n")),
    "schedule_cell": (PLANT, *scheduled(table="speed,kp\n10,1\n20,x\n")),
    "schedule_unit_of_plain": (
        PLANT, one("{num: [{table: g.csv, over: speed}], den: [1, 1]}"), {"g.csv": "speed,b [deg]\n10,1\n20,2\n"}
    ),
    "schedule_filter": (
        PLANT, one("{pid: {kd: 1, filter: {table: g.csv, over: speed}}}"), {"g.csv": "speed,f\n10,0\n20,0\n"}
    ),
    # files
    "file_missing": (PLANT, one('{file: "{point}.json"}'), {"kn20.json": ""}),
    "file_form": (PLANT, one("{file: [c.json]}"), {}),
    "file_suffix": (PLANT, one("{file: c.txt}"), {"c.txt": ""}),
    "file_json": (PLANT, FILE, {"c.json": "{"}),
    "file_inputs": (PLANT, FILE, js(inputs=["pich"])),
    "file_inputs_missing": (PLANT, FILE, js(inputs=None)),
    "file_outputs_lack": (PLANT, one("{file: c.json}", moves="[fore_flap, thrust]"), js()),
    "file_outputs_twice": (PLANT, FILE, js(outputs=["fore_flap", "fore_flap"])),
    "file_shape": (PLANT, FILE, js(B=[[1, 1]])),
    "file_square": (PLANT, FILE, js(A=[[1, 2]])),
    "file_no_c": (PLANT, FILE, js(C=None)),
    "file_unit": (PLANT, FILE, js(units={"pitch": "m"})),
    "file_unit_name": (PLANT, FILE, js(units={"pich": "deg"})),
    "file_time_unit": (PLANT, FILE, js(time_unit="m")),
    "file_dt": (PLANT, one("{file: c.json}", more="sample: 10 ms"), js(dt=0.02)),
    "file_dt_absent": (PLANT, one("{file: c.json}", more="sample: 10 ms"), js()),
    "file_dt_negative": (PLANT, FILE, js(dt=-0.02)),
    "file_x0": (PLANT, FILE, js(x0=[0, 0])),
    "file_hold": (PLANT, FILE, js(dt=0.1, hold="straight")),
    "file_point": (PLANT, FILE, js(point="kn20")),
    "file_points": (PLANT, FILE, {"c.json": json.dumps({"points": {"kn20": A_FILE}})}),
    "file_word": (PLANT, FILE, js(E=[[1]])),
    "file_nan": (PLANT, FILE, {"c.json": js()["c.json"].replace("-2", "NaN")}),
    "file_npz": (PLANT, one("{file: c.npz}"), npz(B=[[1, 2]])),
    # objects
    "object_form": (PLANT, one("{object: ctl.py}"), {}),
    "object_file": (PLANT, one('{object: "ctl.py:dc"}'), {}),
    "object_name": (PLANT, made()[0].replace(":dc", ":dcc"), made()[1]),
    "object_syntax": (PLANT, made()[0], {"ctl.py": "def dc(:\n"}),
    "object_raises": (PLANT, *made("1 / 0")),
    "object_key": (PLANT, *made("at['sped']")),
    "object_number": (PLANT, *made("3")),
    "object_nothing": (PLANT, *made(name="fixed", fixed="None")),
    "object_three": (PLANT, *made("(1, 1, 1)")),
    "object_shape": (PLANT, *made("(np.eye(2), np.eye(2), np.eye(2), 0)")),
    "object_square": (PLANT, *made("([[1, 2]], 1, 1, 0)")),
    "object_nan": (PLANT, *made("(float('nan'), 1, 1, 0)")),
    "object_complex": (PLANT, *made("(1j, 1, 1, 0)")),
    "object_dt": (PLANT, *made("(1, 1, 1, 0, 0.02)", more="sample: 10 ms")),
    "object_dt_text": (PLANT, *made("(1, 1, 1, 0, 'fast')")),
    "object_names": (PLANT, *made("{'A': 1, 'B': 1, 'C': 1, 'inputs': ['pich']}")),
    "object_word": (PLANT, *made("{'A': 1, 'B': 1, 'C': 1, 'E': 1}")),
    # several at once: every one is told
    "all_at_once": (
        PLANT,
        one(PID, "[pitch]", "[fore_flop]", "delay: 3 m, require: {gain_margin: 0 dB}, leaves: [x]"),
        {},
    ),
}  # fmt: skip
