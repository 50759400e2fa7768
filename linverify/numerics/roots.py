"""Which ends of a search are equilibria: judged by the residual there, never by how the search thinks it ended.

A residual within the accuracy is not enough. Where rates fade out far away (x' = exp(-x)) they pass any accuracy
without an equilibrium anywhere near, so the correction that the linearized equations still ask for must be small too.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..core.model import Array
from .equations import Equations
from .newton import Ends, balanced, jacobian, joined, largest, pseudo_inverse, shortest_step, solve, step_sizes
from .noise import Noise, measured_noise
from .probe import Probe

NEAR = 1e-3  # largest correction, in nominal sizes, that a point may still need and be called an equilibrium
APART = 1e-6  # equilibria nearer to each other than this, in nominal sizes, are one
SINGULAR = 1e-4  # balanced singular values below this share leave a direction open; a walk then decides
SAME = 1e-7  # nominal sizes between ends that surely mean one solution
JITTER = 1e-8  # a change, in nominal sizes, far above double and below single precision: shows the plant's own noise


@dataclass(frozen=True, slots=True, eq=False)
class Root:
    """A solution of the equations: z (q,), largest scaled residual, error estimate (q,) in nominal sizes.

    open_directions (q, p): unit vectors along which the linearized equations do not change; p = 0 when regular.
    """

    z: Array
    worst: float
    error: Array
    open_directions: Array


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """Distinct roots, and whether some ends met the accuracy without being near a solution."""

    roots: tuple[Root, ...]
    fading: tuple[Array, ...] = ()


def noise(system: Equations, z: Array, at: Array, slopes: Array) -> Array:
    """How far F (r, N) scatters about its tangent within +-4 JITTER of the columns of z (q, N); (r, N)."""
    if not z.shape[0]:
        return np.zeros_like(at)
    (q, columns), turns = z.shape, np.array([-4, -3, -2, -1, 1, 2, 3, 4])
    low, high = (side[:, np.newaxis, np.newaxis] for side in system.box)
    signs = np.where((np.arange(q)[:, np.newaxis] + turns) % 3 == 0, -1.0, 1.0)
    moves = JITTER * turns * signs
    whole = z[:, np.newaxis, :]
    moved = np.clip(whole + moves[:, :, np.newaxis] * np.maximum(1.0, 1e-3 * np.abs(whole)), low, high)
    values = system.residual(moved.reshape(q, -1)).reshape(-1, turns.size, columns)
    left = values - at[:, np.newaxis, :] - np.einsum("krq,qtk->rtk", slopes, moved - whole)
    return np.asarray(np.nan_to_num(np.fmax.reduce(np.abs(left), axis=1)), dtype=np.float64)


def search(system: Equations, starts: Array, accuracy: float) -> Ends:
    """Ends of the search from all starts (q, N); of those that reach one solution one stays, taken to round-off."""
    ends = solve(system, starts, goal=0.01 * accuracy)
    passing = np.flatnonzero(ends.worst <= accuracy)
    chosen: list[int] = []
    for j in passing:
        if not chosen or np.abs(ends.z[:, chosen] - ends.z[:, [j]]).max(axis=0, initial=0.0).min() > SAME:
            chosen.append(int(j))
    others = np.flatnonzero(ends.worst > accuracy)
    left = Ends(ends.z[:, others], ends.residual[:, others], ends.worst[others])
    return joined(solve(system, ends.z[:, chosen]), left) if chosen else left


def roots_among(system: Equations, ends: Ends, accuracy: float) -> Found:
    """The distinct solutions among the ends of a search, in the order of the starts that found them."""
    passing = np.flatnonzero(ends.worst <= accuracy)
    if not passing.size:
        return Found(())
    z, at = ends.z[:, passing], ends.residual[:, passing]
    slopes = jacobian(system, z, at)
    blind = ~np.isfinite(slopes).all(axis=(1, 2))
    slopes[blind] = 0.0
    scatter = noise(system, z, at, slopes)
    slopes = _above_noise(slopes, scatter, z)
    # in whatever direction the equations are open the correction is not defined; the walk along it decides
    correction = np.abs(shortest_step(slopes, at)).max(axis=0, initial=0.0)
    error = np.einsum("kqr,rk->qk", np.abs(pseudo_inverse(slopes)), np.abs(at) + scatter)
    found: list[Root] = []
    for j in np.flatnonzero(correction <= NEAR):
        root = Root(z[:, j], float(ends.worst[passing[j]]), error[:, j], open_directions(slopes[j]))
        if not any(_same(system, root, other, accuracy) for other in found):
            found.append(root)
    return Found(tuple(found), tuple(z[:, j] for j in np.flatnonzero(correction > NEAR)))


def _above_noise(slopes: Array, scatter: Array, z: Array) -> Array:
    """Slopes (N, r, q) without the entries that round-off alone can make; they would pass for an influence."""
    doubt = 2.0 * scatter.T[:, :, np.newaxis] / step_sizes(z).T[:, np.newaxis, :]
    return np.where(np.abs(slopes) > doubt, slopes, 0.0)


def open_directions(slopes: Array, share: float = SINGULAR) -> Array:
    """Unit vectors (q, p) along which the linearized equations (r, q) change by less than `share` of their most."""
    even, _, columns = balanced(slopes[np.newaxis])
    q = slopes.shape[1]
    if not q:
        return np.zeros((0, 0))
    _, strength, directions = np.linalg.svd(even[0])
    strength = np.concatenate([strength, np.zeros(q - strength.size)])
    limit = share * max(strength[0], 1e-300)
    vectors = (directions[strength < limit] * columns).T
    return vectors / np.linalg.norm(vectors, axis=0) if vectors.size else np.zeros((q, 0))


def _same(system: Equations, one: Root, other: Root, accuracy: float) -> bool:
    gap = other.z - one.z
    v = len(system.unknowns)
    if np.all(np.abs(gap)[:v] <= np.maximum(APART, 10.0 * (one.error + other.error)[:v])):
        return True
    if np.any(np.abs(gap)[:v] > NEAR):
        return False
    # a root of higher order is met only to a root of the round-off: all between the two meets the accuracy then
    between = system.residual(one.z[:, np.newaxis] + gap[:, np.newaxis] * np.array([0.25, 0.5, 0.75]))
    return bool(np.all(largest(between) <= accuracy))


def roughness(system: Equations, z: Array) -> Noise:
    """The plant's own noise in each equation at z (q,), on fine and on all scales; zero without unknowns."""
    at = system.residual(z[:, np.newaxis])
    if not z.size or not np.isfinite(at).all():
        return Noise(np.zeros(at.shape[0]), np.zeros(at.shape[0]))
    low, high = system.box
    probe = Probe(system.residual, z, at[:, 0], np.ones(z.size), low, high)
    return measured_noise(probe, np.zeros(at.shape[0]))


