"""Corners, jumps and infinite slopes of a function along its axes, near a point: found by looking closer and closer.

A window of 17 samples is narrowed to three of its sixteen segments, those about the largest change of slope, again and
again; plain curvature is taken off first. A smooth function loses its change of slope on the way (by at least 16/3 a
round), a corner keeps it, a root gains (2.3), a jump gains as much as the window shrinks (16/3). Central differences
cannot see any of this: at a corner they give the mean of both sides with an error estimate of zero. Comparing one-sided
slopes at a few fixed steps, the obvious other way, tells less: two corners mix, a sharp but smooth bend looks like a
corner, and the distance stays unknown.

Where noise is as large as the change of slope no verdict is made, and the gap it may hide is told.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from typing import Literal

import numpy as np

from ..core.model import Array
from .probe import Indices, Mask, Probe
from .sights import Sights, looked, sights
from .windows import FAR, NEAR, Windows, near_windows, outer_windows

GapKind = Literal["kink", "jump", "steep"]

ROUNDS = 14
NEAR_NOTICE = 2e-5  # of the row's scale: smaller changes of slope at the point are not followed up
FAR_NOTICE = 5e-3  # the same for corners further out, which are told and not judged
CLEAR = 12.0  # a change of value along one segment must be this many times the noise to count
LOCAL = 12.0  # and so many times the roughness of the same samples beside the change
CLEAN = 8.0  # rounds that are this many times clearer than they must be are preferred when the trend is judged
LEAST_SPACINGS = 64.0  # a window is at least so many floating-point numbers wide
# gain a round: a smooth curve has 0.19, |x|^1.5 0.43, a corner 1, a square root 2.3, a cube root 3.1, a jump 5.3
KINK_GAIN, STEEP_GAIN, JUMP_GAIN = 0.6, 1.5, 4.0


@dataclass(frozen=True, slots=True)
class GapFinding:
    """One-sided slopes of row by column that differ: a kink, a jump of value, or an infinite slope ("steep").

    distance: signed, from the point, in sizes of the column. gap: the difference of slopes in f per z; for a jump its
    height over NEAR sizes, the mean slope that it adds. left, right: slopes beside it. height: of a jump, else zero.
    error: of the gap, from noise. blur: length of a sample segment where it was seen, in sizes; spread: how far off
    noise may have put it, in sizes.
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
    spread: float = 0.0

    @property
    def near(self) -> bool:
        """True where it counts as sitting on the point."""
        return abs(self.distance) < NEAR

    @property
    def maybe_near(self) -> bool:
        """True where it may sit on the point, for all that noise lets us know."""
        return abs(self.distance) - self.spread < NEAR

    @property
    def surely_near(self) -> bool:
        """True where it sits on the point whatever noise did."""
        return abs(self.distance) + self.spread < NEAR


@dataclass(frozen=True, slots=True, eq=False)
class Corners:
    """findings, nearest first; hidden (r, v): gaps of slope on the point that noise may be hiding; puzzling (r, v):
    gaps that were seen and fit no kind; lost (r, v): True where a call next to the point failed; grainy (r,): rows with
    jumps far and wide, which pass for noise.
    """

    findings: tuple[GapFinding, ...]
    hidden: Array
    puzzling: Array
    lost: Mask
    grainy: Mask


@dataclass(frozen=True, slots=True, eq=False)
class _First:
    """The first look at S windows. asked (S,): windows that their row takes; usable (S,): those with finite samples;
    notice, least (S,): changes of slope that matter, and that are followed up.
    """

    seen: Sights
    row: Indices
    column: Indices
    usable: Mask
    asked: Mask
    notice: Array
    least: Array


@dataclass(frozen=True, slots=True, eq=False)
class _Look:
    """Window `index` of `sights`, and how clear of noise it was."""

    sights: Sights
    index: int
    clear: float

    @property
    def change(self) -> float:
        return float(self.sights.change[self.index])

    @property
    def most(self) -> float:
        """The largest change that may be there: what was seen, or what noise could hide."""
        return max(self.change, self.change / self.clear) if self.clear > 0 else float("inf")

    @property
    def step(self) -> float:
        return float(self.sights.step[self.index])


