"""Linear plants with loops around them, as cases: what the tests of `margins` are made from."""

from __future__ import annotations

from typing import Any

import numpy as np

from linverify.checks.judge import judge
from linverify.core.case import Case, CheckAsk, Options, TrimAsk
from linverify.core.errors import Place
from linverify.core.loop import Controller, Limit, Loop, Moved
from linverify.core.plant import Plant
from linverify.core.shown import Shown
from linverify.core.verdict import Figure, Verdict

PLACE = Place("specs/loops.yaml", 9, 3)
DB = Shown("dB")
DEG = Shown("deg", 180.0 / np.pi)


def linear_plant(A: Any, B: Any, C: Any, D: Any = None, *, step: float | None = None) -> Plant:
    """x' = A x + B u, y = C x + D u; states x1, x2, ..., inputs u1, ..., outputs y1, ..."""
    A, B, C = (np.array(each, dtype=float, ndmin=2) for each in (A, B, C))
    D = np.zeros((len(C), B.shape[1])) if D is None else np.array(D, dtype=float, ndmin=2)
    return Plant(
        states={f"x{k + 1}": "m" for k in range(len(A))},
        inputs={f"u{k + 1}": "N" for k in range(B.shape[1])},
        outputs={f"y{k + 1}": "m" for k in range(len(C))},
        parameters={},
        dynamics=lambda t, x, u, p: A @ x + B @ u,
        measurement=lambda t, x, u, p: C @ x + D @ u,
        step=step,
    )


def companion(num: Any, den: Any) -> tuple[Any, Any, Any, Any]:
    """num / den, highest power first, as matrices: a construction for tests with harmless coefficients."""
    den = np.array(den, dtype=float)
    num = np.concatenate([np.zeros(len(den) - len(num)), num]) / den[0]
    den = den / den[0]
    n = len(den) - 1
    A = np.diag(np.ones(n - 1), 1) if n else np.zeros((0, 0))
    if n:
        A[-1] = -den[:0:-1]
    B = np.zeros((n, 1))
    B[-1:] = 1.0
    return A, B, (num[1:] - num[0] * den[1:])[::-1].reshape(1, n), num[:1].reshape(1, 1)


def pid(kp: float, ki: float = 0.0, kd: float = 0.0, filter: float = 0.0) -> Controller:
    """kp e + ki integral e + kd s / (filter s + 1) e."""
    blocks = []
    if ki:
        blocks.append((0.0, 1.0, ki, 0.0))
    if kd:
        blocks.append((-1.0 / filter, 1.0 / filter, -kd / filter, kd / filter))
    n = len(blocks)
    return Controller(
        np.diag([each[0] for each in blocks]).reshape(n, n),
        np.array([each[1] for each in blocks]).reshape(n, 1),
        np.array([each[2] for each in blocks]).reshape(1, n),
        np.array([[kp + sum(each[3] for each in blocks)]]),
        text=f"pid {kp:g} {ki:g} {kd:g}",
    )


def gain(matrix: Any, step: float | None = None) -> Controller:
    """A static controller."""
    D = np.array(matrix, dtype=float, ndmin=2)
    return Controller(np.zeros((0, 0)), np.zeros((0, D.shape[1])), np.zeros((len(D), 0)), D, step, "gain")


def loop(controller: Controller, *require: Limit, name: str = "ride", **changes: Any) -> Loop:
    """A loop from y1 to u1."""
    known: dict[str, Any] = {"measures": ("y1",), "moves": (Moved("u1"),), "require": require, "place": PLACE}
    return Loop(name, controller, **{**known, **changes})


def least(word: str, low: float, shown: Shown | None = None) -> Limit:
    return Limit(word, low=low, place=PLACE, shown=shown)


def most(word: str, high: float, shown: Shown | None = None, **changes: Any) -> Limit:
    return Limit(word, high=high, place=PLACE, shown=shown, **changes)


def case(plant: Plant, *loops: Loop, **changes: Any) -> Case:
    """The plant at rest with these loops declared."""
    names = (*plant.states, *plant.inputs)
    known: dict[str, Any] = {
        "spec": "specs/loops.yaml",
        "point": "rest",
        "title": "Loops",
        "plant": plant,
        "place": PLACE,
        "trim": TrimAsk(hold=dict.fromkeys(names, 0.0), find=(), start=dict.fromkeys(names, 0.0)),
        "parameters": dict(plant.defaults),
        "envelope": {},
        "nominal": dict.fromkeys((*names, *plant.outputs), 1.0),
        "checks": tuple(CheckAsk("margins", PLACE, loop=one.name) for one in loops),
        "loops": {one.name: one for one in loops},
    }
    return Case(**{**known, **changes})


def judged(plant: Plant, *loops: Loop, **changes: Any) -> Verdict:
    """The verdict on the first of the loops."""
    return judge(case(plant, *loops, **changes), CheckAsk("margins", PLACE, loop=loops[0].name), Options())


def figure(verdict: Verdict, what: str, signal: str = "") -> Figure:
    """The one figure called so."""
    (found,) = [one for one in verdict.figures if one.what == what and one.signal == signal]
    return found
