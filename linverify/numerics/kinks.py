"""Corners, jumps and infinite slopes of a function along its axes, near a point: found by looking closer and closer.

A window of 17 samples is narrowed to three of its sixteen segments, those about the largest change of slope, again and
again. A smooth function loses its change of slope on the way (by 16/3 a round), a corner keeps it, a root gains
(2.3), a jump gains as much as the window shrinks. Central differences cannot see any of this: at a corner they give the
mean of both sides with an error estimate of zero. Comparing one-sided slopes at a few fixed steps, the obvious
other way, tells less: two corners mix, a sharp but smooth bend looks like a corner, and the distance stays unknown.

Where noise is as large as the change of slope no verdict is made: the entry is `noisy`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..core.model import Array
from .probe import Indices, Mask, Probe
from .windows import NEAR, Windows, near_windows, outer_windows

GapKind = Literal["kink", "jump", "steep"]

SEGMENTS = 16
SHRINK = SEGMENTS / 3
ROUNDS = 14
NEAR_NOTICE = 2e-5  # of the row's scale: smaller changes of slope at the point are not followed up
FAR_NOTICE = 5e-3  # the same for corners further out, which are told and not judged
CLEAR = 12.0  # a change of value along one segment must be this many times the noise to count
CLEAN = 100.0  # rounds this clear are preferred when the trend is judged
LOCAL = 12.0  # and so many times the roughness of the same samples beside the change
# gain a round: a smooth curve has 0.19, |x|^1.5 0.43, a corner 1, a square root 2.3, a cube root 3.1, a jump 5.3
KINK_GAIN, STEEP_GAIN, JUMP_GAIN = 0.6, 1.5, 4.0


@dataclass(frozen=True, slots=True)
class GapFinding:
    """One-sided slopes of row by column that differ: a kink, a jump of value, or an infinite slope ("steep").

    distance: signed, from the point, in sizes of the column. gap: the difference of slopes in f per z; for a jump its
    height over NEAR sizes, the mean slope that it adds. left, right: slopes beside it. height: of a jump, else zero.
    error: of the gap, from noise. blur: how far off the distance may be, in sizes.
    """

    row: int
    column: int
    kind: GapKind
    distance: float
    gap: float
    left: float
    right: float
    height: float = 0.0
    error: float = 0.0
    blur: float = 0.0

    @property
    def near(self) -> bool:
        """True where it counts as sitting on the point."""
        return abs(self.distance) < NEAR


@dataclass(frozen=True, slots=True, eq=False)
class Corners:
    """findings, nearest first; hidden (r, v): gaps of slope on the point that noise may be hiding; puzzling (r, v):
    gaps that were seen and fit no kind; lost (r, v): True where a call next to the point failed.
    """

    findings: tuple[GapFinding, ...]
    hidden: Array
    puzzling: Array
    lost: Mask


@dataclass(slots=True, eq=False)
class _Chase:
    """The windows being narrowed; not frozen, each round overwrites low and high and adds to the history."""

    row: Indices
    column: Indices
    near: Mask
    low: Array
    high: Array
    active: Mask
    handed: Mask  # outer windows that closed in on the point, where near windows look already
    change: list[Array]
    clear: list[Array]
    sights: list[_Sight]


@dataclass(frozen=True, slots=True, eq=False)
class _Sight:
    """One look at S windows. change (S,): largest change of slope; step (S,): segment length; at (S,): its segment;
    nodes (S, 17); values (S, 17); slopes (S, 16); rough (S,): roughness of the samples beside the change.
    """

    change: Array
    step: Array
    at: Indices
    nodes: Array
    values: Array
    slopes: Array
    rough: Array


def corners(probe: Probe, scales: Array, noise: Array) -> Corners:
    """Search every row and column. scales (r, v): slope that makes up the row's scale, in f per z; noise (r,)."""
    near, far = near_windows(probe, scales, noise), outer_windows(probe)
    rows, columns = scales.shape
    hidden, lost = np.zeros((rows, columns)), np.zeros((rows, columns), dtype=np.bool_)
    first = [_first_look(probe, windows) for windows in (near, far)]
    chase = _started(near, first[0], scales, noise, hidden, lost)
    chase = _joined(chase, _started(far, first[1], scales, noise, None, None))
    _narrow(probe, chase, scales, noise)
    puzzling = np.zeros_like(hidden)
    findings = _judged(probe, chase, noise, hidden, puzzling)
    return Corners(_merged(findings), hidden, puzzling, lost)


