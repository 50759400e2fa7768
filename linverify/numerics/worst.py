"""Drives that move a linear model furthest: the dual side of its impulse response.

A signal of a linear model at the end of the horizon is a weighted sum of the drive's rows, and the weights are its
time-reversed pulse response. Within |u| <= a the largest sum is reached by the sign of the weights (bang-bang; the
largest value is their L1 norm). With a limit on the change from row to row that drive is not the clipped bang-bang
one: the linear programme is solved. An earlier peak is the same drive begun earlier, so the end of the horizon is
the worst instant. For a root mean square the sum of squares is climbed from vertex to vertex by repeated linearization;
that finds a local maximum.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from ..core.delivered import Course, Delays
from ..core.model import Array, LocalModel
from .interval_maps import interval_map, repeats

CLIMBS = 20  # linearizations of a sum of squares; in trials it stood still after 3 to 8
NO_DELAYS = Delays()
WITHIN = 8  # places inside an interval at which a peak is looked for


@dataclass(frozen=True, slots=True, eq=False)
class Reach:
    """What moves some signals of a local model at one time of the horizon.

    rows (q, K, m): what each row of a drive adds; offsets (q, K, n): what each initial state adds when the drive is
    only 1, 2, ..., K intervals old (the last is the time in question). In units of the signal per unit of input, state.
    """

    rows: Array
    offsets: Array


def reach(
    model: LocalModel,
    signals: Sequence[str],
    every: float,
    intervals: int,
    course: Course,
    delays: Delays = NO_DELAYS,
    share: float = 1.0,
) -> Reach:
    """What moves `signals` when `share` of the last interval has passed; 0: just after its first instant.

    At whole instants the values are those left of a jump, but for share 0. Raises ValueError for a signal that is
    neither state nor output of the model.
    """
    rows = np.zeros((len(signals), intervals, len(model.inputs)))
    offsets = np.zeros((len(signals), intervals, len(model.states)))
    sampled = model.step is not None
    for late, some in _alike({name: delays.outputs.get(name, 0.0) for name in signals}).items():
        picked = [signals[at] for at in some]
        # a sequence has right-hand values only, but at the end of the horizon
        right = share == 0.0 or (sampled and (share < 1.0 or late > 0.0))
        for delay, columns in _alike({name: delays.inputs.get(name, 0.0) for name in model.inputs.names}).items():
            count, part = _age(every, intervals, share, late + delay, right)
            if count > 0:
                found, _ = _weights(model, picked, every, count, course, part)
                rows[np.ix_(some, range(count), columns)] = found[:, :, columns]
        count, part = _age(every, intervals, share, late, right)
        if count > 0:
            offsets[np.ix_(some, range(intervals - count, intervals))] = _weights(
                model, picked, every, count, course, part
            )[1]
    return Reach(rows, offsets)


def weights(
    model: LocalModel, signal: str, every: float, intervals: int, course: Course, delays: Delays = NO_DELAYS
) -> tuple[Array, Array]:
    """What each row of a drive and each initial state adds to `signal` at the end of the horizon.

    Returns (rows (K, m), offsets (n,)) in units of the signal per unit of the input or state; left of the last instant.
    Raises ValueError for a signal that is neither state nor output of the model.
    """
    found = reach(model, (signal,), every, intervals, course, delays)
    return found.rows[0], found.offsets[0, -1]


def reaches(
    model: LocalModel,
    signals: Sequence[str],
    every: float,
    intervals: int,
    course: Course,
    delays: Delays = NO_DELAYS,
) -> tuple[Array, Array]:
    """How far unit inputs and unit initial states can move signals of the local model at any time of the horizon.

    Returns (inputs (q, m), states (q, n)): the largest |deviation| when one input alone moves within +-1 (the L1 norm
    of its response, the worst over places inside an interval), and when one state starts one unit off.
    Raises ValueError for a signal that is neither state nor output of the model.
    """
    inputs = np.zeros((len(signals), len(model.inputs)))
    states = np.abs(np.stack([_row(model, signal)[0] for signal in signals]))
    for place in range(WITHIN):
        found = reach(model, signals, every, intervals, course, delays, (place + 1) / WITHIN)
        inputs = np.maximum(inputs, np.abs(found.rows).sum(axis=1))
        states = np.maximum(states, np.abs(found.offsets).max(axis=1))
    return inputs, states


def _alike(delays: Mapping[str, float]) -> dict[float, list[int]]:
    """Positions by their dead time."""
    found: dict[float, list[int]] = {}
    for at, delay in enumerate(delays.values()):
        found.setdefault(delay, []).append(at)
    return found


def _age(every: float, intervals: int, share: float, late: float, right: bool) -> tuple[int, float]:
    """The same place `late` before, as intervals and share of the last; no intervals where nothing has arrived yet."""
    if not late > 0.0:
        return intervals, share
    passed = intervals - 1 + share - late / every
    whole = round(passed)
    if abs(passed - whole) <= 1e-9 * intervals:
        return (whole + 1, 0.0) if right else (whole, 1.0)
    count = int(np.floor(passed)) + 1
    return count, passed - (count - 1)


def _weights(
    model: LocalModel, signals: Sequence[str], every: float, intervals: int, course: Course, share: float
) -> tuple[Array, Array]:
    """At time (intervals - 1 + share) * every: rows (q, K, m), and offsets (q, K, n) at that share of each interval.

    For a sampled model `share` is rounded to whole steps.
    """
    pairs = [_row(model, signal) for signal in signals]
    read, feed = np.stack([pair[0] for pair in pairs]), np.stack([pair[1] for pair in pairs])
    cycle = repeats(model, every)
    wholes = [interval_map(model, every, course, 1.0, number) for number in range(cycle)]
    parts = [interval_map(model, every, course, share, number) for number in range(cycle)]
    part = parts[(intervals - 1) % cycle]
    rows = np.zeros((len(signals), intervals, len(model.inputs)))
    offsets = np.zeros((len(signals), intervals, len(model.states)))
    reached = share if course == "straight" else 1.0
    rows[:, -1] = read @ part.new + feed * reached
    if intervals > 1:
        rows[:, -2] = read @ part.before + feed * (1.0 - reached)
    back = read @ part.state
    offsets[:, 0] = back
    for k in range(intervals - 2, -1, -1):
        whole = wholes[k % cycle]
        rows[:, k] += back @ whole.new
        if k > 0:
            rows[:, k - 1] += back @ whole.before
        back = back @ whole.state
        offsets[:, intervals - 1 - k] = back
    if cycle > 1:  # a start is always at time zero: intervals are not alike when they are counted from the end
        since = np.eye(len(model.states))
        for k in range(intervals):
            offsets[:, k] = read @ parts[k % cycle].state @ since
            since = wholes[k % cycle].state @ since
    return rows, offsets


def furthest(rows: Array, low: Array, high: Array, change: Array) -> Array:
    """The drive (K, m) with the largest sum(rows * drive) within low <= u <= high and |u_k - u_(k-1)| <= change.

    rows (K, m); low, high, change (m,), change infinite where nothing limits it; before row 0 the drive is zero.
    """
    drive = np.where(rows > 0.0, high, np.where(rows < 0.0, low, 0.0))
    for column in np.flatnonzero(change < high - low):
        drive[:, column] = _programme(rows[:, column], low[column], high[column], change[column])
    return drive


def furthest_square(rows: Array, low: Array, high: Array, change: Array) -> Array:
    """A drive (K, m) with a large sum of squares of the signal over all instants; arguments as `furthest`."""
    pulse = rows[::-1]
    drive = furthest(rows, low, high, change)
    for _ in range(CLIMBS):
        signal = np.sum([np.convolve(pulse[:, j], drive[:, j])[: len(rows)] for j in range(rows.shape[1])], axis=0)
        slope = [np.convolve(pulse[:, j], signal[::-1])[: len(rows)][::-1] for j in range(rows.shape[1])]
        better = furthest(np.stack(slope, axis=1), low, high, change)
        if np.array_equal(better, drive):
            break
        drive = better
    return drive


def _programme(gains: Array, low: float, high: float, change: float) -> Array:
    """One input's linear programme; falls back to the clipped bang-bang drive where the solver gives up."""
    from scipy.optimize import linprog
    from scipy.sparse import eye_array, vstack

    count = gains.size
    scale = float(np.max(np.abs(gains), initial=0.0))
    if not scale > 0.0 or not change > 0.0:
        return np.zeros(count)
    step: Any = eye_array(count) - eye_array(count, k=-1)
    changes: Any = vstack([step, -step])
    found = linprog(-gains / scale, A_ub=changes, b_ub=np.full(2 * count, change), bounds=(low, high), method="highs")
    wanted = found.x if found.success else np.where(gains > 0.0, high, low)
    return _followed(np.asarray(wanted, dtype=np.float64), low, high, change)


def _followed(wanted: Array, low: float, high: float, change: float) -> Array:
    """The wanted values inside their limits to the last bit."""
    kept = np.empty_like(wanted)
    before = 0.0
    for k, value in enumerate(np.clip(wanted, low, high)):
        before = float(np.clip(value, before - change, before + change))
        kept[k] = before
    return kept


def _row(model: LocalModel, signal: str) -> tuple[Array, Array]:
    """The rows of C and D that read `signal`."""
    if signal in model.outputs:
        at = model.outputs.index(signal)
        return np.asarray(model.C[at]), np.asarray(model.D[at])
    at = model.states.index(signal)
    feed = np.zeros(len(model.inputs)) if model.ahead is None else np.asarray(model.ahead[at])
    return np.eye(len(model.states))[at], feed
