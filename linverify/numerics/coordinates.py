"""States without a meaning of their own, such as a controller's, brought to the coordinates of the reference.

Whoever closes a loop elsewhere has the same controller in other coordinates: an integral of the error, or that times
its gain. Entries can be compared only in the same ones. A change of coordinates is accepted only where it makes one
model of the other to within `SOLVED` and printed digits, so no error that a limit would look at is hidden in it.
"""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import replace

import numpy as np

from ..core.model import Array, frozen_array
from .pair import Pair

SOLVED = 1e-4  # residual of the equations, as a share of the largest term of each row
SPREAD = 3.0  # printed digits move the coordinates too, and so more than the entries that they are in
REGULAR = 1e8  # condition of a change of coordinates that is one


def aligned(pair: Pair, names: Collection[str]) -> Pair | None:
    """`pair` with the delivered states called `names` in the coordinates of the reference; all others stay.

    None where no such change of coordinates makes one model of the other, or where there is nothing to change.
    """
    rows = [row for row, name in enumerate(pair.reference.states.names) if name in names]
    if pair.anonymous or pair.time_clash or not rows:
        return None
    S = _solved(pair, rows)
    if S is None or not np.linalg.cond(S[np.ix_(rows, rows)] / _sizes(pair, rows)) < REGULAR:
        return None
    theirs, back = pair.delivered, np.linalg.inv(S)
    made = replace(
        theirs,
        A=frozen_array(S @ theirs.A @ back),
        B=frozen_array(S @ theirs.B),
        C=frozen_array(theirs.C @ back),
    )
    large, small = np.abs(S), np.abs(back)
    rounding = {
        "A": large @ pair.rounding["A"] @ small,
        "B": large @ pair.rounding["B"],
        "C": pair.rounding["C"] @ small,
        "D": pair.rounding["D"],
    }
    found = replace(pair, delivered=made, rounding=rounding)
    return found if _same(found) else None


def _same(pair: Pair) -> bool:
    """Whether A, B and C of both models are the same to within `SOLVED` of each row, printed digits and our errors."""
    x, u, y = pair.states, pair.inputs, pair.outputs
    for name, columns, scale in (("A", x, x), ("B", u, x), ("C", x, y)):
        ours = getattr(pair.reference, name)
        gap = np.abs(getattr(pair.delivered, name) - ours) * columns
        least = np.maximum((np.abs(ours) * columns).max(axis=1, initial=0.0), 1e-12 * scale)[:, np.newaxis]
        known = SPREAD * (pair.rounding[name] + pair.reference.errors[name]) * columns
        if not (gap <= SOLVED * least + known).all():
            return False
    return True


def _sizes(pair: Pair, rows: list[int]) -> Array:
    x = pair.states[rows]
    return np.asarray(x[:, np.newaxis] / x)


def _solved(pair: Pair, rows: list[int]) -> Array | None:
    """S (n, n), the identity but for `rows`, with A S = S A', B = S B', C S = C' in the least-squares sense."""
    ours, theirs, n, count = pair.reference, pair.delivered, len(pair.states), len(rows)
    x, u, y = pair.states, pair.inputs, pair.outputs

    def gaps(S: Array) -> Array:
        parts = (
            (ours.A @ S - S @ theirs.A) * x / x[:, np.newaxis],
            (ours.B - S @ theirs.B) * u / x[:, np.newaxis],
            (ours.C @ S - theirs.C) * x / y[:, np.newaxis],
        )
        return np.concatenate([part.ravel() for part in parts])

    start = np.eye(n)
    start[rows, rows] = 0.0
    fixed, columns = gaps(start), []
    for i in rows:
        for j in rows:
            unit = np.array(start)
            unit[i, j] = x[i] / x[j]
            columns.append(gaps(unit) - fixed)
    matrix = np.array(columns).T
    if not np.isfinite(matrix).all():
        return None
    solution, _, rank, _ = np.linalg.lstsq(matrix, -fixed, rcond=1e-12)
    if rank < count * count:
        return None
    S = np.array(start)
    S[np.ix_(rows, rows)] = solution.reshape(count, count) * _sizes(pair, rows)
    return S
