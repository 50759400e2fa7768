"""How controllers, actuators and dead times are wired around a plant or a local model: one diagram for both.

The states of the whole are those of what is inside, then those of the actuators, then those of each loop. Everything
is computed from the same signal flow: set points less measurements, through the controllers, onto what they move,
through the actuators. With a linear inside and without limits the whole is linear, and its matrices are what the
diagram answers to unit vectors (`closed_model`); with the plant inside it is the closed plant (`closed_plant`).
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from ..core.delivered import Delays
from ..core.errors import PlantError
from ..core.loop import Actuator, Loop
from ..core.model import Array
from .instants import SNAP, Instants, common_multiple
from .looped import Controlled, Event, controlled

MOST = 40  # corrections of an algebraic loop before it counts as without solution
EXACT, GOOD = 1e-13, 1e-9  # of the sizes that enter: where corrections end, and what must be reached


Jumps = Callable[[float, Array, Array], Array]  # (t, x (n, N), w (m, N)) -> x (n, N)


class Inner(Protocol):
    """What is inside: x (n, N), u (m, N) absolute for a plant, deviations for a local model.

    measured: deviations of the wiring's `measured` signals from the trimmed course, (q, N); feed (q, m): how much of u
    they hold at once, near trim; sizes (q,): magnitudes that their rounding goes with; direct: whether they may hold
    inputs at once at all.
    """

    n: int
    feed: Array
    sizes: Array
    direct: bool

    def rates(self, t: float, x: Array, u: Array) -> Array:
        """Rates, or next states, (n, N)."""

    def measured(self, t: float, x: Array, u: Array) -> Array:
        """Deviations of the measured signals, (q, N)."""


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
        commands = self._ranged(wanted)
        return Flow(wanted, commands, self._positions(a, commands), tuple(errors), tuple(given))

    def _points(self, w: Array) -> dict[str, Array]:
        points = {one.name: np.zeros((len(one.measures), w.shape[1])) for one in self.loops}
        for at, (loop, signal) in enumerate(self.points):
            points[loop][self._row(loop, signal)] += w[at] - self.references[at]
        return points

    def _row(self, loop: str, signal: str) -> int:
        return next(one for one in self.loops if one.name == loop).measures.index(signal)

    def _ranged(self, wanted: Array) -> Array:
        if not self.limits:
            return wanted
        found = wanted.copy()
        for at, name in enumerate(self.inputs):
            if name in self.actuators:
                found[at] = np.clip(wanted[at], self.actuators[name].low, self.actuators[name].high)
        return found

    def _positions(self, a: Array, commands: Array) -> Array:
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
        return np.clip(change, -most, most)

    def added_rates(self, a: Array, y: Array, flow: Flow) -> Array:
        """Rates (next values) of the added states, (na, N)."""
        found = np.zeros_like(a) if self.step is None else a.copy()
        for state, at in enumerate(self.slow):
            actuator, gap = self.actuators[self.inputs[at]], flow.commands[at] - a[state]
            if self.step is not None:
                share = -np.expm1(-self.step / actuator.lag) if actuator.lag > 0.0 else 1.0
                found[state] += self._slewed(actuator, share * gap)
            else:
                rate = gap / actuator.lag
                found[state] = np.clip(rate, -actuator.rate, actuator.rate) if self.limits else rate
        for one, error, raw in zip(self.controlled, flow.errors, flow.given, strict=True):
            if one.loop.sample is None:
                one.rates(a, error, raw, found)
                one.hear(a, y, found)
        return found

    def gain(self) -> Array:
        """How the inputs of the inside answer at once to the measured signals, without limits, (m, q)."""
        free = _unlimited(self)
        q, na = len(self.measured), len(self.added)
        width = np.zeros((len(self.inputs) + len(self.points), q))
        width[: len(self.inputs)] += self.trims[:, np.newaxis]
        width[len(self.inputs) :] += self.references[:, np.newaxis]
        rest = np.broadcast_to(self.rests[:, np.newaxis], (na, q))
        still = free.flow(rest, width, np.zeros((q, q))).inputs
        return np.asarray(free.flow(rest, width, np.eye(q)).inputs - still)


def _unlimited(wiring: Wiring) -> Wiring:
    if not wiring.limits:
        return wiring
    return Wiring(
        wiring.inputs, wiring.trims, wiring.loops, wiring.actuators, wiring.measured, wiring.points,
        wiring.references, wiring.delays, wiring.step, False,
    )  # fmt: skip


@dataclass(frozen=True, slots=True, eq=False)
class Whole:
    """A wiring with its inside. Raises ValueError where the loop is algebraic and has no solution near trim."""

    wiring: Wiring
    inner: Inner
    gain: Array = field(init=False)
    solver: Array = field(init=False)

    def __post_init__(self) -> None:
        gain = self.wiring.gain()
        loop = np.eye(len(gain)) - gain @ self.inner.feed
        if not np.linalg.cond(loop) < 1e12:
            raise ValueError("the loop is algebraic and ill-posed: what the controller gives at once cancels itself")
        object.__setattr__(self, "gain", gain)
        object.__setattr__(self, "solver", np.linalg.inv(loop))

    def split(self, x: Array) -> tuple[Array, Array]:
        """States of the inside, and the added ones."""
        return x[: self.inner.n], x[self.inner.n :]

    def settle(self, t: float, x: Array, a: Array, w: Array) -> tuple[Array, Flow]:
        """Measured deviations (q, N) and the flow that agrees with them.

        Where the inputs depend on the measurements at once, and these on the inputs, both are solved for by Newton's
        method with the slopes at trim, put right as it goes (Broyden 1965). Raises PlantError where that finds nothing.
        """
        u = w[: len(self.gain)]
        y = self.inner.measured(t, x, u)
        flow = self.wiring.flow(a, w, y)
        # mostly the measurements do not hold the inputs at once: they are the same with the inputs that they lead to
        if not self.inner.direct or np.array_equal(self.inner.measured(t, x, flow.inputs), y):
            return y, flow
        u, inverse, before = flow.inputs, np.tile(self.solver, (x.shape[1], 1, 1)), None
        for _ in range(MOST):
            y = self.inner.measured(t, x, u)
            flow = self.wiring.flow(a, w, y)
            gap = flow.inputs - u
            size = np.abs(u) + np.abs(self.gain) @ (np.abs(y) + self.inner.sizes[:, np.newaxis])
            if np.all(np.abs(gap) <= EXACT * size):
                break
            if before is not None:
                _corrected(inverse, before, gap)
            step = np.einsum("nij,jn->in", inverse, gap)
            before, u = (step, gap), u + step
        if not np.all(np.abs(gap) <= GOOD * size):
            names = ", ".join(one.name for one in self.wiring.loops)
            raise PlantError(f"the algebraic loop through {names} has no solution that was found")
        return y, flow

    def rates(self, t: float, x: Array, w: Array) -> Array:
        """Rates (next values) of all states, (n + na, N)."""
        inside, a = self.split(x)
        y, flow = self.settle(t, inside, a, w)
        return np.concatenate([self.inner.rates(t, inside, flow.inputs), self.wiring.added_rates(a, y, flow)])

    def inputs(self, t: float, x: Array, w: Array) -> Array:
        """What arrives at the inside, (m, N)."""
        inside, a = self.split(x)
        return self.settle(t, inside, a, w)[1].inputs

    def updates(self) -> list[tuple[Instants, Jumps]]:
        """What sampled controllers do: all that happens at one instant is one jump (t, x, w) -> x.

        The pattern repeats after the common multiple of all sample times, which is the period of every jump.
        """
        events = [(event, at) for at, one in enumerate(self.wiring.controlled) for event in one.events()]
        # values are put into queues before anything acts on them; then outer loops come before inner ones
        events.sort(key=lambda pair: pair[0].kind != "read")
        if not events:
            return []
        common = common_multiple([event.instants.period for event, _ in events])
        times = sorted(time for event, _ in events for time in event.instants.until(common))
        found: list[tuple[Instants, Jumps]] = []
        for before, time in zip([-np.inf, *times], times, strict=False):
            if time - before > SNAP * common:
                due = tuple((event, at) for event, at in events if event.instants.due(time))
                found.append((Instants(common, time), _Jump(self, due)))
        return found


@dataclass(frozen=True, slots=True, eq=False)
class _Jump:
    """What happens at one instant: everything is measured just before, then each event acts, in order."""

    whole: Whole
    due: tuple[tuple[Event, int], ...]

    def __call__(self, t: float, x: Array, w: Array) -> Array:
        wiring, after = self.whole.wiring, np.array(x)
        inside, a = self.whole.split(after)
        y, _ = self.whole.settle(t, inside, a, w)
        for event, at in self.due:
            one, now = wiring.controlled[at], a.copy()
            if event.kind == "hold":
                one.hold(now, event.channel, a)
            elif event.kind == "read":
                one.read(now, y, event.channel, a)
            else:
                one.sample(now, wiring.flow(now, w, y).errors[at], a)
        return after


def _corrected(inverse: Array, before: tuple[Array, Array], gap: Array) -> None:
    """Broyden's update of the inverse slopes (N, m, m) of gap(u), by what the last step did to the gap."""
    step, old = before
    change = old - gap  # the slopes of -gap
    along = np.einsum("nij,jn->in", inverse, change)
    size = np.sum(step * along, axis=0)
    row = np.einsum("in,nij->jn", step, inverse)
    scale = np.divide(1.0, size, out=np.zeros_like(size), where=np.abs(size) > 1e-300)
    inverse += np.einsum("in,jn->nij", (step - along) * scale, row)


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
