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
TURN = 0.3  # rad between two points of the border
POINTS, ROUNDS = 200, 24
LOW = 1e-6  # of the frequency: where the region begins


def weakly_damped(loop: Transfer, damping: float, frequency: float) -> int | None:
    """Roots of 1 + L in the upper half plane left of the axis with a damping ratio below `damping`, up to `frequency`.

    loop: continuous, one channel; frequency: rad per time unit. None where the border runs too near to a root or pole.
    """
    lean = math.asin(min(damping, 1.0))
    border = _border(lean, frequency)
    poles = np.linalg.eigvals(loop.A)
    inside = (np.abs(poles) < frequency) & (np.abs(poles) > LOW * frequency) & (poles.imag > 0)
    inside &= (poles.real < 0) & (-poles.real < np.abs(poles) * math.sin(lean))
    turns = _turns(loop, border)
    return None if turns is None else turns + int(inside.sum())


def _border(lean: float, frequency: float) -> Complex:
    """Anticlockwise: up the axis, along the arc, back down the slanting line, along the small arc."""
    up = 1j * np.geomspace(LOW * frequency, frequency, POINTS)
    arc = frequency * np.exp(1j * np.linspace(0.5 * math.pi, 0.5 * math.pi + lean, POINTS))
    back = np.exp(1j * (0.5 * math.pi + lean)) * np.geomspace(frequency, LOW * frequency, POINTS)
    small = LOW * frequency * np.exp(1j * np.linspace(0.5 * math.pi + lean, 0.5 * math.pi, POINTS))
    return np.concatenate([up, arc[1:], back[1:], small[1:]])


def _turns(loop: Transfer, border: Complex) -> int | None:
    """How often 1 + L goes round zero."""
    values = _closed(loop, border)
    for _ in range(ROUNDS):
        steps = np.angle(values[1:] / values[:-1])
        wide = np.flatnonzero(np.abs(steps) > TURN)
        if not len(wide):
            return round(float(steps.sum()) / (2.0 * math.pi))
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
