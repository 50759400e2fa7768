"""State-space blocks wired together by the names of their signals.

Every input of every block is a signal, and so is every output. Wires add outputs to inputs; what comes from outside is
added to inputs by name as well. A cycle of wires through direct feedthrough is solved where it has one solution, and
refused where it has none or nearly none. The same algebra holds for rates and for next states, so blocks of one
connection are all continuous, or all difference equations of one step.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import matrix_balance
from scipy.sparse.csgraph import connected_components

from ..core.model import Array

SINGULAR = 1e-12  # reciprocal condition of the equations of direct feedthrough below which they have no solution


class IllPosedError(ValueError):
    """Direct feedthrough closes a cycle whose equations have no solution."""


@dataclass(frozen=True, slots=True, eq=False)
class Block:
    """x' = A x + B u, y = C x + D u, or the next state; A (n, n), B (n, m), C (k, n), D (k, m), and their names."""

    A: Array
    B: Array
    C: Array
    D: Array
    states: tuple[str, ...]
    inputs: tuple[str, ...]
    outputs: tuple[str, ...]

    def picked(self, inputs: Sequence[str], outputs: Sequence[str]) -> Block:
        """The same states seen through these inputs and outputs only. Raises ValueError for a foreign name."""
        columns = [self.inputs.index(name) for name in inputs]
        rows = [self.outputs.index(name) for name in outputs]
        return Block(
            self.A, self.B[:, columns], self.C[rows], self.D[np.ix_(rows, columns)],
            self.states, tuple(inputs), tuple(outputs),
        )  # fmt: skip


@dataclass(frozen=True, slots=True)
class Wire:
    """`gain` times the output `source` of a block is added to the input `target` of a block."""

    source: str
    target: str
    gain: float = 1.0


def connected(blocks: Sequence[Block], wires: Sequence[Wire]) -> Block:
    """All blocks as one: every input stays an input from outside, every output stays an output.

    Raises ValueError for a name that no block has or that two have, and IllPosedError.
    """
    whole = _side_by_side(blocks)
    W = np.zeros((len(whole.inputs), len(whole.outputs)))
    for wire in wires:
        if wire.source not in whole.outputs or wire.target not in whole.inputs:
            raise ValueError(f"no block has both ends of the wire from {wire.source} to {wire.target}")
        W[whole.inputs.index(wire.target), whole.outputs.index(wire.source)] += wire.gain
    return _closed(whole, W)


def solved(matrix: Array, right: Array) -> Array:
    """(1 + matrix)^-1 right, matrix (m, m): the equations of a cycle of direct feedthrough. Raises IllPosedError."""
    if not matrix.any():
        return right
    for cycle in _cycles(matrix):
        # balanced first, since a condition number means nothing where rows have different units
        balanced, _ = matrix_balance(matrix[np.ix_(cycle, cycle)], permute=False, separate=True)
        values = np.linalg.svd(np.eye(len(cycle)) + balanced, compute_uv=False)
        if values[-1] <= SINGULAR * values[0]:
            raise IllPosedError("direct feedthrough around the loop leaves its equations without a solution")
    balanced, (scale, _) = matrix_balance(matrix, permute=False, separate=True)
    equations = np.eye(len(matrix)) + balanced
    return np.asarray(np.linalg.solve(equations, right / scale[:, np.newaxis]) * scale[:, np.newaxis])


def _cycles(matrix: Array) -> Iterator[NDArray[np.intp]]:
    """Places of equations that wait for each other: only those can be without a solution, however large a gain is."""
    count, group = connected_components(matrix != 0.0, directed=True, connection="strong")
    for number in range(count):
        yield np.flatnonzero(group == number)


def _side_by_side(blocks: Sequence[Block]) -> Block:
    inputs = tuple(name for block in blocks for name in block.inputs)
    outputs = tuple(name for block in blocks for name in block.outputs)
    states = tuple(name for block in blocks for name in block.states)
    for names in (inputs, outputs):
        if twice := sorted({name for name in names if names.count(name) > 1}):
            raise ValueError(f"two blocks have a signal called {twice[0]}")
    n, m, k = len(states), len(inputs), len(outputs)
    shapes = {"A": (n, n), "B": (n, m), "C": (k, n), "D": (k, m)}
    A, B, C, D = (_diagonal([getattr(block, name) for block in blocks], *shape) for name, shape in shapes.items())
    return Block(A, B, C, D, states, inputs, outputs)


def _diagonal(matrices: Sequence[Array], rows: int, columns: int) -> Array:
    found = np.zeros((rows, columns))
    row = column = 0
    for matrix in matrices:
        found[row : row + matrix.shape[0], column : column + matrix.shape[1]] = matrix
        row, column = row + matrix.shape[0], column + matrix.shape[1]
    return found


def _closed(whole: Block, W: Array) -> Block:
    """u = W y + r, r from outside."""
    if not W.any():
        return whole
    inside = solved(-W @ whole.D, np.hstack([W @ whole.C, np.eye(len(W))]))
    states, outside = inside[:, : len(whole.states)], inside[:, len(whole.states) :]
    return Block(
        whole.A + whole.B @ states, whole.B @ outside, whole.C + whole.D @ states, whole.D @ outside,
        whole.states, whole.inputs, whole.outputs,
    )  # fmt: skip