def _first_look(probe: Probe, windows: Windows) -> _Sight:
    """All rows in every window, shape (r * W,)."""
    share = np.linspace(0.0, 1.0, SEGMENTS + 1)
    offsets = windows.low[:, np.newaxis] + (windows.high - windows.low)[:, np.newaxis] * share
    values, taken = probe.along(np.repeat(windows.column, SEGMENTS + 1), offsets.ravel())
    count = len(windows.column)
    nodes = np.broadcast_to(taken.reshape(count, -1), (len(values), count, SEGMENTS + 1))
    return _sight(nodes.reshape(-1, SEGMENTS + 1), values.reshape(-1, SEGMENTS + 1))


def _sight(nodes: Array, values: Array) -> _Sight:
    slopes = np.diff(values, axis=1) / np.maximum(np.diff(nodes, axis=1), 1e-300)
    before, here, after = slopes[:, 1:-3], slopes[:, 2:-2], slopes[:, 3:-1]
    # a corner changes the slope for good, a jump for one segment only: the next but one must agree
    bend = np.minimum(np.abs(after - before), np.abs(slopes[:, 4:] - slopes[:, :-4]))
    change = np.maximum(bend, np.abs(here - (before + after) / 2))
    at = np.argmax(np.nan_to_num(change, nan=-1.0), axis=1)
    biggest = np.take_along_axis(change, at[:, np.newaxis], 1)[:, 0]
    step = (nodes[:, -1] - nodes[:, 0]) / SEGMENTS
    return _Sight(biggest, step, at + 2, nodes, values, slopes, _roughness(values, at + 2))


def _roughness(values: Array, at: Indices) -> Array:
    """Median third difference clear of segment `at` and its neighbours, as the noise of one sample.

    The median, since a second corner or jump in the window is no noise.
    """
    third = np.abs(np.diff(values, n=3, axis=1)) / np.sqrt(20.0)
    start = np.arange(third.shape[1])
    beside = (start + 4 <= at[:, np.newaxis]) | (start > at[:, np.newaxis] + 1)
    rough: Array = np.nanmedian(np.where(beside, third, np.nan), axis=1)
    return rough


def _started(
    windows: Windows, sight: _Sight, scales: Array, noise: Array, hidden: Array | None, lost: Mask | None
) -> _Chase:
    """Windows in which the change of slope is worth following; notes what the near ones leave open."""
    rows = len(noise)
    row = np.repeat(np.arange(rows), len(windows.column))
    column = np.tile(windows.column, rows)
    usable = windows.usable[row, np.tile(np.arange(len(windows.column)), rows)]
    floor = 8.0 * noise[row] / sight.step
    notice = (FAR_NOTICE if hidden is None else NEAR_NOTICE) * scales[row, column]
    bad = ~np.isfinite(sight.values).all(axis=1)
    suspect = usable & ~bad & (sight.change > np.maximum(notice, floor))
    if hidden is not None and lost is not None:
        np.maximum.at(hidden, (row, column), np.where(usable & ~suspect & ~bad, sight.change + floor, 0.0))
        np.logical_or.at(lost, (row, column), bad & usable)
    chosen = np.flatnonzero(suspect)
    near = np.full(len(chosen), hidden is not None)
    part = _part(sight, chosen)
    low, high = _narrowed(part)
    clear = _clearness(part, noise[row[chosen]])
    handed = np.zeros(len(chosen), dtype=np.bool_)
    return _Chase(row[chosen], column[chosen], near, low, high, clear > 1.0, handed, [part.change], [clear], [part])


