"""An operating point and the linear model about it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from .signals import Signals

Array = NDArray[np.float64]


def frozen_array(values: object) -> Array:
    """A read-only float64 copy of `values`."""
    array = np.array(values, dtype=np.float64)
    array.setflags(write=False)
    return array


@dataclass(frozen=True, slots=True, eq=False)
class OperatingPoint:
    """Where a local model holds.

    x (n,), u (m,), y (k,) in the plant's units; drift (n,): the rates that remain (zero but for prescribed and free
    rates), per time unit; time: the t at which the plant was trimmed. Deviations are taken from x + drift * t.
    For a difference equation drift is the change a step.
    """

    x: Array
    u: Array
    y: Array
    drift: Array
    time: float
    states: Signals
    inputs: Signals
    outputs: Signals
    # scaled residual of each equation (rate of a state, held output), by its name
    residuals: Mapping[str, float] = field(default_factory=lambda: MappingProxyType({}))

    def value(self, name: str) -> float:
        """Trimmed value of a state, input or output; raises KeyError for a foreign name."""
        for signals, values in ((self.states, self.x), (self.inputs, self.u), (self.outputs, self.y)):
            if name in signals:
                return float(values[signals.index(name)])
        raise KeyError(name)

    def unit(self, name: str) -> str:
        """Unit of a state, input or output; raises KeyError for a foreign name."""
        for signals in (self.states, self.inputs, self.outputs):
            if name in signals:
                return signals.unit(name)
        raise KeyError(name)


@dataclass(frozen=True, slots=True, eq=False)
class Jump:
    """What a sampled controller does to a continuous model: at phase + k period (k = 0, 1, ...) x becomes A x + B u.

    A (n, n), B (n, m); u are the inputs just after that instant; period and phase in time units, 0 <= phase < period.
    """

    A: Array
    B: Array
    period: float
    phase: float = 0.0


@dataclass(frozen=True, slots=True, eq=False)
class LocalModel:
    """x' = A x + B u, y = C x + D u in deviations from an operating point.

    A (n, n), B (n, m), C (k, n), D (k, m) in the plant's units; errors: the absolute error estimate of every entry,
    same shapes, by the names "A", "B", "C", "D"; step: time between the states of a discrete model, None when
    continuous; course: how a discrete model of a continuous plant takes its inputs between samples. states may be fewer
    than the plant's; anonymous: they mean nothing by themselves, and only outputs can be compared. ahead (n, m): of a
    model sampled for straight inputs, what the inputs at an instant add to its states to give the plant's. jumps: of a
    model in whose loop a sampled controller is closed; those of one instant act in their order.
    """

    A: Array
    B: Array
    C: Array
    D: Array
    states: Signals
    inputs: Signals
    outputs: Signals
    at: OperatingPoint
    step: float | None = None
    errors: Mapping[str, Array] = field(default_factory=lambda: MappingProxyType({}))
    anonymous: bool = False
    course: Literal["held", "straight"] = "held"
    ahead: Array | None = None
    jumps: tuple[Jump, ...] = ()
