"""What the pattern of zeros of a matrix alone says about its eigenvalues, whatever the other entries are.

A chain of integrators has a multiple eigenvalue at zero that rounding spreads to eps^(1/k). Where the zeros of the
matrix are known to be zeros, its eigenvalues are those of the blocks of states that act on each other, one by one, and
a chain comes out as zeros exactly.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import linear_sum_assignment
from scipy.sparse import csr_matrix
from scipy.sparse.csgraph import connected_components

Pattern = NDArray[np.bool_]
Places = NDArray[np.intp]


def strong_blocks(pattern: Pattern) -> tuple[Places, ...]:
    """Groups of indices that act on each other, (n, n) -> index arrays, by their first index.

    pattern[i, j]: column j acts on row i. The eigenvalues of the matrix are those of its diagonal blocks on these.
    """
    if not len(pattern):
        return ()
    count, labels = connected_components(csr_matrix(pattern.astype(np.int8)), directed=True, connection="strong")
    groups = [np.flatnonzero(labels == label) for label in range(count)]
    return tuple(sorted(groups, key=lambda group: int(group[0])))


def parts(pattern: Pattern) -> tuple[Places, ...]:
    """Groups of indices that have nothing to do with each other in either direction, by their first index."""
    if not len(pattern):
        return ()
    count, labels = connected_components(csr_matrix(pattern.astype(np.int8)), directed=False)
    groups = [np.flatnonzero(labels == label) for label in range(count)]
    return tuple(sorted(groups, key=lambda group: int(group[0])))


def zeros_for_sure(pattern: Pattern) -> int:
    """How many eigenvalues are zero for every matrix with this pattern.

    The coefficients of the characteristic polynomial are sums over sets of disjoint cycles: where no such set covers
    more than k rows, n - k eigenvalues vanish.
    """
    n = len(pattern)
    if n == 0:
        return 0
    weights = np.where(pattern, 1.0, -2.0 * n)
    np.fill_diagonal(weights, np.where(np.diag(pattern), 1.0, 0.0))  # a row that no cycle needs stays by itself
    rows, columns = linear_sum_assignment(weights, maximize=True)
    return n - round(float(weights[rows, columns].sum()))


def leads(pattern: Pattern, starts: Pattern, ends: Pattern) -> Pattern:
    """Which indices lie on a path from `starts` to `ends`; all (n,), pattern[i, j]: column j acts on row i."""
    return _spread(pattern, starts) & _spread(pattern.T, ends)


def _spread(pattern: Pattern, seeds: Pattern) -> Pattern:
    reached = np.array(seeds, dtype=np.bool_)
    for _ in range(len(pattern)):
        more = reached | (pattern @ reached)
        if (more == reached).all():
            break
        reached = more
    return reached
