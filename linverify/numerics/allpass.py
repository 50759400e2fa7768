"""A dead time as a chain of states: the all-pass approximation of exp(-s delay) of high order (Pade).

The usual companion form loses digits with the order. Here the same transfer function is a lossless ladder: with
z = s delay / 2, exp(-2 z) = (1 - tanh z) / (1 + tanh z), and the continued fraction tanh z = z / (1 + z^2 / (3 +
z^2 / (5 + ...))) cut after N terms is a ladder of coils and capacitors whose equations are well scaled for every N.
"""

from __future__ import annotations

from functools import cache

import numpy as np

from ..core.model import Array, frozen_array

ORDER = 6
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
    A, b, c, d = all_pass(1.0, order)
    last = 0.0
    for w in np.arange(0.25, 4.0 * order, 0.25):
        response = c @ np.linalg.solve(1j * w * np.eye(order) - A, b) + d
        if abs(response - np.exp(-1j * w)) > GOOD:
            break
        last = float(w)
    return last / delay
