"""How many closed-loop roots of a loop with a dead time are damped less than so much, up to a frequency.

A loop with a dead time has infinitely many roots, of which a search finds those that it is led to. Here they are
counted, by the turns of 1 + L along the border of the region (the argument principle), so that none can be missed.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from ..core.model import Array
from .transfer import Transfer

Complex = NDArray[np.complex128]
TURN, GROWTH = 0.3, 0.5  # rad, and relative change, between two points of the border
POINTS, ROUNDS = 200, 24
MOST = 200_000  # points of the border
LOW = 1e-6  # of the frequency: where the region begins
BESIDE = (-0.3, -0.1, -0.03, -0.01, 0.0, 0.01, 0.03, 0.1, 0.3)  # of a pole's frequency: points about it


def weakly_damped(loop: Transfer, damping: float, frequency: float) -> int | None:
    """Roots of 1 + L in the upper half plane left of the axis with a damping ratio below `damping`, up to `frequency`.

    loop: continuous, one channel; frequency: rad per time unit. None where the border runs too near to a root or pole.
    """
    lean = math.asin(min(damping, 1.0))
    poles = np.linalg.eigvals(loop.A)
    border = _border(lean, _sizes(loop, frequency, np.abs(poles)))
    if border is None:
        return None
    inside = (np.abs(poles) < frequency) & (np.abs(poles) > LOW * frequency) & (poles.imag > 0)
    inside &= (poles.real < 0) & (-poles.real < np.abs(poles) * math.sin(lean))
    turns = _turns(loop, border)
    return None if turns is None else turns + int(inside.sum())


def _sizes(loop: Transfer, frequency: float, poles: Array) -> Array | None:
    """Frequencies along the axis that follow every pole and the phase of the dead time; None where that is too many."""
    count = math.ceil(frequency * loop.delay / TURN) + 1
    if count > MOST:
        return None
    parts = [np.geomspace(LOW * frequency, frequency, POINTS), np.linspace(0.0, frequency, count)]
    parts += [pole * (1.0 + np.array(BESIDE)) for pole in poles]
    sizes = np.unique(np.concatenate(parts))
    return np.asarray(sizes[(sizes >= LOW * frequency) & (sizes <= frequency)])


def _border(lean: float, sizes: Array | None) -> Complex | None:
    """Anticlockwise: up the axis, along the arc, back down the slanting line, along the small arc."""
    if sizes is None:
        return None
    turn = np.exp(1j * np.linspace(0.5 * math.pi, 0.5 * math.pi + lean, POINTS))
    back = turn[-1] * sizes[::-1]
    return np.concatenate([1j * sizes, sizes[-1] * turn[1:], back[1:], sizes[0] * turn[-2::-1]])


def _turns(loop: Transfer, border: Complex) -> int | None:
    """How often 1 + L goes round zero."""
    values = _closed(loop, border)
    for _ in range(ROUNDS):
        ratios = values[1:] / values[:-1]
        steps = np.angle(ratios)
        wide = np.flatnonzero(
            (np.abs(steps) > TURN) | (np.abs(ratios) > 1.0 + GROWTH) | (np.abs(ratios) < 1.0 - GROWTH)
        )
        if not len(wide):
            return round(float(steps.sum()) / (2.0 * math.pi))
        if len(border) + len(wide) > MOST:
            return None
        middle = 0.5 * (border[wide] + border[wide + 1])
        border = np.insert(border, wide + 1, middle)
        values = np.insert(values, wide + 1, _closed(loop, middle))
        if not np.isfinite(values).all():
            return None
    return None


def _closed(loop: Transfer, s: Complex) -> Complex:
    shifted = s[:, np.newaxis, np.newaxis] * np.eye(len(loop.A)) - loop.A
    inner = np.linalg.solve(shifted, np.broadcast_to(loop.B, (len(s), *loop.B.shape)))
    L: Array = (loop.C @ inner)[:, 0, 0] + loop.D[0, 0]
    return np.asarray(1.0 + L * np.exp(-s * loop.delay), dtype=np.complex128)
