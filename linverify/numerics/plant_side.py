"""The plant's side of a comparison: follow each drive interval by interval, and stop each column where it must stop.

A column stops where it leaves the envelope or where the plant fails. What has stopped rests on the trimmed course,
where the plant is known to answer, so that it neither stalls nor poisons the batch.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from ..core.model import Array
from ..core.outcome import Outcome, of_call
from .courses import Courses, input_at
from .exits import Limits, limits_of
from .instants import updated
from .integrate import Batch, Demand, DormandPrince, Mask, Method, advance
from .piece import Piece, domain_of
from .rig import Fidelity, Rig
from .stiff import Rosenbrock

ROUNDING = 1e-15  # of a state: smallest local error that a step can be held to
EXPLICIT = 400  # steps an interval that the explicit pair may try before the implicit method has a try
SHORTEST = 1e-12  # of an interval; a shorter step cannot be told from standing still
CUT = 1e-9  # of a domain's ends: an input that is cut to its limit may be off by rounding
SLOW = "more steps an interval were needed than the budget of {} allows"
SPENT = "more plant evaluations were needed than the budget of {} a drive allows"


@dataclass(slots=True, eq=False)
class Followed:
    """How the plant went.

    deviations (w, K, S + 1, N) of the watched signals from their course, NaN where a column had stopped; the course
    itself, absolute, is `reference` (w, K, S + 1). stopped (N,): when a column stopped between nodes, else NaN; `last`
    (w, N): the absolute values there. until (N,): when an outcome other than DONE was met, else infinite.
    """

    deviations: Array
    reference: Array
    stopped: Array
    last: Array
    until: Array
    outcomes: list[Outcome]
    errors: list[str]
    method: str = ""
    evaluations: int = 0


def follow(rig: Rig, drives: Courses, names: Sequence[str], times: Array, fidelity: Fidelity) -> Followed:
    """Simulate the plant along `drives`, and read the states and outputs called `names` at `times` (K, S + 1).

    A point may be stiff only away from trim, or its local model may not know a fast pole: where the explicit pair runs
    out of steps, the implicit method has a try. What both give up is fast without being stiff, and is followed by the
    explicit pair with all the steps that the budget has.
    """
    stiff = rig.stiff(drives.pieces.every)
    first = rig.attempts if stiff or rig.plant.step is not None else min(rig.attempts, EXPLICIT)
    ways = [(stiff, first)]
    if not stiff and rig.plant.step is None:
        ways += [(True, rig.attempts), *([(False, rig.attempts)] if rig.attempts > first else [])]
    spent = 0
    for implicit, attempts in ways:
        result = _Way(rig, drives, tuple(names), times, fidelity, implicit, attempts).went()
        spent += result.evaluations
        if Outcome.TOO_MANY_STEPS not in result.outcomes:
            break
    result.evaluations = spent
    return result


@dataclass(slots=True, eq=False)
class _Way:
    """Everything that one batch of drives needs on its way; used once."""

    rig: Rig
    drives: Courses
    names: tuple[str, ...]
    times: Array
    fidelity: Fidelity
    stiff: bool
    attempts: int
    limits: Limits = field(init=False)
    piece: Piece = field(init=False)
    batch: Batch = field(init=False)
    result: Followed = field(init=False)
    method: Method = field(init=False)

    def __post_init__(self) -> None:
        rig, width = self.rig, self.drives.width
        low, high = domain_of(rig.plant, rig.plant.states)
        self.limits = limits_of(rig, self.names)
        self.method = Rosenbrock(rig.weights, high) if self.stiff else DormandPrince()
        self.piece = Piece(rig.plant, rig.point.time, np.zeros((rig.plant.m, width)), None, low, high)
        x = rig.point.x[:, np.newaxis] + self.drives.offsets
        step = self.drives.pieces.length(0) * self.fidelity.longest
        self.batch = Batch(x, np.ones(width, dtype=bool), step, self._rest, self._leaving, self._stuck)
        self.result = Followed(
            np.full((len(self.names), *self.times.shape, width), np.nan),
            self._reference(),
            np.full(width, np.nan),
            np.full((len(self.names), width), np.nan),
            np.full(width, np.inf),
            [Outcome.DONE] * width,
            [""] * width,
            "difference equation" if rig.plant.step is not None else self.method.name,
        )

    def went(self) -> Followed:
        """The whole way."""
        discrete = self.rig.plant.step is not None
        for k in range(self.drives.count):
            if not self.batch.active.any():
                break
            running = self.batch.active.copy()
            self._begin(k)
            out = self._difference(k) if discrete else self._differential(k)
            self._read(k, out, running)
            if self.piece.used > self.rig.evaluations * self.drives.width:
                self._fail(self.batch.active, self.times[k, -1], SPENT.format(self.rig.evaluations))
                break
        if self.drives.pieces.sampled and self.rig.updates and self.batch.active.any():
            self._last()
        if discrete:
            # outputs are read at instants, with that instant's input: a jump has no left side
            self.result.deviations[:, :-1, -1] = self.result.deviations[:, 1:, 0]
        self.result.evaluations = self.piece.used
        return self.result

    def _ticks(self, time: float) -> float:
        """Time since the drive began as the plant counts it: in time units, or in steps of a difference equation."""
        return time if self.rig.plant.step is None else float(round(time / self.rig.plant.step))

    def _reference(self) -> Array:
        """The trimmed course of the watched signals at all nodes, absolute, (w, K, S + 1)."""
        rig, point = self.rig, self.rig.point
        result = np.empty((len(self.names), *self.times.shape))
        ticks = np.array([[self._ticks(time) for time in row] for row in self.times])
        for row, name in enumerate(self.names):
            result[row] = point.value(name)
            if name in rig.plant.states:
                result[row] += point.drift[rig.plant.states.index(name)] * ticks
        outputs = [row for row, name in enumerate(self.names) if name not in rig.plant.states]
        if outputs and point.drift.any():
            pick = [rig.plant.outputs.index(self.names[row]) for row in outputs]
            for place in np.ndindex(self.times.shape):
                course = point.x + point.drift * ticks[place]
                t = point.time + float(ticks[place])
                result[(outputs, *place)] = rig.plant.measure_or_nan(t, course, point.u)[pick]
        return result

    def _begin(self, k: int) -> None:
        point, drives, piece = self.rig.point, self.drives, self.piece
        self.batch.begun = float(self.times[k, 0])
        piece.t = point.time + self._ticks(self.batch.begun)
        piece.u = point.u[:, np.newaxis] + drives.start[:, k]
        piece.slope = None if drives.held else (drives.end[:, k] - drives.start[:, k]) / drives.pieces.length(k)
        self._outside(k)
        self._rest(~self.batch.active)
        if self.rig.updates:
            self._update()

    def _update(self) -> None:
        """Let sampled controllers act where a piece begins; what has stopped stays at rest."""
        batch = self.batch
        after, errors = updated(self.rig.updates, batch.begun, self.piece.t, batch.x, self.piece.u)
        batch.x = np.where(batch.active & np.isfinite(after).all(axis=0), after, batch.x)
        bad = np.asarray(batch.active & ~np.isfinite(after).all(axis=0))
        for column in np.flatnonzero(bad):
            error = errors.get(int(column))
            outcome = Outcome.NOT_FINITE if error is None else of_call(error)
            text = "a sampled controller's output overflows" if error is None else str(error)
            self._note(int(column), batch.begun, outcome, text)
        if bad.any():
            batch.stop(bad, 0.0)

    def _last(self) -> None:
        """Where only right-hand values mean anything, the last one too is what comes after the controllers act."""
        k = self.drives.count - 1
        running = self.batch.active.copy()
        self.batch.begun = float(self.times[k, -1])
        self.piece.t = self.rig.point.time + self._ticks(self.batch.begun)
        self.piece.u = self.rig.point.u[:, np.newaxis] + self.drives.end[:, k]
        self._update()
        values = self._values(k, self.times.shape[1] - 1, self.batch.x)
        found = values - self.result.reference[:, k, -1, np.newaxis]
        self.result.deviations[:, k, -1] = np.where(running, found, self.result.deviations[:, k, -1])

    def _values(self, k: int, j: int, x: Array) -> Array:
        """The watched signals at node j of piece k, absolute, (w, N)."""
        states, outputs = self.rig.plant.states, self.rig.plant.outputs
        y = self._measured(k, j, x)
        rows = [x[states.index(name)] if name in states else y[outputs.index(name)] for name in self.names]
        return np.array(rows).reshape(len(rows), -1)

    def _outside(self, k: int) -> None:
        """Stop the drives whose inputs leave the plant's domain in piece k."""
        low, high = domain_of(self.rig.plant, self.rig.plant.inputs)
        if np.isinf(low).all() and np.isinf(high).all():
            return
        u = self.rig.point.u[:, np.newaxis]
        ends = u[:, np.newaxis] + np.stack([self.drives.start[:, k], self.drives.end[:, k]], 1)
        low, high = (end + side * CUT * np.maximum(np.abs(u), np.abs(end)) for end, side in ((low, -1), (high, 1)))
        over = (ends < low[:, np.newaxis]) | (ends > high[:, np.newaxis])
        beyond: Mask = np.asarray(over.any(axis=1))
        bad: Mask = np.asarray(self.batch.active & beyond.any(axis=0))
        for column in np.flatnonzero(bad):
            name = self.rig.plant.inputs.names[int(np.argmax(beyond[:, column]))]
            text = f"the drive moves {name} out of the plant's domain"
            self._note(int(column), self.batch.begun, Outcome.NOT_FINITE, text)
        if bad.any():
            self.batch.stop(bad, 0.0)

    def _differential(self, k: int) -> Array:
        every = self.drives.pieces.length(k)
        # below rounding no step is short enough; the halved grid tells what that costs
        scale = np.maximum(self.fidelity.tolerance * self.rig.weights, ROUNDING * np.abs(self.rig.point.x))
        demand = Demand(scale[:, np.newaxis], every * self.fidelity.longest, every * SHORTEST, self.attempts)
        return advance(self.method, self.piece.rates, self.batch, every, self.times.shape[1] - 1, demand)

    def _difference(self, k: int) -> Array:
        nodes, batch, piece = self.times.shape[1] - 1, self.batch, self.piece
        first, out = piece.t, np.full((batch.x.shape[0], self.times.shape[1], batch.x.shape[1]), np.nan)
        out[:, 0] = np.where(batch.active, batch.x, np.nan)
        for j in range(nodes):
            batch.begun, piece.t, piece.slope = float(self.times[k, j]), first + j, None
            piece.u = self.rig.point.u[:, np.newaxis] + input_at(self.drives, k, j / nodes)
            self._rest(~batch.active)
            ahead = piece.rates(0.0, batch.x)
            bad = batch.active & ~np.isfinite(ahead).all(axis=0)
            if bad.any():
                self._stuck(bad, 0.0, False)
                batch.stop(bad, 0.0)
            batch.x = np.where(batch.active, ahead, batch.x)
            out[:, j + 1] = np.where(batch.active, batch.x, np.nan)
        return out

    def _read(self, k: int, out: Array, running: Mask) -> None:
        """Keep the watched signals of piece k, and stop what left the envelope or cannot be read."""
        states, outputs = self.rig.plant.states, self.rig.plant.outputs
        values = np.empty((len(self.names), *out.shape[1:]))
        read = [row for row, name in enumerate(self.names) if name not in states]
        for row, name in enumerate(self.names):
            if name in states:
                values[row] = out[states.index(name)]
        if read:
            pick = [outputs.index(self.names[row]) for row in read]
            for j in range(out.shape[1]):
                values[read, j] = self._measured(k, j, out[:, j])[pick]
        self.result.deviations[:, k] = values - self.result.reference[:, k, :, np.newaxis]
        self._stopped_between(k, running & ~self.batch.active)
        self._unreadable(k, out, values)
        gone = self.batch.active & self.limits.beyond(values).any(axis=(0, 1))
        if gone.any():
            self.batch.begun = float(self.times[k, -1])
            self.batch.stop(gone, 0.0)

    def _measured(self, k: int, j: int, x: Array) -> Array:
        share = j / (self.times.shape[1] - 1)
        u = self.rig.point.u[:, np.newaxis] + input_at(self.drives, k, share)
        t = self.rig.point.time + self._ticks(float(self.times[k, j]))
        return self.rig.plant.measure_or_nan(t, x, u)

    def _unreadable(self, k: int, out: Array, values: Array) -> None:
        """Fail columns whose outputs are not finite where their states are."""
        seen = self.result.deviations[:, k]
        blind: Mask = np.asarray(np.isfinite(out).all(axis=0) & ~np.isfinite(seen).all(axis=0))
        for column in np.flatnonzero(blind.any(axis=0)):
            j = int(np.argmax(blind[:, column]))
            alone = out[:, j, [column]]
            outcome, text = self.piece.why(lambda j=j, alone=alone, c=column: self._measure_one(k, j, alone, c))
            if np.isfinite(values[:, j, column]).all():
                outcome, text = Outcome.NOT_FINITE, "the outputs on the trimmed course itself are not finite"
            self._note(int(column), float(self.times[k, j]), outcome, text)
        stop = self.batch.active & blind.any(axis=0)
        if stop.any():
            self.batch.stop(stop, 0.0)

    def _measure_one(self, k: int, j: int, x: Array, column: int) -> None:
        u = self.rig.point.u[:, np.newaxis] + input_at(self.drives, k, j / (self.times.shape[1] - 1))[:, [column]]
        self.rig.plant.measure_or_nan(self.rig.point.time + self._ticks(float(self.times[k, j])), x, u)

    def _stopped_between(self, k: int, columns: Mask) -> None:
        """Read the watched signals where columns stopped within piece k."""
        plant, point = self.rig.plant, self.rig.point
        for column in np.flatnonzero(columns):
            when = float(self.batch.stopped[column])
            share = (when - self.times[k, 0]) / self.drives.pieces.length(k)
            x = self.batch.last[:, column]
            u = point.u + input_at(self.drives, k, share)[:, column]
            y = plant.measure_or_nan(point.time + self._ticks(when), x, u)
            self.result.stopped[column] = when
            for row, name in enumerate(self.names):
                inner = name in plant.states
                self.result.last[row, column] = x[plant.states.index(name)] if inner else y[plant.outputs.index(name)]

    def _rest(self, columns: Mask) -> None:
        """Put `columns` on the trimmed course."""
        if not columns.any():
            return
        point = self.rig.point
        course = point.x + point.drift * self._ticks(self.batch.begun)
        self.batch.x = np.where(columns, course[:, np.newaxis], self.batch.x)
        self.piece.u = np.where(columns, point.u[:, np.newaxis], self.piece.u)
        if self.piece.slope is not None:
            self.piece.slope = np.where(columns, 0.0, self.piece.slope)

    def _leaving(self, time: float, x: Array) -> Mask:
        return self.limits.states_beyond(x)

    def _stuck(self, columns: Mask, when: float, slow: bool) -> None:
        """Say why `columns` cannot go on from `when` into the interval."""
        time = self.batch.begun + when
        if slow:
            self._fail(columns, time, SLOW.format(self.attempts))
            return
        for column in np.flatnonzero(columns):
            alone, x = self.piece.alone(int(column)), self.batch.x[:, [column]]
            outcome, text = alone.why(lambda alone=alone, x=x: self._tried(alone, when, x))
            self._note(int(column), time, outcome, text)

    def _tried(self, alone: Piece, when: float, x: Array) -> None:
        first = alone.rates(when, x)
        if self.rig.plant.step is None:
            self.method.attempt(alone.rates, when, x, first, 10 * SHORTEST * self.drives.pieces.every)

    def _fail(self, columns: Mask, time: float, text: str) -> None:
        for column in np.flatnonzero(columns):
            self._note(int(column), time, Outcome.TOO_MANY_STEPS, text)

    def _note(self, column: int, time: float, outcome: Outcome, text: str) -> None:
        if self.result.outcomes[column].done:
            self.result.outcomes[column], self.result.errors[column] = outcome, text
            self.result.until[column] = time
