"""How controllers, actuators and dead times are wired around a plant or a local model: one diagram for both.

The states of the whole are those of what is inside, then those of the actuators, then those of each loop. Everything
is computed from the same signal flow: set points less measurements, through the controllers, onto what they move,
through the actuators. With a linear inside and without limits the whole is linear, and its matrices are what the
diagram answers to unit vectors (`closed_model`); with the plant inside it is the closed plant (`closed_plant`).
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from ..core.delivered import Delays
from ..core.loop import Actuator, Loop
from ..core.model import Array
from .looped import Controlled, controlled


@dataclass(frozen=True, slots=True, eq=False)
class Flow:
    """All signals at one instant, each with one column a drive.

    wanted, commands, inputs (m, N): what arrives at the actuators, what is left of it within their range, and what
    they give; errors, given: by loop, set points less measurements (k, N), and the controller's outputs (j, N).
    """

    wanted: Array
    commands: Array
    inputs: Array
    errors: tuple[Array, ...]
    given: tuple[Array, ...]


@dataclass(frozen=True, slots=True, eq=False)
class Wiring:
    """Loops, outer before inner, and actuators around an inside with `inputs` (m,) and trimmed values `trims` (m,).

    measured: every signal that a loop measures, each once; points: (loop, signal) of the set points that are inputs of
    the whole, behind the inside's own; references (s,): their trimmed values; step: of a difference equation; limits:
    whether rate and range of the actuators act.
    """

    inputs: tuple[str, ...]
    trims: Array
    loops: tuple[Loop, ...]
    actuators: Mapping[str, Actuator]
    measured: tuple[str, ...]
    points: tuple[tuple[str, str], ...]
    references: Array
    delays: Delays
    step: float | None
    limits: bool
    controlled: tuple[Controlled, ...] = field(init=False)
    slow: tuple[int, ...] = field(init=False)  # inputs whose actuator has a state
    ranges: tuple[tuple[int, Actuator], ...] = field(init=False)  # inputs whose actuator has a range

    def __post_init__(self) -> None:
        slow = tuple(
            at
            for at, name in enumerate(self.inputs)
            if name in self.actuators and (self.actuators[name].lag > 0.0 or np.isfinite(self.actuators[name].rate))
        )
        first, found = len(slow), []
        for loop in self.loops:
            found.append(controlled(loop, self.measured, self.delays, first))
            first = found[-1].last
        object.__setattr__(self, "controlled", tuple(found))
        object.__setattr__(self, "slow", slow)
        acting = [(at, self.actuators[name]) for at, name in enumerate(self.inputs) if name in self.actuators]
        ranges = tuple((at, one) for at, one in acting if np.isfinite([one.low, one.high]).any())
        object.__setattr__(self, "ranges", ranges)

    @property
    def lagging(self) -> list[int]:
        """Inputs that do not follow their commands at once, even without limits."""
        return [at for at in self.slow if self.step is None or self.actuators[self.inputs[at]].lag > 0.0]

    @property
    def added(self) -> tuple[str, ...]:
        """Names of the states behind those of the inside."""
        actuators = (f"{self.inputs[at]}.lag" for at in self.slow)
        return (*actuators, *(name for one in self.controlled for name in one.names))

    @property
    def rests(self) -> Array:
        """Values of the added states at trim: actuators at the trimmed inputs, everything else at zero."""
        found = np.zeros(len(self.added))
        found[: len(self.slow)] = self.trims[list(self.slow)]
        return found

    @property
    def moved(self) -> tuple[str, ...]:
        """Inputs of the inside that a loop moves, in its order."""
        names = {moved.name for loop in self.loops for moved in loop.moves if not moved.loop}
        return tuple(name for name in self.inputs if name in names)

    def flow(self, a: Array, w: Array, y: Array) -> Flow:
        """Added states a (na, N), inputs of the whole w (m + s, N), measured deviations y (q, N)."""
        m = len(self.inputs)
        wanted = np.array(w[:m])
        points = self._points(w[m:])
        errors, given = [], []
        for one in self.controlled:
            error = points[one.loop.name] - one.seen(a, y)
            raw, late = one.answer(a, error)
            for channel, moved in enumerate(one.loop.moves):
                if moved.loop in points:
                    points[moved.loop][self._row(moved.loop, moved.name)] += late[channel]
                else:  # a set point of a loop that the inside has closed already is an input of the inside
                    wanted[self.inputs.index(str(moved))] += late[channel]
            errors.append(error)
            given.append(raw)
        commands = self.ranged(wanted)
        return Flow(wanted, commands, self.positions(a, commands), tuple(errors), tuple(given))

    def _points(self, w: Array) -> dict[str, Array]:
        points = {one.name: np.zeros((len(one.measures), w.shape[1])) for one in self.loops}
        for at, (loop, signal) in enumerate(self.points):
            points[loop][self._row(loop, signal)] += w[at] - self.references[at]
        return points

    def _row(self, loop: str, signal: str) -> int:
        return next(one for one in self.loops if one.name == loop).measures.index(signal)

    def ranged(self, wanted: Array) -> Array:
        """Commands within the ranges of their actuators, (m, N)."""
        if not self.limits or not self.ranges:
            return wanted
        found = wanted.copy()
        for at, actuator in self.ranges:
            found[at] = _clipped(wanted[at], actuator.low, actuator.high)
        return found

    def positions(self, a: Array, commands: Array) -> Array:
        """What the actuators give, (m, N)."""
        if not self.slow:
            return commands
        inputs = commands.copy()
        for state, at in enumerate(self.slow):
            actuator = self.actuators[self.inputs[at]]
            inputs[at] = a[state]
            if self.step is not None and not actuator.lag > 0.0:  # it goes as far as it can within the step
                inputs[at] += self._slewed(actuator, commands[at] - a[state])
        return inputs

    def _slewed(self, actuator: Actuator, change: Array) -> Array:
        if not self.limits:
            return change
        most = actuator.rate * (self.step or 1.0)
        return _clipped(change, -most, most)

    def slow_rates(self, a: Array, commands: Array) -> Array:
        """Rates (next values) of the actuators' states, the first of those that are added."""
        found = np.empty((len(self.slow), a.shape[1]))
        for state, at in enumerate(self.slow):
            actuator, gap = self.actuators[self.inputs[at]], commands[at] - a[state]
            if self.step is not None:
                share = -np.expm1(-self.step / actuator.lag) if actuator.lag > 0.0 else 1.0
                found[state] = a[state] + self._slewed(actuator, share * gap)
            else:
                rate = gap / actuator.lag
                found[state] = _clipped(rate, -actuator.rate, actuator.rate) if self.limits else rate
        return found

    def added_rates(self, a: Array, y: Array, flow: Flow) -> Array:
        """Rates (next values) of the added states, (na, N)."""
        found = np.zeros_like(a) if self.step is None else a.copy()
        found[: len(self.slow)] = self.slow_rates(a, flow.commands)
        for one, error, raw in zip(self.controlled, flow.errors, flow.given, strict=True):
            if one.loop.sample is None:
                one.rates(a, error, raw, found)
                one.hear(a, y, found)
        return found

    def unlimited(self) -> Wiring:
        """The same diagram about a trim of zero and without limits, which is linear."""
        return replace(self, trims=np.zeros_like(self.trims), references=np.zeros_like(self.references), limits=False)


def _clipped(values: Array, low: float, high: float) -> Array:
    return np.asarray(np.minimum(np.maximum(values, low), high))


def ordered(loops: Iterable[Loop]) -> tuple[Loop, ...]:
    """Outer loops before those whose set points they move. Raises ValueError where they move each other in a ring."""
    waiting: list[Loop] = list(loops)
    found: list[Loop] = []
    while waiting:
        names = {one.name for one in waiting}
        driven = {
            moved.loop for one in waiting for moved in one.moves if moved.loop in names and moved.loop != one.name
        }
        free = [one for one in waiting if one.name not in driven]
        if not free or any(moved.loop == one.name for one in waiting for moved in one.moves):
            raise ValueError(f"loops move each other's set points in a ring: {', '.join(sorted(names))}")
        found.append(free[0])
        waiting.remove(free[0])
    return tuple(found)


def measured_by(loops: Sequence[Loop]) -> tuple[str, ...]:
    """Every signal that one of the loops measures, each once."""
    return tuple(dict.fromkeys(name for one in loops for name in one.measures))
