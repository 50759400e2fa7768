"""One interval's right-hand side, as the integrators see it."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from ..core.bound import BoundPlant
from ..core.model import Array
from ..core.outcome import Outcome, of_call
from ..core.signals import Signals


@dataclass(slots=True, eq=False)
class Piece:
    """Inputs u + slope s, with s the time since the interval began; the plant's own time is then t + s.

    u (m, N), slope (m, N) or None where inputs are held; low, high (n, 1): the plant's domain, infinite where open.
    used: columns evaluated so far; it goes on from interval to interval.
    """

    plant: BoundPlant
    t: float
    u: Array
    slope: Array | None
    low: Array
    high: Array
    used: int = 0
    limited: bool = field(init=False)

    def __post_init__(self) -> None:
        self.limited = bool(np.isfinite(self.low).any() or np.isfinite(self.high).any())

    def inputs(self, s: float) -> Array:
        """Inputs (m, N) after `s`."""
        return self.u if self.slope is None else self.u + s * self.slope

    def rates(self, s: float, x: Array) -> Array:
        """Rates (n, N): NaN for columns where the plant fails or that are outside the plant's domain.

        x may hold several states a drive, (n, r N), one block of drives after the other.
        """
        self.used += x.shape[1]
        if self.limited:
            outside = (x < self.low) | (x > self.high)
            if outside.any():
                x = np.where(outside.any(axis=0), np.nan, x)
        u = self.inputs(s)
        if x.shape[1] != u.shape[1]:
            u = np.tile(u, x.shape[1] // u.shape[1])
        return self.plant.rates_or_nan(self.t + s, x, u)

    def alone(self, column: int) -> Piece:
        """The same piece for one column."""
        pick = [column]
        slope = None if self.slope is None else self.slope[:, pick]
        return Piece(self.plant, self.t, self.u[:, pick], slope, self.low, self.high)

    def why(self, call: object) -> tuple[Outcome, str]:
        """What the plant did wrong while `call` was made with this piece's rates or outputs: outcome and text."""
        plant, kept = self.plant, self.plant.last_error
        plant.last_error = None
        call()  # type: ignore[operator]
        error, plant.last_error = plant.last_error, kept
        plant.last_error = kept or error
        if error is None:
            domain = self.plant.plant.domain
            limited = [name for name in self.plant.states.names if name in domain]
            if limited:
                return Outcome.NOT_FINITE, f"the states leave the plant's domain ({', '.join(limited)})"
            return Outcome.DIVERGED, "the states overflow"
        return of_call(error), str(error)


def domain_of(plant: BoundPlant, signals: Signals) -> tuple[Array, Array]:
    """Lower and upper ends of the plant's domain for its states or inputs, (len(signals), 1) each."""
    bounds = [plant.plant.domain.get(name, (None, None)) for name in signals.names]
    low = [-np.inf if low is None else low for low, _ in bounds]
    high = [np.inf if high is None else high for _, high in bounds]
    return np.array(low, dtype=np.float64)[:, np.newaxis], np.array(high, dtype=np.float64)[:, np.newaxis]
