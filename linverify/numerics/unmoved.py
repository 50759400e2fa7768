"""Poles that a loop cannot move: what its input does not reach, or what does not reach its output.

A heading that nobody measures, a position, a mode that a zero of the controller hides: their poles are those of the
closed loop too. First whole states are told apart by which entries are zero, exactly and without touching the others;
then, in what is left, directions that cancel to within rounding, by the staircase of Rosenbrock (1970).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse.csgraph import connected_components

from ..core.model import Array
from .minimal import balanced, reached
from .transfer import Transfer

Truth = NDArray[np.bool_]
WITHIN = 1e-11  # of the size of the balanced matrices: a coupling that small is rounding
LEAST = 1e-3  # participations below are not told


@dataclass(frozen=True, slots=True)
class Unmoved:
    """A pole (of a sampled loop: in z), and how much each state takes part in its mode: shares that sum to one."""

    value: complex
    shares: tuple[tuple[str, float], ...]


@dataclass(frozen=True, slots=True, eq=False)
class Split:
    """moved: the same transfer function without what its loop does not move; states: which of its states are left, None
    where they were mixed; unmoved: the poles that were left out."""

    moved: Transfer
    unmoved: tuple[Unmoved, ...]


def split(transfer: Transfer, states: Sequence[str]) -> Split:
    """Tell the poles of `transfer` that a loop around it moves from the others; states: names of its states (n,)."""
    A, B, C = transfer.A, transfer.B, transfer.C
    kept = _reached(A, np.asarray(B.any(axis=1))) & _reached(A.T, np.asarray(C.any(axis=0)))
    found = _left_out(A, ~kept, states)
    A, B, C = A[np.ix_(kept, kept)], B[kept], C[:, kept]
    # at fast sampling all poles crowd at z = 1, and what tells them apart is in the difference
    shift = 0.0 if transfer.step is None else 1.0
    mixed, A, B, C = _staircase(A - shift * np.eye(len(A)), B, C)
    mixed, A = [value + shift for value in mixed], A + shift * np.eye(len(A))
    names = [name for name, stays in zip(states, kept, strict=True) if stays]
    found += [Unmoved(complex(value), _shares_near(transfer.A[np.ix_(kept, kept)], value, names)) for value in mixed]
    moved = Transfer(A, B, C, transfer.D, transfer.delay, transfer.step, transfer.inputs, transfer.outputs)
    return Split(moved, tuple(found))


def _reached(A: Array, start: Truth) -> Truth:
    """States that are reached from those of `start` along entries of A that are not zero."""
    links, found = A != 0, np.asarray(start)
    while True:
        further = np.asarray(found | links[:, found].any(axis=1))
        if (further == found).all():
            return found
        found = further


def _left_out(A: Array, out: Truth, states: Sequence[str]) -> list[Unmoved]:
    """Poles of the states left out: A is block triangular over groups of states that hold each other."""
    found: list[Unmoved] = []
    if not out.any():
        return found
    count, group = connected_components(A != 0, directed=True, connection="strong")
    for number in range(count):
        members = np.flatnonzero(group == number)
        if out[members[0]]:
            values, shares = _participation(A[np.ix_(members, members)])
            names = [states[int(member)] for member in members]
            found += [Unmoved(complex(value), _told(names, shares[:, k])) for k, value in enumerate(values)]
    return found


def _participation(A: Array) -> tuple[NDArray[np.complex128], Array]:
    """Eigenvalues (n,) and shares (n, n) of each state (row) in each mode (column)."""
    values, right = np.linalg.eig(A)
    # of a defective matrix the inverse does not exist; the pseudo-inverse still shares out among the right states
    size = np.abs(right * np.linalg.pinv(right).T)
    total = size.sum(axis=0)
    shares = size / np.where(total > 0.0, total, 1.0)
    return np.asarray(values, dtype=np.complex128), np.asarray(shares)


def _shares_near(A: Array, value: complex, names: Sequence[str]) -> tuple[tuple[str, float], ...]:
    values, shares = _participation(A)
    return _told(names, shares[:, int(np.argmin(np.abs(values - value)))])


def _told(names: Sequence[str], shares: Array) -> tuple[tuple[str, float], ...]:
    order = sorted(range(len(names)), key=lambda k: (-round(float(shares[k]), 9), k))
    return tuple((names[k], float(shares[k])) for k in order if shares[k] >= LEAST)


def _staircase(A: Array, B: Array, C: Array) -> tuple[list[complex], Array, Array, Array]:
    """Poles of directions that cancel, and what is left; the very matrices where there are none."""
    Ab, Bb, Cb = balanced(A, B, C)
    poles: list[complex] = []
    for _ in range(2):  # what is not reached, then (transposed) what is not seen
        basis = reached(Ab, Bb, WITHIN)
        if basis.shape[1] < len(Ab):
            whole, _ = np.linalg.qr(np.hstack([basis, np.eye(len(Ab))]))
            rest = whole[:, basis.shape[1] :]
            poles += [complex(value) for value in np.linalg.eigvals(rest.T @ Ab @ rest)]
            Ab, Bb, Cb = basis.T @ Ab @ basis, basis.T @ Bb, Cb @ basis
        Ab, Bb, Cb = Ab.T, Cb.T, Bb.T
    return (poles, Ab, Bb, Cb) if poles else (poles, A, B, C)
