"""Participation of states in modes: |P_kk| as a share of the sum over all states k.

P is the projector onto the mode's eigenvector along all others; for a simple mode P_kk is the product of the entries of
its left and right eigenvectors. Its diagonal does not depend on the scaling of states at all. Here P is an integral of
(z I - A)^-1 around the mode's eigenvalue, which is well defined for repeated and defective ones too: modes that cannot
be told apart, be it by rounding or because their discs of error meet, are enclosed by one contour and share one answer.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.linalg import matrix_balance

from ..core.model import Array
from .clusters import Cluster, settled
from .frequency import Complex
from .spectrum import RESERVE, SPACING, Root, circle, largest

TELLING = 1e-3  # error of a share of participation, from rounding alone, beyond which modes are taken together
GOOD = 1e-4  # the same, with errors of entries: no other contour is tried then
CROWDED = 0.6  # of the distance to the nearest foreign eigenvalue: within it the contour has room
CONTOUR = 64  # points of the contour


@dataclass(frozen=True, slots=True, eq=False)
class Shared:
    """What modes that cannot be told apart have in common.

    poles: how many there are, conjugates counted; shares (n,): participation of every state, sum one; share_error: of
    each; left, right (n, poles): orthonormal bases of both invariant subspaces, states scaled by nominal sizes;
    direction_error: of them.
    """

    poles: int
    shares: Array
    share_error: float
    left: Complex
    right: Complex
    direction_error: float


def projectors(A: Array, E: Array, found: Sequence[Root]) -> list[Shared]:
    """The projector of every root, in their order; the same object for roots that share one."""
    around = _Projectors.of(A, E, found)
    made: dict[int, Shared] = {}
    for cluster, shared in settled([root.value for root in found], around.of_cluster):
        made |= dict.fromkeys(cluster.members, shared)
    return [made[at] for at in range(len(found))]


@dataclass(frozen=True, slots=True, eq=False)
class _Projectors:
    """A balanced for accuracy, its errors, those of rounding alone; scale (n,): state = scale x balanced state."""

    A: Array
    E: Array
    rounding: float
    scale: Array
    found: Sequence[Root]

    @classmethod
    def of(cls, A: Array, E: Array, found: Sequence[Root]) -> _Projectors:
        if not len(A):
            return cls(A, E, 0.0, np.ones(0), found)
        _, (scale, _) = matrix_balance(A, permute=False, separate=True)
        A, E = A * scale / scale[:, np.newaxis], E * scale / scale[:, np.newaxis]
        return cls(A, E, SPACING * float(np.linalg.norm(A)), np.asarray(scale, dtype=np.float64), found)

    def of_cluster(self, cluster: Cluster) -> Shared | None:
        """The projector onto a cluster's subspace; None where it cannot be told from that of its neighbours."""
        if math.isinf(cluster.gap):
            n = len(self.A)
            return Shared(n, np.full(n, 1.0 / n), 0.0, np.eye(n, dtype=complex), np.eye(n, dtype=complex), 0.0)
        if cluster.inside > CROWDED * cluster.gap or self._torn(cluster):
            return None
        best: Shared | None = None
        for share in (0.5, 0.25, 0.75):
            found = self._contour(cluster, share)
            if found is not None and (best is None or found.share_error < best.share_error):
                best = found
            if best is not None and best.share_error <= GOOD:
                break
        return best

    def _torn(self, cluster: Cluster) -> bool:
        """True where a disc that cannot be told apart has members inside and outside."""
        discs = {(root.center, root.spread) for at, root in enumerate(self.found) if at in cluster.members}
        return any(
            (root.center, root.spread) in discs and not root.single and not root.zero
            for at, root in enumerate(self.found)
            if at not in cluster.members
        )

    def _contour(self, cluster: Cluster, share: float) -> Shared | None:
        """The projector by an integral on a circle that lies `share` of the way out to the nearest foreign one."""
        base = max(cluster.inside, 1e-3 * cluster.gap)
        around = circle(cluster.center, base ** (1.0 - share) * cluster.gap**share, CONTOUR)
        n, steady = len(self.A), np.full_like(self.A, self.rounding)
        if largest(self.A, steady, around) >= RESERVE:
            return None
        inverse = np.linalg.inv(around[:, np.newaxis, np.newaxis] * np.eye(n) - self.A)
        turning = ((around - cluster.center) / CONTOUR)[:, np.newaxis, np.newaxis]
        P = np.asarray((turning * inverse).sum(axis=0), dtype=np.complex128)
        size, length = np.abs(inverse), np.abs(turning)
        own = float(np.diag((length * (size @ steady @ size)).sum(axis=0)).sum()) / float(np.abs(np.diag(P)).sum())
        if not own <= TELLING:
            return None
        rho = largest(self.A, self.E + self.rounding, around)
        away = (length * (size @ (self.E + self.rounding) @ size)).sum(axis=0)
        return self._told(P, away / (1.0 - rho) if rho < 1.0 else np.full_like(away, np.inf), len(cluster.values))

    def _told(self, P: Complex, away: Array, poles: int) -> Shared:
        weights = np.abs(np.diag(P))
        whole = float(weights.sum())
        share_error = 2.0 * float(np.diag(away).sum()) / whole
        back = self.scale[:, np.newaxis] / self.scale  # into the states' nominal sizes again
        left, sizes, right = np.linalg.svd(P * back)
        direction = float(np.linalg.norm(away * back)) / float(sizes[poles - 1])
        return Shared(poles, weights / whole, share_error, right[:poles].conj().T, left[:, :poles], direction)
