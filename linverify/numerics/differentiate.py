"""Jacobians by differences, with an error estimate for every entry and a search for corners and jumps.

Central differences at steps that fall by four from 0.08 nominal sizes are extrapolated to step zero; all columns and
levels go through the function in one call. Complex steps, the obvious other way, give silently wrong
slopes for code with absolute values or maxima, and many plants refuse complex numbers.

Where a domain ends at the point, or a variable moves one way only, the slope is one-sided and says so. A corner or jump
on the point has no slope: the mean of both sides is given, with an error of at least half the gap.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..core.model import Array, frozen_array
from ..core.outcome import Outcome
from .extrapolate import extrapolated
from .kinks import GapFinding, corners
from .levels import Quotients, one_sided, sampled
from .noise import Noise, measured_noise, rounding_floor
from .probe import Indices, Mask, Probe, VectorFunction
from .steep import steep_ends

LEAST_SCALE = (
    1e-3  # of the row's change over the coarsest step: a row whose slopes vanish at the point is not scaleless
)
SMALL = 1e-3  # nominal sizes: steps within which a gap that does not shrink is laid to the point
LEAST_ERROR = 1e-12  # of the row's scale: below this, rounding in the plant's own terms is not told apart
DOUBT = 10.0  # times the fine noise: coarse noise that makes the finer slopes doubtful
FAR_APART = 30.0  # times their errors: slopes at short and long steps that measure different things
GRAINY = 8.0  # times rounding: noise that is the plant's own
LEGIBLE = 10.0  # times its noise, before the shrinking of a gap is judged


@dataclass(frozen=True, slots=True, eq=False)
class Slopes:
    """What differences found at one point.

    jacobian, error (r, v): slopes and their absolute error estimates. left, right (r, v): one-sided slopes, NaN where a
    side has no room. scales (r,): largest |slope| x size of each row, what gaps are compared with. gaps: corners and
    jumps, nearest first. unresolved (r, v): gaps on the point that noise may be hiding. noise (r,): standard deviation
    of one evaluation; grainy (r,): True where it exceeds rounding. one_sided (v,): +1 only upwards, -1 only downwards,
    0 both. lost (v,): calls next to the point failed inside the domain. outcome: DONE, or NOT_FINITE.
    """

    jacobian: Array
    error: Array
    left: Array
    right: Array
    scales: Array
    gaps: tuple[GapFinding, ...]
    unresolved: Array
    noise: Array
    grainy: Mask
    one_sided: tuple[int, ...]
    lost: tuple[bool, ...]
    outcome: Outcome


@dataclass(slots=True, eq=False)
class _Estimate:
    """Slopes under way; not frozen, corners that are found later change them. All (r, v)."""

    jacobian: Array
    error: Array
    left: Array
    right: Array


def slopes(
    f: VectorFunction,
    z0: Array,
    sizes: Array,
    low: Array,
    high: Array,
    *,
    sides: Sequence[int] | None = None,
    floors: Array | None = None,
) -> Slopes:
    """The Jacobian of f at z0 (v,).

    f: (v, N) -> (r, N), NaN in columns that fail. sizes (v,): typical deviations, positive; steps and distances count
    in them. low, high (v,): the domain, infinite where open. sides (v,): +1 or -1 where a variable moves one way only.
    floors (r,): smallest scale of a row that means anything (default 0). Raises ValueError for sizes that are not
    positive and for a point outside [low, high].
    """
    z0, sizes = np.asarray(z0, dtype=np.float64), np.asarray(sizes, dtype=np.float64)
    if not (np.all(sizes > 0) and np.all(np.isfinite(sizes))):
        raise ValueError("sizes must be positive and finite")
    if np.any(z0 < low) or np.any(z0 > high):
        raise ValueError("the point lies outside its domain")
    way = np.zeros(len(z0), dtype=np.intp) if sides is None else np.asarray(sides, dtype=np.intp)
    with np.errstate(all="ignore"):
        f0 = f(z0[:, np.newaxis])[:, 0]
        probe = Probe(f, z0, f0, sizes, np.where(way > 0, z0, low), np.where(way < 0, z0, high))
        return _slopes(probe, np.zeros(len(f0)) if floors is None else np.asarray(floors))


def _slopes(probe: Probe, floors: Array) -> Slopes:
    quotients, probe, lost = sampled(probe)
    rounding = rounding_floor(probe.f0, quotients.widest, probe.z0)
    noise = measured_noise(probe, rounding)
    grainy = noise.coarse > GRAINY * rounding
    way = one_sided(probe)
    estimate = _estimate(quotients, noise, way)
    done = bool(np.isfinite(probe.f0).all() and np.isfinite(estimate.error).all() and not lost.any())
    gaps: tuple[GapFinding, ...] = ()
    unresolved = np.zeros_like(estimate.jacobian)
    scales = _scales(probe, estimate, quotients, floors)
    if done:
        found = corners(probe, scales[:, np.newaxis] / probe.sizes, noise.coarse)
        gaps = (*found.findings, *steep_ends(quotients, noise.coarse, probe.sizes, scales, found.findings))
        lost, grainy = lost | found.lost.any(axis=0), grainy | found.grainy
        hidden = np.minimum(found.hidden, _largest_possible(quotients, noise.coarse, probe.sizes))
        # what rounding alone may hide is no finding: every constant row would have it
        unresolved = np.maximum(np.where(grainy[:, np.newaxis], hidden, 0.0), found.puzzling)
        _widen(estimate, _unexplained(quotients, noise.coarse, probe.sizes), gaps)
        _mend(estimate, gaps, way)
        _floored(estimate, scales, probe.sizes)
        scales = np.maximum(scales, _scales(probe, estimate, quotients, floors))
    return Slopes(
        frozen_array(estimate.jacobian),
        frozen_array(estimate.error),
        frozen_array(estimate.left),
        frozen_array(estimate.right),
        frozen_array(scales),
        gaps,
        frozen_array(unresolved),
        frozen_array(noise.coarse),
        grainy,
        tuple(way.tolist()),
        tuple(lost.tolist()),
        Outcome.DONE if done and not lost.any() else Outcome.NOT_FINITE,
    )


def _estimate(quotients: Quotients, noise: Noise, way: Indices) -> _Estimate:
    fine, coarse = (_limits(quotients, level) for level in (noise.fine, noise.coarse))
    doubtful = (noise.coarse > DOUBT * noise.fine)[:, np.newaxis]
    sides = []
    for (slope, error), (other, other_error) in zip(fine, coarse, strict=True):
        apart = np.abs(slope - other) * doubtful
        agree = apart <= error + other_error
        # apart by far: short steps see the plant's noise (an inner solver's last digits), long ones its course
        far = apart > FAR_APART * (error + other_error)
        sides.append((np.where(agree, slope, other), np.where(agree, error, other_error) + np.where(far, 0.0, apart)))
    (middle, middle_error), (right, right_error), (left, left_error) = sides
    jacobian = np.where(way == 0, middle, np.where(way > 0, right, left))
    error = np.where(way == 0, middle_error, np.where(way > 0, right_error, left_error))
    return _Estimate(jacobian, error, left, right)


def _limits(quotients: Quotients, noise: Array) -> tuple[tuple[Array, Array], ...]:
    """Slopes and errors from both sides, from above and from below."""
    central_floor, side_floor = quotients.floors(noise)
    return (
        extrapolated(quotients.central, central_floor, 16.0),
        extrapolated(quotients.forward, side_floor, 4.0),
        extrapolated(quotients.backward, side_floor, 4.0),
    )


def _floored(estimate: _Estimate, scales: Array, sizes: Array) -> None:
    """Estimates raised to LEAST_ERROR of the row's scale."""
    np.maximum(estimate.error, LEAST_ERROR * scales[:, np.newaxis] / sizes, out=estimate.error)


