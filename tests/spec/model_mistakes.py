"""Files of models with one mistake each, beside a plant and a spec that are right."""

from __future__ import annotations

import io
import json
import warnings
from typing import Any

import numpy as np
import scipy.io

PLANT = """
from linverify import Plant


def dynamics(t, x, u, p):
    return [u[0] - x[0], u[1] - x[1]]


def measurement(t, x, u, p):
    return [x[0], x[0] + x[1]]


tank = Plant(
    states={"level": "m", "temperature": "degC"},
    inputs={"inflow": "m/s", "heat": "degC/s"},
    outputs={"level": "m", "excess": "m"},
    parameters={"area": (1.0, "m^2")},
    dynamics=dynamics,
    measurement=measurement,
)
"""
SPEC = """\
linverify: 1
plant: plant.py:tank
operating_points:
  full: {hold: {level: 1 m, temperature: 20 degC}}
local_models: {source: "SOURCE"}
"""
A, B, C, D = [[-1.0, 0.5], [0.0, -1.0]], [[1.0, 0.0], [0.0, 1.0]], [[1.0, 0.0], [1.0, 1.0]], [[0.0, 0.0], [0.0, 0.0]]
MODEL: dict[str, Any] = {
    "A": A,
    "B": B,
    "C": C,
    "D": D,
    "states": ["level", "temperature"],
    "inputs": ["inflow", "heat"],
    "outputs": ["level", "excess"],
}


def js(**changes: Any) -> str:
    """The right model with changes, a word a line; None leaves a word out."""
    words = {key: value for key, value in {**MODEL, **changes}.items() if value is not None}
    return "{\n" + ",\n".join(f'  "{key}": {json.dumps(value)}' for key, value in words.items()) + "\n}\n"


JSON = {
    "json_end": '{"A": [[1, 2]',
    "json_word": "A: 1",
    "json_trailing_comma": '{"A": [[1, 2],]}',
    "json_quote": '{"A: 1}',
    "json_twice": js().replace('"B"', '"A"'),
    "json_second": js() + "{}",
    "json_escape": '{"A\\q": 1}',
    "json_list": "[1, 2]",
    "json_empty": "",
    "json_unknown": js(State=[1]),
    "json_nan": js(A=[[float("nan"), 0], [0, 1]]),
    "json_infinity": js(A=[[1e999, 0], [0, 1]]),
    "json_huge": js().replace("0.5", "1e400"),
    "json_comma": js().replace("0.5", '"0,5"'),
    "json_text_number": js().replace("0.5", '"0.5"'),
    "json_ragged": js(A=[[1, 2], [3]]),
    "json_mixed": js(A=[[1, 2], 3]),
    "json_null": js(B=[[1, None], [0, 1]]),
    "json_points_empty": '{"points": {}}',
    "json_points_form": json.dumps({"points": {"full": 1}}),
    "json_points_missing": json.dumps({"points": {"ful": MODEL, "half": MODEL}}),
    "json_points_broken": json.dumps({**MODEL, "points": {"full": {"A": [[1, 2], [3, "x"]]}}}),
    "names_foreign": js(states=["level", "temprature"]),
    "names_kind": js(inputs=["inflow", "level"]),
    "names_parameter": js(inputs=["inflow", "area"]),
    "names_twice": js(states=["level", "level"]),
    "names_empty": js(states=["level", ""]),
    "names_missing_state": js(states=["level"], A=[[1]], B=[[1, 0]], C=[[1], [1]]),
    "names_missing_input": js(inputs=["heat"], B=[[1], [0]], D=[[1], [0]]),
    "names_no_inputs": js(inputs=None),
    "names_no_outputs": js(outputs=None),
    "names_number": js(inputs=["inflow", 1]),
    "names_form": js(inputs="inflow"),
    "no_A": js(A=None),
    "no_C": js(C=None),
    "shape": js(B=[[1, 0, 0], [0, 1, 0]]),
    "shape_turned": js(inputs=["inflow", "heat"], outputs=["level"], C=[[1], [0]], D=[0, 0]),
    "shape_line": js(A=[1, 2, 3, 4]),
    "shape_number": js(D=0),
    "anonymous_square": js(states=None, A=[[1, 2, 3], [1, 2, 3]]),
    "units_dimension": js(units={"level": "s"}),
    "units_unknown": js(units={"level": "metres per"}),
    "units_hertz": js(units={"inflow": "Hz"}),
    "units_foreign": js(units={"levl": "m"}),
    "units_form": js(units={"level": 3}),
    "time_unit": js(time_unit="m"),
    "time_unit_number": js(time_unit=1),
    "dt_negative": js(dt=-0.1),
    "dt_true": js(dt=True),
    "hold": js(dt=0.1, hold="hold"),
    "point": js(point="half"),
    "x0_foreign": js(x0={"levl": 1}),
    "x0_kind": js(x0={"inflow": 1}),
    "x0_count": js(x0=[1, 2, 3]),
    "x0_anonymous": js(states=None, x0=[1, 2]),
    "x0_text": js(u0={"inflow": "1 m/s"}),
    "too_large": js(units={"excess": "km"}, C=[[1.0, 0.0], [1.0, 1e307]]),
}
TABLES = {
    "A": ",level,temperature\nlevel,-1,0.5\ntemperature,0,-1\n",
    "B": ",inflow,heat\nlevel,1,0\ntemperature,0,1\n",
    "C": ",level,temperature\nlevel,1,0\nexcess,1,1\n",
    "D": ",inflow,heat\nlevel,0,0\nexcess,0,0\n",
}