def _part(sight: _Sight, chosen: Indices) -> _Sight:
    return _Sight(
        sight.change[chosen],
        sight.step[chosen],
        sight.at[chosen],
        sight.nodes[chosen],
        sight.values[chosen],
        sight.slopes[chosen],
        sight.rough[chosen],
    )


def _joined(first: _Chase, second: _Chase) -> _Chase:
    def both(one: Array, other: Array) -> Array:
        return np.concatenate([one, other])

    sights = [
        _Sight(*(both(getattr(a, name), getattr(b, name)) for name in _Sight.__slots__))
        for a, b in zip(first.sights, second.sights, strict=True)
    ]
    return _Chase(
        np.concatenate([first.row, second.row]),
        np.concatenate([first.column, second.column]),
        np.concatenate([first.near, second.near]),
        both(first.low, second.low),
        both(first.high, second.high),
        np.concatenate([first.active, second.active]),
        np.concatenate([first.handed, second.handed]),
        [both(a, b) for a, b in zip(first.change, second.change, strict=True)],
        [both(a, b) for a, b in zip(first.clear, second.clear, strict=True)],
        sights,
    )


def _narrowed(sight: _Sight) -> tuple[Array, Array]:
    index = np.arange(len(sight.at))
    return sight.nodes[index, sight.at - 1], sight.nodes[index, sight.at + 2]


def _clearness(sight: _Sight, noise: Array) -> Array:
    """How many times the change of value along one segment exceeds what noise could make of it; below 1: it may be
    noise alone.
    """
    size = sight.change * sight.step
    return size / np.maximum(np.maximum(CLEAR * noise, LOCAL * sight.rough), 1e-300)


def _narrow(probe: Probe, chase: _Chase, scales: Array, noise: Array) -> None:
    """Look closer until every window is settled: smooth, at the end of floating-point resolution, or lost in noise."""
    notice = np.where(chase.near, NEAR_NOTICE, FAR_NOTICE) * scales[chase.row, chase.column]
    size, spacing = probe.sizes[chase.column], probe.spacing[chase.column]
    inner = 1.5 * NEAR * size
    for _ in range(ROUNDS):
        chase.active &= chase.high - chase.low > 64.0 * np.maximum(spacing, np.spacing(size) * 1e-6)
        chase.handed |= ~chase.near & (np.maximum(np.abs(chase.low), np.abs(chase.high)) <= inner)
        chase.active &= ~chase.handed
        live = np.flatnonzero(chase.active)
        if not live.size:
            return
        sight = _look(probe, chase, live)
        clear = _clearness(sight, noise[chase.row[live]])
        settled = (sight.change < notice[live]) | ~np.isfinite(sight.values).all(axis=1)
        _remember(chase, live, sight, clear)
        chase.low[live], chase.high[live] = _narrowed(sight)
        chase.active[live] = (clear > 1.0) & ~settled


def _look(probe: Probe, chase: _Chase, live: Indices) -> _Sight:
    share = np.linspace(0.0, 1.0, SEGMENTS + 1)
    offsets = chase.low[live, np.newaxis] + (chase.high - chase.low)[live, np.newaxis] * share
    values, taken = probe.along(np.repeat(chase.column[live], SEGMENTS + 1), offsets.ravel())
    own = values.reshape(len(values), len(live), SEGMENTS + 1)[chase.row[live], np.arange(len(live))]
    return _sight(taken.reshape(len(live), -1), own)


