"""Closed-loop poles of a loop without dead time, with what rounding may move them by.

A pole is called stable or unstable only where it is further from the boundary than its own uncertainty: the rounding of
the matrix times the condition of the eigenvalue (the angle between its left and right vectors). Where poles lie on each
other or nearly so that says nothing, and discs that hold them together do (`spectrum`).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eig

from ..core.model import Array
from .curve import Complex, Curve, balanced
from .spectrum import roots

Places = NDArray[np.intp]
ROUNDING = 2.0**-50  # of the norm of the matrix
ILL_POSED = 1e-12  # |1 + D| below this share of 1 + |D| is zero


@dataclass(frozen=True, slots=True, eq=False)
class Poles:
    """values (n,): poles in s per time unit, or in z; to_go (n,): distance left to the boundary of stability, negative
    beyond it; error (n,): uncertainty of that distance.
    """

    values: Complex
    to_go: Array
    error: Array

    @property
    def stable(self) -> bool:
        """True where every pole is surely stable."""
        return bool((self.to_go > self.error).all())

    @property
    def unstable(self) -> Places:
        """Places of the poles that are surely unstable."""
        return np.flatnonzero(self.to_go < -self.error)

    @property
    def undecided(self) -> Places:
        """Places of the poles that lie on the boundary to within rounding."""
        return np.flatnonzero(np.abs(self.to_go) <= self.error)


def ill_posed(d: float) -> bool:
    """True where 1 + d is zero: the closed loop has no solution."""
    return abs(1.0 + d) <= ILL_POSED * (1.0 + abs(d))


def closed(curve: Curve, sign: float = 1.0) -> Poles:
    """Poles of the closed loop without dead time, u = -sign y. Needs 1 + sign d that is not zero."""
    F, fed = curve.F, np.outer(sign * curve.bF, curve.cF) / (1.0 + sign * curve.dF)
    return settled(F - fed, curve.step, ROUNDING * (np.abs(F) + np.abs(fed)))


def settled(F: Array, step: float | None, error: Array | None = None) -> Poles:
    """As `of_matrix`, by discs where that leaves a pole undecided. error (n, n): of the entries of F, zero if None."""
    poles = of_matrix(F, step)
    return in_discs(F, step, error) if len(poles.undecided) else poles


def in_discs(F: Array, step: float | None, error: Array | None = None) -> Poles:
    """As `settled`, always by discs."""
    found = [(each.value, each.radius) for each in roots(F, np.zeros_like(F) if error is None else error)]
    found += [(value.conjugate(), radius) for value, radius in found if value.imag > 0.0]
    values, radius = np.array([value for value, _ in found]), np.array([radius for _, radius in found])
    return Poles(values, -values.real, radius) if step is None else _in_z(values, radius)


def _in_z(values: Complex, error: Array) -> Poles:
    """Of the eigenvalues of F, those of I + F: 1 - |1 + F| from F itself, near z = 1 it would have lost the digits."""
    return Poles(1.0 + values, -(2.0 * values.real + np.abs(values) ** 2) / (1.0 + np.abs(1.0 + values)), error)


def of_matrix(F: Array, step: float | None) -> Poles:
    """Eigenvalues of F (n, n), or of I + F where `step` is given."""
    n = len(F)
    if n == 0:
        return Poles(np.zeros(0, complex), np.zeros(0), np.zeros(0))
    F, _, _ = balanced(F, np.zeros(n), np.zeros(n))
    values, left, right = eig(F, left=True, right=True)  # type: ignore[misc]
    match = np.maximum(np.abs(np.sum(np.conj(left) * right, axis=0)), 2.0**-52)
    error = ROUNDING * np.linalg.norm(F) / match
    return Poles(values, -values.real, error) if step is None else _in_z(values, error)
