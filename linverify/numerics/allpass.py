"""A dead time as states: the all-pass approximation of exp(-s delay) of high order (Pade), alone or several in a row.

The usual companion form loses digits with the order. Here the same transfer function is a lossless ladder: with
z = s delay / 2, exp(-2 z) = (1 - tanh z) / (1 + tanh z), and the continued fraction tanh z = z / (1 + z^2 / (3 +
z^2 / (5 + ...))) cut after N terms is a ladder of coils and capacitors whose equations are well scaled for every N.

All of them have modulus one, as the dead time has. In time one of order 6 stands for the whole dead time; where margins
are taken on it, sections of order 8 in a row do, each for a share whose phase it has to 3e-8 up to 4.5 rad.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np
from numpy.typing import NDArray

from ..core.model import Array, frozen_array
from .transfer import Transfer

Complex = NDArray[np.complex128]
ORDER = 6
SECTION = 8  # order of one of several in a row; even, so that its feedthrough is one
PER_SECTION = 4.5  # rad of lag that one section stands for
GOOD = 0.01  # of the response, up to the frequency that a report states


@cache
def all_pass(delay: float, order: int = ORDER) -> tuple[Array, Array, Array, float]:
    """A (N, N), b (N,), c (N,), d with c (s I - A)^-1 b + d close to exp(-s delay), and of size 1 on the whole axis.

    x[2k] is the current of a coil, x' = (4k + 1) V[2k]; x[2k + 1] the voltage of a capacitor, x' = (4k + 3) I[2k + 1],
    where V[0] = v, V[2k + 2] = V[2k] - x[2k + 1], I[1] = i - x[0], I[2k + 1] = I[2k - 1] - x[2k], and i + v = u is
    what goes in, i - v = y what comes out.
    """
    coils, capacitors = np.zeros(order), np.zeros(order)
    coils[0::2], capacitors[1::2] = 1.0, 1.0
    if order % 2 == 0:  # the ladder ends in a capacitor across the line: no voltage is left
        v, v_u = capacitors, 0.0
        i, i_u = -capacitors, 1.0
    else:  # it ends in a coil in the line: no current is left
        i, i_u = coils, 0.0
        v, v_u = -coils, 1.0
    A, b = np.empty((order, order)), np.empty(order)
    for row in range(order):
        before = np.arange(order) < row
        if row % 2 == 0:
            A[row], b[row] = v - capacitors * before, v_u
        else:
            A[row], b[row] = i - coils * before, i_u
        scale = (2 * row + 1) * 2.0 / delay
        A[row] *= scale
        b[row] *= scale
    return frozen_array(A), frozen_array(b), frozen_array(i - v), float(i_u - v_u)


def good_up_to(delay: float, order: int = ORDER) -> float:
    """The angular frequency up to which the chain is within 1 % of the dead time it stands for."""
    last = 0.0
    for w in np.arange(0.25, 4.0 * order, 0.25):
        if abs(complex(_response(order, np.array([1j * w]))[0]) - np.exp(-1j * w)) > GOOD:
            break
        last = float(w)
    return last / delay


def sections(delay: float, omega: float) -> int:
    """How many sections in a row stand for `delay` up to a frequency."""
    return max(1, math.ceil(delay * omega / PER_SECTION))


def share_off(delay: float, number: int, omega: float) -> float:
    """Largest |sections / exp(-s delay) - 1| between frequency zero and `omega`."""
    s = np.asarray(1j * np.linspace(0.0, omega, 65) * delay / number, dtype=np.complex128)
    return float(np.abs((_response(SECTION, s) * np.exp(s)) ** number - 1.0).max())


def delayed_by(loop: Transfer, number: int) -> Transfer:
    """`loop` with `number` sections in a row in each input instead of its dead time."""
    A, b, c = _row(loop.delay, number)
    n, eye = len(loop.A), np.eye(loop.D.shape[1])
    inside, moved, seen = np.kron(eye, A), np.kron(eye, b[:, np.newaxis]), np.kron(eye, c[np.newaxis, :])
    whole = np.block([[loop.A, loop.B @ seen], [np.zeros((len(inside), n)), inside]])
    return Transfer(whole, np.vstack([loop.B, moved]), np.hstack([loop.C, loop.D @ seen]), loop.D)


def _row(delay: float, number: int) -> tuple[Array, Array, Array]:
    """A, b, c of sections in a row, whose feedthrough is one: each is given what goes in and what all before add."""
    A, b, c, _ = all_pass(delay / number, SECTION)
    before = np.tril(np.ones((number, number)), -1)
    row = np.kron(np.eye(number), A) + np.kron(before, np.outer(b, c))
    return np.asarray(row), np.tile(b, number), np.tile(c, number)


def _response(order: int, s: Complex) -> Complex:
    """Of the all-pass for a dead time of one, at s (F,)."""
    A, b, c, d = all_pass(1.0, order)
    inside = np.linalg.solve(s[:, np.newaxis, np.newaxis] * np.eye(order) - A, b[:, np.newaxis])
    return np.asarray(inside[:, :, 0] @ c + d, dtype=np.complex128)
