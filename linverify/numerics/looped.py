"""One controller as states and signals: continuous or sampled, with its dead times.

A continuous controller's dead times are all-pass chains (`allpass`). A sampled one keeps its outputs in states until
the next instant; dead times are whole samples in queues, and what is left of a sample shifts the instant at which a
measurement is read or an output is put out, which is exact.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..core.delivered import Delays
from ..core.loop import Loop
from ..core.model import Array
from .allpass import all_pass
from .instants import SNAP, Instants


@dataclass(frozen=True, slots=True)
class Event:
    """Something that a sampled controller does at instants: read a late measurement, act, or put out a late output."""

    instants: Instants
    kind: Literal["read", "sample", "hold"]
    channel: int = 0


@dataclass(frozen=True, slots=True, eq=False)
class _Late:
    """A dead time of one channel: states from `first` on. count: of the chain, or of the queue (newest first)."""

    channel: int
    delay: float
    first: int
    count: int
    phase: float = 0.0

    @property
    def rows(self) -> slice:
        """Its states among the added ones."""
        return slice(self.first, self.first + self.count)


@dataclass(frozen=True, slots=True, eq=False)
class Controlled:
    """A loop with its states among the added ones: controller, held outputs, dead times of what it reads and gives.

    pick (k,): rows of the measured signals; own, held: slices; heard, told: the channels with a dead time.
    """

    loop: Loop
    pick: tuple[int, ...]
    own: slice
    held: slice
    heard: tuple[_Late, ...]
    told: tuple[_Late, ...]

    @property
    def last(self) -> int:
        """Where the states of the next loop begin."""
        ends = [late.first + late.count for late in (*self.heard, *self.told)]
        return max(int(self.held.stop), *ends, 0)

    @property
    def names(self) -> tuple[str, ...]:
        """Names of its states, in order."""
        name = self.loop.name
        own = [f"{name}.{number}" for number in range(1, self.own.stop - self.own.start + 1)]
        held = [f"{name}.held.{number}" for number in range(1, self.held.stop - self.held.start + 1)]
        late = sum(one.count for one in (*self.heard, *self.told))
        return (*own, *held, *(f"{name}.delay.{number}" for number in range(1, late + 1)))

    def seen(self, a: Array, y: Array) -> Array:
        """What the controller sees of the measured deviations y (q, N): (k, N), each after its dead time."""
        found = y[list(self.pick)]
        for late in self.heard:
            if self.loop.sample is None:
                _, _, c, d = all_pass(late.delay)
                found[late.channel] = c @ a[late.rows] + d * found[late.channel]
            else:
                found[late.channel] = a[late.rows][-1]
        return found

    def answer(self, a: Array, error: Array) -> tuple[Array, Array]:
        """The controller's outputs, and what arrives of them after dead times, (j, N) each. error (k, N)."""
        if self.loop.sample is not None:
            return a[self.held], a[self.held]
        control = self.loop.controller
        raw = control.C @ a[self.own] + control.D @ error
        if not self.told:
            return raw, raw
        arrived = raw.copy()
        for late in self.told:
            _, _, c, d = all_pass(late.delay)
            arrived[late.channel] = c @ a[late.rows] + d * raw[late.channel]
        return raw, arrived

    def rates(self, a: Array, error: Array, raw: Array, into: Array) -> None:
        """Rates of a continuous controller's states. heard chains are driven by what `seen` was made from."""
        control = self.loop.controller
        into[self.own] = control.A @ a[self.own] + control.B @ error
        for late in self.told:
            A, b, _, _ = all_pass(late.delay)
            into[late.rows] = A @ a[late.rows] + b[:, np.newaxis] * raw[late.channel]

    def hear(self, a: Array, y: Array, into: Array) -> None:
        """Rates of the chains that carry the measured deviations y (q, N) to a continuous controller."""
        for late in self.heard:
            A, b, _, _ = all_pass(late.delay)
            into[late.rows] = A @ a[late.rows] + b[:, np.newaxis] * y[self.pick[late.channel]]

    def events(self) -> list[Event]:
        """What a sampled controller does at which instants, in order; nothing for a continuous one."""
        period = self.loop.sample
        if period is None:
            return []
        reads = [Event(Instants(period, late.phase), "read", at) for at, late in enumerate(self.heard)]
        holds = [Event(Instants(period, late.phase), "hold", at) for at, late in enumerate(self.told)]
        return [*reads, Event(Instants(period), "sample"), *holds]

    def read(self, a: Array, y: Array, at: int, into: Array) -> None:
        """Put a measurement into its queue."""
        late = self.heard[at]
        _pushed(a, late, y[self.pick[late.channel]], into)

    def sample(self, a: Array, error: Array, into: Array) -> None:
        """One step of the controller: its next states and its outputs, held at once or put into their queues."""
        control = self.loop.controller
        given = control.C @ a[self.own] + control.D @ error
        into[self.own] = control.A @ a[self.own] + control.B @ error
        queued = {late.channel: late for late in self.told}
        for channel, row in enumerate(given):
            if channel in queued:
                _pushed(a, queued[channel], row, into)
            else:
                into[self.held.start + channel] = row

    def hold(self, a: Array, at: int, into: Array) -> None:
        """Put out what waited longest in a queue."""
        late = self.told[at]
        into[self.held.start + late.channel] = a[late.rows][-1]


def _pushed(a: Array, late: _Late, value: Array, into: Array) -> None:
    into[late.first + 1 : late.rows.stop] = a[late.first : late.rows.stop - 1]
    into[late.first] = value


def controlled(loop: Loop, measured: tuple[str, ...], delays: Delays, first: int) -> Controlled:
    """The loop with its states from `first` on; measured: the signals that `Controlled.seen` is given."""
    own = slice(first, first + len(loop.controller.A))
    held = slice(own.stop, own.stop + (len(loop.moves) if loop.sample is not None else 0))
    last, heard, told = held.stop, [], []
    for channel, name in enumerate(loop.measures):
        if late := delays.outputs.get(name, 0.0):
            heard.append(_read_late(loop, channel, late, last))
            last = heard[-1].rows.stop
    for channel, moved in enumerate(loop.moves):
        late = loop.delay + (0.0 if moved.loop else delays.inputs.get(moved.name, 0.0))
        if late > 0.0:
            told.append(_told_late(loop, channel, late, last))
            last = told[-1].rows.stop
    pick = tuple(measured.index(name) for name in loop.measures)
    return Controlled(loop, pick, own, held, tuple(heard), tuple(told))


def _read_late(loop: Loop, channel: int, delay: float, first: int) -> _Late:
    """A measurement that arrives late: read so much before the instant, or a whole number of samples earlier too."""
    if loop.sample is None:
        return _Late(channel, delay, first, len(all_pass(delay)[1]))
    count = math.ceil(delay / loop.sample - SNAP)
    phase = count * loop.sample - delay
    if phase <= SNAP * loop.sample:  # read at the instant itself, before the controller's step
        return _Late(channel, delay, first, count + 1)
    return _Late(channel, delay, first, count, phase)


def _told_late(loop: Loop, channel: int, delay: float, first: int) -> _Late:
    """An output that is put out late: after whole samples in a queue and what is left of one."""
    if loop.sample is None:
        return _Late(channel, delay, first, len(all_pass(delay)[1]))
    whole = math.floor(delay / loop.sample + SNAP)
    phase = delay - whole * loop.sample
    return _Late(channel, delay, first, whole + 1, phase if phase > SNAP * loop.sample else 0.0)
