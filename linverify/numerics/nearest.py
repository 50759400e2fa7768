"""The solution nearest to a target: least weighted squared distance subject to the equations and the box.

From a solution of the equations, Newton steps of the Lagrangian along the solutions, each one brought back onto the
equations before its distance is compared; unknowns on a bound stay there while their multiplier holds them. A penalty
method was not used: it meets the equations only in the limit, and here the residual is the verdict.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..core.model import Array
from .equations import Equations
from .newton import EDGE, Flags, jacobian, solve
from .roots import open_directions

SHARES = 0.5 ** np.arange(12)[np.newaxis, :]  # of a step, tried at once
ROUNDS = 60
STILL = 1e-9  # a step shorter than this (nominal sizes) ends the descent
FLAT = 1e-6  # curvature below this share of the largest weight leaves a direction free
BEND = 3e-4  # nominal sizes over which the bend of the equations is measured


@dataclass(frozen=True, slots=True, eq=False)
class Nearest:
    """z (q,) and its weighted squared distance; flat (q, p): directions in which the distance does not grow."""

    z: Array
    distance: float
    flat: Array
    settled: bool


def nearest(system: Equations, weights: Array, target: Array, feasible: Array, accuracy: float) -> tuple[Nearest, ...]:
    """Local minima reached from the solutions `feasible` (q, N) of the equations, least distance first."""
    ends = [_descend(system, weights, target, z, accuracy) for z in feasible.T]
    return tuple(sorted(ends, key=lambda end: round(end.distance, 9)))


def distance(weights: Array, target: Array, z: Array) -> Array:
    """Weighted squared distance of the columns of z (q, N), or of z (q,), from target (q,)."""
    tail = (1,) * (z.ndim - 1)
    result: Array = np.sum(weights.reshape(-1, *tail) * (z - target.reshape(-1, *tail)) ** 2, axis=0)
    return result


def _descend(system: Equations, weights: Array, target: Array, z: Array, accuracy: float) -> Nearest:
    settled = False
    for _ in range(ROUNDS):
        slopes = _slopes(system, z)
        if slopes is None:
            break
        step, _ = _step(system, weights, target, z, slopes)
        if np.abs(step).max(initial=0.0) <= STILL:
            settled = True
            break
        better = _best_along(system, weights, target, z, step, accuracy)
        if better is None:
            # what no share of the step improves is the minimum, to the resolution of the differences
            settled = bool(np.abs(step).max() <= 1e-4)
            break
        z = better
    slopes = _slopes(system, z)
    flat = np.zeros((z.size, 0)) if slopes is None else _step(system, weights, target, z, slopes)[1]
    return Nearest(z, float(distance(weights, target, z)), flat, settled)


def _slopes(system: Equations, z: Array) -> Array | None:
    at = system.residual(z[:, np.newaxis])
    slopes = jacobian(system, z[:, np.newaxis], at)[0]
    return slopes if np.isfinite(slopes).all() else None


def _best_along(
    system: Equations, weights: Array, target: Array, z: Array, step: Array, accuracy: float
) -> Array | None:
    """The longest share of the step that, back on the equations, is nearer to the target; None where there is none."""
    low, high = system.box
    # a step that ends outside is cut where it meets its first bound, so that its direction is kept
    with np.errstate(divide="ignore", invalid="ignore"):
        reach = np.where(step > 0, (high - z) / step, np.where(step < 0, (low - z) / step, np.inf))
    step = step * min(1.0, max(0.0, float(reach.min(initial=np.inf))))
    tried = np.clip(z[:, np.newaxis] + SHARES * step[:, np.newaxis], low[:, np.newaxis], high[:, np.newaxis])
    ends = solve(system, tried, iterations=20, goal=0.01 * accuracy)
    now = float(distance(weights, target, z))
    good = (ends.worst <= accuracy) & (distance(weights, target, ends.z) < now - 1e-15 * (1.0 + now))
    return ends.z[:, int(np.argmax(good))] if good.any() else None


def _step(system: Equations, weights: Array, target: Array, z: Array, slopes: Array) -> tuple[Array, Array]:
    """Step (q,) along the solutions towards the least distance, and the flat directions (q, p) there."""
    low, high = system.box
    pull = weights * (z - target)
    held = (z <= low + EDGE) | (z >= high - EDGE)
    for _ in range(z.size + 1):
        multipliers = np.asarray(np.linalg.lstsq(slopes[:, ~held].T, -pull[~held], rcond=None)[0], dtype=np.float64)
        bend = _curvature(system, z, multipliers)
        along = _tangents(slopes, held)
        reduced = along.T @ (np.diag(weights) + bend) @ along
        values, vectors = np.linalg.eigh(0.5 * (reduced + reduced.T))
        flat = np.abs(values) <= FLAT * weights.max(initial=1e-300)
        # where the distance curves down, go down; where it is flat to our eyes, stay
        inverse = np.where(flat, 0.0, 1.0 / np.where(flat, 1.0, np.abs(values)))
        step = -along @ (vectors * inverse) @ vectors.T @ along.T @ pull
        step[held] = 0.0  # round-off there would let the cut at the bounds take the whole step
        if np.abs(step).max(initial=0.0) > STILL:
            break
        force = pull + slopes.T @ multipliers
        wrong = held & np.where(z <= low + EDGE, force < -FLAT * 1e-2, force > FLAT * 1e-2) & (high > low)
        if not wrong.any():
            break
        held[int(np.argmax(np.where(wrong, np.abs(force), 0.0)))] = False
    return step, along @ vectors[:, flat]


def _tangents(slopes: Array, held: Flags) -> Array:
    """Orthonormal directions (q, p) along the solutions in which the unknowns that are `held` do not move."""
    q = slopes.shape[1]
    fixed = np.eye(q)[held]
    free = open_directions(np.concatenate([slopes, fixed]), 1e-8)
    return np.linalg.qr(free)[0] if free.size else np.zeros((q, 0))


def _curvature(system: Equations, z: Array, multipliers: Array) -> Array:
    """Second derivatives (q, q) of multipliers . F at z, by differences of first ones."""
    q = z.size
    if not np.any(multipliers):
        return np.zeros((q, q))
    low, high = system.box
    up, down = np.minimum(z + BEND, high), np.maximum(z - BEND, low)
    moved = np.repeat(z[:, np.newaxis], 2 * q, axis=1)
    moved[np.arange(q), np.arange(q)], moved[np.arange(q), q + np.arange(q)] = up, down
    first = np.einsum("r,krq->kq", multipliers, jacobian(system, moved, system.residual(moved)))
    width = (up - down)[:, np.newaxis]
    second = np.where(width > 0, (first[:q] - first[q:]) / np.where(width > 0, width, 1.0), 0.0)
    second = np.nan_to_num(second)
    return 0.5 * (second + second.T)


def feasible_ends(system: Equations, starts: Array, weights: Array, target: Array, accuracy: float, most: int) -> Array:
    """Distinct solutions (q, N) reached from the starts, at most `most`, the nearest to the target first."""
    ends = solve(system, starts, goal=0.01 * accuracy)
    usable = ends.z[:, ends.worst <= accuracy]
    order = np.argsort(np.round(distance(weights, target, usable), 9), kind="stable")
    chosen: list[Array] = []
    for z in usable[:, order].T:
        if len(chosen) < most and not any(np.abs(z - other).max(initial=0.0) < 1e-3 for other in chosen):
            chosen.append(z)
    return np.stack(chosen, axis=1) if chosen else np.zeros((starts.shape[0], 0))
