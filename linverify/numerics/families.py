"""Is an equilibrium one of a family? Walk along the direction that the linearized equations leave open and see.

A singular Jacobian alone says nothing: x' = -x**3 has one at its only equilibrium. A family is there if the walk,
corrected back onto the equations after each small step, comes a fair way along.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ..core.model import Array
from .equations import Equations
from .newton import jacobian, largest, shortest_step
from .roots import Root, open_directions

FIRST_STEP, LONGEST_STEP, SHORTEST_STEP = 5e-3, 5e-2, 1e-4  # nominal sizes
FAR = 0.25  # nominal sizes of arc that make a family
LEAST_PLATEAU = 1e-3  # nominal sizes over which equal values are no accident of round-off
# shares of the way from one root to another, no two of them at a rational distance: where equilibria repeat, as with
# angles, even ones would all be equilibria as well
BETWEEN = np.sort(np.arange(1, 16) * (0.5 * (math.sqrt(5.0) - 1.0)) % 1.0)
TAKES_PART = 1e-3  # share of the direction from which on an unknown is named


@dataclass(frozen=True, slots=True)
class Family:
    """Equilibria that are not isolated: the unknowns that change along it, and how far the walk came."""

    names: tuple[str, ...]
    length: float


def family(system: Equations, root: Root, accuracy: float) -> Family | None:
    """The family that `root` belongs to, or None where it stands alone."""
    names: set[str] = set()
    length = 0.0
    for direction in root.open_directions.T:
        (there, end), (back, other) = (_walk(system, root.z, sign * direction, accuracy) for sign in (1.0, -1.0))
        room = _room(system, root.z, direction) + _room(system, root.z, -direction)
        # between close bounds a family is as long as the bounds let it be
        far_enough = there + back >= min(FAR, 0.9 * room) and there + back > 10 * SHORTEST_STEP
        if far_enough or _is_plateau(system, root.z, direction):
            weights = np.maximum(np.abs(end - root.z), np.abs(other - root.z))[: len(system.unknowns)]
            moving = weights >= TAKES_PART * weights.max(initial=0.0)
            names |= {name for name, moves in zip(system.unknowns, moving, strict=True) if moves}
            length = max(length, there + back)
    if not names:
        return None
    return Family(tuple(name for name in system.unknowns if name in names), length)


def joined_by(system: Equations, one: Root, other: Root, accuracy: float) -> Family | None:
    """The family that joins two roots by a straight line of solutions; None where they are not joined."""
    gap, v = other.z - one.z, len(system.unknowns)
    size = float(np.abs(gap[:v]).max(initial=0.0))
    if size < LEAST_PLATEAU:
        return None  # two ends of one root of higher order
    between = system.residual(one.z[:, np.newaxis] + gap[:, np.newaxis] * BETWEEN)
    if not np.all(largest(between) <= accuracy):
        return None
    names = [name for name, moves in zip(system.unknowns, np.abs(gap[:v]), strict=True) if moves >= TAKES_PART * size]
    return Family(tuple(names), float(np.linalg.norm(gap)))


def _is_plateau(system: Equations, z: Array, direction: Array) -> bool:
    """Whether the equations have the very same values along a straight piece, as in a dead zone; no power has."""
    straight = np.where(np.abs(direction) > TAKES_PART * np.abs(direction).max(initial=0.0), direction, 0.0)
    for side in (-1.0, 1.0):
        columns = z[:, np.newaxis] + side * LEAST_PLATEAU * straight[:, np.newaxis] * np.linspace(0.0, 1.0, 17)
        low, high = (bound[:, np.newaxis] for bound in system.box)
        inside = bool(np.all((columns >= low) & (columns <= high)))
        values = system.residual(columns)
        if inside and np.isfinite(values).all() and np.all(values == values[:, :1]):
            return True
    return False


def _walk(system: Equations, z: Array, direction: Array, accuracy: float) -> tuple[float, Array]:
    """Arc length, at most FAR, over which solutions continue from z (q,) along `direction`, and where that ends."""
    length, step = 0.0, FIRST_STEP
    low, high = system.box
    while length < FAR and step >= SHORTEST_STEP:
        ahead = z + step * direction
        if np.any(ahead < low) or np.any(ahead > high):
            step *= 0.5
            continue
        landed = _corrected(system, ahead, direction, accuracy)
        if landed is None or np.linalg.norm(landed - ahead) > 0.5 * step:
            step *= 0.5
            continue
        length += float(np.linalg.norm(landed - z))
        direction = _onward(system, landed, direction)
        z, step = landed, min(1.5 * step, LONGEST_STEP)
    return length, z


def _corrected(system: Equations, z: Array, direction: Array, accuracy: float) -> Array | None:
    """Back onto the equations across the walking direction; None where they do not reach the accuracy."""
    low, high = system.box
    for _ in range(8):
        at = system.residual(z[:, np.newaxis])
        if not np.isfinite(at).all():
            return None
        slopes = jacobian(system, z[:, np.newaxis], at)
        if not np.isfinite(slopes).all():
            return None
        fixed = np.concatenate([slopes, direction[np.newaxis, np.newaxis, :]], axis=1)
        step = shortest_step(fixed, np.concatenate([at, np.zeros((1, 1))]))[:, 0]
        if largest(at)[0] <= accuracy and np.abs(step).max() <= 1e-6:
            return z
        z = np.clip(z + step, low, high)
    return None


def _onward(system: Equations, z: Array, direction: Array) -> Array:
    """The open direction at z that goes on where `direction` was heading."""
    at = system.residual(z[:, np.newaxis])
    slopes = jacobian(system, z[:, np.newaxis], at)
    if not np.isfinite(slopes).all():
        return direction
    free = open_directions(slopes[0])
    if not free.size:
        return direction
    onward, *_ = np.linalg.lstsq(free, direction, rcond=None)
    ahead = free @ onward
    size = np.linalg.norm(ahead)
    return ahead / size if size > 0.1 else direction


def _room(system: Equations, z: Array, direction: Array) -> float:
    """Distance from z along `direction` to the first bound."""
    low, high = system.box
    with np.errstate(divide="ignore", invalid="ignore"):
        reach = np.where(direction > 0, (high - z) / direction, np.where(direction < 0, (low - z) / direction, np.inf))
    return float(max(0.0, reach.min(initial=np.inf)))
