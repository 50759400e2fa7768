"""Closed-loop poles right of the axis, counted from the loop's response alone (Nyquist 1932).

Eigenvalues of a closed loop may be known to few digits although its stability is plain: high gains that cancel each
other leave a matrix whose eigenvalues move far for a rounding. The response of the open loop has no such trouble.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ..core.model import Array
from .crossings import gain_candidates, walk
from .curve import Curve
from .loop_stability import of_matrix, settled

NEAR = 1e-7  # |1 + L| of 1 + |L|: nearer to -1 nothing is said
TURN = 0.7  # rad from one point to the next; larger ones are looked into
ROUNDS = 30
SHIFTS = (0.0, 1e-2, 1e-3, 1e-4, 1e-5)  # of the smallest pole or crossover: how far left of the axis is counted
WHOLE = 0.02  # how far the count may be from a whole number


def surely_stable(curve: Curve) -> bool:
    """True where the count shows that every closed-loop pole lies left of the axis, or of a line a little left of it.

    The line is needed where the loop itself has poles on the axis, such as integrators.
    """
    opened = of_matrix(curve.A, None).values
    candidates = gain_candidates(curve)
    scales = np.concatenate([np.abs(opened), candidates])
    scales = scales[scales > 1e-9 * scales.max(initial=0.0)]
    if not len(scales):
        return False
    for share in SHIFTS:
        # L(s - shift), whose imaginary axis is that line
        shift = share * float(scales.min()) * np.eye(len(curve.A))
        moved = replace(curve, A=curve.A + shift, T=curve.T + shift)
        poles = settled(moved.A, None)
        if not len(poles.undecided) and right_of_axis(moved, walk(poles.values, candidates)) == 0:
            return True
    return False


def right_of_axis(curve: Curve, nodes: Array) -> int | None:
    """Number of closed-loop poles right of the axis, None where that cannot be told: poles of the loop on the axis, or
    a response that comes too near to -1. nodes: a walk over the loop's poles, ascending. For loops without dead time.
    """
    opened = settled(curve.A, None)
    if len(opened.undecided):
        return None
    points = np.concatenate([[0.0], nodes])
    for _ in range(ROUNDS):
        L = curve.quick(points)
        f = 1.0 + L
        if (np.abs(f) <= NEAR * (1.0 + np.abs(L))).any():
            return None
        f = np.append(f, 1.0 + curve.d)
        turns = np.angle(f[1:] * np.conj(f[:-1]))
        wide = np.flatnonzero(np.abs(turns[:-1]) > TURN)
        if not len(wide):
            break
        points = np.sort(np.concatenate([points, 0.5 * (points[wide] + points[wide + 1])]))
    else:
        return None
    encircled = float(turns.sum()) / np.pi
    if abs(turns[-1]) > TURN or abs(encircled - round(encircled)) > WHOLE:
        return None
    return len(opened.unstable) - round(encircled)
