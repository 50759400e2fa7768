"""Drives that can see: would the drives that were run have caught a wrong local model?

The local model's own trajectories are put wrong (by a gain, by a delay, by not moving at all) and judged with the same
bands on the same drives. Nothing is simulated again but the few drives that move most.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from ..core.drive import Drive
from ..core.model import Array
from ..numerics.simulate import Fidelity, Runs, run
from .bands import Figures, judged, moves_with_plant
from .comparison import Comparison

KEPT = 64  # drives that are looked at with wrong models; fewer drives see less, so the figures err to the safe side
SMALLEST = 1e-4  # gain error, and share of the horizon, at which the scan begins
LARGEST_GAIN = 64.0
HALVINGS = 14


@dataclass(frozen=True, slots=True)
class Sight:
    """The smallest errors of the local model that these drives would catch; infinite where none is caught.

    gain: relative, both signs of the error; delay: in time units. signals: the same for an error in one signal only.
    """

    gain: float
    delay: float
    signals: dict[str, tuple[float, float]] = field(default_factory=dict)


def sees_motion(still: Figures, comparison: Comparison, noise: Array) -> bool:
    """True where a model that does not move at all would break a band on some drive, beyond our own error `noise`."""
    return bool(np.any(_broken(still, comparison, noise)))


def sight(comparison: Comparison, drives: Sequence[Drive], still: Figures, fidelity: Fidelity, noise: Array) -> Sight:
    """The smallest visible gain error and delay, over the drives of which a still model would break bands most."""
    if not drives:
        return Sight(np.inf, np.inf)
    shares = np.max(np.nan_to_num(still.share, posinf=1e9), axis=0, initial=0.0)
    order = np.lexsort((np.arange(len(drives)), -shares))[:KEPT]
    runs = run(comparison.rig, [drives[int(column)] for column in order], fidelity)
    rows = range(len(runs.signals))
    each = {name: _smallest(comparison, runs, noise, [row]) for row, name in enumerate(runs.signals)}
    whole = _smallest(comparison, runs, noise, rows)
    return Sight(*whole, each)


def _smallest(comparison: Comparison, runs: Runs, noise: Array, rows: Sequence[int]) -> tuple[float, float]:
    def caught(model: Array) -> bool:
        wrong = runs.model.copy()
        wrong[list(rows)] = model[list(rows)]
        return bool(np.any(_broken(judged(runs, comparison.bands, model=wrong), comparison, noise)))

    more = _threshold(lambda size: caught(runs.model * (1.0 + size)), SMALLEST, LARGEST_GAIN)
    less = _threshold(lambda size: caught(runs.model * (1.0 - size)), SMALLEST, 1.0)
    late = _threshold(lambda size: caught(_delayed(runs, size)), SMALLEST * runs.horizon, runs.horizon)
    return max(more, less), late


def _broken(figures: Figures, comparison: Comparison, noise: Array) -> Array:
    """Bands broken beyond our own error, (B, N); an error within it of zero breaks nothing."""
    count = len(comparison.bands)
    error = noise[:count, np.newaxis]
    moving = np.array([moves_with_plant(band) for band in comparison.bands])[:, np.newaxis]
    excess = figures.worst[:count] - figures.limit[:count]
    return np.asarray((excess > error) & ~(moving & (figures.worst[:count] <= error)))


def _threshold(caught: Callable[[float], bool], smallest: float, largest: float) -> float:
    """The smallest size that is caught, on a doubling scan upwards and then by bisection; infinite for none."""
    low, high = 0.0, smallest
    while not caught(high):
        if high >= largest:
            return float("inf")
        low, high = high, min(2.0 * high, largest)
    for _ in range(HALVINGS):
        middle = 0.5 * (low + high)
        low, high = (low, middle) if caught(middle) else (middle, high)
    return high


def _delayed(runs: Runs, delay: float) -> Array:
    """The local model's trajectories `delay` later; before that the first value stands, which shows least."""
    model, times = runs.model, runs.times.ravel()
    line = model.reshape(model.shape[0], times.size, model.shape[3])
    asked = np.maximum(times - delay, times[0])
    before = np.minimum(np.searchsorted(times, asked, side="right") - 1, times.size - 2)
    width = times[before + 1] - times[before]
    share = np.divide(asked - times[before], width, out=np.zeros_like(asked), where=width > 0.0)[:, np.newaxis]
    return np.asarray(line[:, before] * (1.0 - share) + line[:, before + 1] * share).reshape(model.shape)
