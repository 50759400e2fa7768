"""Controllers from what engineers write to state space: pid, ratios of polynomials, the trapezoidal rule.

All return (A, B, C, D) with A (n, n), B (n, k), C (m, n), D (m, k) of x' = A x + B e, v = C x + D e, in the units and
per the time unit of what is given. Polynomials are read once, here; whatever is asked of a controller afterwards is
asked of its state space.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TypeAlias

import numpy as np

from .model import Array

StateSpace: TypeAlias = tuple[Array, Array, Array, Array]

_SWEEPS = 40  # of scaling; each state settles within a few of them
_GAIN = 0.95  # what a change of scale must bring to be made, so that scaling ends


def pid(kp: float = 0.0, ki: float = 0.0, kd: float = 0.0, filter_time: float = 0.0) -> StateSpace:
    """kp e + ki integral e + kd s/(filter_time s + 1) e with one state for each of ki and kd that is not zero.

    kp, ki, kd: per time unit as the formula has them; filter_time > 0: time constant of the derivative's filter.
    Raises ValueError for a derivative without a filter, which no state space can be made of.
    """
    rows: list[tuple[float, float, float]] = []  # of each state: rate of decay, gain of e, gain to v
    direct = kp
    if ki:
        rows.append((0.0, 1.0, ki))
    if kd:
        if filter_time <= 0.0:
            raise ValueError("a derivative needs a filter")
        rows.append((-1.0 / filter_time, 1.0 / filter_time, -kd / filter_time))
        direct += kd / filter_time
    a, b, c = (np.array([row[each] for row in rows], dtype=np.float64) for each in range(3))
    return np.diag(a), b[:, None], c[None, :], np.array([[direct]])


def rational(num: Sequence[float], den: Sequence[float]) -> StateSpace:
    """num / den, highest power first, in s or in z, in controllable form with its states scaled by powers of two.

    Zeros in front are left out; what is left of num may have no more coefficients than what is left of den. The scaling
    rounds nothing. Raises ValueError for a den of zeros and for a ratio that is improper.
    """
    above, below = _leading(num), _leading(den)
    if not below:
        raise ValueError("the denominator is zero")
    if len(above) > len(below):
        raise ValueError("the ratio is improper")
    n = len(below) - 1
    a = np.array(below, dtype=np.float64) / below[0]
    b = np.zeros(n + 1)
    b[n + 1 - len(above) :] = np.array(above, dtype=np.float64) / below[0]
    A = np.zeros((n, n))
    if n:
        A[:-1, 1:] = np.eye(n - 1)
        A[-1] = 0.0 - a[:0:-1]
    B = np.zeros((n, 1))
    B[n - 1 :] = 1.0
    C = (b[1:] - a[1:] * b[0])[::-1][None, :]
    return scaled(A, B, C, b[:1, None])


def scaled(A: Array, B: Array, C: Array, D: Array) -> StateSpace:
    """The same response from states whose rows and columns in [A B; C 0] are of like size; powers of two only."""
    A, B, C = A.copy(), B.copy(), C.copy()
    for _ in range(_SWEEPS):
        moved = False
        for i in range(len(A)):
            own = abs(A[i, i])
            row = np.abs(A[i]).sum() - own + np.abs(B[i]).sum()
            column = np.abs(A[:, i]).sum() - own + np.abs(C[:, i]).sum()
            factor = _power_of_two(row, column)
            if factor != 1.0 and column * factor + row / factor < _GAIN * (row + column):
                A[:, i] *= factor
                C[:, i] *= factor
                A[i] /= factor
                B[i] /= factor
                moved = True
        if not moved:
            break
    return A, B, C, D.copy()


def trapezoidal(A: Array, B: Array, C: Array, D: Array, step: float) -> StateSpace:
    """The difference equation that the trapezoidal rule makes of a continuous controller: s = 2/step (z - 1)/(z + 1).

    step: sample time. Raises ValueError where A has an eigenvalue at 2/step, which the rule sends to infinity.
    """
    n = len(A)
    implicit = np.eye(n) - 0.5 * step * A
    try:
        solved: Array = np.asarray(np.linalg.solve(implicit, np.hstack([np.eye(n) + 0.5 * step * A, B])), np.float64)
        through: Array = np.asarray(np.linalg.solve(implicit.T, C.T).T, np.float64)
    except np.linalg.LinAlgError:
        raise ValueError("the trapezoidal rule has no answer for a pole at 2/step") from None
    driven = step * solved[:, n:]
    return solved[:, :n], driven, through, D + 0.5 * C @ driven


def _leading(coefficients: Sequence[float]) -> list[float]:
    """Without the zeros in front."""
    first = next((index for index, value in enumerate(coefficients) if value != 0.0), len(coefficients))
    return [float(value) for value in coefficients[first:]]


def _power_of_two(row: float, column: float) -> float:
    """The power of two that brings `column * f` and `row / f` nearest to each other; 1 where either is zero."""
    if not (row > 0.0 and column > 0.0 and np.isfinite(row) and np.isfinite(column)):
        return 1.0
    return float(2.0 ** round(0.5 * (np.log2(row) - np.log2(column))))
