"""Drives that are tried at every operating point, before anything is drawn.

Plain ones (steps, pulses, doublets, ramps, square waves; each input alone and several together, both signs; offsets
alone and with steps), and the drives that move each compared signal of the local model furthest. A random search
seldom meets the latter: the worst drive of a resonant plant switches in step with the resonance from beginning to end.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from itertools import product

import numpy as np

from ..core.delivered import Delays
from ..core.drive import Drive
from ..core.model import Array, LocalModel
from ..numerics.worst import NO_DELAYS, WITHIN, furthest, furthest_square, reach, weights
from . import shapes
from .declared import Limits

TOGETHER = 4  # up to so many inputs every combination of signs is stepped
SWITCHES = 3  # of an input in a switched drive, at most
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


def switched(limits: Limits, count: int, rng: np.random.Generator) -> tuple[Drive, ...]:
    """`count` corners of the declared set: every input at one end of its range, and a few switches to the other.

    Where the error bends (a corner in the plant, say) it has many local maxima, and most of them lie at such corners.
    They are places to climb from: what is drawn elsewhere seldom moves all inputs fully all the time.
    """
    found = []
    for _ in range(count):
        values = np.empty((limits.intervals, len(limits.inputs)))
        for column in range(len(limits.inputs)):
            turns = np.zeros(limits.intervals, dtype=np.intp)
            np.add.at(turns, rng.integers(limits.intervals, size=int(rng.integers(SWITCHES + 1))), 1)
            high = (np.cumsum(turns) + int(rng.integers(2))) % 2 == 0
            values[:, column] = np.where(high, limits.high[column], limits.low[column])
        start = {name: _end(limits, name, float(rng.integers(-1, 2))) for name in limits.offsets}
        found.append(limits.drive(values, start))
    return unique(found)


def worst_of_model(
    limits: Limits, model: LocalModel, signals: Sequence[str], squares: Sequence[str], delays: Delays = NO_DELAYS
) -> tuple[Drive, ...]:
    """Both signs of the drives that move each of `signals` furthest at the end of the horizon.

    For `squares` (signals with an rms band) the drive with a large mean square is added.
    """
    found: list[Drive] = []
    for signal in signals:
        rows, offsets = weights(model, signal, limits.every, limits.intervals, limits.course, delays)
        columns = [model.inputs.index(name) for name in limits.inputs]
        gains = dict(zip(model.states.names, offsets, strict=True))
        found += worst_of_weights(limits, rows[:, columns], gains, square=signal in squares)
    return unique(found)


def worst_of_difference(
    limits: Limits,
    first: LocalModel,
    second: LocalModel,
    signals: Sequence[str],
    squares: Sequence[str],
    delays: Delays = NO_DELAYS,
) -> tuple[Drive, ...]:
    """Both signs of the drives that move `signals` of two local models furthest apart, anywhere in the horizon.

    For `squares` (signals with an rms band) the drive with a large mean square is added. Either model may be sampled.
    """
    found: list[Drive] = []
    for signal in signals:
        apart = [_apart(limits, (first, second), signal, delays, share) for share in _places(limits, first, second)]
        found += worst_of_weights(limits, apart[-1][0], {}, square=signal in squares)
        for sign in (1.0, -1.0):
            sized = [_oldest(limits, sign * rows, sign * offsets) for rows, offsets in apart]
            for place in {len(apart) - 1, int(np.argmax([size for size, _ in sized]))}:
                found += _begun(limits, sign * apart[place][0], sign * apart[place][1], sized[place][1])
    return unique(found)


def _places(limits: Limits, first: LocalModel, second: LocalModel) -> list[float]:
    """Shares of an interval at which both models say something; the whole one last."""
    step = first.step if first.step is not None else second.step
    count = WITHIN if step is None else max(1, round(limits.every / step))
    return [place / count for place in range(count + 1)]


def _apart(
    limits: Limits, models: tuple[LocalModel, LocalModel], signal: str, delays: Delays, share: float
) -> tuple[Array, Array]:
    """First less second: what rows (K, m) of the driven inputs add, and offsets (K, states in `limits.offsets`)."""
    rows = np.zeros((limits.intervals, len(limits.inputs)))
    offsets = np.zeros((limits.intervals, len(limits.offsets)))
    for sign, model in zip((1.0, -1.0), models, strict=True):
        found = reach(model, (signal,), limits.every, limits.intervals, limits.course, delays, share)
        for column, name in enumerate(limits.inputs):
            if name in model.inputs:
                rows[:, column] += sign * found.rows[0, :, model.inputs.index(name)]
        for column, name in enumerate(limits.offsets):
            if name in model.states:
                offsets[:, column] += sign * found.offsets[0, :, model.states.index(name)]
    return rows, offsets


def _oldest(limits: Limits, rows: Array, offsets: Array) -> tuple[float, int]:
    """The largest sum of inputs and offsets, without limits on rates, and the intervals after which it is reached."""
    inputs = np.cumsum(np.sum(np.maximum(rows * limits.high, rows * limits.low), axis=1)[::-1])
    started = np.sum(np.maximum(offsets * limits.offset_high, offsets * limits.offset_low), axis=1)
    total = inputs + started
    if not np.all(np.isfinite(total)):
        return 0.0, limits.intervals
    at = limits.intervals - 1 if not np.any(started) else int(np.argmax(total))
    return float(total[at]), at + 1


def _begun(limits: Limits, rows: Array, offsets: Array, age: int) -> list[Drive]:
    """The worst drive whose worst instant is `age` intervals old, followed by what keeps the last value."""
    if not np.all(np.isfinite(rows)) or not np.all(np.isfinite(offsets)):
        return []
    values = np.empty_like(rows)
    values[:age] = furthest(rows[limits.intervals - age :], limits.low, limits.high, limits.change)
    values[age:] = values[age - 1]
    starts = {
        name: limits.offset(column, float(np.sign(offsets[age - 1, column])))
        for column, name in enumerate(limits.offsets)
    }
    return [limits.drive(values, starts)]


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