def _scales(probe: Probe, estimate: _Estimate, quotients: Quotients, floors: Array) -> Array:
    """Largest term of each row (r,): the largest |slope| x size, one-sided slopes included."""
    every = np.abs(np.stack([estimate.jacobian, estimate.left, estimate.right]))
    terms = np.nan_to_num(every, posinf=0.0).max(axis=0) * probe.sizes
    wide = LEAST_SCALE * quotients.widest * probe.sizes
    scales: Array = np.maximum(np.maximum(terms, wide).max(axis=1, initial=0.0), floors)
    return scales


def _largest_possible(quotients: Quotients, noise: Array, sizes: Array) -> Array:
    """Largest gap of slopes that can sit on the point and still agree with the one-sided quotients, (r, v).

    A corner nearer than a quarter of a step shows with three quarters of its gap or more at that step.
    """
    _, side_floor = quotients.floors(noise)
    gap = np.abs(quotients.forward - quotients.backward) + 6.0 * side_floor
    far_enough = quotients.steps >= 4e-4 * sizes
    bound = np.where(far_enough[:, np.newaxis, :] & np.isfinite(gap), gap / 0.75, np.inf)
    smallest: Array = bound.min(axis=0)
    return smallest


def _unexplained(quotients: Quotients, noise: Array, sizes: Array) -> Array:
    """Gaps of slope too small to be chased that still do not shrink with the step, (r, v); zero elsewhere."""
    gap = np.nan_to_num(np.abs(quotients.forward - quotients.backward))
    legible = gap > LEGIBLE * 2.0 * quotients.floors(noise)[1]
    legible &= (quotients.steps <= SMALL * sizes)[:, np.newaxis, :]
    found = np.zeros_like(gap[0])
    for level in range(len(gap) - 1, 0, -1):  # the finest legible pair decides
        pair = legible[level] & legible[level - 1] & (found == 0)
        steady = gap[level] > 0.5 * gap[level - 1]
        found = np.where(pair, np.where(steady, gap[level], -1.0), found)
    left: Array = np.maximum(found, 0.0)
    return left


def _widen(estimate: _Estimate, unexplained: Array, gaps: Sequence[GapFinding]) -> None:
    named = np.zeros(unexplained.shape, dtype=np.bool_)
    for gap in gaps:
        named[gap.row, gap.column] |= gap.maybe_near
    estimate.error += np.where(named, 0.0, 0.55 * unexplained)


def _mend(estimate: _Estimate, gaps: Sequence[GapFinding], way: Indices) -> None:
    """At a corner on the point: the mean of both sides, with an error that covers either."""
    for gap in gaps:
        if not gap.maybe_near:
            continue
        entry = gap.row, gap.column
        if gap.kind != "kink" or way[gap.column] != 0:
            estimate.error[entry] += gap.gap
            continue
        mean = (gap.left + gap.right) / 2
        away = max(abs(float(estimate.jacobian[entry]) - mean) - gap.gap / 2, 0.0)
        estimate.jacobian[entry] = mean
        estimate.left[entry], estimate.right[entry] = gap.left, gap.right
        estimate.error[entry] = gap.gap / 2 + away + gap.error