@dataclass(slots=True, eq=False)
class _Suspect:
    """A window being narrowed; not frozen, every round adds a look. handed: it closed in on the point from an outer
    window, where the near windows look already.
    """

    row: int
    column: int
    near: bool
    notice: float
    active: bool = True
    handed: bool = False
    looks: list[_Look] = field(default_factory=list)

    @property
    def window(self) -> tuple[float, float]:
        last = self.looks[-1]
        return last.sights.closer(last.index)


def corners(probe: Probe, scales: Array, noise: Array) -> Corners:
    """Search every row and column. scales (r, v): slope that makes up the row's scale, in f per z; noise (r,)."""
    hidden, puzzling = np.zeros(scales.shape), np.zeros(scales.shape)
    lost = np.zeros(scales.shape, dtype=np.bool_)
    near = _first_look(probe, near_windows(probe, scales, noise), scales, noise, NEAR_NOTICE)
    far = _first_look(probe, outer_windows(probe), scales, noise, FAR_NOTICE)
    _left_open(near, hidden, lost)
    grain = far.seen.rough.reshape(len(noise), -1).max(axis=1, initial=0.0)
    suspects = [*_started(near, noise, near=True), *_started(far, noise, near=False)]
    _narrow(probe, suspects, noise)
    findings = _judged(probe, suspects, noise, hidden, puzzling)
    kept = _without_grain(findings, grain, hidden)
    grainy = np.array([any(one.row == row for one in findings if one not in kept) for row in range(len(noise))])
    return Corners(_merged(kept), hidden, puzzling, lost, grainy)


def _first_look(probe: Probe, windows: Windows, scales: Array, noise: Array, share: float) -> _First:
    """Every row in every window."""
    nodes, values = looked(probe, windows.column, windows.low, windows.high)
    rows = len(noise)
    seen = sights(np.tile(nodes, (rows, 1)), values.reshape(rows * len(nodes), -1))
    row, column = np.repeat(np.arange(rows), len(nodes)), np.tile(windows.column, rows)
    notice = share * scales[row, column]
    least = np.maximum(notice, 8.0 * noise[row] / seen.step)
    asked = windows.usable.ravel()
    return _First(seen, row, column, asked & seen.complete, asked, notice, least)


def _started(first: _First, noise: Array, *, near: bool) -> Iterator[_Suspect]:
    """The windows in which the change of slope is worth following, once for each place of change."""
    if not (first.usable & (first.seen.change > first.least)).any():
        return
    for peak in first.seen.peaks():
        clear = peak.clearness(noise[first.row], CLEAR, LOCAL)
        for index in np.flatnonzero(first.usable & (peak.change > first.least)).tolist():
            row, column, notice = int(first.row[index]), int(first.column[index]), float(first.notice[index])
            look = _Look(peak, index, float(clear[index]))
            yield _Suspect(row, column, near, notice, active=look.clear > 1.0, looks=[look])


def _left_open(first: _First, hidden: Array, lost: Mask) -> None:
    """What near windows that are not followed up leave open."""
    quiet = first.usable & (first.seen.change <= first.least)
    np.maximum.at(hidden, (first.row[quiet], first.column[quiet]), (first.seen.change + first.least)[quiet])
    broken = first.asked & ~first.usable
    lost[first.row[broken], first.column[broken]] = True


def _without_grain(findings: Sequence[GapFinding], grain: Array, hidden: Array) -> list[GapFinding]:
    """Findings without the jumps that are no higher than the roughness of their row far and wide: they are noise."""
    kept = []
    for finding in findings:
        if finding.kind == "jump" and abs(finding.height) < LOCAL * grain[finding.row]:
            if finding.maybe_near:
                entry = finding.row, finding.column
                hidden[entry] = max(hidden[entry], finding.gap)
            continue
        kept.append(finding)
    return kept


def _narrow(probe: Probe, suspects: Sequence[_Suspect], noise: Array) -> None:
    """Look closer until every window is settled: smooth, at the end of floating-point resolution, or lost in noise."""
    for _ in range(ROUNDS):
        for suspect in suspects:
            _retire(probe, suspect)
        live = [suspect for suspect in suspects if suspect.active]
        if not live:
            return
        rows = np.array([suspect.row for suspect in live])
        low, high = np.array([suspect.window for suspect in live]).T
        nodes, values = looked(probe, np.array([suspect.column for suspect in live]), low, high)
        seen = sights(nodes, values[rows, np.arange(len(live))])
        clear, complete = seen.clearness(noise[rows], CLEAR, LOCAL), seen.complete
        for index, suspect in enumerate(live):
            suspect.looks.append(_Look(seen, index, float(clear[index]) if complete[index] else 0.0))
            suspect.active = bool(complete[index] and clear[index] > 1.0 and seen.change[index] >= suspect.notice)


