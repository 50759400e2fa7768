"""The response of one loop along the frequency axis: quickly for walks, and with an error bound for quoted figures.

Everything is asked at real frequencies v >= 0 of a continuous realization. A sampled loop is mapped onto one (see
`bilinear`), its v runs from 0 to infinity as frequency runs to half the sample rate. The walk's evaluation goes
through one Schur form (a few microseconds a hundred points); figures are evaluated anew by solving with the matrices
themselves.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import matrix_balance, schur

from ..core.model import Array
from .bilinear import change, mapped
from .transfer import Transfer

Complex = NDArray[np.complex128]
ROUNDING = 2.0**-50  # relative: errors of entries that the evaluation's own rounding may act like
HUGE = 1e150  # stands for infinite sizes, so that squares stay finite


class Value(NamedTuple):
    """L, its slope dL/dv and the absolute error of L, at each frequency; (F,)."""

    at: Complex
    slope: Complex
    error: Array


@dataclass(frozen=True, slots=True, eq=False)
class Curve:
    """L(jv) = (C (jv I - A)^-1 B + D) exp(-jv delay), one channel, states balanced.

    A (n, n), b (n,), c (n,), d. T, bT, cT: the same in complex Schur form. step: of a sampled loop, whose own matrices
    are F = Ad - I, bF, cF, dF: L(z) = cF ((z - 1) I - F)^-1 bF + dF.
    """

    A: Array
    b: Array
    c: Array
    d: float
    delay: float
    step: float | None
    T: Complex
    bT: Complex
    cT: Complex
    F: Array
    bF: Array
    cF: Array
    dF: float

    def quick(self, v: Array) -> Complex:
        """L at finite frequencies (F,), to about rounding of |A|. Very large at a pole."""
        n = len(self.T)
        x = np.empty((n, len(v)), dtype=np.complex128)
        gaps = 1j * v - np.diagonal(self.T)[:, np.newaxis]
        if not gaps.all():  # exactly at a pole: as near to it as numbers come
            gaps = np.where(gaps == 0.0, 1e-16 * np.maximum(v, 1e-250), gaps)
        for i in range(n - 1, -1, -1):
            x[i] = (self.bT[i] + self.T[i, i + 1 :] @ x[i + 1 :]) / gaps[i]
        found = self.cT @ x + self.d
        return np.asarray(found * np.exp(-1j * self.delay * v) if self.delay else found)

    def exact(self, v: Array) -> Value:
        """L, slope and error bound at frequencies (F,), infinity allowed without a dead time; infinite at a pole."""
        v = np.asarray(v, dtype=np.float64)
        finite = np.isfinite(v)
        at = np.full(len(v), complex(self.d), dtype=np.complex128)
        slope = np.zeros(len(v), dtype=np.complex128)
        error = np.full(len(v), ROUNDING * abs(self.d))
        for place in np.flatnonzero(finite):
            at[place], slope[place], error[place] = self._point(float(v[place]))
        return Value(at, slope, error)

    def _point(self, v: float) -> tuple[complex, complex, float]:
        if self.step is None:
            shift, stretch = 1j * v, 1j
            A, b, c, d = self.A, self.b, self.c, self.d
        else:
            half = 0.5j * v * self.step
            shift, stretch = 2.0 * half / (1.0 - half), 1j * self.step / (1.0 - half) ** 2
            A, b, c, d = self.F, self.bF, self.cF, self.dF
        X = shift * np.eye(len(A)) - A
        try:
            right, left = np.linalg.solve(X, b), np.linalg.solve(X.T, c)
        except np.linalg.LinAlgError:
            return complex(HUGE), 0j, math.inf
        at, slope = c @ right + d, -(left @ right) * stretch
        r, h = np.abs(right), np.abs(left)
        error = ROUNDING * (h @ (np.abs(A) @ r + np.abs(b)) + np.abs(c) @ r + abs(shift) * (h @ r) + abs(d))
        if self.delay:
            turn = np.exp(-1j * self.delay * v)
            at, slope = at * turn, (slope - 1j * self.delay * at) * turn
            error += ROUNDING * self.delay * v * abs(at)
        return complex(at), complex(slope), float(error)

    def plane(self, s: complex) -> tuple[complex, complex]:
        """L and dL/ds anywhere in the plane of a continuous loop; infinite at a pole."""
        X = s * np.eye(len(self.A)) - self.A
        try:
            right, left = np.linalg.solve(X, self.b), np.linalg.solve(X.T, self.c)
        except np.linalg.LinAlgError:
            return complex(math.inf), 0j
        at, slope = self.c @ right + self.d, -(left @ right)
        fade = np.exp(-s * self.delay)
        return complex(at * fade), complex((slope - self.delay * at) * fade)

    def told(self, v: float) -> float:
        """A frequency of the realization as the loop's own, rad per time unit."""
        return v if self.step is None else 2.0 / self.step * math.atan(0.5 * v * self.step)

    def pace(self, v: float) -> float:
        """How fast `told` changes with v."""
        return 1.0 if self.step is None else 1.0 / (1.0 + (0.5 * v * self.step) ** 2)


def curve(loop: Transfer) -> Curve:
    """One channel of a loop prepared. Raises ValueError for several channels or entries that are not finite."""
    if loop.D.shape != (1, 1):
        raise ValueError(f"one input and one output are needed, got {loop.D.shape[1]} and {loop.D.shape[0]}")
    if not all(np.isfinite(each).all() for each in (loop.A, loop.B, loop.C, loop.D)):
        raise ValueError("a loop with entries that are not finite has no response")
    F, bF, cF = balanced(change(loop), loop.B[:, 0], loop.C[0])
    dF = float(loop.D[0, 0])
    A, b, c, d = (F, bF, cF, dF) if loop.step is None else mapped(F, bF, cF, dF, loop.step)
    if loop.step is not None:
        A, b, c = balanced(A, b, c)
    T, Q = schur(A, output="complex") if len(A) else (np.zeros((0, 0)), np.zeros((0, 0)))
    return Curve(
        A, b, c, d, loop.delay, loop.step, _complex(T), _complex(Q.conj().T @ b), _complex(c @ Q), F, bF, cF, dF
    )


def _complex(values: object) -> Complex:
    return np.asarray(values, dtype=np.complex128)


def balanced(A: Array, b: Array, c: Array) -> tuple[Array, Array, Array]:
    """States scaled by powers of two so that [A b; c 0] has rows and columns of one size; A (n, n), b (n,), c (n,)."""
    n = len(A)
    if n == 0:
        return A, b, c
    whole = np.zeros((n + 1, n + 1))
    whole[:n, :n], whole[:n, n], whole[n, :n] = A, b, c
    _, (scale, _) = matrix_balance(whole, permute=False, separate=True)
    scale = np.asarray(scale[:n] / scale[n], dtype=np.float64)
    return A * scale / scale[:, np.newaxis], b / scale, c * scale
