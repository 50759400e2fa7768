"""A loop's response in double and in extended precision, and the frequencies where it has to be looked at.

Part of the brute force of `oracle`: nothing here is shared with the library.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import scipy.linalg

PER_DECADE = 400  # of the plain logarithmic grid
ABOUT_A_ROOT = 14  # points a decade of distance, on either side
APART = 1e-12  # relative: closer points make brackets of nothing
CHUNK = 20_000


@dataclass(frozen=True)
class Loop:
    """A (n, n), B (n,), C (n,), D of one loop; dead time and sample time in its time unit."""

    A: np.ndarray
    B: np.ndarray
    C: np.ndarray
    D: float
    delay: float = 0.0
    step: float | None = None

    @property
    def n(self) -> int:
        return int(self.A.shape[0])

    @cached_property
    def balanced(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Rate matrix (A, or A - I of a sampled loop), B and C in states scaled by powers of two, which is exact."""
        rate = self.A if self.step is None else self.A - np.eye(self.n)
        if not self.n:
            return rate, self.B, self.C
        bordered = np.block([[rate, self.B[:, None]], [self.C[None, :], np.zeros((1, 1))]])
        _, (scale, _) = scipy.linalg.matrix_balance(bordered, permute=False, separate=True)
        scale = scale[:-1] / scale[-1]
        return rate / scale[:, None] * scale[None, :], self.B / scale, self.C * scale

    @cached_property
    def triangular(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """The balanced loop in complex Schur form."""
        F, B, C = self.balanced
        if not self.n:
            return F + 0j, B + 0j, C + 0j
        T, Z = scipy.linalg.schur(F, output="complex")
        return T, Z.conj().T @ B, C @ Z

    @property
    def top(self) -> float:
        """The highest frequency: half the sampling frequency, or infinity."""
        return math.inf if self.step is None else math.pi / self.step

    def variable(self, w: np.ndarray) -> np.ndarray:
        """s of a frequency; of a sampled loop z - 1, without cancellation."""
        if self.step is None:
            return 1j * w
        angle = w * w.dtype.type(self.step)
        return -2.0 * np.sin(angle / 2.0) ** 2 + 1j * np.sin(angle)

    def bare(self, w: np.ndarray) -> np.ndarray:
        """L without its dead time, from the Schur form, in double precision."""
        T, B, C = self.triangular
        out = np.empty(w.shape, complex)
        for first in range(0, w.size, CHUNK):
            part = slice(first, first + CHUNK)
            s = self.variable(w[part])
            x = np.empty((self.n, s.size), complex)
            for i in range(self.n - 1, -1, -1):
                x[i] = (B[i] + T[i, i + 1 :] @ x[i + 1 :]) / (s - T[i, i])
            out[part] = C @ x + self.D
        return out

    def response(self, w: np.ndarray) -> np.ndarray:
        """L at frequencies (N,), in double precision."""
        return self.bare(w) * np.exp(-1j * w * self.delay)

    def exact(self, w: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """L and its derivative by frequency at (N,), by elimination in extended precision."""
        w = np.asarray(w, np.longdouble)
        s = self.variable(w)
        L, slope = extended(self, s)
        turn = 1j if self.step is None else 1j * np.longdouble(self.step) * (1.0 + s)
        late = np.exp(-1j * w * np.longdouble(self.delay))
        return L * late, (slope * turn - 1j * np.longdouble(self.delay) * L) * late


def extended(loop: Loop, s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """C (s - F)^-1 B + D and its derivative by s, for s (N,) in extended precision."""
    F, B, C = (part.astype(np.clongdouble) for part in loop.balanced)
    shifted = s[:, None, None] * np.eye(loop.n) - F
    x = eliminated(shifted, np.broadcast_to(B, (s.size, loop.n)))
    y = eliminated(shifted, x)
    return (x * C).sum(axis=1) + np.longdouble(loop.D), -(y * C).sum(axis=1)


def eliminated(matrix: np.ndarray, right: np.ndarray) -> np.ndarray:
    """Solutions of N systems (N, n, n), (N, n) by Gaussian elimination with row pivoting, in the precision given."""
    M = np.concatenate([matrix, right[:, :, None]], axis=2)
    n, rows = M.shape[1], np.arange(M.shape[0])
    for k in range(n):
        pivot = k + np.argmax(np.abs(M[:, k:, k]), axis=1)
        M[rows, pivot], M[:, k] = M[:, k].copy(), M[rows, pivot]
        factor = M[:, k + 1 :, k] / M[:, k, k, None]
        M[:, k + 1 :, k:] -= factor[:, :, None] * M[:, k, None, k:]
    x = np.zeros((M.shape[0], n), M.dtype)
    for k in range(n - 1, -1, -1):
        x[:, k] = (M[:, k, n] - (M[:, k, k + 1 : n] * x[:, k + 1 :]).sum(axis=1)) / M[:, k, k]
    return x


# -- where to look ---------------------------------------------------------------------------------------------------


def closed_roots(loop: Loop, sign: float = 1.0) -> np.ndarray:
    """Roots of 1 + sign L without dead time, in s or z - 1; empty where the loop is not well posed."""
    F, B, C = loop.balanced
    through = 1.0 + sign * loop.D
    return np.linalg.eigvals(F - sign * np.outer(B, C) / through) if through and loop.n else np.empty(0, complex)


def zeros(loop: Loop) -> np.ndarray:
    """Finite zeros of L without dead time, roughly."""
    F, B, C = loop.balanced
    size = float(np.abs(F).max(initial=1e-300))
    pencil = np.block([[F / size, B[:, None]], [C[None, :], np.full((1, 1), loop.D)]])
    with np.errstate(all="ignore"):
        values = scipy.linalg.eigvals(pencil, np.diag([1.0] * loop.n + [0.0])) * size
    return values[np.isfinite(values) & (np.abs(values) < 1e8 * max(size, 1e-300))]


def landmarks(loop: Loop) -> np.ndarray:
    """What the response turns about: complex rates, per time unit."""
    found = [np.diag(loop.triangular[0]), zeros(loop), closed_roots(loop), closed_roots(loop, -1.0)]
    roots = np.concatenate(found)
    if loop.step is not None:
        roots = roots[np.abs(1.0 + roots) > 1e-12]
        roots = np.where(np.abs(roots) < 1e-4, roots - roots**2 / 2 + roots**3 / 3, np.log1p(roots)) / loop.step
    biggest = np.abs(roots).max(initial=0.0)
    return roots[np.abs(roots) > 1e-13 * biggest]


def about(root: complex) -> np.ndarray:
    """Frequencies about a root, ever closer to where it is nearest to the axis."""
    size, centre = abs(root), abs(root.imag)
    width = max(abs(root.real), 1e-13 * size)
    count = int(ABOUT_A_ROOT * (math.log10(2.0 * size / width) + 3.0))
    offsets = width * np.geomspace(1e-3, 2.0 * size / width, count)
    return np.concatenate([centre + offsets, centre - offsets, [centre, size]])


def grid(loop: Loop) -> np.ndarray:
    """Frequencies to scan where the dead time does not matter: ascending, above zero."""
    roots = landmarks(loop)
    sizes = np.abs(roots) if roots.size else np.ones(1)
    low, high = 1e-4 * sizes.min(), min(1e4 * sizes.max(), loop.top)
    low = min(low, 1e-3 * high)
    plain = np.geomspace(low, high, int(PER_DECADE * math.log10(high / low)) + 2)
    parts = [plain, *(about(complex(root)) for root in roots)]
    if loop.step is not None:
        parts.append(loop.top * (1.0 - np.geomspace(1e-9, 0.5, 200)))
        parts.append(np.linspace(0.0, loop.top, 2000))
    w = np.unique(np.concatenate(parts))
    w = w[(w > 0.0) & (w <= loop.top)]
    w = w[np.diff(w, prepend=0.0) > APART * w]
    with np.errstate(all="ignore"):  # a point may be a pole
        return w[np.isfinite(loop.bare(w))]
