"""One look at windows of a function: 17 samples each, and where among them the slope changes most."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from ..core.model import Array
from .probe import Indices, Mask, Probe

SEGMENTS = 16
FURTHER = 2  # places of change that are followed beside the largest
BESIDE = 2  # segments that belong to one place of change
STANDS_OUT = 8.0  # times the median of its window


@dataclass(frozen=True, slots=True, eq=False)
class Sights:
    """S windows. nodes, values (S, 17); slopes (S, 16) of the segments; changes (S, 12): of slope about each segment
    but the outer two on either side; at (S,): the segment about which the slope
    changes most; change (S,): by how much; step (S,): length of a segment; rough (S,): noise of the samples beside it.
    """

    nodes: Array
    values: Array
    slopes: Array
    changes: Array
    at: Indices
    change: Array
    step: Array
    rough: Array

    def clearness(self, noise: Array, global_share: float, local_share: float) -> Array:
        """How many times the change of value along one segment exceeds noise (S,), taken `global_share` times, and the
        roughness of the window itself, `local_share` times; below 1 it may be noise alone.
        """
        floor = np.maximum(global_share * noise, local_share * self.rough)
        clear: Array = self.change * self.step / np.maximum(floor, 1e-300)
        return clear

    @property
    def complete(self) -> Mask:
        """True where every sample of a window is finite, (S,)."""
        return np.asarray(np.isfinite(self.values).all(axis=1), dtype=np.bool_)

    def peaks(self) -> Iterator[Sights]:
        """These sights, and again at further places that stand out in their windows (else `change` is zero there)."""
        yield self
        usual = STANDS_OUT * np.median(np.abs(self.changes), axis=1, keepdims=True)
        left = np.where(self.changes > usual, self.changes, 0.0)
        at = self.at
        for _ in range(FURTHER):
            apart = np.abs(np.arange(2, SEGMENTS - 2) - at[:, np.newaxis]) > BESIDE
            left = np.where(apart, left, 0.0)
            further = _at_the_largest(self.nodes, self.values, self.slopes, left)
            at = further.at
            yield further

    def closer(self, index: int) -> tuple[float, float]:
        """The three segments about the change in window `index`."""
        at = int(self.at[index])
        return float(self.nodes[index, at - 1]), float(self.nodes[index, at + 2])


def looked(probe: Probe, columns: Indices, low: Array, high: Array) -> tuple[Array, Array]:
    """Samples of every row over windows [low, high] (S,) along `columns` (S,): nodes (S, 17), values (r, S, 17)."""
    share = np.linspace(0.0, 1.0, SEGMENTS + 1)
    offsets = low[:, np.newaxis] + (high - low)[:, np.newaxis] * share
    values, taken = probe.along(np.repeat(columns, SEGMENTS + 1), offsets.ravel())
    return taken.reshape(offsets.shape), values.reshape(len(values), *offsets.shape)


def sights(nodes: Array, values: Array) -> Sights:
    """What samples (S, 17) show."""
    slopes = np.diff(values, axis=1) / np.maximum(np.diff(nodes, axis=1), 1e-300)
    before, here, after = slopes[:, 1:-3], slopes[:, 2:-2], slopes[:, 3:-1]
    # a corner changes the slope for good, a jump for one segment only: the next but one must agree
    bend = np.minimum(_untrended(after - before), _untrended(slopes[:, 4:] - slopes[:, :-4]))
    changes = np.maximum(bend, np.abs(here - (before + after) / 2))
    return _at_the_largest(nodes, values, slopes, np.nan_to_num(changes, nan=-1.0))


def _at_the_largest(nodes: Array, values: Array, slopes: Array, changes: Array) -> Sights:
    most = np.argmax(changes, axis=1)
    biggest = np.take_along_axis(changes, most[:, np.newaxis], 1)[:, 0]
    step = (nodes[:, -1] - nodes[:, 0]) / SEGMENTS
    return Sights(nodes, values, slopes, changes, most + 2, biggest, step, _roughness(values, most + 2))


def _untrended(changes: Array) -> Array:
    """|changes| of slope less what is common to the window: plain curvature is no corner and must not hide one."""
    return np.abs(changes - np.median(changes, axis=1, keepdims=True))


def _roughness(values: Array, at: Indices) -> Array:
    """Median third difference clear of segment `at` and its neighbours, as the noise of one sample.

    The median, since a second corner or jump in the window is no noise.
    """
    third = np.abs(np.diff(values, n=3, axis=1)) / np.sqrt(20.0)
    start = np.arange(third.shape[1])
    beside = (start + 4 <= at[:, np.newaxis]) | (start > at[:, np.newaxis] + 1)
    ordered = np.sort(np.where(beside, np.nan_to_num(third), np.inf), axis=1)
    middle = (np.count_nonzero(beside, axis=1) - 1) // 2
    rough: Array = np.take_along_axis(ordered, middle[:, np.newaxis], 1)[:, 0]
    return rough
