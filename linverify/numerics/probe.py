"""Sampling a function along its axes, one batched call at a time, never outside its domain."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..core.model import Array

Indices = NDArray[np.intp]
Mask = NDArray[np.bool_]
VectorFunction = Callable[[Array], Array]  # (v, N) -> (r, N); a column that fails is NaN


@dataclass(frozen=True, slots=True, eq=False)
class Probe:
    """f about z0 (v,), with f0 = f(z0) (r,). sizes (v,): typical deviation of each variable; low, high (v,): how far
    each may be moved, equal to z0 on a side where the domain ends or the variable does not go.
    """

    f: VectorFunction
    z0: Array
    f0: Array
    sizes: Array
    low: Array
    high: Array

    @property
    def up(self) -> Array:
        """Room above z0, (v,)."""
        return self.high - self.z0

    @property
    def down(self) -> Array:
        """Room below z0, (v,)."""
        return self.z0 - self.low

    @property
    def spacing(self) -> Array:
        """Distance of neighbouring floating-point numbers at z0, (v,)."""
        return np.maximum(np.spacing(np.abs(self.z0)), 1e-300)

    def along(self, columns: Indices, offsets: Array) -> tuple[Array, Array]:
        """f at z0 + offsets[i] along axis columns[i]: values (r, N), and the offsets (N,) that were really taken.

        The two differ by the rounding of z0 + offset; slopes must be taken over what was really stepped.
        """
        taken = np.clip(self.z0[columns] + offsets, self.low[columns], self.high[columns])
        points = np.repeat(self.z0[:, np.newaxis], len(columns), axis=1)
        points[columns, np.arange(len(columns))] = taken
        return self.f(points), taken - self.z0[columns]
