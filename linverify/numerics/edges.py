"""Solutions that are none: the equations jump right beside them.

Dry friction as `-0.3 * sign(speed)` lets a search end a hair away from rest, where friction still has its full size
and happens to balance the push; at rest itself the rate is far from zero. The residual alone cannot tell such an end
from an equilibrium, so the neighbourhood is asked. A smooth change shrinks with the distance, a jump does not.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..core.model import Array
from .equations import Equations
from .roots import Root

FAR, NEAR = 1e-8, 1e-9  # nominal sizes; a solution is known to far less, and no plant is meant to live so near a jump
SHARES = np.array([1.0, 0.8, 0.6])  # of NEAR: how far these differ is noise
KEEPS = 0.6  # of the change at FAR: a linear change keeps a tenth at NEAR, a square root a third
LARGE = 10.0  # accuracies, and times the noise: smaller jumps are no matter


@dataclass(frozen=True, slots=True)
class Edge:
    """A jump of one equation across a solution: the unknown that it is across, and the residual on both sides.

    below, above: in the scaled size of the equation.
    """

    equation: str
    unknown: str
    below: float
    above: float


def edge(system: Equations, root: Root, accuracy: float) -> Edge | None:
    """The largest jump beside `root`; None where its neighbourhood is sound."""
    found: list[Edge] = []
    at = system.residual(root.z[:, np.newaxis])
    for i, unknown in enumerate(system.unknowns):
        sides = [_side(system, root.z, i, sign) for sign in (-1.0, 1.0)]
        for side in sides:
            if side is None:
                continue
            near, far = side
            change, noise = np.abs(near[:, 0] - at[:, 0]), np.ptp(near, axis=1)
            jumps = (change > LARGE * (accuracy + noise)) & (change > KEEPS * np.abs(far - at[:, 0]))
            if jumps.any():
                row = int(np.argmax(np.where(jumps, change, 0.0)))
                below, above = (float(at[row, 0] if one is None else one[0][row, 0]) for one in sides)
                found.append(Edge(system.names[row], unknown, below, above))
    return max(found, key=lambda one: abs(one.above - one.below), default=None)


def _side(system: Equations, z: Array, i: int, sign: float) -> tuple[Array, Array] | None:
    """F (r, 3) at NEAR and F (r,) at FAR from z along unknown i; None where the box ends or the plant fails before."""
    away = sign * max(1.0, abs(float(z[i]))) * np.array([*(NEAR * SHARES), FAR])
    if not system.box[0][i] <= z[i] + away[-1] <= system.box[1][i]:
        return None
    columns = np.repeat(z[:, np.newaxis], away.size, axis=1)
    columns[i] += away
    values = system.residual(columns)
    return (values[:, :-1], values[:, -1]) if np.isfinite(values).all() else None
