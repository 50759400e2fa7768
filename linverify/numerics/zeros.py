"""Transmission zeros of a local model, and which pole or zero of one model stands for which of another.

The system matrix is reduced until its feedthrough has full rank, by orthogonal transformations only, so that zeros at
infinity are gone before eigenvalues are taken: taken with them, they come back as large finite ones. Emami-Naeini, Van
Dooren 1982, "Computation of zeros of linear multivariable systems", Automatica 18(4).
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import eigvals
from scipy.optimize import linear_sum_assignment

from ..core.model import Array, LocalModel
from .frequency import Complex, blocks

RANK = 1e-9  # of the largest entry: a smaller singular value is a zero in which differences left their noise

System = tuple[Array, Array, Array, Array]


def transmission_zeros(model: LocalModel) -> Complex:
    """Finite transmission zeros in s (or z), sorted; states scaled, entries below the noise of differences dropped."""
    scaled = blocks(model)
    size = float(np.abs(scaled.A).max(initial=0.0)) or 1.0
    system = _leveled((scaled.A / size, scaled.B / size, scaled.C, scaled.D))
    A, B, C, D = _dual(_reduced(_dual(_reduced(system))))
    if not len(A) or not B.shape[1]:
        return np.zeros(0, dtype=np.complex128)
    n, m = B.shape
    whole = np.block([[A, B], [C, D]])
    found = np.asarray(eigvals(whole, np.diag(np.r_[np.ones(n), np.zeros(m)])), dtype=np.complex128)
    finite = found[np.isfinite(found) & (np.abs(found) < 1.0 / RANK)] * size
    return finite[np.lexsort((finite.imag, finite.real))]


def matched(one: Complex, other: Complex) -> list[tuple[complex | None, complex | None]]:
    """Pairs with the least sum of distances; what has no partner stands beside None."""
    distance = np.abs(one[:, np.newaxis] - other[np.newaxis, :])
    rows, columns = linear_sum_assignment(np.where(np.isfinite(distance), distance, 1e300))
    pairs: list[tuple[complex | None, complex | None]] = [
        (complex(one[i]), complex(other[j])) for i, j in zip(rows, columns, strict=True)
    ]
    pairs += [(complex(value), None) for i, value in enumerate(one) if i not in rows]
    pairs += [(None, complex(value)) for j, value in enumerate(other) if j not in columns]
    return pairs


def _leveled(system: System) -> System:
    """Inputs and outputs scaled so that the largest entry of each column and row is about one."""
    A, B, C, D = system
    by_column = np.maximum(np.abs(B).max(axis=0, initial=0.0), 1e-300)
    B, D = B / by_column, D / by_column
    by_row = np.maximum(np.abs(np.hstack([C, D])).max(axis=1, initial=0.0), 1e-300)
    return A, B, C / by_row[:, np.newaxis], D / by_row[:, np.newaxis]


def _dual(system: System) -> System:
    A, B, C, D = system
    return A.T, C.T, B.T, D.T


def _reduced(system: System) -> System:
    """Take away rows until the feedthrough has full row rank; the finite zeros stay as they are."""
    A, B, C, D = system
    while True:
        U, sizes, _ = np.linalg.svd(D) if D.size else (np.eye(len(D)), np.zeros(0), None)
        rank = int((sizes > RANK).sum())
        C, D = U.T @ C, U.T @ D
        C1, D1, C2 = C[:rank], D[:rank], C[rank:]
        if not len(C2) or not len(A):
            return A, B, C1, D1
        _, heights, Vt = np.linalg.svd(C2)
        depth = int((heights > RANK).sum())
        if depth == 0:
            return A, B, C1, D1
        # the states that C2 sees must stay at zero; their equations become outputs of the others
        V = np.roll(Vt.T, -depth, axis=1)
        A, B, C1 = V.T @ A @ V, V.T @ B, C1 @ V
        n = len(A) - depth
        C = np.vstack([C1[:, :n], A[n:, :n]])
        D = np.vstack([D1, B[n:]])
        A, B = A[:n, :n], B[:n]