def folder(**changes: Any) -> dict[str, Any]:
    """The right folder with changes; None leaves a file out."""
    return {f"m/{key}.csv": value for key, value in {**TABLES, **changes}.items() if value is not None}


FOLDERS: dict[str, dict[str, Any]] = {
    "folder_foreign_file": folder(E="1,2\n"),
    "folder_no_A": folder(A=None),
    "folder_row_foreign": folder(B=",inflow,heat\nlevel,1,0\ntemprature,0,1\n"),
    "folder_row_missing": folder(B=",inflow,heat\nlevel,1,0\n"),
    "folder_row_twice": folder(B=",inflow,heat\nlevel,1,0\nlevel,0,1\n"),
    "folder_column_twice": folder(B=",inflow,inflow\nlevel,1,0\ntemperature,0,1\n"),
    "folder_short": folder(B=",inflow,heat\nlevel,1\ntemperature,0,1\n"),
    "folder_semicolon": folder(A=";level;temperature\nlevel;-1;0,5\n"),
    "folder_blank": folder(A=""),
    "folder_cell": folder(A=",level,temperature\nlevel,-1,\ntemperature,0,-1\n"),
    "folder_nan": folder(A=",level,temperature\nlevel,-1,NaN\ntemperature,0,-1\n"),
    "folder_name": folder(
        A=",level,temprature\nlevel,-1,0.5\ntemprature,0,-1\n",
        B=",inflow,heat\nlevel,1,0\ntemprature,0,1\n",
        C=",level,temprature\nlevel,1,0\nexcess,1,1\n",
    ),
    "folder_point_header": folder(point="name;value\nlevel;1\n"),
    "folder_point_foreign": folder(point="name,value,unit\nlevl,1,m\n"),
    "folder_point_unit": folder(point="name,value,unit\nlevel,1,s\n"),
    "folder_model_word": folder(model="word,value\nTs,0.1\n"),
    "folder_model_twice": folder(model="word,value\ndt,0.1\ndt,0.2\n"),
    "folder_latin": folder(model=b"word,value\nnote,\xe4\n"),
}


def long_form() -> str:
    """The right model in long form."""
    lines = ["op,matrix,row,col,value"]
    for word, text in TABLES.items():
        header, *rows = (line.split(",") for line in text.splitlines())
        lines += [
            f"full,{word},{row[0]},{name},{value}"
            for row in rows
            for name, value in zip(header[1:], row[1:], strict=True)
        ]
    return "\n".join(lines) + "\n"


