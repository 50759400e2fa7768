"""How noisy a function is: repeated differences along short rays that start beside the point.

Differences of rising order wipe out what is smooth and leave noise, whose size does not depend on the order once each
is divided by the root of C(2k, k). Rays start off the point so that a kink on it does not count as noise; of a ray, its
opposite and their continuations a quiet one is taken, so that a corner which some of them cross does not count either.
Several scales are tried, since a coarse noise (single precision, the staircase of an inner solver) hides from short
steps. Where the function moves smoothly on a fine scale, what shows on coarser ones may be a fast wave instead:
both figures are given, and slopes that depend on which is believed say so by their error.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import comb

import numpy as np

from ..core.model import Array
from .probe import Probe

DIRECTIONS = 3
POINTS = 8
ORDERS = (3, 4, 5)
SCALES = (1e-8, 1e-6, 1e-4, 2e-3, 3e-2)  # where a ray starts, in nominal sizes; it ends at twice that
ORDINARY = 4  # scales for all functions; the widest is for those that rest on the finest, as staircases do
CALM = 1  # rank among the four rays of a direction: a corner spoils at most two, and the very calmest may be lucky
QUIETEST = 1.5  # the calmer ones of a few rays are not as noisy as they are on the whole
STARTS = (1.0, 2.6)  # a ray and its continuation
FINEST = 2  # scales on which a function must move smoothly to be believed
RESOLVED = 30.0  # first differences this many times the noise: at this scale the function is smooth and moving
EPS = float(np.finfo(np.float64).eps)


@dataclass(frozen=True, slots=True, eq=False)
class Noise:
    """Standard deviation of one evaluation of each row, (r,) each. fine: up to the first scale at which the function
    moves smoothly; coarse: over all scales, never less.
    """

    fine: Array
    coarse: Array


def measured_noise(probe: Probe, rounding: Array) -> Noise:
    """Noise of each row, at least `rounding` (r,)."""
    rays = _rays(probe)
    points = probe.z0[:, np.newaxis] + rays.reshape(len(probe.z0), -1)
    values = probe.f(points).reshape(-1, len(SCALES), DIRECTIONS, 2 * len(STARTS), POINTS)
    quiet, moving = _spread(values), np.sqrt(np.mean(np.diff(values, axis=-1) ** 2, axis=-1))
    quiet = np.where(np.isfinite(quiet), quiet, np.inf)
    calmest = np.argsort(quiet, axis=-1, kind="stable")[..., [CALM]]
    quiet, moving = (np.take_along_axis(each, calmest, -1)[..., 0] for each in (quiet, moving))
    known = np.isfinite(quiet)
    resolved = np.median(known & (moving > RESOLVED * quiet), axis=-1) > 0.5
    noise = QUIETEST * np.median(np.where(known, quiet, 0.0), axis=-1)
    at_rest = (np.median(moving[:, 0], axis=-1) == 0)[:, np.newaxis]
    noise[:, ORDINARY:] *= at_rest
    # scales run from fine to coarse; `fine` leaves out those beyond the first resolved one. A function that rests on
    # the finest scales and moves only on coarser ones is a staircase, not a wave
    resolved[:, FINEST:] = False
    resolved &= ~at_rest
    beyond = np.logical_or.accumulate(resolved, axis=-1)
    counted = np.concatenate([np.ones_like(beyond[:, :1]), ~beyond[:, :-1]], axis=-1)
    fine = np.where(counted, noise, 0.0).max(axis=-1)
    return Noise(np.maximum(fine, rounding), np.maximum(noise.max(axis=-1), rounding))


def rounding_floor(f0: Array, slopes: Array, z0: Array) -> Array:
    """Rounding (r,) of one evaluation that must be reckoned with: of the value, and of the terms that cancel in it."""
    terms = np.nan_to_num(np.abs(slopes)) * np.abs(z0)
    floor: Array = EPS * np.maximum(np.abs(f0), terms.max(axis=1, initial=0.0))
    return floor


def _rays(probe: Probe) -> Array:
    """Steps (v, scales, directions, 2 * starts, points); the same every time."""
    generator = np.random.default_rng(40_961)
    count = len(probe.z0)
    share = generator.uniform(0.5, 1.0, size=(count, DIRECTIONS)) * generator.choice([-1.0, 1.0], (count, DIRECTIONS))
    both = np.stack([sign * start * share for start in STARTS for sign in (1.0, -1.0)], axis=-1)
    along = 1.0 + np.arange(POINTS) / (POINTS - 1)
    steps = np.array(SCALES)[:, np.newaxis, np.newaxis] * both[:, np.newaxis]
    steps = steps[..., np.newaxis] * along * probe.sizes[:, np.newaxis, np.newaxis, np.newaxis, np.newaxis]
    up, down = (side[:, np.newaxis, np.newaxis, np.newaxis, np.newaxis] for side in (probe.up, probe.down))
    reach = np.abs(steps).max(axis=-1, keepdims=True)
    # a ray that has no room on its side turns round; with no room on either side the variable stays
    turned = np.where(np.where(steps > 0, up, down) >= reach, steps, -steps)
    fits = np.where(turned > 0, up, down) >= reach
    return np.where(fits, turned, 0.0)


def _spread(values: Array) -> Array:
    """Smallest normalized root mean square over the orders of difference, along the last axis."""
    found = []
    for order in ORDERS:
        differences = np.diff(values, n=order, axis=-1)
        found.append(np.sqrt(np.mean(differences**2, axis=-1) / comb(2 * order, order)))
    smallest: Array = np.min(found, axis=0)
    return smallest
