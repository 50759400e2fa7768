"""The linear part of a wiring as matrices: one product instead of a walk through its diagram.

Only ranges and rates of actuators are not linear, and they act behind everything that is: the matrices are what the
unlimited diagram answers to unit vectors, about a trim of zero.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from ..core.model import Array, frozen_array

Answer = Callable[[Array, Array, Array], Array]  # (a (na, N), w (m + s, N), y (q, N)) -> rows (r, N)


@dataclass(frozen=True, slots=True, eq=False)
class LinearPart:
    """rows = of_states a + of_points p + of_seen y: states of the controllers, set points and measurements, deviations.

    blind: whether no row holds y.
    """

    of_states: Array
    of_points: Array
    of_seen: Array
    blind: bool

    def free(self, a: Array, p: Array) -> Array:
        """The rows (r, N) without what is measured."""
        rows = self.of_states @ a
        if len(p):
            rows += self.of_points @ p
        return rows


def linear_part(answer: Answer, slow: int, added: int, inputs: int, points: int, seen: int) -> LinearPart:
    """The matrices of `answer`, which is linear in the added states behind the first `slow`, set points, measurements.

    added: number of all added states; inputs: of w in front of the set points.
    """
    sizes = [added - slow, points, seen]
    ends = np.cumsum([0, *sizes])
    columns = np.eye(sum(sizes))
    a, w = np.zeros((added, sum(sizes))), np.zeros((inputs + points, sum(sizes)))
    a[slow:], w[inputs:] = columns[: ends[1]], columns[ends[1] : ends[2]]
    rows = answer(a, w, columns[ends[2] :])
    states, given, measured = (frozen_array(rows[:, first:last]) for first, last in pairwise(ends))
    return LinearPart(states, given, measured, not measured.any())
