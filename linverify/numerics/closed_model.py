"""A local model with controllers closed around it and actuators before it: the wiring's answers to unit vectors."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from ..core.model import Array, Jump, LocalModel, OperatingPoint, frozen_array
from ..core.signals import Signals
from .whole import Whole
from .wiring import Wiring


def reading(model: LocalModel, name: str) -> tuple[Array, Array]:
    """The rows of C and D that read a state or output; raises ValueError for a signal that the model does not have."""
    if name in model.outputs:
        at = model.outputs.index(name)
        return model.C[at], model.D[at]
    at = model.states.index(name)
    return np.eye(len(model.states))[at], np.zeros(len(model.inputs))


@dataclass(slots=True, eq=False)
class _Linear:
    """x' = A x + B u (or the next state), measured = C x + D u, as a wiring sees it. Not frozen: filled in once."""

    model: LocalModel
    names: tuple[str, ...]
    n: int = field(init=False)
    C: Array = field(init=False)
    feed: Array = field(init=False)
    sizes: Array = field(init=False)
    direct: bool = field(init=False)

    def __post_init__(self) -> None:
        rows = [reading(self.model, name) for name in self.names]
        n, m = self.model.B.shape
        self.n, self.sizes = n, np.zeros(len(rows))
        self.C = np.array([row for row, _ in rows]).reshape(-1, n)
        self.feed = np.array([row for _, row in rows]).reshape(-1, m)
        self.direct = bool(self.feed.any())

    def rates(self, t: float, x: Array, u: Array) -> Array:
        """A x + B u."""
        return np.asarray(self.model.A @ x + self.model.B @ u)

    def measured(self, t: float, x: Array, u: Array) -> Array:
        """C x + D u."""
        return np.asarray(self.C @ x + self.feed @ u)


def closed_model(model: LocalModel, wiring: Wiring, at: OperatingPoint, *, whole_names: bool = False) -> LocalModel:
    """`model` with `wiring` around it, in deviations from `at`; wiring: with zero trims and without limits.

    Its inputs are the model's and the set points, its outputs the model's and the inputs that loops move. whole_names:
    set points are called `LOOP.set_point.SIGNAL`, else like their signals. Raises ValueError where a loop measures or
    moves what the model does not have, and where it is ill-posed.
    """
    whole = Whole(wiring, _Linear(model, wiring.measured))
    n, m = len(model.states) + len(wiring.added), len(model.inputs) + len(wiring.points)
    moved = tuple(name for name in wiring.moved if name not in model.outputs)
    rows = [model.inputs.index(name) for name in moved]

    def answers(x: Array, w: Array) -> Array:
        return whole.rates(0.0, x, w)

    def outputs(x: Array, w: Array) -> Array:
        u = whole.inputs(0.0, x, w)
        return np.concatenate([model.C @ x[: whole.inner.n] + model.D @ u, u[rows]])

    A, B = _matrices(answers, n, m)
    C, D = _matrices(outputs, n, m)
    jumps = []
    for instants, jump in whole.updates():
        after = _matrices(lambda x, w, jump=jump: jump(0.0, x, w), n, m)
        jumps.append(Jump(*after, instants.period, instants.phase))
    units = dict(zip(at.inputs.names, at.inputs.units, strict=True))
    points = tuple(f"{loop}.set_point.{signal}" if whole_names else signal for loop, signal in wiring.points)
    return LocalModel(
        A, B, C, D,
        _joined(model.states, wiring.added, dict(zip(at.states.names, at.states.units, strict=True))),
        _joined(model.inputs, points, units),
        _joined(model.outputs, moved, units),
        at, model.step, anonymous=model.anonymous, course=model.course, ahead=None, jumps=tuple(jumps),
    )  # fmt: skip


def _matrices(answers: object, n: int, m: int) -> tuple[Array, Array]:
    """The two blocks of a linear function of (x (n, N), w (m, N))."""
    of_states = answers(np.eye(n), np.zeros((m, n)))  # type: ignore[operator]
    of_inputs = answers(np.zeros((n, m)), np.eye(m))  # type: ignore[operator]
    return frozen_array(of_states), frozen_array(of_inputs)


def _joined(signals: Signals, names: tuple[str, ...], units: dict[str, str]) -> Signals:
    more = tuple(units.get(name, "") for name in names)
    return Signals((*signals.names, *names), (*signals.units, *more))
