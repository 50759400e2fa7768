"""Eigenvalues with discs in which they surely lie, for a matrix whose entries are known to within errors.

z is an eigenvalue of some A + X with |X| <= E, entry by entry, only where the spectral radius of |(z I - A)^-1| E is
one or more. So a circle on which it stays below one keeps its number of eigenvalues, whatever X is. The circle about
each eigenvalue is made as small as that allows; where circles would meet, their eigenvalues are taken together. This
holds for repeated and defective eigenvalues too. The spectral radius is evaluated at points of the circle with a
reserve, so the discs are an estimate with a margin and no proof.

An error of a stiffness moves a lightly damped pole along the axis and hardly across it. So for a simple eigenvalue its
shift in one direction is bounded too: to first order from its eigenvectors, the rest by Cauchy's estimate, since the
eigenvalue is an analytic function of the errors as long as K times as large ones leave it alone in a larger disc.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import eig, matrix_balance

from ..core.model import Array
from .clusters import Cluster, settled
from .frequency import Complex
from .structure import parts, strong_blocks, zeros_for_sure

STRUCTURAL = 1e-9  # of the largest scaled term of its row: a zero that is known this well is zero for good
SPACING = 2.0**-52
RESERVE = 0.8  # the spectral radius that the points of a circle must keep below
POINTS = 32  # of a circle
APART = 0.4  # of the distance to the nearest foreign eigenvalue: larger circles are joined
ROOM = 1.25  # times the distance of its own eigenvalues: the least radius of a circle
HALVINGS = 4  # steps that narrow a radius down to five per cent
LARGER = (300.0, 100.0, 30.0, 10.0, 3.0)  # times the errors, under which a simple eigenvalue may still be alone

Turn = Callable[[complex], complex]


@dataclass(frozen=True, slots=True)
class Root:
    """One eigenvalue, or a conjugate pair told by its upper member.

    value: as computed, or exactly zero; radius: of the disc about `value` that holds it, infinite where errors are
    unbounded; center, spread: of the disc that holds all `together` eigenvalues which cannot be told apart; single: one
    simple eigenvalue has the disc to itself; zero: it is zero whatever the entries are; along: how far it may be off in
    the one direction that was asked for, at most `radius`; part: places of the states that it can belong to, since the
    others have nothing to do with them.
    """

    value: complex
    radius: float
    center: complex
    spread: float
    together: int = 1
    zero: bool = False
    along: float = math.inf
    part: tuple[int, ...] = ()

    @property
    def single(self) -> bool:
        """True where the disc holds one eigenvalue (and, off the real axis, its mirror image the conjugate)."""
        return self.together == 1

    @property
    def real(self) -> bool:
        """True where it is real for sure: alone in a disc about a point of the real axis."""
        return self.zero or (self.single and self.value.imag == 0.0)


def structural(A: Array, E: Array, others: Array | None = None) -> Array:
    """E with errors of entries that are zero for good set to zero; A, E (n, n) scaled by nominal sizes.

    What is small is told row by row, since the rates of states may be of very different size. others (n,): the largest
    other term of each row, what inputs do.
    """
    size = np.abs(A)
    whole = float(size.max(initial=0.0)) or 1.0  # nothing but zeros: per time unit
    rows = np.maximum(size.max(axis=1, initial=0.0), STRUCTURAL * whole)
    rows = rows if others is None else np.maximum(rows, others)
    return np.where((A == 0.0) & (STRUCTURAL * rows[:, np.newaxis] >= E), 0.0, E)


def _outwards(value: complex) -> complex:
    return 1.0 + 0.0j


def roots(A: Array, E: Array, turn: Turn = _outwards) -> tuple[Root, ...]:
    """Eigenvalues of A (n, n) to within E (n, n) >= 0, upper members of pairs only; E as `structural` leaves it.

    turn: the direction of `along` at an eigenvalue, |Re(turn x shift)| is bounded; by default that of the real part.
    Raises ValueError for an A that is not finite.
    """
    if not np.isfinite(A).all():
        raise ValueError("the matrix has entries that are not finite")
    known, pattern = E, np.asarray((A != 0.0) | (E > 0.0), dtype=np.bool_)
    found: list[Root] = []
    for part in parts(pattern):
        states = tuple(int(at) for at in part)
        for block in strong_blocks(pattern[np.ix_(part, part)]):
            place = np.ix_(part[block], part[block])
            own = _with_zeros(_block(A[place], known[place], turn), zeros_for_sure(pattern[place]))
            found += [replace(root, part=states) for root in own]
    return tuple(found)


def _with_zeros(found: list[Root], sure: int) -> list[Root]:
    """The smallest ones put to zero, as many as vanish for sure."""
    order = sorted(range(len(found)), key=lambda at: abs(found[at].value))
    for at in order:
        count = 1 if found[at].value.imag == 0.0 else 2
        if count > sure:
            break
        sure -= count
        zero = Root(0j, 0.0, 0j, 0.0, zero=True, along=0.0)
        found[at] = zero
        if count == 2:
            found.append(zero)
    return found


def _block(A: Array, E: Array, turn: Turn) -> list[Root]:
    if len(A) == 1:
        value = float(A[0, 0])
        radius = float(E[0, 0]) + 2.0 * SPACING * abs(value)
        return [Root(complex(value), radius, complex(value), radius, along=radius)]
    _, (scale, _) = matrix_balance(A, permute=False, separate=True)
    A, E = A * scale / scale[:, np.newaxis], E * scale / scale[:, np.newaxis]
    E = E + 2.0 * SPACING * float(np.linalg.norm(A))  # what the eigensolver's own rounding may act like
    values, left, right = (np.asarray(part, dtype=np.complex128) for part in eig(A, left=True))
    upper = np.flatnonzero(values.imag >= 0.0)
    listed = [complex(values[at]) for at in upper]
    if not np.isfinite(E).all():
        return [Root(value, math.inf, value, math.inf, len(A)) for value in listed]
    with np.errstate(divide="ignore", invalid="ignore"):
        # shift of each eigenvalue by each entry of A, (n, n)
        slopes = [np.outer(left[:, at].conj(), right[:, at]) / (left[:, at].conj() @ right[:, at]) for at in upper]
    return _Circles(A, E, listed, slopes, turn).roots()


class _Circles:
    """The circles of one block. A, E balanced (n, n); values on or above the real axis; slopes: by entries of A."""

    def __init__(self, A: Array, E: Array, values: list[complex], slopes: list[Complex], turn: Turn) -> None:
        self.A, self.E, self.values, self.slopes, self.turn = A, E, values, slopes, turn
        self.first_order = [float((np.abs(slope) * E).sum()) for slope in slopes]
        self.size = float(np.linalg.norm(A)) or 1.0

    def roots(self) -> list[Root]:
        """Every eigenvalue with its disc."""
        return [root for cluster, radius in settled(self.values, self._radius) for root in self._told(cluster, radius)]

    def _told(self, cluster: Cluster, radius: float) -> list[Root]:
        if len(cluster.values) == 1:
            along = min(radius, self._along(cluster, radius))
            return [Root(cluster.center, radius, cluster.center, radius, along=along)]
        whole = Root(cluster.center, 0.0, cluster.center, radius, len(cluster.values))
        members = [self.values[at] for at in cluster.members]
        away = [abs(value - cluster.center) + radius for value in members]
        return [replace(whole, value=value, radius=far, along=far) for value, far in zip(members, away, strict=True)]

    def _radius(self, cluster: Cluster) -> float | None:
        """The smallest radius found; None where the circle would come too near to foreign eigenvalues."""
        most, least = APART * cluster.gap, ROOM * cluster.inside
        begin = max(self.first_order[at] for at in cluster.members)
        shortest = max(least, SPACING * self.size)
        radius = max(shortest, begin if math.isfinite(begin) and begin < most else 0.0)
        begun = radius
        while radius <= most and not self._keeps(cluster.center, radius):
            radius *= 2.0
        if radius > most:
            return None
        failed = 0.5 * radius if radius > begun else 0.0
        while radius / 2.0 >= shortest and radius / 2.0 != failed and self._keeps(cluster.center, radius / 2.0):
            radius /= 2.0  # of poles that nearly coincide the first-order error says nothing
        low, high = max(least, radius / 2.0), radius
        for _ in range(HALVINGS):
            middle = math.sqrt(low * high)
            low, high = (low, middle) if self._keeps(cluster.center, middle) else (middle, high)
        return high

    def _along(self, cluster: Cluster, radius: float) -> float:
        """How far a simple eigenvalue may be off in one direction; infinite where nothing better is known."""
        slope = self.slopes[cluster.members[0]]
        first = float((np.abs((self.turn(cluster.center) * slope).real) * self.E).sum())
        for times in LARGER:
            if times * radius <= APART * cluster.gap and self._keeps(cluster.center, times * radius, times):
                return first + radius / (times - 1.0)
        return math.inf

    def _keeps(self, center: complex, radius: float, times: float = 1.0) -> bool:
        points, E = circle(center, radius, POINTS), times * self.E
        if center.imag == 0.0:
            points = points[points.imag > 0.0]  # the other half is its mirror image, with the same figures
        # a circle that is too small mostly shows it at any point
        return largest(self.A, E, points[::8]) < RESERVE and largest(self.A, E, points) < RESERVE


def circle(center: complex, radius: float, points: int) -> Complex:
    """So many points of a circle, none of them on the real axis; (points,)."""
    return np.asarray(center + radius * np.exp(2j * np.pi * (np.arange(points) + 0.5) / points))


def largest(A: Array, E: Array, points: Complex) -> float:
    """The largest spectral radius of |(z I - A)^-1| E over `points` (P,), from above; infinite at an eigenvalue."""
    n = len(A)
    try:
        inverse = np.linalg.inv(points[:, np.newaxis, np.newaxis] * np.eye(n) - A)
    except np.linalg.LinAlgError:
        return math.inf
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        grown = np.abs(inverse) @ E
        vector = np.ones((len(points), n, 1))
        for _ in range(4):
            vector = grown @ vector + 1e-300
            vector = vector / vector.max(axis=1, keepdims=True)
        # Collatz and Wielandt: of a matrix without negative entries this bounds the spectral radius
        ratio = (grown @ vector) / np.maximum(vector, 1e-300)
    found = float(ratio.max())
    return found if math.isfinite(found) else math.inf
