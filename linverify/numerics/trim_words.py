"""What a trim tells in words: values with units, and which limits hold it back."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from ..core.model import OperatingPoint
from ..core.shown import Shown
from .equations import bounds
from .trim_result import Task

ROUND_OFF = 1e-12  # nominal sizes
LISTED = 4  # equilibria in one line; all of them stand in the record
ON_LIMIT = 1e-6  # nominal sizes


def shown_as(task: Task, name: str) -> Shown:
    """The unit in which values of a state, input or output are told: as the spec writes them, else the plant's."""
    return task.shown.get(name) or Shown(task.system.plant.plant.unit(name))


def told_rate(task: Task, name: str, rate: float, digits: int = 6) -> str:
    """A rate of a state: `0.2 m/s per s`, or `0.1 mol/l a step` for a difference equation."""
    plant = task.system.plant
    per = "a step" if plant.step is not None else f"per {plant.plant.time_unit}"
    return f"{shown_as(task, name).told_size(rate, digits)} {per}"


def told(task: Task, name: str, value: float) -> str:
    """`speed = 12.3 m/s`."""
    return f"{name} = {shown_as(task, name).told(value)}"


def told_limit(task: Task, name: str, limit: float) -> str:
    """A limit of the envelope or of the plant's domain: `3 deg`."""
    return (task.shown_limits.get(name) or shown_as(task, name)).told(limit)


def told_unknowns(task: Task, point: OperatingPoint) -> str:
    """`speed = 12.3 m/s, pitch = 0.01 rad`: what was found, without the round-off of zeros."""
    words = []
    for name, size in zip(task.system.unknowns, task.system.sizes, strict=True):
        value = point.value(name)
        words.append(told(task, name, value if abs(value) > ROUND_OFF * size else 0.0))
    return ", ".join(words)


def numbered(task: Task, points: Sequence[OperatingPoint]) -> str:
    """`(1) speed = 12.3 m/s; (2) speed = 15 m/s; and 3 more`."""
    words = [f"({i}) {told_unknowns(task, point)}" for i, point in enumerate(points[:LISTED], 1)]
    return "; ".join([*words, *([f"and {len(points) - LISTED} more"] if len(points) > LISTED else [])])


def active_bounds(task: Task, point: OperatingPoint) -> tuple[str, ...]:
    """The limits that unknowns and outputs stand on: `thrust at its upper limit 80000 N`."""
    words = []
    plant = task.system.plant
    outputs = [name for name in plant.outputs.names if name not in plant.states]
    for name in (*task.system.unknowns, *outputs):
        limits, value, size = bounds(plant, task.envelope, name), point.value(name), task.nominal.get(name, 1.0)
        for side, limit in (("lower", limits.low), ("upper", limits.high)):
            if np.isfinite(limit) and abs(value - limit) <= ON_LIMIT * size:
                words.append(f"{name} at its {side} limit {told_limit(task, name, limit)}")
    return tuple(words)