def told_errors(system: Equations, root: Root) -> dict[str, float]:
    """Estimated error of the trimmed unknowns and of all outputs, in the plant's units."""
    rough = 3.0 * roughness(system, root.z).fine
    error = np.maximum(_steep_error(system, root, rough), _flatness(system, root, rough))
    errors = {name: float(error[i] * system.sizes[i]) for i, name in enumerate(system.unknowns)}
    plant, q = system.plant, root.z.size
    steps = np.maximum(error, 1e-7)  # what moves less than this is measured at this and scaled down
    inwards = np.where(root.z + steps <= system.box[1], steps, -steps)
    x, u = system.values(root.z[:, np.newaxis] + np.concatenate([np.zeros((q, 1)), np.diag(inwards)], axis=1))
    outputs = plant.measure_or_nan(system.time, x, u)
    change = np.abs(outputs[:, 1:] - outputs[:, :1]) * (error / steps)[np.newaxis, :] if q else np.zeros((plant.k, 0))
    for i, name in enumerate(plant.outputs.names):
        errors.setdefault(name, float(np.nansum(change[i])))
    return errors


def _steep_error(system: Equations, root: Root, rough: Array) -> Array:
    """Error (q,) that noise `rough` (r,) makes through the linearized equations; the root's own estimate at least."""
    if not root.z.size:
        return np.zeros(0)
    z = root.z[:, np.newaxis]
    slopes = np.nan_to_num(jacobian(system, z, system.residual(z)))
    spread: Array = np.abs(pseudo_inverse(slopes))[0] @ rough
    return np.maximum(root.error, spread) if not root.open_directions.size else root.error


def _flatness(system: Equations, root: Root, rough: Array) -> Array:
    """How far each unknown can move (q,) before the residuals leave their round-off: what a flat root hides."""
    q, z = root.z.size, root.z[:, np.newaxis]
    if not q:
        return np.zeros(0)
    at = system.residual(z)
    slopes = np.nan_to_num(jacobian(system, z, at))
    limit = 4.0 * (np.abs(at) + noise(system, z, at, slopes) + rough[:, np.newaxis])
    sizes = 10.0 ** np.arange(-9.0, -2.0, 0.5)
    moves = np.concatenate([sizes, -sizes])
    columns = np.concatenate([z + np.eye(q) * move for move in moves], axis=1)
    low, high = (side[:, np.newaxis] for side in system.box)
    inside = np.clip(columns, low, high)
    hidden = np.all(np.abs(system.residual(inside)) <= limit, axis=0)
    far = np.abs(inside - z).max(axis=0)  # a root on a bound cannot hide beyond it
    # what is hidden at one size and shows at the next may be hidden up to there
    farthest = np.max(np.where(hidden, far, 0.0).reshape(moves.size, q), axis=0)
    return np.asarray(np.sqrt(10.0) * farthest, dtype=np.float64)
