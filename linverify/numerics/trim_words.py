"""What a trim tells in words: values with units, and which limits hold it back."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from ..core.bound import BoundPlant
from ..core.case import Interval
from ..core.model import OperatingPoint
from .equations import Equations, bounds

ROUND_OFF = 1e-12  # nominal sizes
LISTED = 4  # equilibria in one line; all of them stand in the record
ON_LIMIT = 1e-6  # nominal sizes


def unit_of(plant: BoundPlant, name: str) -> str:
    """Unit of a state, input or output, empty for a number without unit."""
    unit = plant.plant.unit(name)
    return "" if unit == "1" else unit


def rate_unit(plant: BoundPlant, name: str) -> str:
    """Unit of the rate of a state: `m/s per s`, or `mol/l a step` for a difference equation."""
    per = "a step" if plant.step is not None else f"per {plant.plant.time_unit}"
    return f"{unit_of(plant, name)} {per}".strip()


def told(plant: BoundPlant, name: str, value: float) -> str:
    """`speed = 12.3 m/s`."""
    return f"{name} = {value:.6g} {unit_of(plant, name)}".strip()


def told_unknowns(system: Equations, point: OperatingPoint) -> str:
    """`speed = 12.3 m/s, pitch = 0.01 rad`: what was found, without the round-off of zeros."""
    words = []
    for name, size in zip(system.unknowns, system.sizes, strict=True):
        value = point.value(name)
        words.append(told(system.plant, name, value if abs(value) > ROUND_OFF * size else 0.0))
    return ", ".join(words)


def numbered(system: Equations, points: Sequence[OperatingPoint]) -> str:
    """`(1) speed = 12.3 m/s; (2) speed = 15 m/s; and 3 more`."""
    words = [f"({i}) {told_unknowns(system, point)}" for i, point in enumerate(points[:LISTED], 1)]
    return "; ".join([*words, *([f"and {len(points) - LISTED} more"] if len(points) > LISTED else [])])


def active_bounds(
    system: Equations, point: OperatingPoint, envelope: Mapping[str, Interval], nominal: Mapping[str, float]
) -> tuple[str, ...]:
    """The limits that unknowns and outputs stand on: `thrust at its upper limit 80000 N`."""
    words = []
    plant = system.plant
    outputs = [name for name in plant.outputs.names if name not in plant.states]
    for name in (*system.unknowns, *outputs):
        limits, value, size = bounds(plant, envelope, name), point.value(name), nominal.get(name, 1.0)
        for side, limit in (("lower", limits.low), ("upper", limits.high)):
            if np.isfinite(limit) and abs(value - limit) <= ON_LIMIT * size:
                words.append(f"{name} at its {side} limit {limit:.6g} {unit_of(plant, name)}".strip())
    return tuple(words)
