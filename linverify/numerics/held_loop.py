"""What a sampled controller sees of a plant: the plant between its instants, exactly, as a difference equation.

Everything that happens in one period of the slowest loop is written down as linear maps of what there was just before
it began: states, controllers, held outputs, values under way. Between two events the plant flows under held inputs,
which one matrix exponential gives exactly; so dead times that are a fraction of a sample, and loops of other sample
times inside, need no approximation. At one instant, in this order: what is measured is read, as it is just before
anything changes; values that were under way arrive; controllers act, the outer before the one whose set point it moves.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np

from ..core.model import Array
from .hold import held
from .interconnect import Block

SNAP = 1e-9  # of a sample time: nearer instants are one


@dataclass(frozen=True, slots=True, eq=False)
class Sampled:
    """A sampled loop: what it reads, every `step`, and what it moves, with the dead times on both ways.

    controller: inputs are set point minus measurement in the order of `reads`; moves: names of inputs of the plant, or
    `LOOP.set_point.NAME` of another sampled loop; late: dead time of each output; old: of each reading.
    """

    name: str
    step: float
    controller: Block
    reads: tuple[str, ...]
    moves: tuple[str, ...]
    late: tuple[float, ...]
    old: tuple[float, ...]


def whole(ratio: float) -> int | None:
    """`ratio` as a whole number, None where it is none."""
    nearest = round(ratio)
    return nearest if abs(ratio - nearest) <= SNAP * max(1.0, abs(ratio)) else None


def seen(
    plant: Block, outer: Sampled, inside: Sequence[Sampled], tick: float | None, looks: Sequence[float] = ()
) -> Block:
    """From what `outer` puts out to what it reads, every `outer.step`; the controller of `outer` is left out.

    looks: times within a sample at which the signals that `outer` reads are outputs too, as they are without dead time;
    they follow the readings, time by time, and are called `NAME at K`, K being the place of the time in `looks`.

    plant: continuous, or a difference equation of step `tick`; inside: sampled loops that are closed, outer before
    inner; their sample times divide that of `outer`, and `tick` divides all. Raises ValueError where they do not.
    """
    period = _Period(plant, outer, inside, tick, tuple(looks))
    lasting = len(plant.states) + sum(len(loop.controller.states) for loop in inside)
    return _pruned(period.run(), lasting)


@dataclass(slots=True, eq=False)
class _Line:
    """Values under way: `places` are states, the oldest first; one is taken `offset` into each `step`."""

    step: float
    delay: float
    places: list[int]
    target: int = -1  # of an output: the state that holds what has arrived

    def at(self, time: float, shift: float) -> bool:
        return whole((time - shift) / self.step) is not None


@dataclass(slots=True, eq=False)
class _Period:
    """One period of the outer loop. Mutable: `now` (N, N + m) is what each state is by now, as a linear function of
    the states just before the period and of what the outer loop puts out at its beginning."""

    plant: Block
    outer: Sampled
    inside: Sequence[Sampled]
    tick: float | None
    looks: tuple[float, ...]
    names: list[str] = field(default_factory=list)
    controllers: dict[str, slice] = field(default_factory=dict)
    outputs: dict[tuple[str, int], _Line] = field(default_factory=dict)
    readings: dict[tuple[str, int], _Line] = field(default_factory=dict)
    now: Array = field(default_factory=lambda: np.zeros((0, 0)))
    flows: dict[int, tuple[Array, Array]] = field(default_factory=dict)

    def __post_init__(self) -> None:
        self.names = list(self.plant.states)
        for loop in self.inside:
            self.controllers[loop.name] = self._added(loop.controller.states)
        for loop in self.loops:
            self._check(loop)
            for j, late in enumerate(loop.late):
                place = self._added([f"{loop.name}.held.{j + 1}"]).start
                self.outputs[loop.name, j] = self._line(f"{loop.name}.sent.{j + 1}", loop.step, late, place)
            for i, old in enumerate(loop.old):
                self.readings[loop.name, i] = self._line(f"{loop.name}.read.{i + 1}", loop.step, old)
        self.now = np.eye(len(self.names), len(self.names) + len(self.outer.moves))

    @property
    def loops(self) -> tuple[Sampled, ...]:
        return (self.outer, *self.inside)

    def _added(self, names: Iterable[str]) -> slice:
        start = len(self.names)
        self.names += names
        return slice(start, len(self.names))

    def _line(self, name: str, step: float, delay: float, target: int = -1) -> _Line:
        count = math.ceil(delay / step - SNAP)
        places = self._added(f"{name}.{slot + 1}" for slot in range(count))
        return _Line(step, delay, list(range(places.start, places.stop)), target)

    def _check(self, loop: Sampled) -> None:
        if whole(self.outer.step / loop.step) in (None, 0):
            raise ValueError(f"the sample time of {self.outer.name} is no whole multiple of that of {loop.name}")
        if self.tick is None:
            return
        for span in (loop.step, *loop.late, *loop.old):
            if whole(span / self.tick) is None:
                raise ValueError(
                    f"{loop.name} has a sample time or dead time of {span:.6g}, no whole multiple of the step "
                    f"{self.tick:.6g} of what it is closed around"
                )

    def run(self) -> Block:
        """The whole period."""
        read: list[Array] = []
        looked: dict[int, list[Array]] = {}
        times = self._times()
        for time, following in zip(times, [*times[1:], self.outer.step], strict=True):
            measured = self._measured()
            looked |= {k: [measured[name] for name in self.outer.reads] for k in self._looks_at(time)}
            self._arrive(time)
            for loop in self.loops:
                if whole(time / loop.step) is None or (loop is self.outer and time > 0.0):
                    continue
                values = [self._read(loop, i, measured) for i in range(len(loop.reads))]
                if loop is self.outer:
                    read = values
                    self._emit(loop, np.eye(len(loop.moves), self.now.shape[1], len(self.names)))
                else:
                    self._act(loop, values)
            self._latch(time, measured)
            self._flow(following - time)
        return self._block(read + [row for k in range(len(self.looks)) for row in looked[k]])

    def _looks_at(self, time: float) -> list[int]:
        return [k for k, look in enumerate(self.looks) if abs(look - time) <= SNAP * self.outer.step]

    def _block(self, read: list[Array]) -> Block:
        n = len(self.names)
        rows = np.array(read).reshape(len(read), self.now.shape[1])
        return Block(
            self.now[:, :n], self.now[:, n:], rows[:, :n], rows[:, n:],
            tuple(self.names), self.outer.moves,
            (*self.outer.reads, *(f"{name} at {k}" for k in range(len(self.looks)) for name in self.outer.reads)),
        )  # fmt: skip

    def _times(self) -> list[float]:
        """When something happens in one period, the beginning included."""
        period, found = self.outer.step, [0.0]
        spans = [(loop.step, 0.0) for loop in self.inside]
        spans += [(line.step, line.delay) for line in self.outputs.values()]
        spans += [(line.step, -line.delay) for line in self.readings.values()]
        if self.tick is not None:
            spans.append((self.tick, 0.0))
        found += self.looks
        for step, shift in spans:
            first = shift % step
            found += [first + k * step for k in range(round(period / step) + 1)]
        kept: list[float] = []
        for time in sorted(found):
            if time < period * (1.0 - SNAP) and (not kept or time - kept[-1] > SNAP * period):
                kept.append(time)
        return kept

    def _inputs(self) -> Array:
        """What the plant's inputs are held at, (m, N + m)."""
        found = np.zeros((len(self.plant.inputs), self.now.shape[1]))
        for loop in self.loops:
            for j, name in enumerate(loop.moves):
                if name in self.plant.inputs:
                    found[self.plant.inputs.index(name)] += self.now[self.outputs[loop.name, j].target]
        return found

    def _measured(self) -> Mapping[str, Array]:
        values = self.plant.C @ self.now[: len(self.plant.states)] + self.plant.D @ self._inputs()
        return dict(zip(self.plant.outputs, values, strict=True))

    def _arrive(self, time: float) -> None:
        # before anything is sent at this instant, so that the oldest is what has been under way for the dead time
        for line in self.outputs.values():
            if line.places and line.at(time, line.delay):
                self.now[line.target] = self.now[line.places[0]]

    def _read(self, loop: Sampled, i: int, measured: Mapping[str, Array]) -> Array:
        line = self.readings[loop.name, i]
        return np.array(self.now[line.places[0]] if line.places else measured[loop.reads[i]])

    def _act(self, loop: Sampled, values: Sequence[Array]) -> None:
        controller, places = loop.controller, self.controllers[loop.name]
        errors = np.array([self._asked(loop, i) - value for i, value in enumerate(values)])
        errors = errors.reshape(len(values), self.now.shape[1])
        state = np.array(self.now[places])
        self.now[places] = controller.A @ state + controller.B @ errors
        self._emit(loop, controller.C @ state + controller.D @ errors)

    def _asked(self, loop: Sampled, i: int) -> Array:
        """The set point of a reading: what other loops add to it by now."""
        found, name = np.zeros(self.now.shape[1]), f"{loop.name}.set_point.{loop.reads[i]}"
        for other in self.loops:
            for j, moved in enumerate(other.moves):
                if moved == name:
                    found += self.now[self.outputs[other.name, j].target]
        return found

    def _emit(self, loop: Sampled, values: Array) -> None:
        for j, value in enumerate(values):
            line = self.outputs[loop.name, j]
            if line.places:
                self._push(line, value)
            else:
                self.now[line.target] = value

    def _latch(self, time: float, measured: Mapping[str, Array]) -> None:
        for loop in self.loops:
            for i, name in enumerate(loop.reads):
                line = self.readings[loop.name, i]
                if line.places and line.at(time, -line.delay):
                    self._push(line, measured[name])

    def _push(self, line: _Line, value: Array) -> None:
        self.now[line.places] = np.vstack([self.now[line.places[1:]], value])

    def _flow(self, span: float) -> None:
        n = len(self.plant.states)
        A, B = self._over(span)
        self.now[:n] = A @ self.now[:n] + B @ self._inputs()

    def _over(self, span: float) -> tuple[Array, Array]:
        if self.tick is not None:
            return self.plant.A, self.plant.B
        key = round(span / self.outer.step / SNAP)
        if key not in self.flows:
            self.flows[key] = held(self.plant.A, self.plant.B, span)
        return self.flows[key]


def _pruned(block: Block, lasting: int) -> Block:
    """Without memory that nothing depends on any more; the first `lasting` states, of plant and controllers, stay."""
    kept = np.ones(len(block.states), dtype=bool)
    while True:
        used = np.asarray(block.A[kept].any(axis=0) | block.C.any(axis=0))
        fewer = kept & (used | (np.arange(len(kept)) < lasting))
        if (fewer == kept).all():
            break
        kept = fewer
    return Block(
        block.A[np.ix_(kept, kept)], block.B[kept], block.C[:, kept], block.D,
        tuple(name for name, stays in zip(block.states, kept, strict=True) if stays), block.inputs, block.outputs,
    )  # fmt: skip
