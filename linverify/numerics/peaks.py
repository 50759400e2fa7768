"""The largest size that a sampled signal reaches, also between its samples.

A parabola through three neighbours within one interval shows a peak that lies between two of them. It never crosses an
instant at which inputs change, since the signal may jump or bend there. What it misses shows in the difference to the
run on the halved grid, whose samples are twice as dense.
"""

from __future__ import annotations

import numpy as np

from ..core.model import Array


def refined_peak(times: Array, values: Array) -> tuple[Array, Array]:
    """Largest |value| of each column and when it is met.

    times (K, S + 1); values (K, S + 1, N), NaN for samples that do not count. Returns (N,) and (N,): at least the
    largest sample, and 0 at the first instant for a column without samples. Sub-intervals of one interval are equally
    long.
    """
    nodes, width = times.shape[1], values.shape[2]
    sizes = np.where(np.isfinite(values), np.abs(values), 0.0)
    flat = sizes.reshape(-1, width)
    at = np.argmax(flat, axis=0)
    columns = np.arange(width)
    peak, when = flat[at, columns], times.reshape(-1)[at]
    if nodes < 3:
        return peak, when
    top, shift = _vertices(values)
    # the parabola through a node and its neighbours, told at the middle node of the three
    flat_top = top.reshape(-1, width)
    best = np.argmax(flat_top, axis=0)
    height = flat_top[best, columns]
    middle = times[:, 1:-1].reshape(-1)[best]
    spacing = np.diff(times, axis=1)[:, :-1].reshape(-1)[best]
    between = middle + shift.reshape(-1, width)[best, columns] * spacing
    higher = height > peak
    return np.where(higher, height, peak), np.where(higher, between, when)


def _vertices(values: Array) -> tuple[Array, Array]:
    """|vertex| of the parabola through every three neighbours of an interval and its place, in sub-intervals from the
    middle one; (K, S - 1, N) each. The vertex counts where it lies between the three samples and no further from the
    largest of them than half a sub-interval; elsewhere 0.
    """
    before, here, after = values[:, :-2], values[:, 1:-1], values[:, 2:]
    slope, bend = 0.5 * (after - before), after - 2.0 * here + before
    with np.errstate(divide="ignore", invalid="ignore"):
        shift = -slope / bend
        top = np.abs(here + 0.5 * slope * shift)
    sizes = np.abs(np.stack([before, here, after]))
    with np.errstate(invalid="ignore"):
        largest = np.argmax(np.where(np.isfinite(sizes), sizes, -1.0), axis=0) - 1
        near = (np.abs(shift - largest) <= 0.5) & (np.abs(shift) <= 1.0) & np.isfinite(top)
    return np.where(near, top, 0.0), np.where(near, shift, 0.0)