def _remember(chase: _Chase, live: Indices, sight: _Sight, clear: Array) -> None:
    change, clearness = np.full(len(chase.row), np.nan), np.zeros(len(chase.row))
    change[live], clearness[live] = sight.change, clear
    whole = {}
    for name in _Sight.__slots__:
        part, last = getattr(sight, name), getattr(chase.sights[-1], name)
        whole[name] = last.copy()
        whole[name][live] = part
    chase.change.append(change)
    chase.clear.append(clearness)
    chase.sights.append(_Sight(**whole))


def _judged(probe: Probe, chase: _Chase, noise: Array, hidden: Array, puzzling: Array) -> list[GapFinding]:
    change, clear = np.array(chase.change), np.array(chase.clear)  # (rounds, S)
    findings = []
    for index in np.flatnonzero(~chase.handed).tolist():
        row, column = int(chase.row[index]), int(chase.column[index])
        seen = np.flatnonzero(clear[:, index] > 1.0)
        clean = np.flatnonzero(clear[:, index] > CLEAN / CLEAR)
        rounds = (clean if len(clean) >= 3 else seen)[-3:]
        last = change[np.isfinite(change[:, index]), index]
        if len(rounds) < 2:
            if chase.near[index]:
                floor = CLEAR * noise[row] / chase.sights[len(last) - 1].step[index]
                open_ = hidden if floor > last[-1] / 2 else puzzling
                open_[row, column] = max(open_[row, column], last[-1] + floor)
            continue
        gain = (change[rounds[-1], index] / change[rounds[0], index]) ** (1.0 / (rounds[-1] - rounds[0]))
        if gain >= KINK_GAIN:
            findings.append(_finding(probe, chase, index, gain, int(rounds[-1]), noise[row]))
    return findings


def _finding(probe: Probe, chase: _Chase, index: int, gain: float, at_round: int, noise: float) -> GapFinding:
    sight = chase.sights[at_round]
    at, step = int(sight.at[index]), float(sight.step[index])
    nodes, values, slopes = sight.nodes[index], sight.values[index], sight.slopes[index]
    column = int(chase.column[index])
    size = float(probe.sizes[column])
    left, right = float(slopes[at - 1]), float(slopes[at + 1])
    error = 4.0 * max(float(noise), float(sight.rough[index])) / step
    middle = float(nodes[at] + nodes[at + 1]) / 2
    row = int(chase.row[index])
    if gain >= JUMP_GAIN:
        height = float(values[at + 1] - values[at]) - step * (left + right) / 2
        gap = abs(height) / (NEAR * size)
        return GapFinding(row, column, "jump", middle / size, gap, left, right, height, 0.0, step / size)
    if gain >= STEEP_GAIN:
        gap = float(sight.change[index])
        return GapFinding(row, column, "steep", middle / size, gap, left, right, 0.0, error, step / size)
    # where the lines through the segments on either side meet
    meet = middle
    if left != right:
        meet = (values[at + 1] - right * nodes[at + 1] - values[at] + left * nodes[at]) / (left - right)
        meet = float(np.clip(meet, nodes[at - 1], nodes[at + 2]))
    return GapFinding(row, column, "kink", meet / size, abs(right - left), left, right, 0.0, error, step / size)


def _merged(findings: list[GapFinding]) -> tuple[GapFinding, ...]:
    """One finding a corner: windows overlap, so that a corner may have been met more than once; the sharpest stays."""
    kept: list[GapFinding] = []
    for finding in sorted(findings, key=lambda one: (one.row, one.column, one.blur, abs(one.distance))):
        if not any(_same(finding, other) for other in kept):
            kept.append(finding)
    return tuple(sorted(kept, key=lambda one: (abs(one.distance), one.row, one.column)))


def _same(one: GapFinding, other: GapFinding) -> bool:
    apart = abs(one.distance - other.distance)
    blur = max(3.0 * one.blur, 3.0 * other.blur, 1e-7, 0.02 * abs(one.distance))
    return (one.row, one.column) == (other.row, other.column) and apart <= blur