def _retire(probe: Probe, suspect: _Suspect) -> None:
    """Stop where a window is too narrow for floating point, or where it is another window's business."""
    low, high = suspect.window
    size = float(probe.sizes[suspect.column])
    least = LEAST_SPACINGS * max(float(probe.spacing[suspect.column]), float(np.spacing(size)) * 1e-6)
    suspect.handed |= not suspect.near and max(abs(low), abs(high)) <= 1.5 * NEAR * size
    suspect.active &= high - low > least and not suspect.handed


def _judged(
    probe: Probe, suspects: Sequence[_Suspect], noise: Array, hidden: Array, puzzling: Array
) -> list[GapFinding]:
    findings = []
    for suspect in suspects:
        if suspect.handed:
            continue
        gain, look = _trend(suspect.looks)
        if suspect.looks[-1].change < suspect.notice:
            continue
        if look is None:
            if suspect.near:
                _note_open(suspect, float(noise[suspect.row]), hidden, puzzling)
        elif gain >= KINK_GAIN:
            finding = _finding(probe, suspect, gain, look, float(noise[suspect.row]))
            if abs(finding.distance) <= FAR:
                findings.append(finding)
    return findings


def _trend(looks: Sequence[_Look]) -> tuple[float, _Look | None]:
    """Gain a round of the change of slope over the last clean rounds, and the last of them; None for too few."""
    seen = [index for index, look in enumerate(looks) if look.clear > 1.0]
    clean = [index for index in seen if looks[index].clear > CLEAN]
    rounds = (clean if len(clean) >= 3 else seen)[-3:]
    if rounds and any(look.most < KINK_GAIN * looks[rounds[-1]].change for look in looks[rounds[-1] + 1 :]):
        return 0.0, looks[rounds[-1]]  # gone, where it would have shown
    if len(rounds) < 2:
        return 0.0, None
    first, last = looks[rounds[0]], looks[rounds[-1]]
    return (last.change / first.change) ** (1.0 / (rounds[-1] - rounds[0])), last


def _note_open(suspect: _Suspect, noise: float, hidden: Array, puzzling: Array) -> None:
    finite = [look for look in suspect.looks if np.isfinite(look.change)]
    floor = CLEAR * noise / finite[-1].step
    left = hidden if floor > finite[-1].change / 2 else puzzling
    left[suspect.row, suspect.column] = max(left[suspect.row, suspect.column], finite[-1].change + floor)


def _finding(probe: Probe, suspect: _Suspect, gain: float, look: _Look, noise: float) -> GapFinding:
    seen, index, step = look.sights, look.index, look.step
    at, nodes, values = int(seen.at[index]), seen.nodes[index], seen.values[index]
    left, right = float(seen.slopes[index, at - 1]), float(seen.slopes[index, at + 1])
    size = float(probe.sizes[suspect.column])
    error = 4.0 * max(noise, float(seen.rough[index])) / step
    kind: GapKind = "jump" if gain >= JUMP_GAIN else "steep" if gain >= STEEP_GAIN else "kink"
    place, gap, height = float(nodes[at] + nodes[at + 1]) / 2, look.change, 0.0
    if kind == "jump":
        height = float(values[at + 1] - values[at]) - step * (left + right) / 2
        gap, error = abs(height) / (NEAR * size), error * step / (NEAR * size)
    elif kind == "kink":
        gap = max(abs(right - left), gap)
        place = _meeting(nodes[at - 1 : at + 3], values[at - 1 : at + 3], left, right, place)
    spread = (2.0 * error / max(gap, 1e-300) + 1e-12 if kind == "kink" else 1.0) * step / size
    return GapFinding(
        suspect.row, suspect.column, kind, place / size, gap, left, right, height, error, step / size, spread
    )


def _meeting(nodes: Array, values: Array, left: float, right: float, middle: float) -> float:
    """Where the lines through the outer two of three segments (four nodes) meet; `middle` where they are parallel."""
    if left == right:
        return middle
    meeting = (values[2] - right * nodes[2] - values[1] + left * nodes[1]) / (left - right)
    return float(np.clip(meeting, nodes[0], nodes[3]))


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
