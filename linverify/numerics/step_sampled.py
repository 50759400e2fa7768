"""The step response of a sampled closed loop at its instants, marched until a bound keeps the rest inside the band."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.linalg import solve_discrete_lyapunov

from ..core.model import Array

BLOCK = 128  # instants marched at once, a power of two
MOST = 4_000_000  # instants in all
SLACK = 1e-6  # of the band: settling is told for bands this much narrower and wider
UNSEEN = 1e-9  # overshoot below this is none


@dataclass(frozen=True, slots=True)
class Response:
    """What became of the deviation from the final value, in shares of it.

    highest: largest deviation upwards and when it was met; unseen: what a longer search might find above it; settled:
    last time outside the band, doubt: how much that depends on the last digits of the band.
    """

    highest: float
    when: float
    unseen: float
    settled: float
    doubt: float


def sampled_response(A: Array, c: Array, start: Array, within: float, step: float) -> Response:
    """Deviation c A^k start at instants k step; A (n, n) has its poles inside the unit circle."""
    bounds = np.array([within * (1.0 + SLACK), within, within * (1.0 - SLACK)])
    last = np.full(3, -1, dtype=np.int64)
    highest, when, k, x = -math.inf, 0, 0, start
    bound, onward, seen = _Bound(A, c), _power(A), _seen(A, c)
    while k < MOST:
        values = seen @ x
        if values.max() > highest:
            highest, when = float(values.max()), k + int(values.argmax())
        for place, edge in enumerate(bounds):
            outside = np.flatnonzero(np.abs(values) > edge)
            if len(outside):
                last[place] = k + int(outside[-1])
        k, x = k + BLOCK, onward @ x
        if bound(x) < min(bounds[2], max(highest, UNSEEN)):
            break
    left = bound(x)
    done = left < bounds[2]
    # the response is inside from the instant after the last one outside
    early, settled, late = (step * (each + 1.0) for each in last)
    return Response(
        highest,
        step * when,
        max(0.0, left - max(highest, 0.0)),
        settled if done else math.inf,
        late - early if done else math.inf,
    )


class _Bound:
    """Largest |c A^k x| that can come, by a quadratic form that never grows; infinite where rounding spoils it."""

    def __init__(self, A: Array, c: Array) -> None:
        n = len(A)
        self._P = solve_discrete_lyapunov(A.T, np.eye(n)) if n else np.zeros((0, 0))
        self._gain = float(c @ np.linalg.solve(self._P, c)) if n else 0.0

    def __call__(self, x: Array) -> float:
        square = self._gain * float(x @ self._P @ x)
        return math.sqrt(square) if square >= 0.0 else math.inf


def _power(A: Array) -> Array:
    found = A
    for _ in range(BLOCK.bit_length() - 1):
        found = found @ found
    return found


def _seen(A: Array, c: Array) -> Array:
    """c, c A, ... as BLOCK rows."""
    rows, power = c[np.newaxis], A
    while len(rows) < BLOCK:
        rows = np.vstack([rows, rows @ power])
        power = power @ power
    return rows
