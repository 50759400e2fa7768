"""When sampled controllers act, and how what they do enters a simulation.

A sampled controller in a loop is a set of states that jump at instants: the plant's side is a function of the states
at that instant, the local model's a matrix (`core.model.Jump`). Between instants both sides are what they always were.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np

from ..core.errors import PlantError
from ..core.model import Array

SNAP = 1e-9  # of a period: nearer instants are one
MOST = 1000  # samples of one loop until another acts at the same instant again
ROUNDING = 1e-13  # of the time since the drive began


@dataclass(frozen=True, slots=True)
class Instants:
    """phase + k period, k = 0, 1, ..., in time units since the drive began."""

    period: float
    phase: float = 0.0

    def due(self, time: float) -> bool:
        """Whether `time` is one of them."""
        count = round((time - self.phase) / self.period)
        return count >= 0 and abs(self.phase + count * self.period - time) <= SNAP * self.period + ROUNDING * time

    def until(self, end: float) -> list[float]:
        """Those from zero up to `end`, which is left out."""
        count = math.ceil((end - self.phase) / self.period - SNAP)
        return [self.phase + index * self.period for index in range(count)]

    def phases(self, every: float) -> list[float]:
        """Where they fall within intervals of length `every`, ascending, each within [0, every).

        Raises ValueError where neither time is a whole multiple of the other.
        """
        if not related(every, self.period):
            raise ValueError(f"samples every {self.period} do not fit drives that change every {every}")
        count = max(1, round(every / self.period))
        found = [(self.phase + index * self.period) % every for index in range(count)]
        return sorted(0.0 if every - phase <= SNAP * every else phase for phase in found)


@dataclass(frozen=True, slots=True, eq=False)
class Update:
    """jump(t, x (n, N), u (m, N)) -> x (n, N): absolute values, u just after the instant; raises PlantError."""

    instants: Instants
    jump: Callable[[float, Array, Array], Array]


def related(first: float, second: float) -> bool:
    """Whether one of two times is a whole multiple of the other."""
    long, short = max(first, second), min(first, second)
    return abs(round(long / short) * short - long) <= SNAP * long


def common_multiple(periods: Sequence[float]) -> float:
    """The shortest time that is a whole multiple of every period. Raises ValueError where there is no short one."""
    found = periods[0]
    for period in periods[1:]:
        share = Fraction(found / period).limit_denominator(MOST)
        if abs(float(share) * period - found) > SNAP * found:
            raise ValueError(f"sample times of {found:.6g} and {period:.6g} have no short common multiple")
        found *= share.denominator
    return found


def updated(
    updates: Sequence[Update], time: float, t: float, x: Array, u: Array
) -> tuple[Array, dict[int, PlantError]]:
    """States (n, N) after what is due at `time` since the drive began (t: the plant's time), and what failed by column.

    A column that fails is NaN.
    """
    errors: dict[int, PlantError] = {}
    for update in updates:
        if not update.instants.due(time):
            continue
        try:
            x = update.jump(t, x, u)
        except PlantError:
            x = _one_by_one(update, t, x, u, errors)
    return x, errors


def _one_by_one(update: Update, t: float, x: Array, u: Array, errors: dict[int, PlantError]) -> Array:
    after = np.full(x.shape, np.nan)
    for column in range(x.shape[1]):
        if not np.isfinite(x[:, column]).all():
            continue
        try:
            after[:, column] = update.jump(t, x[:, [column]], u[:, [column]])[:, 0]
        except PlantError as error:
            errors.setdefault(column, error)
    return after
