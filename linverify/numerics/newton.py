"""Damped Newton iterations inside a box, for many starts at once.

All starts advance together, so that a plant which answers batches is called a few dozen times instead of thousands.
The step is the shortest one that solves the linearized equations (singular value decomposition), so that neither
redundant equations nor families of solutions stop it; it is cut to the box, and halved until the residual falls. A
general root finder was not used: those at hand know no bounds, and report success on points that are no roots.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..core.model import Array
from .equations import Equations

STEP = 6e-6  # cube root of the machine precision: balances truncation and round-off of central differences
LONGEST = 100.0  # a step is cut to so many times the distance from zero: further away its direction means little
FINEST = 1e-18  # nominal sizes: a shorter step only chases a zero down to where numbers end
HALVINGS = 12
EDGE = 1e-12  # nearer to a bound than this (in nominal sizes) counts as on it
NOTHING = 1e-100  # smaller slopes are none: their inverses would overflow
REGULAR = 1e7  # entries of an inverse up to this size are trusted to elimination
PATIENCE, GAIN = 6, 0.1  # a search that does not gain so much in so many steps is given up
RANK = 1e-12  # singular values below this share of the largest count as zero


Flags = NDArray[np.bool_]


@dataclass(frozen=True, slots=True, eq=False)
class Ends:
    """Where the iterations ended: z (q, N), residuals F (r, N), worst |F| (N,) (inf where no call succeeded)."""

    z: Array
    residual: Array
    worst: Array


def joined(one: Ends, other: Ends) -> Ends:
    """The ends of two searches together."""
    return Ends(
        np.concatenate([one.z, other.z], axis=1),
        np.concatenate([one.residual, other.residual], axis=1),
        np.concatenate([one.worst, other.worst]),
    )


def largest(residual: Array) -> Array:
    """Largest |F| of each column; infinite where the plant could not be called."""
    if residual.shape[0] == 0:
        return np.zeros(residual.shape[1])
    with np.errstate(invalid="ignore"):
        worst = np.abs(residual).max(axis=0)
    return np.where(np.isnan(worst), np.inf, worst)


def jacobian(system: Equations, z: Array, at: Array) -> Array:
    """dF/dz (N, r, q) at the columns of z (q, N), where F is `at` (r, N); NaN where no neighbour can be called.

    Central differences, one-sided at a bound of the box or beside a point where the plant cannot be called.
    """
    (q, columns), r = z.shape, at.shape[0]
    if not q:
        return np.zeros((columns, r, 0))
    low, high = (side[:, np.newaxis] for side in system.box)
    steps = step_sizes(z)
    up, down = np.minimum(z + steps, high), np.maximum(z - steps, low)
    moved = np.repeat(z[:, np.newaxis, :], 2 * q, axis=1)
    each = np.arange(q)
    moved[each, each], moved[each, q + each] = up, down
    values = system.residual(moved.reshape(q, -1)).reshape(r, 2 * q, columns)
    above, below, middle = values[:, :q], values[:, q:], at[:, np.newaxis, :]
    miss_up, miss_down = np.isnan(above[:1]), np.isnan(below[:1])
    above, below = np.where(miss_up, middle, above), np.where(miss_down, middle, below)
    width = np.where(miss_up[0], z, up) - np.where(miss_down[0], z, down)
    with np.errstate(invalid="ignore", divide="ignore"):
        slopes = np.where(width > 0, (above - below) / width, np.where(high > low, np.nan, 0.0))
    return np.moveaxis(slopes, 2, 0)


def _one_sided(system: Equations, z: Array, at: Array) -> Array:
    """As `jacobian` by forward differences: half the calls, and exact enough to choose the next step."""
    (q, columns), r = z.shape, at.shape[0]
    if not q:
        return np.zeros((columns, r, 0))
    low, high = (side[:, np.newaxis] for side in system.box)
    steps = step_sizes(z)
    taken = np.where(z + steps <= high, z + steps, np.maximum(z - steps, low))
    moved = np.repeat(z[:, np.newaxis, :], q, axis=1)
    moved[np.arange(q), np.arange(q)] = taken
    values = system.residual(moved.reshape(q, -1)).reshape(r, q, columns)
    width = taken - z
    slopes = (values - at[:, np.newaxis, :]) / np.where(width == 0.0, 1.0, width)
    missing = np.isnan(slopes).any(axis=(0, 1))
    result = np.moveaxis(np.where(width == 0.0, 0.0, slopes), 2, 0)
    if missing.any():  # beside a point where the plant cannot be called the other side may do
        result[missing] = jacobian(system, z[:, missing], at[:, missing])
    return result


def step_sizes(z: Array) -> Array:
    """Steps of the differences at z: a fixed share of the nominal size, more only where z dwarfs it."""
    return STEP * np.maximum(1.0, 1e-3 * np.abs(z))


def row_weights(slopes: Array) -> Array:
    """1 / largest entry of each row, (N, r): makes fast and slow equations count alike in ranks and line searches."""
    return _inverse_of(np.abs(slopes).max(axis=2, initial=0.0))


def balanced(slopes: Array) -> tuple[Array, Array, Array]:
    """(N, r, q) slopes with rows, then columns divided by their largest entry; the row and column weights used."""
    rows = row_weights(slopes)
    even = slopes * rows[:, :, np.newaxis]
    columns = _inverse_of(np.abs(even).max(axis=1, initial=0.0))
    return even * columns[:, np.newaxis, :], rows, columns


def pseudo_inverse(slopes: Array) -> Array:
    """(N, q, r): its product with -F is the shortest step, in balanced units, that solves the linearized equations."""
    even, rows, columns = balanced(slopes)
    return _inverted(even) * columns[:, :, np.newaxis] * rows[:, np.newaxis, :]


def _inverted(even: Array) -> Array:
    """Pseudo-inverses (N, q, r); by elimination, much faster, where a matrix is square and far from singular."""
    _, r, q = even.shape
    if r != q or not r:
        return np.asarray(np.linalg.pinv(even, rcond=RANK), dtype=np.float64)
    weak = (np.abs(even).max(axis=1) == 0.0).any(axis=1) | (np.abs(even).max(axis=2) == 0.0).any(axis=1)
    inverse = np.empty_like(even)
    try:
        inverse[~weak] = np.linalg.inv(even[~weak])
        inverse[weak] = 0.0
        weak |= ~(np.abs(inverse).max(axis=(1, 2)) <= REGULAR)
    except np.linalg.LinAlgError:
        weak[:] = True
    inverse[weak] = np.linalg.pinv(even[weak], rcond=RANK)
    return inverse


def shortest_step(slopes: Array, residual: Array) -> Array:
    """The step d (q, N) with slopes d = -residual in the least-squares sense; slopes (N, r, q), residual (r, N)."""
    return np.asarray(-np.einsum("kqr,rk->qk", pseudo_inverse(slopes), residual), dtype=np.float64)


def _inverse_of(size: Array) -> Array:
    return np.where(size > NOTHING, 1.0 / np.where(size > NOTHING, size, 1.0), 1.0)


def solve(system: Equations, starts: Array, *, iterations: int = 60, goal: float = 0.0) -> Ends:
    """Advance all starts (q, N) until the residual is at most `goal`, nothing improves, or `iterations` are used.

    All but the first give up when they are slow: even a root of high order is approached by a third a step.
    """
    low, high = (side[:, np.newaxis] for side in system.box)
    z = np.clip(starts, low, high)
    residual = system.residual(z)
    active = np.flatnonzero(np.isfinite(residual).all(axis=0) & (largest(residual) > goal))
    before = largest(residual)
    for turn in range(iterations):
        if turn and turn % PATIENCE == 0:
            now = largest(residual)
            slow = (now > GAIN * before) & (np.arange(now.size) > 0)
            active, before = active[~slow[active]], now
        if not active.size:
            break
        moved, values, better = _advance(system, z[:, active], residual[:, active], low, high)
        z[:, active[better]], residual[:, active[better]] = moved[:, better], values[:, better]
        active = active[better & (largest(values) > goal)]
    return Ends(z, residual, largest(residual))


def _advance(system: Equations, z: Array, at: Array, low: Array, high: Array) -> tuple[Array, Array, Flags]:
    """One damped step of every column: new z, new F, and which columns improved."""
    slopes = _one_sided(system, z, at)
    usable = np.isfinite(slopes).all(axis=(1, 2))
    slopes[~usable] = 0.0
    step = bounded_step(slopes, at, z, low, high)
    longest = np.abs(step).max(axis=0, initial=0.0)
    allowed = LONGEST * (1.0 + np.abs(z).max(axis=0, initial=0.0))
    step *= np.minimum(1.0, allowed / np.maximum(longest, allowed))
    weights = row_weights(slopes).T
    before = np.linalg.norm(weights * at, axis=0)
    moved, values, better = z.copy(), at.copy(), np.zeros(z.shape[1], dtype=bool)
    ahead = np.any(np.abs(step) > FINEST + np.finfo(np.float64).eps * np.abs(z), axis=0)
    trying, share = np.flatnonzero(usable & ahead), 1.0
    for _ in range(HALVINGS):
        if not trying.size:
            break
        tried = np.clip(z[:, trying] + share * step[:, trying], low, high)
        answer = system.residual(tried)
        after = np.linalg.norm(weights[:, trying] * answer, axis=0)  # NaN compares as no improvement
        accepted = after <= (1.0 - 1e-4 * share) * before[trying]
        chosen = trying[accepted]
        moved[:, chosen], values[:, chosen], better[chosen] = tried[:, accepted], answer[:, accepted], True
        trying, share = trying[~accepted], 0.5 * share
    return moved, values, better


def bounded_step(slopes: Array, at: Array, z: Array, low: Array, high: Array) -> Array:
    """Newton steps (q, N) in which unknowns that stand on a bound and would leave it stay where they are."""
    step = shortest_step(slopes, at)
    for _ in range(z.shape[0]):
        stuck = ((z <= low + EDGE) & (step < 0)) | ((z >= high - EDGE) & (step > 0))
        if not stuck.any():
            break
        slopes = slopes * ~stuck.T[:, np.newaxis, :]
        step = np.where(stuck, 0.0, shortest_step(slopes, at))
    return step
