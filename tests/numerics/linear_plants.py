"""Linear plants from matrices, with local models that may be sampled, reduced or anonymous, for tests of the runs."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from linverify.core.bound import BoundPlant
from linverify.core.case import Interval
from linverify.core.delivered import Delays
from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.plant import Plant
from linverify.core.signals import Signals
from linverify.numerics.simulate import Rig


def linear_plant(A: Any, B: Any, C: Any = None, D: Any = None, *, step: float | None = None, **more: Any) -> Plant:
    """x' = A x + B u (or the next state), y = C x + D u; states x1, x2, ..., inputs u1, ..., outputs y1, ..."""
    A, B = np.atleast_2d(np.array(A, dtype=float)), np.atleast_2d(np.array(B, dtype=float))
    C = np.zeros((0, len(A))) if C is None else np.atleast_2d(np.array(C, dtype=float))
    D = np.zeros((len(C), B.shape[1])) if D is None else np.atleast_2d(np.array(D, dtype=float))
    named = {"states": ("x", len(A)), "inputs": ("u", B.shape[1]), "outputs": ("y", len(C))}
    words = {key: {f"{letter}{i + 1}": "" for i in range(count)} for key, (letter, count) in named.items() if count}
    words |= {key: more.pop(key) for key in ("states", "inputs", "outputs") if key in more}
    known = {
        "dynamics": lambda t, x, u, p: np.tensordot(A, x, 1) + np.tensordot(B, u, 1),
        "measurement": (lambda t, x, u, p: np.tensordot(C, x, 1) + np.tensordot(D, u, 1)) if len(C) else None,
        "step": step,
    }
    return Plant(**{**words, **known, **more})


def local(
    plant: Plant,
    A: Any,
    B: Any,
    C: Any = None,
    D: Any = None,
    *,
    states: tuple[str, ...] | None = None,
    inputs: tuple[str, ...] | None = None,
    outputs: tuple[str, ...] | None = None,
    **more: Any,
) -> LocalModel:
    """A local model of `plant` about the origin, with these names of its own."""
    A, B = np.atleast_2d(np.array(A, dtype=float)), np.atleast_2d(np.array(B, dtype=float))
    known = (tuple(plant.state_signals.names), tuple(plant.inputs), tuple(plant.output_signals.names))
    chosen = (states or known[0], inputs or known[1], known[2] if outputs is None else outputs)
    s, i, o = (Signals(names, ("",) * len(names)) for names in chosen)
    C = np.eye(len(o), len(A)) if C is None else np.atleast_2d(np.array(C, dtype=float))
    D = np.zeros((len(o), len(i))) if D is None else np.atleast_2d(np.array(D, dtype=float))
    return LocalModel(A, B, C, D, s, i, o, origin(plant), **{"step": plant.step, **more})


def origin(plant: Plant) -> OperatingPoint:
    """The plant at rest at zero."""
    bound = BoundPlant(plant)
    zeros = (np.zeros(bound.n), np.zeros(bound.m), np.zeros(bound.k), np.zeros(bound.n))
    return OperatingPoint(*zeros, 0.0, bound.states, bound.inputs, bound.outputs)


def rig(
    plant: Plant,
    model: LocalModel,
    signals: tuple[str, ...],
    *,
    delays: Delays | None = None,
    envelope: Mapping[str, Interval] | None = None,
    turns: Mapping[str, float] | None = None,
    weight: float = 1e-3,
) -> Rig:
    """A rig about the origin, batched."""
    bound = BoundPlant(plant)
    generator = np.random.default_rng(2)
    bound.detect(0.0, generator.uniform(-1, 1, (bound.n, 5)), generator.uniform(-1, 1, (bound.m, 5)))
    return Rig(
        bound, origin(plant), model, signals, envelope or {}, np.full(bound.n, weight),
        delays=delays or Delays(), turns=turns or {},
    )  # fmt: skip
