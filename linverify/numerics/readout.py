"""One drive on one rig, instant by instant in plain numbers: for the second opinion, apart from the batched code."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from scipy.linalg import expm

from ..core.drive import Drive
from ..core.model import Array
from .rig import Rig

Side = Literal["low", "high"]
SLACK = 1e-9  # of a limit's size: what lies on the limit is inside
UNSEEN = 1e-3  # of a state's acceptable error: what integration may be off


@dataclass(frozen=True, slots=True)
class Limit:
    """One side of the envelope: row of the signal in `Readout.names`, side, absolute limit, slack."""

    row: int
    side: Side
    limit: float
    slack: float

    def room(self, value: float) -> float:
        """How far `value` is inside; negative beyond the limit."""
        return (value - self.limit if self.side == "low" else self.limit - value) + self.slack


@dataclass(slots=True, eq=False)
class Readout:
    """names: the compared signals, then what the envelope limits besides; nodes: samples an interval, less one."""

    rig: Rig
    drive: Drive
    nodes: int
    names: tuple[str, ...] = field(init=False)
    limits: tuple[Limit, ...] = field(init=False)
    exponentials: dict[float, Array] = field(default_factory=dict)

    def __post_init__(self) -> None:
        rig, plant = self.rig, self.rig.plant
        limited = [name for name in rig.envelope if name in plant.states or name in plant.outputs]
        self.names = (*rig.signals, *(name for name in limited if name not in rig.signals))
        limits = []
        for name in limited:
            row, trimmed = self.names.index(name), abs(rig.point.value(name))
            sides: tuple[tuple[Side, float], ...] = (
                ("low", rig.envelope[name].low),
                ("high", rig.envelope[name].high),
            )
            weight = rig.weights[plant.states.index(name)] if name in plant.states else 0.0
            for side, limit in sides:
                if np.isfinite(limit):
                    limits.append(Limit(row, side, limit, SLACK * max(abs(limit), trimmed) + UNSEEN * weight))
        self.limits = tuple(limits)

    def time(self, k: int, j: int) -> float:
        """Time of node j of interval k; the last node is the next interval's first, to the bit."""
        every = self.drive.every
        return every * (k + 1) if j == self.nodes else every * k + every * j / self.nodes

    def tick(self, time: float) -> float:
        """`time` since the drive began as the plant counts it."""
        return time if self.rig.plant.step is None else float(round(time / self.rig.plant.step))

    def inputs(self, k: int, share: float) -> Array:
        """Deviations of all plant inputs (m,) in interval k after `share` of it."""
        row = np.array(self.drive.values[k])
        if self.drive.course == "straight":
            before = self.drive.values[k - 1] if k else np.zeros_like(row)
            row = before + share * (row - before)
        u = np.zeros(self.rig.plant.m)
        for name, value in zip(self.drive.inputs, row, strict=True):
            u[self.rig.plant.inputs.index(name)] = value
        return u

    def offset(self) -> Array:
        """Initial deviations of the states (n,)."""
        return np.array([self.drive.offsets.get(name, 0.0) for name in self.rig.plant.states.names])

    def model_offset(self) -> Array:
        """Initial deviations of the local model's own states."""
        return np.array([self.drive.offsets.get(name, 0.0) for name in self.rig.model.states.names])

    def known(self, u: Array) -> Array:
        """Of all plant inputs (m,) those that the local model has, in its order."""
        return u[[self.rig.plant.inputs.index(name) for name in self.rig.model.inputs.names]]

    def plant(self, time: float, x: Array, u: Array) -> Array:
        """The plant's signals, absolute, for input deviations u; raises PlantError."""
        plant, point = self.rig.plant, self.rig.point
        outputs = None
        values = []
        for name in self.names:
            if name in plant.states:
                values.append(float(x[plant.states.index(name)]))
                continue
            if outputs is None:
                outputs = plant.measure(point.time + self.tick(time), x, point.u + u)
            values.append(float(outputs[plant.outputs.index(name)]))
        return np.array(values)

    def course(self, time: float) -> Array:
        """The signals on the trimmed course, absolute; raises PlantError."""
        point = self.rig.point
        if not point.drift.any():
            return np.array([point.value(name) for name in self.names])
        return self.plant(time, point.x + point.drift * self.tick(time), np.zeros(self.rig.plant.m))

    def model(self, x: Array, u: Array) -> Array:
        """The local model's signals for its own states x and all plant inputs, as deviations; NaN for what it lacks."""
        model, u = self.rig.model, self.known(u)
        values = []
        for name in self.names:
            if name in model.states:
                values.append(float(x[model.states.index(name)]))
            elif name not in model.outputs:
                values.append(float("nan"))
            else:
                row = model.outputs.index(name)
                values.append(float(model.C[row] @ x + model.D[row] @ u))
        return np.array(values)


def model_course(readout: Readout) -> list[Array]:
    """The local model's states where each interval begins, and at the end of the last, (n,) each."""
    x = readout.model_offset()
    starts = [x]
    for k in range(readout.drive.intervals):
        x = model_within(readout, x, k, readout.nodes)
        starts.append(x)
    return starts


def model_within(readout: Readout, x: Array, k: int, node: int) -> Array:
    """The local model's states at a node of interval k that begins with x."""
    model = readout.rig.model
    if readout.rig.plant.step is not None:
        for j in range(node):
            x = model.A @ x + model.B @ readout.known(readout.inputs(k, j / readout.nodes))
        return x
    return model_after(readout, x, k, readout.drive.every * node / readout.nodes)


def model_after(readout: Readout, x: Array, k: int, local: float) -> Array:
    """The local model's states `local` after interval k began with x.

    States, inputs and slopes of the inputs are one vector that a single exponential carries on.
    """
    model, every = readout.rig.model, readout.drive.every
    n, m = model.B.shape
    start, end = readout.known(readout.inputs(k, 0.0)), readout.known(readout.inputs(k, 1.0))
    if readout.drive.course == "held":
        end = start
    if local not in readout.exponentials:
        generator = np.zeros((n + 2 * m, n + 2 * m))
        generator[:n, :n], generator[:n, n : n + m] = model.A, model.B
        generator[n : n + m, n + m :] = np.eye(m)
        readout.exponentials[local] = np.asarray(expm(generator * local), dtype=np.float64)[:n]
    vector = np.concatenate([x, start, (end - start) / every])
    carried: Array = readout.exponentials[local] @ vector
    return carried
