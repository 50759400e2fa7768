"""An oscillator whose worst errors are known in closed form, with local models that are wrong on purpose.

x' = v, v' = -w^2 x - 2 z w v + f - bend x^3 - kink |x|, or with a dead zone on f. Used by the tests of `follows`.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from linverify.checks.study import Study
from linverify.core.case import Amplitude, Band, Case, CheckAsk, DriveSet, Exits, Interval, Options, TrimAsk
from linverify.core.errors import Place
from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.plant import Plant

W, Z = 2.0, 0.1
PLACE = Place("specs/oscillator.yaml", 7, 3)


def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
    force = u[0] - np.clip(u[0], -p["dead"], p["dead"])
    return np.stack(
        [x[1], -(W**2) * x[0] - 2 * Z * W * x[1] + force - p["bend"] * x[0] ** 3 - p["kink"] * np.abs(x[0])]
    )


OSCILLATOR = Plant(
    states={"x": "m", "v": "m/s"},
    inputs={"f": "N"},
    outputs={"y": "m"},
    parameters={"bend": 0.0, "kink": 0.0, "dead": 0.0},
    dynamics=dynamics,
    measurement=lambda t, x, u, p: np.stack([1.0 * x[0]]),
)
DRIVES = DriveSet("", 0.1, 40, {"f": Amplitude(-1.0, 1.0)}, count=40, search=10)


def case(*bands: Band, plant: Plant = OSCILLATOR, drives: DriveSet = DRIVES, **changes: Any) -> Case:
    """One operating point at rest; `changes` replace fields of the case, `parameters` add to the plant's."""
    known = {
        "spec": "specs/oscillator.yaml",
        "point": "rest",
        "title": "An oscillator",
        "plant": plant,
        "place": PLACE,
        "trim": TrimAsk(hold={"f": 0.0}, find=("x", "v"), start={"x": 0.0, "v": 0.0}),
        "parameters": {**plant.defaults, **changes.pop("parameters", {})},
        "envelope": {"x": Interval(-5, 5), "v": Interval(-10, 10), "f": Interval(-3, 3)},
        "nominal": {"x": 1.0, "v": 2.0, "f": 1.0, "y": 1.0},
        "checks": (CheckAsk("follows", PLACE, drives.name),),
        "drives": (drives,),
        "bands": bands,
        "exits": Exits(),
    }
    return Case(**{**known, **changes})


def model(plant: Plant = OSCILLATOR, *, gain: float = 1.0, w: float = W, z: float = Z, **changes: Any) -> LocalModel:
    """The right local model, or one with a wrong gain, frequency or damping."""
    signals = (plant.state_signals, plant.input_signals, plant.output_signals)
    point = OperatingPoint(np.zeros(2), np.zeros(1), np.zeros(1), np.zeros(2), 0.0, *signals)
    right = LocalModel(
        np.array([[0.0, 1.0], [-(w**2), -2 * z * w]]),
        np.array([[0.0], [gain]]),
        np.array([[1.0, 0.0]]),
        np.zeros((1, 1)),
        *signals,
        point,
        plant.step,
    )
    return replace(right, **changes)


def study(one: Case, local: LocalModel | None = None, options: Options | None = None) -> Study:
    """A study whose local model is `local`, by default the right one."""
    return Study(one, options or Options(), model_override=local or model(one.plant))


def impulse_response(times: np.ndarray) -> np.ndarray:
    """x after a unit impulse of f: exp(-z w t) sin(w_d t) / w_d."""
    damped = W * np.sqrt(1 - Z**2)
    return np.exp(-Z * W * times) * np.sin(damped * times) / damped


def largest_response(every: float, intervals: int) -> float:
    """Largest |x| at the end of the horizon under held |f| <= 1: the L1 norm of the pulse response, by quadrature."""
    fine = 400
    grid = (np.arange(intervals * fine) + 0.5) * every / fine
    pulses = impulse_response(grid).reshape(intervals, fine).sum(axis=1) * every / fine
    return float(np.abs(pulses).sum())
