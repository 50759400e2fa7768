"""A wiring of loops and actuators with its inside, at one instant: what is measured, given and moved agrees.

What is linear in the diagram is one matrix product (`linear_part`); ranges and rates of actuators come behind it, and
an algebraic loop is solved for only where there can be one.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np

from ..core.errors import UnsolvedError
from ..core.model import Array
from .instants import SNAP, Instants, common_multiple
from .linear_part import Answer, LinearPart, linear_part
from .looped import Event
from .wiring import Wiring

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
class Settled:
    """One instant: measured deviations (q, N), what is left of the commands (m, N), inputs of the inside (m, N), and
    the rates (next values) of the controllers' states. seen: None where nothing depends on it.
    """

    seen: Array | None
    commands: Array
    inputs: Array
    controllers: Array


@dataclass(frozen=True, slots=True, eq=False)
class Whole:
    """A wiring with its inside. Raises ValueError where the loop is algebraic and has no solution near trim.

    gain (m, q): how the inputs answer at once to the measured signals, without limits; echo: whether they do at all.
    """

    wiring: Wiring
    inner: Inner
    part: LinearPart = field(init=False)
    gain: Array = field(init=False)
    solver: Array = field(init=False)
    echo: bool = field(init=False)

    def __post_init__(self) -> None:
        wiring, plain = self.wiring, self.wiring.unlimited()
        m, slow = len(wiring.inputs), len(wiring.slow)

        def answer(a: Array, w: Array, y: Array) -> Array:
            flow = plain.flow(a, w, y)
            return np.concatenate([flow.wanted - w[:m], plain.added_rates(a, y, flow)[slow:]])

        part = self.linear(answer)
        gain = part.of_seen[:m].copy()
        gain[wiring.lagging] = 0.0
        loop = np.eye(m) - gain @ self.inner.feed
        if not np.linalg.cond(loop) < 1e12:
            names = ", ".join(one.name for one in wiring.loops)
            raise ValueError(
                f"the loop through {names} is algebraic and ill-posed: what the controller gives at once cancels itself"
            )
        object.__setattr__(self, "part", part)
        object.__setattr__(self, "gain", gain)
        object.__setattr__(self, "solver", np.linalg.inv(loop))
        object.__setattr__(self, "echo", bool(gain.any()))

    def linear(self, answer: Answer) -> LinearPart:
        """The matrices of a linear answer of the unlimited wiring."""
        wiring = self.wiring
        sizes = (len(wiring.slow), len(wiring.added), len(wiring.inputs), len(wiring.points), len(wiring.measured))
        return linear_part(answer, *sizes)

    def split(self, x: Array) -> tuple[Array, Array]:
        """States of the inside, and the added ones."""
        return x[: self.inner.n], x[self.inner.n :]

    def deviations(self, a: Array, w: Array) -> tuple[Array, Array]:
        """Of the added states those of the controllers, and the set points, as deviations from trim."""
        wiring = self.wiring
        points = w[len(wiring.inputs) :]
        return a[len(wiring.slow) :], points - wiring.references[:, np.newaxis] if len(points) else points

    def settle(self, t: float, x: Array, a: Array, w: Array, ask: bool = True) -> Settled:
        """All signals at one instant; ask: whether the measurements are needed beyond what the inputs hold of them.

        Where the inputs depend on the measurements at once, and these on the inputs, both are solved for by Newton's
        method with the slopes at trim, put right as it goes (Broyden 1965). Raises UnsolvedError where none is found.
        """
        free, m = self.part.free(*self.deviations(a, w)), len(self.wiring.inputs)
        free[:m] += w[:m]
        if not self.echo:
            found = self._with(a, free, None)
            if not ask or self.part.blind:
                return found
            return self._with(a, free, self.inner.measured(t, x, found.inputs))
        seen = self.inner.measured(t, x, w[:m])
        found = self._with(a, free, seen)
        # mostly the measurements do not hold the inputs at once: they are the same with the inputs that they lead to
        if not self.inner.direct or (self.inner.measured(t, x, found.inputs) == seen).all():
            return found
        return self._solved(t, x, a, free, found.inputs)

    def measured(self, t: float, x: Array, a: Array, w: Array) -> Array:
        """Measured deviations (q, N)."""
        found = self.settle(t, x, a, w, ask=False)
        return self.inner.measured(t, x, found.inputs) if found.seen is None else found.seen

    def _with(self, a: Array, free: Array, y: Array | None) -> Settled:
        m = len(self.wiring.inputs)
        rows = free if y is None else free + self.part.of_seen @ y
        commands = self.wiring.ranged(rows[:m])
        return Settled(y, commands, self.wiring.positions(a, commands), rows[m:])

    def _solved(self, t: float, x: Array, a: Array, free: Array, u: Array) -> Settled:
        inverse, before = np.tile(self.solver, (x.shape[1], 1, 1)), None
        for _ in range(MOST):
            y = self.inner.measured(t, x, u)
            found = self._with(a, free, y)
            gap = found.inputs - u
            size = np.abs(u) + np.abs(self.gain) @ (np.abs(y) + self.inner.sizes[:, np.newaxis])
            if np.all(np.abs(gap) <= EXACT * size):
                break
            if before is not None:
                _corrected(inverse, before, gap)
            step = np.einsum("nij,jn->in", inverse, gap)
            before, u = (step, gap), u + step
        if not np.all(np.abs(gap) <= GOOD * size):
            names = ", ".join(one.name for one in self.wiring.loops)
            raise UnsolvedError(f"the algebraic loop through {names} has no solution that was found")
        return found

    def rates(self, t: float, x: Array, w: Array) -> Array:
        """Rates (next values) of all states, (n + na, N)."""
        inside, a = self.split(x)
        found = self.settle(t, inside, a, w)
        parts = [self.inner.rates(t, inside, found.inputs)]
        if self.wiring.slow:
            parts.append(self.wiring.slow_rates(a, found.commands))
        return np.concatenate([*parts, found.controllers])

    def inputs(self, t: float, x: Array, w: Array) -> Array:
        """What arrives at the inside, (m, N)."""
        inside, a = self.split(x)
        return self.settle(t, inside, a, w, ask=False).inputs

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
                found.append((Instants(common, time), _jump(self, due)))
        return found


@dataclass(frozen=True, slots=True, eq=False)
class _Jump:
    """What happens at one instant: everything is measured just before, then each event acts, in order.

    part: the controllers' states after it.
    """

    whole: Whole
    part: LinearPart

    def __call__(self, t: float, x: Array, w: Array) -> Array:
        whole, after = self.whole, np.array(x)
        inside, a = whole.split(x)
        with np.errstate(all="ignore"):  # of the plant, when it is measured; what is not finite is seen
            states = self.part.free(*whole.deviations(a, w))
            if not self.part.blind:
                states += self.part.of_seen @ whole.measured(t, inside, a, w)
        after[len(x) - len(states) :] = states
        return after


def _jump(whole: Whole, due: tuple[tuple[Event, int], ...]) -> _Jump:
    plain = whole.wiring.unlimited()

    def answer(a: Array, w: Array, y: Array) -> Array:
        after = a.copy()
        for event, at in due:
            one, now = plain.controlled[at], after.copy()
            if event.kind == "hold":
                one.hold(now, event.channel, after)
            elif event.kind == "read":
                one.read(now, y, event.channel, after)
            else:
                one.sample(now, plain.flow(now, w, y).errors[at], after)
        return after[len(plain.slow) :]

    return _Jump(whole, whole.linear(answer))


def _corrected(inverse: Array, before: tuple[Array, Array], gap: Array) -> None:
    """Broyden's update of the inverse slopes (N, m, m) of gap(u), by what the last step did to the gap."""
    step, old = before
    change = old - gap  # the slopes of -gap
    along = np.einsum("nij,jn->in", inverse, change)
    size = np.sum(step * along, axis=0)
    row = np.einsum("in,nij->jn", step, inverse)
    scale = np.divide(1.0, size, out=np.zeros_like(size), where=np.abs(size) > 1e-300)
    inverse += np.einsum("in,jn->nij", (step - along) * scale, row)
