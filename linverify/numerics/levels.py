"""Difference quotients on both sides of a point at falling steps, all columns and levels in one call."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from ..core.model import Array
from .probe import Indices, Mask, Probe
from .windows import NEAR, WIDTHS

LARGEST = 0.08  # nominal sizes: the coarsest step is the power of two below it
LEVELS = 14  # each a quarter of the one before, down to about 1e-9 nominal sizes
LEAST_SPACINGS = 64.0  # a step is at least so many floating-point numbers wide


@dataclass(frozen=True, slots=True, eq=False)
class Quotients:
    """Central, forward and backward difference quotients (L, r, v), coarsest step first, NaN where there is none;
    steps (L, v).
    """

    central: Array
    forward: Array
    backward: Array
    steps: Array

    def floors(self, noise: Array) -> tuple[Array, Array]:
        """What noise (r,) of one evaluation makes of a central and of a one-sided quotient, (L, r, v) each."""
        per_step = noise[np.newaxis, :, np.newaxis] / self.steps[:, np.newaxis, :]
        return per_step / np.sqrt(2.0), per_step * np.sqrt(2.0)

    @property
    def widest(self) -> Array:
        """Largest |one-sided quotient| at the coarsest levels that exist, (r, v); zero where there is none."""
        sides = np.abs(np.concatenate([self.forward, self.backward]))
        coarse = np.nan_to_num(sides, nan=0.0).reshape(2, *self.forward.shape)
        existing = np.isfinite(self.forward) | np.isfinite(self.backward)
        first = np.argmax(existing, axis=0)[np.newaxis]
        widest: Array = np.take_along_axis(coarse.max(axis=0), first, 0)[0]
        return widest


def sampled(probe: Probe) -> tuple[Quotients, Probe, Mask]:
    """Quotients at every level that there is room for; the probe with its room cut to where f answers; and lost (v,):
    True where a call nearer than NEAR sizes failed although it lies inside the domain.
    """
    steps = 2.0 ** np.floor(np.log2(LARGEST * probe.sizes)) * 4.0 ** -np.arange(LEVELS)[:, np.newaxis]
    fine = steps >= LEAST_SPACINGS * probe.spacing
    above, up_taken, up_good, up_bad = _side(probe, steps, fine & (steps <= probe.up), 1.0)
    below, down_taken, down_good, down_bad = _side(probe, steps, fine & (steps <= probe.down), -1.0)
    f0 = probe.f0[:, np.newaxis]
    forward, backward = (above - f0) / up_taken[:, np.newaxis], (below - f0) / down_taken[:, np.newaxis]
    central = (above - below) / (up_taken - down_taken)[:, np.newaxis]
    cut = replace(
        probe,
        high=np.where(up_bad, probe.z0 + up_good, probe.high),
        low=np.where(down_bad, probe.z0 - down_good, probe.low),
    )
    lost = (up_bad & (up_good < NEAR * probe.sizes)) | (down_bad & (down_good < NEAR * probe.sizes))
    return Quotients(central, forward, backward, steps), cut, lost


def one_sided(probe: Probe) -> Indices:
    """+1 where a column's slope can only be taken upwards, -1 only downwards, 0 where there is room on both sides."""
    least, most = np.minimum(probe.up, probe.down), np.maximum(probe.up, probe.down)
    both = (least >= WIDTHS[0] * probe.sizes) | (least >= most / 4)
    return np.where(both, 0, np.where(probe.up >= probe.down, 1, -1)).astype(np.intp)


def _side(probe: Probe, steps: Array, wanted: Mask, sign: float) -> tuple[Array, Array, Array, Mask]:
    """Values (L, r, v) at z0 + sign * step, the steps taken (L, v), the largest step up to which all calls succeeded
    (v,), and whether one failed (v,).
    """
    levels, columns = np.nonzero(wanted)
    values = np.full((len(steps), len(probe.f0), len(probe.z0)), np.nan)
    taken = np.full(steps.shape, np.nan)
    found, moved = probe.along(columns, sign * steps[levels, columns])
    values[levels, :, columns] = found.T
    taken[levels, columns] = moved
    failed = wanted & ~np.isfinite(values).all(axis=1)
    # from the finest level outwards: everything beyond the first failure is out of reach
    beyond = np.flip(np.logical_or.accumulate(np.flip(failed, axis=0), axis=0), axis=0)
    values[np.broadcast_to(beyond[:, np.newaxis], values.shape)] = np.nan
    good = np.where(wanted & ~beyond, np.abs(np.nan_to_num(taken)), 0.0).max(axis=0)
    return values, taken, good, failed.any(axis=0)
