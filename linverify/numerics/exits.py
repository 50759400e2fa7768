"""Where the plant first leaves the envelope, through what, and whether the local model was on its way there."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np
from numpy.typing import NDArray

from ..core.case import Interval
from ..core.model import Array
from .integrate import Mask
from .rig import Exit, Rig

if TYPE_CHECKING:
    from .plant_side import Followed

ROUNDING = 1e-9  # of a limit's size: a drive or offset cut to the limit itself is no exit
UNSEEN = 1e-3  # of a state's acceptable error: a trim that lies on a limit is not left by errors of integration
TOUCHING = 1e-6  # of the way to a limit: a column that stops this near it (a root's argument runs out) has left there
EVERYWHERE = Interval()
Indices = NDArray[np.intp]


@dataclass(frozen=True, slots=True, eq=False)
class Limits:
    """Absolute limits of the watched signals with a little slack: low, high (w,); state_low, state_high (n, 1)."""

    low: Array
    high: Array
    state_low: Array
    state_high: Array

    def beyond(self, values: Array) -> Mask:
        """Where `values` (w, ..., N) are beyond a limit; NaN is not."""
        shape = (-1,) + (1,) * (values.ndim - 1)
        result: Mask = (values < self.low.reshape(shape)) | (values > self.high.reshape(shape))
        return result

    def states_beyond(self, x: Array) -> Mask:
        """Which columns of `x` (n, N) have a state beyond a limit, (N,)."""
        return np.asarray(((x < self.state_low) | (x > self.state_high)).any(axis=0))


def limits_of(rig: Rig, names: Sequence[str]) -> Limits:
    """The envelope as arrays, for the watched signals called `names` and for all states."""
    states = rig.plant.states.names
    return Limits(*_bounds(rig, names), *(side[:, np.newaxis] for side in _bounds(rig, states)))


def _bounds(rig: Rig, names: Sequence[str]) -> tuple[Array, Array]:
    low, high = np.empty(len(names)), np.empty(len(names))
    for row, name in enumerate(names):
        interval, trimmed = rig.envelope.get(name, EVERYWHERE), abs(rig.point.value(name))
        weight = rig.weights[rig.plant.states.index(name)] if name in rig.plant.states else 0.0
        low[row] = interval.low - ROUNDING * max(abs(interval.low), trimmed) - UNSEEN * weight
        high[row] = interval.high + ROUNDING * max(abs(interval.high), trimmed) + UNSEEN * weight
    return low, high


def find(
    rig: Rig, names: Sequence[str], times: Array, followed: Followed, model: Array
) -> tuple[tuple[Exit | None, ...], Indices]:
    """First exit of each column, and the flat index (over K, S + 1) of its first sample that no longer counts, (N,).

    model (w, K, S + 1, N): the local model's deviations of the same signals. A crossing is interpolated between the
    samples on its two sides; of several signals the one that crosses first is told.
    """
    w, width = followed.deviations.shape[0], followed.deviations.shape[-1]
    flat, course = times.ravel(), followed.reference.reshape(w, -1)
    plant = followed.deviations.reshape(w, -1, width) + course[:, :, np.newaxis]
    local = model.reshape(w, -1, width)
    suspect = limits_of(rig, names).beyond(plant).any(axis=(0, 1)) | np.isfinite(followed.stopped)
    left: list[Exit | None] = [None] * width
    first = np.full(width, flat.size, dtype=np.intp)
    for column in np.flatnonzero(suspect):
        crossings = _crossings(rig, names, _Track(flat, plant[:, :, column], course), followed, int(column))
        if crossings:
            crossing = min(crossings, key=lambda c: (c.time, c.row))
            first[column] = min(c.index for c in crossings)
            way = _model_way(crossing, flat, course[crossing.row], local[crossing.row, :, column])
            left[column] = Exit(names[crossing.row], crossing.side, crossing.time, crossing.limit, way)
    return tuple(left), first


@dataclass(frozen=True, slots=True)
class _Crossing:
    """One limit crossed; index: flat index of the first sample that does not count any more."""

    row: int
    side: Literal["low", "high"]
    limit: float
    time: float
    index: int


@dataclass(frozen=True, slots=True, eq=False)
class _Track:
    """One column: times (T,), absolute values (w, T), course (w, T)."""

    times: Array
    values: Array
    course: Array


def _crossings(rig: Rig, names: Sequence[str], track: _Track, followed: Followed, column: int) -> list[_Crossing]:
    """The first crossing of every limit that this column crosses."""
    stop, failed = float(followed.stopped[column]), not followed.outcomes[column].done
    limits = limits_of(rig, names)
    found = []
    for row, name in enumerate(names):
        good = np.flatnonzero(np.isfinite(track.values[row]))
        times, values, places = track.times[good], track.values[row, good], good
        if np.isfinite(stop) and np.isfinite(followed.last[row, column]):
            after = int(np.searchsorted(track.times, stop, side="right"))
            times = np.append(times, stop)
            values, places = np.append(values, followed.last[row, column]), np.append(places, after)
        interval = rig.envelope.get(name, EVERYWHERE)
        for side, limit, edge in (("low", interval.low, limits.low[row]), ("high", interval.high, limits.high[row])):
            beyond = values < edge if side == "low" else values > edge
            if failed and np.isfinite(stop) and np.isfinite(limit) and len(values):
                beyond[-1] |= abs(values[-1] - limit) <= TOUCHING * abs(limit - track.course[row, 0])
            if beyond.any():
                i = int(np.argmax(beyond))
                time = float(times[i])
                if i > 0 and values[i] != values[i - 1]:
                    share = min(max((limit - values[i - 1]) / (values[i] - values[i - 1]), 0.0), 1.0)
                    time = float(times[i - 1] + share * (times[i] - times[i - 1]))
                found.append(_Crossing(row, "low" if side == "low" else "high", limit, time, int(places[i])))
    return found


def _model_way(crossing: _Crossing, times: Array, course: Array, deviations: Array) -> float:
    """How far the local model had gone from trim to the limit when the plant crossed it; 1 where there is no way."""
    after = crossing.index
    if after >= times.size or times[after] <= crossing.time or after == 0:
        at = min(after, times.size - 1)
        gone, way = deviations[at], crossing.limit - course[at]
    else:
        before = after - 1
        share = (crossing.time - times[before]) / (times[after] - times[before])
        gone = deviations[before] + share * (deviations[after] - deviations[before])
        way = crossing.limit - (course[before] + share * (course[after] - course[before]))
    return float(gone / way) if way != 0 else 1.0
