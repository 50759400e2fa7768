"""One drive on one rig, instant by instant in plain numbers: for the second opinion, apart from the batched code."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from scipy.linalg import expm

from ..core.drive import Drive
from ..core.model import Array
from .pieces import Pieces
from .rig import Rig

Side = Literal["low", "high"]
SLACK = 1e-9  # of a limit's size: what lies on the limit is inside
JITTER = 1e-8  # of a sample time: rounding of instants
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
    """names: the compared signals, then what the envelope limits besides; pieces: where inputs change, and nodes."""

    rig: Rig
    drive: Drive
    pieces: Pieces
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

    @property
    def count(self) -> int:
        """Number of pieces of the whole drive."""
        return self.drive.intervals * self.pieces.count

    @property
    def nodes(self) -> int:
        """Sub-intervals of a piece."""
        return self.pieces.nodes

    def time(self, k: int, j: int) -> float:
        """Time of node j of piece k; the last node is the next piece's first, to the bit."""
        if j == self.nodes:
            k, j = k + 1, 0
        whole, part = divmod(k, self.pieces.count)
        begin = self.pieces.every * whole + float(sum(self.pieces.lengths[:part]))
        return begin + self.pieces.length(k) * j / self.nodes

    def tick(self, time: float) -> float:
        """`time` since the drive began as the plant counts it."""
        return time if self.rig.plant.step is None else float(round(time / self.rig.plant.step))

    def inputs(self, k: int, share: float) -> Array:
        """Deviations of all plant inputs (m,) in piece k after `share` of it, each after its dead time."""
        u = np.zeros(self.rig.plant.m)
        begin, length = self.time(k, 0), self.pieces.length(k)
        for column, name in enumerate(self.drive.inputs):
            late = self.rig.delays.inputs.get(name, 0.0)
            if not late and self.pieces.count == 1:
                u[self.rig.plant.inputs.index(name)] = self._course(k, column, share)
                continue
            # the middle of a piece tells the interval: its ends may miss an instant by rounding
            interval = int(np.floor((begin + 0.5 * length - late) / self.drive.every))
            if interval >= 0:
                within = (begin + share * length - late) / self.drive.every - interval
                u[self.rig.plant.inputs.index(name)] = self._course(interval, column, min(max(within, 0.0), 1.0))
        return u

    def _course(self, interval: int, column: int, share: float) -> float:
        here = float(self.drive.values[interval, column])
        if self.drive.course == "held":
            return here
        before = float(self.drive.values[interval - 1, column]) if interval else 0.0
        return before + share * (here - before)

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
            if name in model.outputs:  # before the state of that name: it is what the model says of the signal
                row = model.outputs.index(name)
                values.append(float(model.C[row] @ x + model.D[row] @ u))
            elif name in model.states:
                row = model.states.index(name)
                values.append(float(x[row]) + (0.0 if model.ahead is None else float(model.ahead[row] @ u)))
            else:
                values.append(float("nan"))
        return np.array(values)


def model_course(readout: Readout) -> list[Array]:
    """The local model's states where each piece has begun, and at the end of the last, (n,) each."""
    x = readout.model_offset()
    starts = []
    for k in range(readout.count):
        x = _model_jumped(readout, x, k)
        starts.append(x)
        x = model_within(readout, x, k, readout.nodes)
    return [*starts, x]


def acts(time: float, period: float, phase: float) -> bool:
    """Whether a sampled controller acts at `time`: at its phase and whole periods after it."""
    passed = (time - phase) / period
    return passed > -0.5 and abs(passed - np.floor(passed + 0.5)) < JITTER * max(1.0, abs(passed))


def model_last(readout: Readout, x: Array) -> Array:
    """The local model's states x at the end of the drive after what sampled controllers do there."""
    return _model_jumped(readout, x, readout.count - 1, 1.0)


def _model_jumped(readout: Readout, x: Array, k: int, share: float = 0.0) -> Array:
    u, time = readout.known(readout.inputs(k, share)), readout.time(k, readout.nodes if share else 0)
    for jump in readout.rig.model.jumps:
        if acts(time, jump.period, jump.phase):
            x = np.asarray(jump.A @ x + jump.B @ u)
    return x


def model_within(readout: Readout, x: Array, k: int, node: int) -> Array:
    """The local model's states at a node of piece k that begins with x."""
    return model_after(readout, x, k, readout.pieces.length(k) * node / readout.nodes)


def model_after(readout: Readout, x: Array, k: int, local: float) -> Array:
    """The local model's states `local` after piece k began with x.

    States, inputs and slopes of the inputs are one vector that a single exponential carries on. Between the instants of
    a sampled model a straight line stands for it.
    """
    if readout.rig.model.step is not None:
        return _sampled_after(readout, x, k, local / readout.pieces.length(k))
    model, length = readout.rig.model, readout.pieces.length(k)
    n, m = model.B.shape
    start, end = readout.known(readout.inputs(k, 0.0)), readout.known(readout.inputs(k, 1.0))
    if readout.drive.course == "held":
        end = start
    if local not in readout.exponentials:
        generator = np.zeros((n + 2 * m, n + 2 * m))
        generator[:n, :n], generator[:n, n : n + m] = model.A, model.B
        generator[n : n + m, n + m :] = np.eye(m)
        readout.exponentials[local] = np.asarray(expm(generator * local), dtype=np.float64)[:n]
    vector = np.concatenate([x, start, (end - start) / length])
    carried: Array = readout.exponentials[local] @ vector
    return carried


def _sampled_after(readout: Readout, x: Array, k: int, share: float) -> Array:
    model, steps = readout.rig.model, readout.nodes // readout.pieces.stride
    done = share * steps
    if abs(done - round(done)) <= SLACK * steps:
        done = float(round(done))
    for j in range(int(done)):
        x = model.A @ x + model.B @ readout.known(readout.inputs(k, j / steps))
    rest = done - int(done)
    if rest > 0.0:
        ahead = model.A @ x + model.B @ readout.known(readout.inputs(k, int(done) / steps))
        x = x + rest * (ahead - x)
    return x
