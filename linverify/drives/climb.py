"""Neighbours of a drive that may be worse: moved in time, made larger, turned over, in part or as a whole.

The search climbs from the worst drives found so far; a round of neighbours is one batch.
"""

from __future__ import annotations

import numpy as np

from ..core.drive import Drive
from ..core.model import Array
from .declared import Limits
from .seeds import unique


def neighbours(drive: Drive, limits: Limits, count: int, rng: np.random.Generator) -> tuple[Drive, ...]:
    """Up to `count` drives of the declared set near `drive`, which has the set's own inputs in their order."""
    return unique(_moved(drive, limits, rng) for _ in range(count))


def _moved(drive: Drive, limits: Limits, rng: np.random.Generator) -> Drive:
    values, offsets = np.array(drive.values), dict(drive.offsets)
    if limits.inputs:
        column = int(rng.integers(len(limits.inputs)))
        values[:, column] = _course(values[:, column], column, limits, rng)
    if limits.offsets and rng.random() < 0.25:
        at = int(rng.integers(len(limits.offsets)))
        offsets[limits.offsets[at]] = limits.offset(at, float(rng.choice([-1.0, 0.0, 1.0])))
    return limits.drive(values, offsets)


def _course(course: Array, column: int, limits: Limits, rng: np.random.Generator) -> Array:
    count = course.size
    first = int(rng.integers(count))
    length = max(1, round(float(np.exp(rng.uniform(0.0, np.log(count + 1.0))))))
    stretch = slice(first, min(first + length, count))
    result = course.copy()
    kind = int(rng.integers(6))
    if kind == 0:
        shift = int(rng.integers(1, max(2, count // 8))) * (1 if rng.random() < 0.5 else -1)
        result = np.roll(course, shift)
        result[:shift] = 0.0 if shift > 0 else result[:shift]
    elif kind == 1:
        result[stretch] = limits.high[column]
    elif kind == 2:
        result[stretch] = limits.low[column]
    elif kind == 3:
        result[stretch] = -result[stretch]
    elif kind == 4:
        result[stretch] = 0.0
    else:
        result = limits.sized(np.sign(course), column)
    return result
