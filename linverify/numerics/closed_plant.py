"""A plant with controllers closed around it and actuators before it, as a plant.

Its states are the plant's, then those of actuators and loops; its inputs the plant's (what a drive adds to the command)
and set points; its outputs the plant's and the inputs that a loop moves, behind the actuator. A moved input is so an
input and an output of one name, and a set point is called like the signal that is measured: both have the same trimmed
value, and reports speak the names of the spec.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray

from ..core.bound import BoundPlant
from ..core.errors import PlantError
from ..core.model import Array, LocalModel, OperatingPoint, frozen_array
from ..core.plant import Plant
from ..core.signals import Signals
from .closed_model import reading
from .instants import Update
from .whole import Whole
from .wiring import Wiring

Rows = NDArray[np.intp]


class ClosedPlant(Plant):
    """A plant that one name may stand twice in: as an input, and as the output or state that it moves or asks for."""

    names_repeat: ClassVar[bool] = True


@dataclass(slots=True, eq=False)
class _Inside:
    """The plant behind its border, as a wiring sees it; measured signals are deviations from the trimmed course.

    Not frozen: `feed` is set once.
    """

    bound: BoundPlant
    point: OperatingPoint
    measured_names: tuple[str, ...]
    model: LocalModel | None
    n: int = field(init=False)
    feed: Array = field(init=False)
    sizes: Array = field(init=False)
    direct: bool = field(init=False)
    states: tuple[Rows, Rows] = field(init=False)  # rows of the measured, and of the plant's states
    outputs: tuple[Rows, Rows] = field(init=False)
    domain: list[tuple[str, int, float, float]] = field(init=False)
    drifts: bool = field(init=False)

    def __post_init__(self) -> None:
        bound, names = self.bound, self.measured_names
        self.n, self.drifts = bound.n, bool(self.point.drift.any())
        self.states, self.outputs = _places(names, bound.states), _places(names, bound.outputs, bound.states)
        self.direct = len(self.outputs[0]) > 0
        self.sizes = np.abs([self.point.value(name) for name in names]) if names else np.zeros(0)
        self.feed = np.zeros((len(names), bound.m))
        if self.model is not None:
            columns = [bound.inputs.index(name) for name in self.model.inputs.names]
            for row in self.outputs[0]:
                self.feed[row, columns] = reading(self.model, names[row])[1]
        self.domain = [
            (name, bound.inputs.index(name), -np.inf if low is None else low, np.inf if high is None else high)
            for name, (low, high) in bound.plant.domain.items()
            if name in bound.inputs
        ]

    def rates(self, t: float, x: Array, u: Array) -> Array:
        """Rates (n, N); raises PlantError, also where an input leaves the plant's domain."""
        for name, row, low, high in self.domain:
            if (u[row] < low).any() or (u[row] > high).any():
                raise PlantError(f"{name} is moved out of the plant's domain")
        return self.bound.rates_within(t, x, u)

    def measured(self, t: float, x: Array, u: Array) -> Array:
        """Deviations from the trimmed course, (q, N)."""
        rows, places = self.outputs
        if not len(rows):
            return self._of_states(t, x)
        still = self._still(t)
        outputs = self.bound.measure_within(t, x, u).take(places, axis=0) - still
        if len(rows) == len(self.measured_names):
            return np.asarray(outputs)
        found = np.empty((len(self.measured_names), x.shape[1]))
        found[rows], found[self.states[0]] = outputs, self._of_states(t, x)
        return found

    def _of_states(self, t: float, x: Array) -> Array:
        places = self.states[1]
        return np.asarray(x.take(places, axis=0) - self._course(t)[places, np.newaxis])

    def _course(self, t: float) -> Array:
        point = self.point
        return point.x + point.drift * (t - point.time) if self.drifts else point.x

    def _still(self, t: float) -> Array:
        """Measured outputs on the trimmed course, (r, 1)."""
        point = self.point
        y = self.bound.measure(t, self._course(t), point.u) if self.drifts else point.y
        return y[self.outputs[1], np.newaxis]


@dataclass(frozen=True, slots=True, eq=False)
class Closed:
    """The plant with its loops closed, its trimmed point, and what sampled controllers do to its states."""

    plant: Plant
    point: OperatingPoint
    updates: tuple[Update, ...]
    nominal: Mapping[str, float]


def closed_plant(bound: BoundPlant, point: OperatingPoint, wiring: Wiring, model: LocalModel | None) -> Closed:
    """`bound` with `wiring` around it; model: its slopes, for what is algebraic, None where nobody knows them.

    Raises ValueError where the loop is ill-posed.
    """
    whole = Whole(wiring, _Inside(bound, point, wiring.measured, model))
    inside, n = bound.plant, bound.n
    spare = tuple(name for name in wiring.moved if name not in bound.outputs)
    rows = [bound.inputs.index(name) for name in spare]

    def dynamics(t: float, x: Array, u: Array, p: Mapping[str, float]) -> Array:
        wide, w = _wide(x), _wide(u)
        return whole.rates(t, wide, w).reshape(x.shape)

    def measurement(t: float, x: Array, u: Array, p: Mapping[str, float]) -> Array:
        wide, w = _wide(x), _wide(u)
        inputs = whole.inputs(t, wide, w)
        y = np.concatenate([bound.measure_within(t, wide[:n], inputs), inputs[rows]])
        return y.reshape((len(y), *x.shape[1:]))

    states = {**inside.states, **dict.fromkeys(wiring.added, "")}
    inputs = {**inside.inputs, **dict(_set_points(wiring, inside))}
    outputs = {**(inside.outputs or {}), **{name: inside.inputs[name] for name in spare}}
    plant = ClosedPlant(
        states=states,
        inputs=inputs,
        outputs=outputs,
        parameters=inside.parameters,
        dynamics=dynamics,
        measurement=measurement,
        time_unit=inside.time_unit,
        domain={name: sides for name, sides in inside.domain.items() if name in inside.states},
        step=inside.step,
    )
    return Closed(
        plant,
        _point(point, wiring, plant, rows),
        tuple(Update(instants, jump) for instants, jump in whole.updates()),
        {},
    )


def _places(names: tuple[str, ...], signals: Signals, others: Signals | None = None) -> tuple[Rows, Rows]:
    """Where `names` that are among `signals`, and not among `others`, stand in both."""
    rows = [at for at, name in enumerate(names) if name in signals and (others is None or name not in others)]
    return np.array(rows, dtype=np.intp), np.array([signals.index(names[at]) for at in rows], dtype=np.intp)


def _wide(values: Array) -> Array:
    return values[:, np.newaxis] if values.ndim == 1 else values


def _set_points(wiring: Wiring, plant: Plant) -> list[tuple[str, str]]:
    return [(signal, plant.unit(signal)) for _, signal in wiring.points]


def _point(point: OperatingPoint, wiring: Wiring, plant: Plant, moved: list[int]) -> OperatingPoint:
    """The same point with everything that is added at rest."""
    rests = wiring.rests
    return replace(
        point,
        x=frozen_array(np.concatenate([point.x, rests])),
        u=frozen_array(np.concatenate([point.u, wiring.references])),
        y=frozen_array(np.concatenate([point.y, point.u[moved]])),
        drift=frozen_array(np.concatenate([point.drift, np.zeros(len(rests))])),
        states=plant.state_signals,
        inputs=plant.input_signals,
        outputs=plant.output_signals,
    )
