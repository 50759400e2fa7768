"""A cart that runs away, with controllers that hold it: plants and loops for the tests of closed loops.

q' = v, v' = a q - b q^3 + g f. With a > 0 it is unstable, and no drive can be followed for long without a loop.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Amplitude, Band, Case, CheckAsk, DriveSet, Exits, Interval, Options, TrimAsk
from linverify.core.errors import Place
from linverify.core.loop import Controller, Loop, Moved
from linverify.core.model import LocalModel
from linverify.core.plant import Plant
from linverify.core.verdict import Verdict

PLACE = Place("specs/cart.yaml", 3, 1)


def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
    return np.stack([x[1], p["a"] * x[0] - p["b"] * x[0] ** 3 + p["g"] * u[0]])


CART = Plant(
    states={"q": "m", "v": "m/s"},
    inputs={"f": "N"},
    outputs={"y": "m"},
    parameters={"a": 4.0, "b": 0.0, "g": 1.0},
    dynamics=dynamics,
    measurement=lambda t, x, u, p: np.stack([1.0 * x[0]]),
)
BANDS = (Band("y", "peak", 0.01), Band("f", "peak", 0.1))


def controller(A: Any, B: Any, C: Any, D: Any, step: float | None = None) -> Controller:
    return Controller(*(np.atleast_2d(np.array(block, dtype=float)) for block in (A, B, C, D)), step=step)


def pd(kp: float, kd: float, filtered: float = 0.02) -> Controller:
    """kp e + kd s / (filtered s + 1) e."""
    return controller([[-1 / filtered]], [[1.0]], [[-kd / filtered**2]], [[kp + kd / filtered]])


def sampled_pd(kp: float, kd: float, step: float) -> Controller:
    """kp e + kd (e - e before) / step."""
    return controller([[0.0]], [[1.0]], [[-kd / step]], [[kp + kd / step]], step)


def loop(control: Controller | None = None, **changes: Any) -> Loop:
    known: dict[str, Any] = {
        "name": "hold",
        "controller": control or pd(20.0, 4.0),
        "measures": ("y",),
        "moves": (Moved("f"),),
    }
    return Loop(**{**known, **changes})


def drives(**changes: Any) -> DriveSet:
    known: dict[str, Any] = {
        "name": "",
        "every": 0.1,
        "intervals": 12,
        "amplitude": {"f": Amplitude(-1.0, 1.0)},
        "count": 6,
        "search": 0,
        "shapes": ("step", "doublet", "walk"),
        "loop": "hold",
    }
    return DriveSet(**{**known, **changes})


def set_point(**changes: Any) -> DriveSet:
    return drives(at="set_point", amplitude={"y": Amplitude(-0.1, 0.1)}, **changes)


def case(*loops: Loop, bands: tuple[Band, ...] = BANDS, driven: DriveSet | None = None, **changes: Any) -> Case:
    plant = changes.get("plant", CART)
    known: dict[str, Any] = {
        "spec": "specs/cart.yaml",
        "point": "rest",
        "title": "A cart",
        "plant": plant,
        "place": PLACE,
        "trim": TrimAsk(hold={"f": 0.0}, find=("q", "v"), start={"q": 0.0, "v": 0.0}),
        "parameters": {**plant.defaults, **changes.pop("parameters", {})},
        "envelope": {"q": Interval(-5, 5), "v": Interval(-10, 10), "f": Interval(-60, 60)},
        "nominal": {"q": 1.0, "v": 2.0, "f": 5.0, "y": 1.0},
        "checks": (CheckAsk("follows", PLACE, ""),),
        "drives": (driven or drives(),),
        "bands": bands,
        "loops": {one.name: one for one in loops or (loop(),)},
        "exits": Exits(),
    }
    return Case(**{**known, **changes})


def verdict(one: Case, local: LocalModel | None = None, options: Options | None = None) -> Verdict:
    return judge_study(Study(one, options or Options(), model_override=local), one.checks[0])


def derived(one: Case) -> LocalModel:
    return Study(one, Options()).derived()
