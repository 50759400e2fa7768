"""From a failing drive to the simplest one that still fails clearly.

A greedy search over neighbours that are simpler: an input or offset left out, a stretch flattened or set to zero, the
end of the course cut off, values set to the full amplitude or halved. All neighbours of a round are run in one batch,
because a batch costs what one drive costs; in trials this took 0.05 to 0.3 s where shrinking inside Hypothesis took 3
to 17 s. A simpler drive must keep at least half of the excess over the limit, else a confirmation by another
integrator would have nothing left to confirm.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from ..core.drive import Drive
from ..core.model import Array
from .declared import Limits
from .seeds import unique

ROUNDS = 60
AT_ONCE = 64  # neighbours a round at most

# Excess over the limit of each drive, in any unit; NaN where it could not be judged.
Excess = Callable[[Sequence[Drive]], Array]
Order = tuple[int, int, float]


def simplicity(drive: Drive) -> Order:
    """Smaller is simpler: how many signals move, how many changes there are, how much is moved altogether."""
    changes = np.diff(drive.values, axis=0, prepend=np.zeros((1, len(drive.inputs))))
    if drive.course == "straight":
        # a straight line costs one change, whatever its length
        changes = np.diff(changes, axis=0, prepend=np.zeros((1, len(drive.inputs))))
        scale = float(np.max(np.abs(drive.values), initial=0.0))
        changes = np.where(np.abs(changes) <= 1e-9 * scale, 0.0, changes)
    moved = int(np.count_nonzero(np.any(drive.values != 0.0, axis=0)))
    offsets = sum(1 for value in drive.offsets.values() if value != 0.0)
    return moved + offsets, int(np.count_nonzero(changes)), float(np.sum(np.abs(drive.values)))


def shrunk(drive: Drive, limits: Limits, excess: Excess, worst: float) -> Drive:
    """The simplest drive found whose excess is at least half of `worst`, the excess of `drive`.

    Deterministic: of the neighbours that keep enough, the simplest is taken, ties to the first.
    """
    here = drive
    for _ in range(ROUNDS):
        order = simplicity(here)
        near = [other for other in unique(_neighbours(here, limits)) if simplicity(other) < order]
        near = sorted(near, key=simplicity)[:AT_ONCE]
        if not near:
            break
        kept = np.flatnonzero(excess(near) >= 0.5 * worst)
        if not kept.size:
            break
        here = near[int(kept[0])]
    return here


def _neighbours(drive: Drive, limits: Limits) -> list[Drive]:
    # a pinned drive may name its inputs in another order or leave some out: from here on it is in the set's own
    values = np.zeros((drive.intervals, len(limits.inputs)))
    for column, name in enumerate(drive.inputs):
        values[:, limits.inputs.index(name)] = drive.values[:, column]
    offsets = dict(drive.offsets)
    found = [limits.drive(values, {other: offsets[other] for other in offsets if other != name}) for name in offsets]
    for column in range(len(limits.inputs)):
        if np.any(values[:, column]):
            found += [limits.drive(other, offsets) for other in _courses(values, column, limits)]
    return found


def _courses(values: Array, column: int, limits: Limits) -> list[Array]:
    """Simpler courses of one input; the rate limit is put back on afterwards."""
    course, count = values[:, column], len(values)
    full = np.where(course > 0.0, limits.high[column], np.where(course < 0.0, limits.low[column], 0.0))
    largest = int(np.argmax(np.abs(course)))
    found = [np.zeros(count), full, np.full(count, course[largest]), 0.5 * course, _rounded(course)]
    length = count
    while length >= 1:
        for first in range(0, count, length):
            last = min(first + length, count)
            for value in {0.0, float(course[first - 1]) if first else 0.0, float(course[min(last, count - 1)])}:
                flat = course.copy()
                flat[first:last] = value
                found.append(flat)
        length //= 2
    result = []
    for other in found:
        if not np.array_equal(other, course):
            changed = values.copy()
            changed[:, column] = other
            result.append(changed)
    return result


def _rounded(course: Array) -> Array:
    """Values to two digits of the largest one."""
    largest = float(np.max(np.abs(course)))
    digits = 1 - int(np.floor(np.log10(largest))) if largest > 0.0 else 0
    return np.asarray(np.round(course, digits))
