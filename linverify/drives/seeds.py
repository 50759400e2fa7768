"""Drives that are tried at every operating point, before anything is drawn.

Plain ones (steps, pulses, doublets, ramps, square waves; each input alone and several together, both signs; offsets
alone and with steps), and the drives that move each compared signal of the local model furthest. A random search
seldom meets the latter: the worst drive of a resonant plant switches in step with the resonance from beginning to end.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from itertools import product

import numpy as np

from ..core.drive import Drive
from ..core.model import Array, LocalModel
from ..numerics.worst import furthest, furthest_square, weights
from . import shapes
from .declared import Limits

TOGETHER = 4  # up to so many inputs every combination of signs is stepped
SMALL = 0.1  # of the amplitude: a dead zone shows at small sizes, a limit at large ones


def plain(limits: Limits) -> tuple[Drive, ...]:
    """Full and small steps, pulses, doublets, ramps and square waves, offsets, and inputs together."""
    return unique((*_alone(limits), *_together(limits), *_offsets(limits)))


def steps(limits: Limits) -> tuple[Drive, ...]:
    """For each input the full step at once, to the larger side; the responses tell where errors add up."""
    at = shapes.instants(limits.intervals, limits.course)
    found = []
    for column in range(len(limits.inputs)):
        sign = 1.0 if limits.high[column] >= -limits.low[column] else -1.0
        found.append(_single(limits, column, sign * shapes.step(at, 0.0)))
    return tuple(found)


def worst_of_model(
    limits: Limits, model: LocalModel, signals: Sequence[str], squares: Sequence[str]
) -> tuple[Drive, ...]:
    """Both signs of the drives that move each of `signals` furthest at the end of the horizon.

    For `squares` (signals with an rms band) the drive with a large mean square is added.
    """
    found: list[Drive] = []
    for signal in signals:
        rows, offsets = weights(model, signal, limits.every, limits.intervals, limits.course)
        columns = [model.inputs.index(name) for name in limits.inputs]
        gains = dict(zip(model.states.names, offsets, strict=True))
        found += worst_of_weights(limits, rows[:, columns], gains, square=signal in squares)
    return unique(found)


def worst_of_weights(limits: Limits, rows: Array, offsets: Mapping[str, float], *, square: bool = False) -> list[Drive]:
    """The drives of the set with the largest and the smallest sum(rows * drive) + offsets, and at half their size.

    rows (K, m): what each row of the drive adds to the signal in question.
    """
    if not np.all(np.isfinite(rows)):
        return []
    found = []
    for sign in (1.0, -1.0):
        start = {name: _end(limits, name, sign * offsets.get(name, 0.0)) for name in limits.offsets}
        full = limits.drive(furthest(sign * rows, limits.low, limits.high, limits.change), start)
        found += [full, full.scaled(0.5)]
        if square:
            found.append(limits.drive(furthest_square(sign * rows, limits.low, limits.high, limits.change), start))
    return found


def unique(drives: Iterable[Drive]) -> tuple[Drive, ...]:
    """Each drive once, in order; drives that move nothing are left out."""
    seen: dict[str, Drive] = {}
    for drive in drives:
        if np.any(drive.values) or any(drive.offsets.values()):
            seen.setdefault(drive.digest, drive)
    return tuple(seen.values())


def _end(limits: Limits, name: str, gain: float) -> float:
    return limits.offset(limits.offsets.index(name), float(np.sign(gain)))


def _single(limits: Limits, column: int, shape: Array) -> Drive:
    values = np.zeros((limits.intervals, len(limits.inputs)))
    values[:, column] = limits.sized(shape, column)
    return limits.drive(values)


def _alone(limits: Limits) -> list[Drive]:
    at, count = shapes.instants(limits.intervals, limits.course), float(limits.intervals)
    first = float(at[0])
    menu = [
        shapes.step(at, first),
        SMALL * shapes.step(at, first),
        shapes.step(at, first + round(count / 3)),
        shapes.pulse(at, first, 1.0),
        shapes.pulse(at, first, round(count / 4)),
        shapes.doublet(at, first, round(count / 8)),
        shapes.doublet(at, first, round(count / 3)),
        shapes.ramp(at, first, count),
        *(shapes.square(at, first, period) for period in (2.0, 4.0, count / 8, count / 4, count / 2)),
    ]
    return [
        _single(limits, column, sign * shape)
        for column in range(len(limits.inputs))
        for shape in menu
        for sign in (1.0, -1.0)
    ]


def _signs(count: int) -> list[tuple[float, ...]]:
    if count <= TOGETHER:
        return list(product((1.0, -1.0), repeat=count))
    same, turn = (1.0,) * count, tuple(1.0 if j % 2 == 0 else -1.0 for j in range(count))
    return [same, tuple(-s for s in same), turn, tuple(-s for s in turn)]


def _together(limits: Limits) -> list[Drive]:
    at, count = shapes.instants(limits.intervals, limits.course), float(limits.intervals)
    if len(limits.inputs) < 2:
        return []
    found = []
    for shape in (shapes.step(at, float(at[0])), shapes.doublet(at, float(at[0]), round(count / 3))):
        for signs in _signs(len(limits.inputs)):
            columns = [limits.sized(sign * shape, column) for column, sign in enumerate(signs)]
            found.append(limits.drive(np.stack(columns, axis=1)))
    return found


def _offsets(limits: Limits) -> list[Drive]:
    still = np.zeros((limits.intervals, len(limits.inputs)))
    found = [
        limits.drive(still, {name: limits.offset(column, sign)})
        for column, name in enumerate(limits.offsets)
        for sign in (1.0, -1.0)
    ]
    if not limits.offsets:
        return found
    at = shapes.instants(limits.intervals, limits.course)
    for signs in _signs(len(limits.offsets)):
        start = {name: limits.offset(column, signs[column]) for column, name in enumerate(limits.offsets)}
        found.append(limits.drive(still, start))
        for sign in (1.0, -1.0) if limits.inputs else ():
            shape = sign * shapes.step(at, float(at[0]))
            columns = [limits.sized(shape, column) for column in range(len(limits.inputs))]
            found.append(limits.drive(np.stack(columns, axis=1), start))
    return found
