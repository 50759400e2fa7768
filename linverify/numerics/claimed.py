"""A Jacobian that a plant brings along, read at the border and held against differences entry by entry."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..core.border import called, read_only
from ..core.bound import BoundPlant
from ..core.errors import PlantError
from ..core.model import Array, OperatingPoint

TRUST = 4.0  # times the error of the difference
LEAST = 1e-10  # of the row's largest term: below this both are rounding


@dataclass(frozen=True, slots=True)
class Mismatch:
    """One entry in which the claimed slope is not the measured one; error: of the measured one."""

    row: str
    column: str
    claimed: float
    measured: float
    error: float

    def told(self) -> str:
        """One line for a reader."""
        return (
            f"the plant's own Jacobian gives d {self.row} / d {self.column} = {self.claimed:.9g}, "
            f"differences give {self.measured:.9g} +- {self.error:.2g}"
        )


def claimed_jacobian(plant: BoundPlant, point: OperatingPoint) -> Array:
    """Rates and outputs by states and inputs (n + k, n + m) as `plant.jacobian` returns them.

    Raises PlantError where it raises, or returns anything else than four finite matrices A, B, C, D that fit.
    """
    function = plant.plant.jacobian
    if function is None:
        raise ValueError("the plant brings no Jacobian")
    x, u = read_only(point.x), read_only(point.u)

    def told() -> str:
        return plant.told_call(point.time, x, u)

    answer = called(function, "jacobian", point.time, x, u, plant.parameters, told)
    kind = type(answer).__name__
    if not isinstance(answer, (tuple, list)) or len(answer) != 4:
        raise PlantError(f"jacobian must return A, B, C, D; it returned {kind} when called with {told()}")
    n, m, k = plant.n, plant.m, plant.k
    shapes = {"A": (n, n), "B": (n, m), "C": (k, n), "D": (k, m)}
    blocks = {}
    for (name, shape), block in zip(shapes.items(), answer, strict=True):
        try:
            matrix = np.asarray(block, dtype=np.float64)
        except (TypeError, ValueError) as error:
            raise PlantError(f"jacobian returned a {name} that is no matrix of real numbers: {error}") from error
        if matrix.shape != shape:
            raise PlantError(f"jacobian returned a {name} of shape {matrix.shape}; expected {shape}")
        if not np.isfinite(matrix).all():
            raise PlantError(f"jacobian returned a {name} that is not finite when called with {told()}")
        blocks[name] = matrix
    return np.block([[blocks["A"], blocks["B"]], [blocks["C"], blocks["D"]]])


def mismatches(
    claimed: Array, measured: Array, error: Array, scales: Array, rows: tuple[str, ...], columns: tuple[str, ...]
) -> tuple[Mismatch, ...]:
    """Entries further apart than the error of the measured one allows, the worst (in scales (r, v)) first."""
    apart = np.abs(claimed - measured)
    wrong = np.argwhere(~(apart <= TRUST * error + LEAST * scales))
    share = apart / np.maximum(scales, 1e-300)
    worst_first = sorted(wrong.tolist(), key=lambda entry: -float(share[tuple(entry)]))
    return tuple(
        Mismatch(rows[i], columns[j], float(claimed[i, j]), float(measured[i, j]), float(error[i, j]))
        for i, j in worst_first
    )
