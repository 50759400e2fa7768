"""Exact discretization of x' = A x + B u by the matrix exponential, for held and for straight inputs.

Inputs that are held or change in straight lines between instants need no integration: one exponential of an augmented
matrix gives the states at the next instant to rounding. Rows and columns are first scaled by powers of two, since one
input in newtons beside a state in radians would otherwise cost the exponential several digits.

Van Loan 1978, "Computing integrals involving the matrix exponential", IEEE Trans. Automatic Control 23(3).
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from scipy.linalg import expm, matrix_balance

from ..core.model import Array, frozen_array

KEPT = 512  # exponentials in memory


def held(A: Array, B: Array, step: float) -> tuple[Array, Array]:
    """Discretize x' = A x + B u for inputs held over `step` time units.

    A (n, n), B (n, m). Returns Ad (n, n) and Bd (n, m): x+ = Ad x + Bd u.
    """
    Ad, start, _ = responses(A, B, np.array([step]))
    return Ad[0], start[0]


def straight(A: Array, B: Array, step: float) -> tuple[Array, Array, Array]:
    """Discretize x' = A x + B u for inputs that change in a straight line over `step` time units.

    A (n, n), B (n, m). Returns Ad (n, n), G0 and G1 (n, m): x+ = Ad x + G0 u + G1 u+, u and u+ the inputs at both ends.
    """
    Ad, start, slope = responses(A, B, np.array([step]))
    ahead = slope[0] / step
    return Ad[0], start[0] - ahead, ahead


def responses(A: Array, B: Array, times: Array) -> tuple[Array, Array, Array]:
    """States after each of `times` (S,) for u(t) = a + s t, from any start: x(t) = P x(0) + Q a + R s.

    A (n, n), B (n, m), times in time units. Returns P (S, n, n), Q (S, n, m), R (S, n, m).
    """
    n, m = B.shape
    scale, columns = _scales(A, B)
    balanced = A * (scale[np.newaxis, :] / scale[:, np.newaxis])
    augmented = np.zeros((n + 2 * m, n + 2 * m))
    augmented[:n, :n] = balanced
    augmented[:n, n : n + m] = B / scale[:, np.newaxis] * columns
    whole = np.empty((len(times), *augmented.shape))
    for index, time in enumerate(times):
        # the slope is per `time` here, which keeps the identity block as small as the rest
        augmented[n : n + m, n + m :] = np.eye(m) / time if time > 0 else 0.0
        whole[index] = _exponential((augmented * time).tobytes(), len(augmented))
    P = whole[:, :n, :n] * (scale[:, np.newaxis] / scale[np.newaxis, :])
    Q = whole[:, :n, n : n + m] * scale[:, np.newaxis] / columns
    R = whole[:, :n, n + m :] * scale[:, np.newaxis] / columns * times[:, np.newaxis, np.newaxis]
    return P, Q, R


@lru_cache(maxsize=KEPT)
def _exponential(matrix: bytes, size: int) -> Array:
    """The exponential of a matrix (size, size), read-only.

    Kept: the same few are asked for time and again, run after run and instant after instant of a sampled controller.
    """
    return frozen_array(expm(np.frombuffer(matrix).reshape(size, size)))


def _scales(A: Array, B: Array) -> tuple[Array, Array]:
    """Powers of two that balance A, and that bring each column of B to the size of A or one."""
    _, (scale, _) = matrix_balance(A, permute=False, separate=True)
    balanced = np.abs(A * (scale[np.newaxis, :] / scale[:, np.newaxis]))
    size = balanced.max(initial=0.0) or 1.0
    largest = np.abs(B / scale[:, np.newaxis]).max(axis=0, initial=0.0)
    ratio = np.divide(size, largest, out=np.ones_like(largest), where=largest > 0)
    return np.asarray(scale, dtype=np.float64), np.asarray(np.exp2(np.round(np.log2(ratio))))
