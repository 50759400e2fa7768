"""The equations of a trim: which numbers are unknown, what must vanish, and in what sizes both are measured.

Unknowns are divided by the nominal size of their signal and residuals by the nominal size of their state (a time unit)
or output, so that "small" means the same everywhere and one accuracy serves all. `Slack` unknowns relax single
equations: the diagnosis of a failed trim and limits on outputs are then ordinary unknowns with bounds.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from ..core.bound import BoundPlant
from ..core.case import Interval, TrimAsk
from ..core.model import Array, OperatingPoint, frozen_array

Indices = NDArray[np.intp]
EVERYWHERE = Interval()


@dataclass(slots=True)
class Tally:
    """Counts what a search cost. Not frozen: the search adds to it."""

    calls: int = 0  # columns of states and inputs that were evaluated
    failed: int = 0  # of these, columns at which the plant raised or was not finite


@dataclass(frozen=True, slots=True)
class Slack:
    """An unknown that is subtracted from equation `row`, in that equation's scaled size, within low..high."""

    row: int
    low: float = -np.inf
    high: float = np.inf


@dataclass(frozen=True, slots=True, eq=False)
class Equations:
    """F(z) = 0 in scaled unknowns z.

    z (q,): first the `unknowns` (states, then inputs, each divided by its size), then one value a slack.
    F (r,): rates of `rate_rows` minus `prescribed` (for a difference equation: next state minus state minus
    prescribed), then outputs `output_rows` minus `wanted`; all divided by the nominal size of their signal.
    """

    plant: BoundPlant
    time: float
    base_x: Array  # (n,) values of the states that are not unknown
    base_u: Array
    unknowns: tuple[str, ...]
    sizes: Array  # (v,) nominal sizes of the unknowns
    low: Array  # (v,) bounds in the plant's units
    high: Array
    rate_rows: Indices
    prescribed: Array  # plant's units a time unit (or a step)
    rate_sizes: Array
    output_rows: Indices
    wanted: Array
    output_sizes: Array
    slacks: tuple[Slack, ...] = ()
    tally: Tally = field(default_factory=Tally)
    box: tuple[Array, Array] = field(init=False)  # bounds of z, both (q,)
    found_x: Indices = field(init=False)  # rows of the unknown states, then of the unknown inputs
    found_u: Indices = field(init=False)

    def __post_init__(self) -> None:
        states, inputs = self.plant.states, self.plant.inputs
        low = np.concatenate([self.low / self.sizes, [slack.low for slack in self.slacks]])
        high = np.concatenate([self.high / self.sizes, [slack.high for slack in self.slacks]])
        rows_x = [states.index(name) for name in self.unknowns if name in states]
        rows_u = [inputs.index(name) for name in self.unknowns if name not in states]
        object.__setattr__(self, "box", (low, high))
        object.__setattr__(self, "found_x", np.array(rows_x, dtype=np.intp))
        object.__setattr__(self, "found_u", np.array(rows_u, dtype=np.intp))

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the equations: the state whose rate must vanish, or the output that is held."""
        states, outputs = self.plant.states.names, self.plant.outputs.names
        return tuple(states[i] for i in self.rate_rows) + tuple(outputs[i] for i in self.output_rows)

    @property
    def all_unknowns(self) -> tuple[str, ...]:
        """Names of the entries of z: the unknowns, then for each slack the name of its equation."""
        return self.unknowns + tuple(self.names[slack.row] for slack in self.slacks)

    @property
    def count(self) -> int:
        """Number of unknowns q, slacks included."""
        return len(self.unknowns) + len(self.slacks)

    def values(self, z: Array) -> tuple[Array, Array]:
        """States (n,) or (n, N) and inputs (m,) or (m, N) that z (q,) or (q, N) stands for, inside their bounds."""
        v, tail = len(self.unknowns), (1,) * (z.ndim - 1)
        given = z[:v] * self.sizes.reshape(-1, *tail)
        # dividing and multiplying by a size can leave a bound by one bit, and the plant may be undefined there
        given = np.clip(given, self.low.reshape(-1, *tail), self.high.reshape(-1, *tail))
        x = np.repeat(self.base_x.reshape(-1, *tail), z.shape[1], axis=1) if tail else self.base_x.copy()
        u = np.repeat(self.base_u.reshape(-1, *tail), z.shape[1], axis=1) if tail else self.base_u.copy()
        x[self.found_x], u[self.found_u] = given[: self.found_x.size], given[self.found_x.size :]
        return x, u

    def scaled(self, point: OperatingPoint) -> Array:
        """z without slacks (v,) of an operating point."""
        return np.array([point.value(name) for name in self.unknowns]) / self.sizes

    def residual(self, z: Array) -> Array:
        """F (r, N) at the columns of z (q, N); a column where a call of the plant fails is NaN."""
        x, u = self.values(z)
        rates = self.plant.rates_or_nan(self.time, x, u)
        outputs = self.plant.measure_or_nan(self.time, x, u) if self.output_rows.size else np.zeros((self.plant.k, 0))
        rows = self._rows(x, rates, outputs)
        for position, slack in enumerate(self.slacks):
            rows[slack.row] -= z[len(self.unknowns) + position]
        failed = ~np.isfinite(rows).all(axis=0)
        rows[:, failed] = np.nan
        self.tally.calls += z.shape[1]
        self.tally.failed += int(failed.sum())
        return rows

    def point(self, z: Array) -> OperatingPoint:
        """The operating point at z (q,), with residuals re-evaluated by single calls and without any slack.

        Raises PlantError where the plant cannot be called at it.
        """
        x, u = self.values(z)
        rates, outputs = self.plant.rates(self.time, x, u), self.plant.measure(self.time, x, u)
        rows = self._rows(x, rates, outputs)
        drift = np.zeros(self.plant.n)
        # what is asked to vanish is zero to the stated accuracy; only prescribed and free rates carry on
        left = rates - x if self.plant.step is not None else rates
        free = np.setdiff1d(np.arange(self.plant.n), self.rate_rows)
        drift[free] = left[free]
        drift[self.rate_rows] = self.prescribed
        return OperatingPoint(
            frozen_array(x + 0.0),  # no negative zeros in reports
            frozen_array(u + 0.0),
            frozen_array(outputs + 0.0),
            frozen_array(drift),
            self.time,
            self.plant.states,
            self.plant.inputs,
            self.plant.outputs,
            {name: float(value) for name, value in zip(self.names, rows, strict=True)},
        )

    def relaxed(self, *slacks: Slack) -> Equations:
        """The same equations with further slack unknowns."""
        return replace(self, slacks=self.slacks + slacks)

    def _rows(self, x: Array, rates: Array, outputs: Array) -> Array:
        tail = (1,) * (x.ndim - 1)
        change = rates - x if self.plant.step is not None else rates
        rows = (change[self.rate_rows] - self.prescribed.reshape(-1, *tail)) / self.rate_sizes.reshape(-1, *tail)
        if not self.output_rows.size:
            return np.array(rows)
        held = (outputs[self.output_rows] - self.wanted.reshape(-1, *tail)) / self.output_sizes.reshape(-1, *tail)
        return np.concatenate([rows, held])


def equations(
    plant: BoundPlant,
    ask: TrimAsk,
    envelope: Mapping[str, Interval],
    nominal: Mapping[str, float],
    time: float,
    *,
    unknowns: tuple[str, ...] | None = None,
    outputs: Mapping[str, float] | None = None,
) -> Equations:
    """The equations that `ask` states; `unknowns` and `outputs` replace what it finds and the outputs it holds.

    Raises KeyError for a name that the plant does not have.
    """
    states, inputs = plant.states, plant.inputs
    names = _in_plant_order(plant, ask.find if unknowns is None else unknowns)
    held = held_outputs(plant, ask) if outputs is None else outputs
    limits = {name: bounds(plant, envelope, name) for name in (*states.names, *inputs.names)}
    guess = {name: first_guess(ask, limits[name], name) for name in (*states.names, *inputs.names)}
    rows = np.array([i for i, name in enumerate(states.names) if name not in ask.free], dtype=np.intp)
    output_rows = [plant.outputs.index(name) for name in plant.outputs.names if name in held]
    return Equations(
        plant=plant,
        time=time,
        base_x=_floats(guess[name] for name in states.names),
        base_u=_floats(guess[name] for name in inputs.names),
        unknowns=names,
        sizes=_floats(nominal.get(name, 1.0) for name in names),
        low=_floats(limits[name].low for name in names),
        high=_floats(limits[name].high for name in names),
        rate_rows=rows,
        prescribed=_floats(ask.rates.get(states.names[i], 0.0) for i in rows),
        rate_sizes=_floats(nominal.get(states.names[i], 1.0) for i in rows),
        output_rows=np.array(output_rows, dtype=np.intp),
        wanted=_floats(held[plant.outputs.names[i]] for i in output_rows),
        output_sizes=_floats(nominal.get(plant.outputs.names[i], 1.0) for i in output_rows),
    )


def _floats(values: Iterable[float]) -> Array:
    return np.array(list(values), dtype=np.float64)


def bounds(plant: BoundPlant, envelope: Mapping[str, Interval], name: str) -> Interval:
    """Where a state, input or output may be: the envelope met with the plant's domain."""
    low, high = plant.plant.domain.get(name, (None, None))
    domain = Interval(-np.inf if low is None else low, np.inf if high is None else high)
    return envelope.get(name, EVERYWHERE).meet(domain)