LINES = long_form()
LONG = {
    "long_header": LINES.replace("op,matrix", "point,matrix"),
    "long_empty": "",
    "long_missing": LINES.replace("full,A,temperature,level,0\n", ""),
    "long_missing_more": "op,matrix,row,col,value\nfull,A,level,level,1\nfull,A,temperature,temperature,1\n"
    "full,B,level,inflow,1\nfull,B,temperature,heat,0\n",
    "long_twice": LINES + "full,A,level,level,-2\n",
    "long_word": LINES + "full,E,level,level,-2\n",
    "long_cells": LINES + "full,A,level,level\n",
    "long_foreign": LINES.replace("heat", "haet"),
    "long_value": LINES.replace("0.5", "half"),
    "long_tabs": LINES.replace(",", "\t"),
    "long_point": LINES.replace("full,", "half,"),
    "long_x0": LINES + "full,x0,inflow,,1\n",
}


def npz(**changes: Any) -> bytes:
    """The right model as an archive, with changes."""
    stream = io.BytesIO()
    np.savez(stream, **{key: np.asarray(value) for key, value in {**MODEL, **changes}.items()})
    return stream.getvalue()


def npy(value: Any) -> bytes:
    """One array, pickled where it holds objects."""
    stream = io.BytesIO()
    np.save(stream, value, allow_pickle=True)
    return stream.getvalue()


NPZ = {
    "npz_none": b"PK nothing",
    "npz_pickle": npy(np.array([{}], dtype=object)),
    "npz_npy": npy(np.eye(2)),
    "npz_objects": npz(states=np.array(["level", "temperature"], dtype=object)),
    "npz_nan": npz(A=[[1, np.nan], [0, 1]]),
    "npz_complex": npz(A=np.array(A) * 1j),
    "npz_text": npz(A=[["1", "2"], ["3", "4"]]),
    "npz_unknown": npz(Bd=1.0),
    "npz_stack": npz(A=[A, A]),
    "npz_stack_count": npz(A=[A, A], op=["full"]),
    "npz_op_twice": npz(A=[A, A], op=["full", "full"]),
    "npz_axes": npz(A=[[A, A]], op=["full", "half"]),
    "npz_units": npz(state_units=["m"]),
    "npz_unit_of_both": npz(state_units=["m", "degC"], output_units=["cm", "m"]),
    "npz_names": npz(states=[1, 2]),
    "npz_hold": npz(hold=["held", "straight"]),
    "npz_dt": npz(dt=[0.1, 0.2]),
    "npz_x0_names": npz(x0=[1.0, 2.0], x0_names=["level"]),
    "npz_point_missing": npz(A=[A, A], op=["ful", "half"]),
}


def mat(**changes: Any) -> bytes:
    """The right model as a MAT file, with changes; lists of names are cell arrays."""
    stream = io.BytesIO()
    words = {**MODEL, **changes}
    for kind in ("states", "inputs", "outputs"):
        words[kind] = np.array(words[kind], dtype=object)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        scipy.io.savemat(stream, words)
    return stream.getvalue()


MAT = {
    "mat_none": b"nothing",
    "mat_73": b"MATLAB 7.3 MAT-file, made up".ljust(512) + b"\x89HDF\r\n\x1a\n" + bytes(64),
    "mat_struct": mat(units={"level": "m"}),
    "mat_cells": mat(states=[1.0, 2.0]),
    "mat_unknown": mat(Ts=0.1),
    "mat_shape": mat(B=[[1.0, 0.0, 0.0], [0.0, 1.0, 0.0]]),
    "mat_foreign": mat(inputs=["inflow", "haet"]),
    "mat_stack": mat(A=np.zeros((2, 2, 3))),
}

Case = tuple[str, dict[str, Any]]
CASES: dict[str, Case] = {
    **{name: ("m.json", {"m.json": text}) for name, text in JSON.items()},
    **{name: ("m", texts) for name, texts in FOLDERS.items()},
    **{name: ("m.csv", {"m.csv": text}) for name, text in LONG.items()},
    **{name: ("m.npz", {"m.npz": data}) for name, data in NPZ.items()},
    **{name: ("m.mat", {"m.mat": data}) for name, data in MAT.items()},
    "source_missing": ("m.jsn", {}),
    "source_file": ("model.json", {"models.json": js()}),
    "source_folder": ("models/{point}", {"modles/full/A.csv": TABLES["A"]}),
    "source_no_folder": ("m", {"m": "x"}),
}
