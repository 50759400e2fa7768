"""A transfer function in continuous time, balanced, for level sets over frequency.

A sampled one is mapped bilinearly, w = (2 / step) (z - 1) / (z + 1), so that the unit circle becomes the imaginary axis
and slow poles stay where they were; the mapping starts from A - I, since at fast sampling all poles crowd at z = 1 and
their digits are in the difference. The Nyquist frequency becomes infinity. A common dead time changes no singular
value: it is kept beside the matrices.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..core.model import Array
from .bilinear import at_nyquist, change
from .minimal import balanced, minimal
from .transfer import Transfer

Complex = NDArray[np.complex128]
ON_AXIS = 64 * 2.0**-52  # of |A| times the condition of a pole: what rounding may move it by
TOGETHER, ROOTED = 1e-3, 1e-8  # of |pole| and of |A|: most that rounding is taken to move poles that coincide
SMALLEST = 1e-11  # of the sizes of B and C: a pole with a smaller residue is not in the transfer function


@dataclass(frozen=True, slots=True, eq=False)
class Mapped:
    """y = (C (w I - A)^-1 B + D) exp(-w delay) u, balanced and without parts that are neither moved nor seen.

    step: of the sampled transfer function it was mapped from, None of a continuous one; nyquist: that one has a pole at
    z = -1, and the matrices are those of its parts without it being possible to map it.
    """

    A: Array
    B: Array
    C: Array
    D: Array
    delay: float = 0.0
    step: float | None = None
    nyquist: bool = False

    def respond(self, omega: Array) -> Complex:
        """The response without dead time at mapped frequencies (F,), which may be infinite; (F, k, m)."""
        found = np.broadcast_to(self.D, (len(omega), *self.D.shape)).astype(np.complex128)
        finite = np.isfinite(omega)
        if len(self.A) and finite.any():
            shifted = 1j * omega[finite, np.newaxis, np.newaxis] * np.eye(len(self.A)) - self.A
            found[finite] += self.C @ np.linalg.solve(shifted, np.broadcast_to(self.B, (len(shifted), *self.B.shape)))
        return found

    def told(self, omega: float) -> float:
        """A mapped frequency as the transfer function's own, rad per time unit."""
        return omega if self.step is None else 2.0 / self.step * math.atan(0.5 * omega * self.step)

    def meant(self, omega: Array) -> Array:
        """Frequencies of the transfer function as mapped ones."""
        return omega if self.step is None else 2.0 / self.step * np.tan(0.5 * omega * self.step)

    def poles(self) -> Complex:
        """Eigenvalues of A, (n,)."""
        return np.asarray(np.linalg.eigvals(self.A), dtype=np.complex128)

    def axis_poles(self) -> Complex:
        """Poles that lie on the imaginary axis to within rounding and are seen in the response."""
        values, on = self.edge()
        return np.asarray(values[on], dtype=np.complex128)

    def edge(self) -> tuple[Complex, NDArray[np.bool_]]:
        """All poles, and which of them may lie on the imaginary axis and are seen in the response."""
        if len(self.A) == 0:
            return np.zeros(0, dtype=np.complex128), np.zeros(0, dtype=np.bool_)
        values, right, left, match = eigen(self.A)
        moved = np.linalg.norm(np.conj(left.T) @ self.B, axis=1) / (float(np.linalg.norm(self.B)) or 1.0)
        seen = np.linalg.norm(self.C @ right, axis=0) / (float(np.linalg.norm(self.C)) or 1.0)
        return values, np.asarray(near_axis(self.A, values, match) & (moved * seen > SMALLEST * match))


def eigen(A: Array) -> tuple[Complex, Complex, Complex, Array]:
    """Eigenvalues (n,), right and left eigenvectors of unit length as columns, and |left^H right| (n,) of each pair."""
    values, right = np.linalg.eig(A)
    left = _left(values, A)
    match = np.maximum(np.abs(np.sum(np.conj(left) * right, axis=0)), 2.0**-52)
    return values.astype(np.complex128), right.astype(np.complex128), left, match


def near_axis(A: Array, values: Complex, match: Array) -> NDArray[np.bool_]:
    """Which eigenvalues rounding may have moved across the imaginary axis; arguments from `eigen`."""
    size = float(np.linalg.norm(A))
    # of poles that coincide the condition grows without bound, and what rounding does to them does not
    most = np.maximum(TOGETHER * np.abs(values), ROOTED * size)
    return np.asarray(np.abs(values.real) <= np.minimum(ON_AXIS * size / match, most))


def mapped(transfer: Transfer) -> Mapped:
    """`transfer` on the imaginary axis."""
    if transfer.step is None:
        A, B, C = minimal(*balanced(transfer.A, transfer.B, transfer.C))
        return Mapped(A, B, C, transfer.D, transfer.delay)
    F, B, C = minimal(*balanced(change(transfer), transfer.B, transfer.C))
    return _bilinear(F, B, C, transfer.D, transfer.step)


def _bilinear(F: Array, B: Array, C: Array, D: Array, step: float) -> Mapped:
    up = 2.0 * np.eye(len(F)) + F
    if at_nyquist(F):
        return Mapped(F, B, C, D, 0.0, step, True)
    inner = np.hstack([F, B])
    if len(F):
        inner = np.asarray(np.linalg.solve(up, inner), dtype=np.float64)
    A, moved = inner[:, : len(F)], inner[:, len(F) :]
    A, B, seen = balanced(2.0 / step * A, 2.0 / step * moved, 2.0 * C @ np.linalg.inv(up))
    return Mapped(A, B, seen, D - C @ moved, 0.0, step)


def _left(values: Complex, A: Array) -> Complex:
    """Left eigenvectors of unit length, in the order of `values`."""
    found, vectors = np.linalg.eig(A.T)
    order = []
    free = np.ones(len(found), dtype=bool)
    for value in values:
        distance = np.where(free, np.abs(np.conj(found) - value), np.inf)
        place = int(np.argmin(distance))
        free[place] = False
        order.append(place)
    return np.asarray(vectors[:, order], dtype=np.complex128)