def first_guess(ask: TrimAsk, limits: Interval, name: str) -> float:
    """Held value, else `start`, else the middle of the limits, else the allowed value nearest to zero."""
    if name in ask.hold:
        return ask.hold[name]
    if name in ask.start:
        return ask.start[name]
    if limits.bounded:
        return 0.5 * (limits.low + limits.high)
    return min(max(0.0, limits.low), limits.high)


def outputs_outside(
    plant: BoundPlant,
    ask: TrimAsk,
    envelope: Mapping[str, Interval],
    nominal: Mapping[str, float],
    point: OperatingPoint,
) -> dict[str, float]:
    """Outputs of `point` beyond their limits, and the limit that each crosses.

    Held outputs stand where they were asked to; limits are kept to within the accuracy that equations are solved to.
    """
    crossed = {}
    for name in plant.outputs.names:
        if name in plant.states or name in ask.hold or name not in envelope:
            continue
        limits, value, slack = envelope[name], point.value(name), ask.accuracy * nominal.get(name, 1.0)
        if value > limits.high + slack or value < limits.low - slack:
            crossed[name] = limits.high if value > limits.high else limits.low
    return crossed


def with_output_limits(
    base: Equations,
    ask: TrimAsk,
    envelope: Mapping[str, Interval],
    nominal: Mapping[str, float],
    *,
    unknowns: tuple[str, ...],
    loose: bool,
) -> Equations:
    """The equations with an unknown for each output that has limits, so that the box keeps it inside.

    With `loose` the held outputs may move as well: their slack is the distance from the value asked.
    """
    plant, held = base.plant, held_outputs(base.plant, ask)
    watched = [
        name for name in plant.outputs.names if name not in plant.states and name not in held and name in envelope
    ]
    outputs = {**held, **dict.fromkeys(watched, 0.0)}
    wide = equations(plant, ask, envelope, nominal, base.time, unknowns=unknowns, outputs=outputs)
    slacks = []
    for i, output in enumerate(wide.output_rows):
        name = plant.outputs.names[output]
        if loose or name in watched:
            limits, size, wanted = envelope.get(name, EVERYWHERE), wide.output_sizes[i], wide.wanted[i]
            row = len(wide.rate_rows) + i
            slacks.append(Slack(row, (limits.low - wanted) / size, (limits.high - wanted) / size))
    return replace(wide, slacks=tuple(slacks), tally=base.tally)


def held_outputs(plant: BoundPlant, ask: TrimAsk) -> dict[str, float]:
    """Held values that are outputs only; an output with a state's name is held as that state."""
    return {name: value for name, value in ask.hold.items() if name not in plant.states and name not in plant.inputs}


def _in_plant_order(plant: BoundPlant, names: tuple[str, ...]) -> tuple[str, ...]:
    order = (*plant.states.names, *plant.inputs.names)
    for name in names:
        if name not in order:
            raise KeyError(name)
    return tuple(name for name in order if name in names)
