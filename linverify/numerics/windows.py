"""Where corners are looked for: windows along each axis, close about the point and further out on either side."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..core.model import Array
from .probe import Indices, Mask, Probe

NEAR = 1e-4  # nominal sizes: a corner closer than this sits on the point
FAR = 1e-2  # a corner closer than this is told
REACH = 2e-2  # outer windows go so far, since a corner in the last segment of a window is not seen
NESTS = 5  # windows of a one-sided variable, each an eighth of the one before
WIDTHS = tuple(2 * NEAR * 8.0**step for step in range(3))  # half widths of near windows; noise asks for the wider ones
QUIET = 2e-2  # share of the row's scale that noise may make of a slope before the window is widened


@dataclass(frozen=True, slots=True, eq=False)
class Windows:
    """column (W,); low, high (W,): offsets from the point; usable (r, W): False where a row takes another window."""

    column: Indices
    low: Array
    high: Array
    usable: Mask


def near_windows(probe: Probe, scales: Array, noise: Array) -> Windows:
    """Windows about the point; one-sided columns get a nest of them that closes in on it."""
    sizes = probe.sizes
    both = np.minimum(probe.up, probe.down) >= WIDTHS[0] * sizes
    columns, lows, highs, usable = [], [], [], []
    widths = _widths(probe, scales, noise)  # (r, v)
    for column in range(len(sizes)):
        size = float(sizes[column])
        if both[column]:
            for index in sorted(set(widths[:, column].tolist())):
                half = WIDTHS[index] * size
                columns.append(column)
                lows.append(-min(half, float(probe.down[column])))
                highs.append(min(half, float(probe.up[column])))
                usable.append(widths[:, column] == index)
            continue
        for low, high in _nest(float(probe.down[column]), float(probe.up[column]), WIDTHS[0] * size):
            columns.append(column)
            lows.append(low)
            highs.append(high)
            usable.append(np.ones(len(noise), dtype=np.bool_))
    return _windows(columns, lows, highs, usable, len(noise))


def outer_windows(probe: Probe) -> Windows:
    """One window on either side of the point, each beginning a little beyond it on the other side."""
    columns, lows, highs = [], [], []
    for column, size in enumerate(probe.sizes):
        up, down = (min(REACH * float(size), float(room[column])) for room in (probe.up, probe.down))
        if up > 2 * NEAR * size:
            columns.append(column)
            lows.append(-min(up / 8, down))
            highs.append(up)
        if down > 2 * NEAR * size:
            columns.append(column)
            lows.append(-down)
            highs.append(min(down / 8, up))
    return _windows(columns, lows, highs, [np.ones(len(probe.f0), dtype=np.bool_)] * len(columns), len(probe.f0))


def _widths(probe: Probe, scales: Array, noise: Array) -> Indices:
    """Index into WIDTHS for every entry: the narrowest window in which noise leaves the slopes legible."""
    widths = np.full(scales.shape, len(WIDTHS) - 1)
    for index in reversed(range(len(WIDTHS))):
        step = WIDTHS[index] * probe.sizes / 8
        widths = np.where(4.0 * noise[:, np.newaxis] / step <= QUIET * scales, index, widths)
    # a wider window than there is room for would be lopsided without need
    room = np.minimum(probe.up, probe.down) / probe.sizes
    widest = np.maximum(np.searchsorted(np.array(WIDTHS), room, side="right") - 1, 0)
    return np.asarray(np.minimum(widths, widest), dtype=np.intp)


def _nest(down: float, up: float, width: float) -> list[tuple[float, float]]:
    """Windows on the roomier side, closing in on the point; each reaches as far beyond it as there is room."""
    windows = []
    for step in range(NESTS):
        wide = min(width, max(up, down)) * 8.0**-step
        windows.append((-min(down, wide / 8), wide) if up >= down else (-wide, min(up, wide / 8)))
    return [(low, high) for low, high in windows if high > low]


def _windows(columns: list[int], lows: list[float], highs: list[float], usable: list[Mask], rows: int) -> Windows:
    mask = np.stack(usable, axis=1) if usable else np.ones((rows, 0), dtype=np.bool_)
    return Windows(np.array(columns, dtype=np.intp), np.array(lows), np.array(highs), mask)
