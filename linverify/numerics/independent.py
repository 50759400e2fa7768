"""The second opinion: one drive at a time by scipy's integrators, with which a failure is confirmed.

It shares no integration code with `simulate`, not even the linear side or the search for exits, so that a mistake in
one cannot confirm itself. Eighth-order Dormand-Prince where the point is not stiff, Radau where it is, restarted at
every instant at which inputs change, with tolerances 100 times tighter than the run that is confirmed.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Literal

import numpy as np

from ..core.drive import Drive
from ..core.errors import PlantError
from ..core.model import Array
from ..core.outcome import Outcome, of_call
from .pieces import cut
from .readout import Limit, Readout, acts, model_after, model_course, model_last, model_within
from .rig import Exit, Fidelity, Rig, Runs

TIGHTER = 100.0
RELATIVE = 3e-14  # as small as scipy takes without raising it: the absolute tolerances rule
DEARER = 10  # times the calls that the run to be confirmed may take
LEAST_STEPS = 3  # an interval; unlike the first run's, so that both do not step over a corner alike
FIRST_STEP = 30  # an interval; scipy's own guess never ends where it meets NaN


class _SpentError(Exception):
    """The budget of plant evaluations is used up."""


def run_independent(rig: Rig, drive: Drive, fidelity: Fidelity) -> Runs:
    """Simulate one drive (N = 1) on plant and local model, 100 times as accurately as `fidelity` asks for.

    Sampled at the nodes of `simulate.run` with the same fidelity. Outcomes and errors as there.
    """
    second = _Second(Readout(rig, drive, cut(rig, drive.every, fidelity)), fidelity)
    with np.errstate(all="ignore"):  # what is not finite is told by the outcome
        second.go()
    return second.told()


@dataclass(slots=True, eq=False)
class _Second:
    """One drive on its way; used once. plant: deviations at the nodes met so far, in time order."""

    readout: Readout
    fidelity: Fidelity
    plant: list[Array] = field(default_factory=list)
    starts: list[Array] = field(default_factory=list)
    left: Exit | None = None
    outcome: Outcome = Outcome.DONE
    text: str = ""
    ended: float = float("nan")
    calls: int = 0
    budget: int = 0

    def go(self) -> None:
        """Both sides, piece by piece."""
        readout = self.readout
        self.budget = DEARER * readout.rig.evaluations
        self.starts = model_course(readout)
        interval = self._continuous if readout.rig.plant.step is None else self._discrete
        x = readout.rig.point.x + readout.offset()
        for k in range(readout.count):
            updated = self._updated(k, x)
            after = None if updated is None else interval(k, updated)
            if after is None:
                return
            x = after
        if readout.pieces.sampled and readout.rig.updates:
            self._last(x)

    def told(self) -> Runs:
        """Everything as `Runs` of one drive."""
        readout, rig = self.readout, self.readout.rig
        K, S, q = readout.count, readout.nodes, len(rig.signals)
        times = np.array([[readout.time(k, j) for j in range(S + 1)] for k in range(K)])
        plant, model = np.full((q, K, S + 1, 1), np.nan), np.empty((q, K, S + 1, 1))
        for place, values in enumerate(self.plant):
            plant[:, place // (S + 1), place % (S + 1), 0] = values[:q]
        for k, j in np.ndindex(K, S + 1):
            x = model_within(readout, self.starts[k], k, j)
            model[:, k, j, 0] = readout.model(x, readout.inputs(k, j / S))[:q]
        if readout.pieces.sampled:  # only right-hand values mean anything, the last one too
            last = model_last(readout, self.starts[K])
            model[:, K - 1, S, 0] = readout.model(last, readout.inputs(K - 1, 1.0))[:q]
        if rig.plant.step is not None:  # read at instants only: a jump has no left side
            plant[:, :-1, -1], model[:, :-1, -1] = plant[:, 1:, 0], model[:, 1:, 0]
        ended = float(times[-1, -1]) if np.isnan(self.ended) else self.ended
        method = f"scipy {self._method()}" if rig.plant.step is None else "difference equation, one column"
        pieces = readout.pieces
        return Runs(
            rig.signals, pieces.folded(times[np.newaxis])[0], pieces.folded(plant), pieces.folded(model),
            np.array([ended]), (self.left,), (self.outcome,), (self.text,), method,
            late=tuple(rig.delays.outputs.get(name, 0.0) for name in rig.signals),
            turns=tuple(rig.turns.get(name, 0.0) for name in rig.signals),
        )  # fmt: skip

    def _method(self) -> Literal["DOP853", "Radau"]:
        return "Radau" if self.readout.rig.stiff(self.readout.drive.every) else "DOP853"

    def _last(self, x: Array) -> None:
        """Put what comes after the controllers act in the place of the last sample."""
        readout = self.readout
        k, time = readout.count - 1, readout.time(readout.count - 1, readout.nodes)
        after = self._updated(k, x, 1.0)
        if after is not None:
            self.plant.pop()
            self._keep(time, after, k, readout.nodes)

    def _updated(self, k: int, x: Array, share: float = 0.0) -> Array | None:
        """States after what sampled controllers do where piece k begins, or ends; notes the failure of one that cannot.

        share: of the piece, 0 or 1.
        """
        readout, rig = self.readout, self.readout.rig
        time = readout.time(k, readout.nodes if share else 0)
        try:
            for update in rig.updates:
                if acts(time, update.instants.period, update.instants.phase):
                    u = rig.point.u + readout.inputs(k, share)
                    x = update.jump(rig.point.time + readout.tick(time), x[:, np.newaxis], u[:, np.newaxis])[:, 0]
        except PlantError as error:
            self._fail(error, time)
            return None
        return x

    def _continuous(self, k: int, x: Array) -> Array | None:
        begin = self.readout.time(k, 0)
        if not self._within(begin, x, k, 0.0):
            return None
        try:
            found = self._solved(k, begin, x)
            for j in range(self.readout.nodes + 1):
                local = self.readout.pieces.length(k) * j / self.readout.nodes
                if local <= found.t[-1]:
                    self._keep(begin + local, found.sol(local) if local < found.t[-1] else found.y[:, -1], k, j)
        except (PlantError, _SpentError, ValueError, FloatingPointError) as error:
            self._fail(error, begin)
            return None
        if found.status == 1:
            hit = next(index for index, times in enumerate(found.t_events) if len(times))
            self._leave(self.readout.limits[hit], k, float(found.t_events[hit][0]))
            return None
        if found.status != 0:
            self._fail(self._why(k, begin, found), begin + float(found.t[-1]))
            return None
        last: Array = found.y[:, -1]
        return last

    def _solved(self, k: int, begin: float, x: Array) -> Any:
        from scipy.integrate import solve_ivp  # slow to import, and needed only where something failed

        rig, length = self.readout.rig, self.readout.pieces.length(k)
        atol = np.maximum(rig.weights * self.fidelity.tolerance / TIGHTER, 1e-15 * np.abs(rig.point.x))
        rates = self._rates(k, begin)
        rig.plant.rates(rig.point.time + begin, x, rig.point.u + self.readout.inputs(k, 0.0))  # raises where it fails
        rooms = [self._room(k, begin, limit) for limit in self.readout.limits]
        return solve_ivp(
            lambda s, x: rates(float(s), x),
            (0.0, length),
            x,
            method=self._method(),
            dense_output=True,
            rtol=RELATIVE,
            atol=atol,
            events=rooms,
            first_step=length / FIRST_STEP,
            max_step=length / LEAST_STEPS,
        )

    def _rates(self, k: int, begin: float) -> Callable[[float, Array], Array]:
        rig, length = self.readout.rig, self.readout.pieces.length(k)

        def rates(s: float, x: Array) -> Array:
            self.calls += 1
            if self.calls > self.budget:
                raise _SpentError("more plant evaluations were needed than the budget allows")
            u = rig.point.u + self.readout.inputs(k, s / length)
            return rig.plant.rates_or_nan(rig.point.time + begin + s, x, u)

        return rates

    def _room(self, k: int, begin: float, limit: Limit) -> Callable[[float, Array], float]:
        """A function that falls through zero where the plant crosses `limit` outwards."""
        length = self.readout.pieces.length(k)

        def room(s: float, x: Array) -> float:
            return limit.room(float(self.readout.plant(begin + s, x, self.readout.inputs(k, s / length))[limit.row]))

        room.terminal = True  # type: ignore[attr-defined]
        room.direction = -1.0  # type: ignore[attr-defined]
        return room

    def _discrete(self, k: int, x: Array) -> Array | None:
        rig, readout = self.readout.rig, self.readout
        for j in range(readout.nodes + 1):
            time = readout.time(k, j)
            last = k == readout.count - 1
            # the last node of a piece is the next one's first, and is looked at there
            if (j < readout.nodes or last) and not self._within(time, x, k, j / readout.nodes):
                return None
            try:
                if j < readout.nodes or last:
                    self._keep(time, x, k, j)
                else:
                    self.plant.append(np.full(len(readout.names), np.nan))
                if j < readout.nodes:
                    u = rig.point.u + readout.inputs(k, j / readout.nodes)
                    x = rig.plant.rates(rig.point.time + readout.tick(time), x, u)
            except PlantError as error:
                self._fail(error, time)
                return None
        return x

    def _keep(self, time: float, x: Array, k: int, j: int) -> None:
        values = self.readout.plant(time, x, self.readout.inputs(k, j / self.readout.nodes))
        self.plant.append(values - self.readout.course(time))

    def _within(self, time: float, x: Array, k: int, share: float) -> bool:
        """Whether the plant is inside the envelope; notes the exit, or the failure, where it is not."""
        try:
            values = self.readout.plant(time, x, self.readout.inputs(k, share))
        except PlantError as error:
            self._fail(error, time)
            return False
        for limit in self.readout.limits:
            if limit.room(float(values[limit.row])) < 0:
                self._leave(limit, k, share * self.readout.pieces.length(k))
                return False
        return True

    def _leave(self, limit: Limit, k: int, local: float) -> None:
        readout = self.readout
        time = readout.time(k, 0) + local
        x = model_after(readout, self.starts[k], k, local)
        gone = readout.model(x, readout.inputs(k, local / readout.pieces.length(k)))[limit.row]
        way = limit.limit - readout.course(time)[limit.row]
        self.left = Exit(readout.names[limit.row], limit.side, time, limit.limit, float(gone / way) if way else 1.0)
        self.ended = time

    def _fail(self, error: Exception, time: float) -> None:
        self.ended, self.text = time, str(error)
        if isinstance(error, PlantError):
            self.outcome = of_call(error)
        else:
            self.outcome = Outcome.TOO_MANY_STEPS if isinstance(error, _SpentError) else Outcome.INACCURATE

    def _why(self, k: int, begin: float, found: Any) -> Exception:
        """What stopped scipy: the plant's own error just ahead of the last good state, or scipy's message."""
        plant, x = self.readout.rig.plant, found.y[:, -1]
        kept, plant.last_error = plant.last_error, None
        rates = self._rates(k, begin)
        ahead = x + 1e-6 * self.readout.pieces.length(k) * rates(float(found.t[-1]), x)
        rates(float(found.t[-1]), ahead)
        error, plant.last_error = plant.last_error, kept
        return error or ArithmeticError(found.message)
