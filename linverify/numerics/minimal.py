"""The part of a state space that its inputs move and its outputs see.

A heading that no output shows, or a mode that nothing drives, has no part in a transfer function, yet its pole on the
axis would spoil every level set and Riccati equation. Spaces reached step by step (the staircase of Rosenbrock 1970, by
orthogonal bases) are cut where what a step adds is within rounding of zero: what is weakly coupled stays.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import matrix_balance

from ..core.model import Array

WITHIN = 1e-13  # of the norm of [A B]: what a step adds to the space reached is rounding
INDEPENDENT = 0.5  # of a unit vector: what is left of it beside the space reached, else it lies in that space


def balanced(A: Array, B: Array, C: Array) -> tuple[Array, Array, Array]:
    """The same with states scaled by powers of two so that [A B; C 0] has rows and columns of one size; A (n, n)."""
    n = len(A)
    if n == 0:
        return A, B, C
    bordered = np.zeros((n + 1, n + 1))
    bordered[:n, :n] = A
    # all inputs as one and all outputs as one: these are not to be scaled against each other
    bordered[:n, n] = np.linalg.norm(B, axis=1)
    bordered[n, :n] = np.linalg.norm(C, axis=0)
    _, (scale, _) = matrix_balance(bordered, permute=False, separate=True)
    scale = np.asarray(scale[:n] / scale[n], dtype=np.float64)
    return A * (scale[np.newaxis, :] / scale[:, np.newaxis]), B / scale[:, np.newaxis], C * scale[np.newaxis, :]


def minimal(A: Array, B: Array, C: Array) -> tuple[Array, Array, Array]:
    """The part of (A, B, C) that B moves and C sees; unchanged where that is all of it. Expects balanced matrices."""
    A, B, C = _reached(A, B, C)
    A, C, B = (each.T for each in _reached(A.T, C.T, B.T))
    return A, B, C


def _reached(A: Array, B: Array, C: Array) -> tuple[Array, Array, Array]:
    basis = reached(A, B)
    if basis.shape[1] == len(A):
        return A, B, C
    return basis.T @ A @ basis, basis.T @ B, C @ basis


def reached(A: Array, B: Array, within: float = WITHIN) -> Array:
    """Orthonormal basis (n, r) of the states that inputs through B move; within: share of a norm that is rounding."""
    n = len(A)
    basis = np.zeros((n, 0))
    if n == 0:
        return basis
    size, added = float(np.linalg.norm(A)), B / (float(np.linalg.norm(B)) or 1.0)
    least = within
    while basis.shape[1] < n and added.shape[1]:
        for _ in range(2):  # the second time removes what rounding of the first has left
            added = added - basis @ (basis.T @ added)
        left, values, _ = np.linalg.svd(added, full_matrices=False)
        # rounding along the basis is large beside an addition that is small: what was added is cleared of it once more
        fresh = left[:, values > least]
        fresh = fresh - basis @ (basis.T @ fresh)
        left, values, _ = np.linalg.svd(fresh, full_matrices=False)
        fresh = left[:, values > INDEPENDENT]
        fresh = fresh - basis @ (basis.T @ fresh)
        basis = np.hstack([basis, fresh])
        added, least = A @ fresh, within * size
    return basis
