"""A plant with its parameters fixed, called only through the border.

Whether a plant answers many columns in one call is found out by trying (`detect`), never asked: a batched answer is
compared with single calls at several points. Until then, and where it cannot, columns are evaluated one by one.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from .border import accepted, called, read_only, require_finite, told_call, told_instant
from .errors import PlantError
from .model import Array
from .plant import Plant, PlantFunction
from .signals import Signals

Indices = NDArray[np.intp]
AGREEMENT = 1e-11  # batched against single calls: matrix products differ by 1e-15, a wrong axis by whole digits
RECHECK = 64  # every so many batched calls one column is compared with a single call


@dataclass(slots=True)
class _Function:
    """One of the plant's two functions, what the rows of its answer are, and what is known of it so far."""

    what: str
    call: PlantFunction
    rows: Signals
    batched: bool = False
    largest: Array = field(default_factory=lambda: np.zeros(0))  # largest |answer| met so far, row by row


class BoundPlant:
    """A plant with its parameters fixed.

    Not frozen: it counts evaluations (columns) and keeps the first error that a search passed over.
    """

    def __init__(self, plant: Plant, parameters: Mapping[str, float] | None = None) -> None:
        self.plant = plant
        self.parameters = MappingProxyType({**plant.defaults, **(parameters or {})})
        self.states, self.inputs, self.outputs = plant.state_signals, plant.input_signals, plant.output_signals
        self.n, self.m, self.k = len(self.states), len(self.inputs), len(self.outputs)
        self.step = plant.step
        self.evaluations = 0
        self.last_error: PlantError | None = None
        self.why_single = "not tried yet"
        self._dynamics = _Function("dynamics", plant.dynamics, self.states)
        self._measurement = None
        if plant.measurement is not None:
            self._measurement = _Function("measurement", plant.measurement, self.outputs)
        self._calls = 0

    @property
    def batched(self) -> bool:
        """True where many columns are answered in one call."""
        return self._dynamics.batched and (self._measurement is None or self._measurement.batched)

    def rates(self, t: float, x: Array, u: Array) -> Array:
        """Rates of the states, or next states. x (n,) or (n, N), u (m,) or (m, N); returns the shape of x.

        Raises PlantError for an exception, a wrong shape or type, NaN or an infinity.
        """
        return self._answer(self._dynamics, t, x, u)

    def measure(self, t: float, x: Array, u: Array) -> Array:
        """Outputs, (k,) or (k, N). Raises PlantError as `rates` does."""
        if self._measurement is None:
            return self._measured_states(x)
        return self._answer(self._measurement, t, x, u)

    def rates_within(self, t: float, x: Array, u: Array) -> Array:
        """As `rates` of x (n, N) and u (m, N), for a plant around this one that stands behind a border of its own.

        Nothing is copied: x and u are made read-only, the answer may be the plant's own array, which its next call may
        change, and floating-point warnings are the caller's.
        """
        return self._within(self._dynamics, t, x, u)

    def measure_within(self, t: float, x: Array, u: Array) -> Array:
        """As `measure`, with the same reservation as `rates_within`."""
        return self._measured_states(x) if self._measurement is None else self._within(self._measurement, t, x, u)

    def rates_or_nan(self, t: float, x: Array, u: Array) -> Array:
        """As `rates`, but a column whose call fails comes back as NaN; the error is kept in `last_error`."""
        return self._columns_or_nan(self._dynamics, t, x, u)

    def measure_or_nan(self, t: float, x: Array, u: Array) -> Array:
        """As `measure`, but a column whose call fails comes back as NaN; the error is kept in `last_error`."""
        if self._measurement is None:
            return self._measured_states(x)
        return self._columns_or_nan(self._measurement, t, x, u)

    def detect(self, t: float, points_x: Array, points_u: Array) -> None:
        """Find out whether the plant is deterministic, and whether it answers batches; points (n, P) and (m, P).

        Columns where the plant fails are left out. Raises PlantError where the same call is answered differently, and
        where an output that is called like a state does not read it.
        """
        self.why_single = ""
        self._same_as_states(t, points_x, points_u)
        for asked in (self._dynamics, self._measurement):
            if asked is not None:
                reason = self._why_single(asked, t, points_x, points_u)
                asked.batched = not reason
                self.why_single = self.why_single or (f"{asked.what}: {reason}" if reason else "")

    def _same_as_states(self, t: float, points_x: Array, points_u: Array) -> None:
        """One name is one signal: bands, holds and models take the output for the state."""
        if self._measurement is None or not (shared := [name for name in self.outputs.names if name in self.states]):
            return
        answers = self._columns_or_nan(self._measurement, t, points_x, points_u)
        for name in shared:
            state, output = points_x[self.states.index(name)], answers[self.outputs.index(name)]
            apart = np.isfinite(output) & (np.abs(output - state) > AGREEMENT * np.abs(state).max(initial=0.0))
            if apart.any():
                j = int(np.argmax(apart))
                raise PlantError(
                    f"output {name} is not the state of that name: called with "
                    f"{self.told_call(t, points_x[:, j], points_u[:, j])} it returned {float(output[j])!r}"
                )

    def moved_by_time(self, times: Sequence[float], points_x: Array, points_u: Array) -> str:
        """The name of a row that is not the same at all `times`, "level" or "rate of level"; empty where t moves none.

        points (n, P) and (m, P). Calls that fail are left out.
        """
        asked = [("rate of ", self._dynamics), ("", self._measurement)]
        for word, function in ((word, function) for word, function in asked if function is not None):
            first, *others = (self._columns_or_nan(function, t, points_x, points_u) for t in times)
            for other in others:
                moved = (first != other) & np.isfinite(first) & np.isfinite(other)
                if moved.any():
                    return f"{word}{function.rows.names[int(np.argmax(moved.any(axis=1)))]}"
        return ""

    def _measured_states(self, x: Array) -> Array:
        return np.array(x, dtype=np.float64)[[self.states.index(name) for name in self.outputs.names]]

    def _told(self, t: float, x: Array, u: Array) -> Callable[[], str]:
        return lambda: self.told_call(t, x, u)

    def told_call(self, t: float, x: Array, u: Array) -> str:
        """The arguments of one call in words, for messages."""
        instant = told_instant(t, self.plant.time_unit, self.step)
        return told_call(instant, x, u, self.states, self.inputs)

    def _call(self, asked: _Function, t: float, x: Array, u: Array) -> Array:
        """One call of the plant's function with one column or, where it can, many; NaN is let through."""
        self.evaluations += 1 if x.ndim == 1 else x.shape[1]
        told = self._told(t, x, u)
        answer = called(asked.call, asked.what, t, read_only(x), read_only(u), self.parameters, told)
        return accepted(answer, asked.what, asked.rows, x, told)

    def _finite(self, asked: _Function, t: float, x: Array, u: Array) -> Array:
        values = self._call(asked, t, x, u)
        require_finite(values, asked.what, asked.rows, self._told(t, x, u))
        return values

    def _answer(self, asked: _Function, t: float, x: Array, u: Array) -> Array:
        x, u = self._shaped(x, u)
        if x.ndim == 1:
            return self._finite(asked, t, x, u)
        if asked.batched:
            values = self._batch(asked, t, x, u)
            if np.isfinite(values).all():
                return values
            bad = int(np.argmax(~np.isfinite(values).all(axis=0)))
            require_finite(values[:, bad], asked.what, asked.rows, self._told(t, x[:, bad], u[:, bad]))
        columns = [self._finite(asked, t, x[:, j], u[:, j]) for j in range(x.shape[1])]
        return np.stack(columns, axis=-1) if columns else np.empty((len(asked.rows), 0))

    def _within(self, asked: _Function, t: float, x: Array, u: Array) -> Array:
        """The answer where it is just what it should be; whatever else comes is left to the border, which says why."""
        width = x.shape[1]
        if width != 1 and not asked.batched:
            return self._answer(asked, t, x, u)
        seen, given = (x[:, 0], u[:, 0]) if width == 1 else (x, u)
        seen.setflags(write=False)
        given.setflags(write=False)
        try:
            answer = asked.call(t, seen, given, self.parameters)
        except (Exception, SystemExit):
            return self._answer(asked, t, x, u)
        shape = (len(asked.rows), *seen.shape[1:])
        if type(answer) is not np.ndarray or answer.dtype != np.float64 or answer.shape != shape:
            return self._answer(asked, t, x, u)
        if not np.isfinite(answer).all():
            return self._answer(asked, t, x, u)
        self.evaluations += width
        return answer[:, np.newaxis] if width == 1 else answer

    def _batch(self, asked: _Function, t: float, x: Array, u: Array) -> Array:
        if x.shape[1] == 1:
            return self._call(asked, t, x[:, 0], u[:, 0])[:, np.newaxis]
        values = self._call(asked, t, x, u)
        self._calls += 1
        if self._calls % RECHECK == 0:
            self._recheck(asked, t, x, u, values)
        return values

    def _recheck(self, asked: _Function, t: float, x: Array, u: Array, values: Array) -> None:
        j = self._calls // RECHECK % x.shape[1]
        alone = self._call(asked, t, x[:, j], u[:, j])
        asked.largest = np.maximum(asked.largest, np.nan_to_num(np.abs(values)).max(axis=1))
        if not _agree(values[:, [j]], alone[:, np.newaxis], asked.largest):
            told = self.told_call(t, x[:, j], u[:, j])
            raise PlantError(
                f"{asked.what} answers differently alone and among {x.shape[1]} columns, called with {told}"
            )

    def _columns_or_nan(self, asked: _Function, t: float, x: Array, u: Array) -> Array:
        x, u = self._shaped(x, u)
        if x.ndim == 1:
            return self._columns_or_nan(asked, t, x[:, np.newaxis], u[:, np.newaxis])[:, 0]
        if asked.batched and np.isfinite(x).all() and np.isfinite(u).all():
            # nearly every call of a simulation ends here; what follows costs more than a small plant
            whole = self._batch_or_none(asked, t, x, u)
            if whole is not None and np.isfinite(whole).all():
                return whole
        values = np.full((len(asked.rows), x.shape[1]), np.nan)
        usable = np.flatnonzero(np.isfinite(x).all(axis=0) & np.isfinite(u).all(axis=0))
        if asked.batched and usable.size:
            try:
                values[:, usable] = self._batch(asked, t, x[:, usable], u[:, usable])
            except PlantError:
                self._one_by_one(asked, t, x, u, usable, values)
        else:
            self._one_by_one(asked, t, x, u, usable, values)
        bad = ~np.isfinite(values).all(axis=0)
        values[:, bad] = np.nan
        if self.last_error is None and bad[usable].any():
            first = usable[int(np.argmax(bad[usable]))]
            self._one_by_one(asked, t, x, u, np.array([first]), values)
        return values

    def _batch_or_none(self, asked: _Function, t: float, x: Array, u: Array) -> Array | None:
        try:
            return self._batch(asked, t, x, u)
        except PlantError:
            return None

    def _one_by_one(self, asked: _Function, t: float, x: Array, u: Array, columns: Indices, values: Array) -> None:
        """Fill `values` at `columns`; a column whose call fails stays NaN."""
        for j in columns:
            try:
                values[:, j] = self._finite(asked, t, x[:, j], u[:, j])
            except PlantError as error:
                values[:, j] = np.nan
                self.last_error = self.last_error or error

    def _shaped(self, x: Array, u: Array) -> tuple[Array, Array]:
        x, u = np.asarray(x, dtype=np.float64), np.asarray(u, dtype=np.float64)
        if x.ndim == 2 and u.ndim == 1:
            u = np.broadcast_to(u[:, np.newaxis], (self.m, x.shape[1]))
        if x.shape[0] != self.n or u.shape != (self.m, *x.shape[1:]):
            raise ValueError(f"x {x.shape} and u {u.shape} do not fit a plant of {self.n} states and {self.m} inputs")
        return x, u

    def _why_single(self, asked: _Function, t: float, x: Array, u: Array) -> str:
        singles = self._tried_twice(asked, t, x, u)
        if len(singles) < 2:
            return "it could not be called at enough points to try a batch"
        # a width that is no dimension of the plant, so that a wrong axis cannot pass for a right one
        width = next(size for size in (5, 7, 11, 13, 17) if size not in (self.n, self.m, self.k))
        columns = [list(singles)[j % len(singles)] for j in range(width)]
        expected = np.stack([singles[j] for j in columns], axis=-1)
        asked.largest = np.abs(expected).max(axis=1)
        try:
            answer = self._call(asked, t, x[:, columns], u[:, columns])
        except PlantError as error:
            return _told_reason(error, expected, asked.rows)
        if not _agree(answer, expected, asked.largest):
            return f"a call with {width} columns answers otherwise than {width} single calls"
        return ""

    def _tried_twice(self, asked: _Function, t: float, x: Array, u: Array) -> dict[int, Array]:
        singles: dict[int, Array] = {}
        for j in range(x.shape[1]):
            try:
                singles[j] = self._finite(asked, t, x[:, j], u[:, j])
            except PlantError as error:
                self.last_error = self.last_error or error
        for j in reversed(singles):  # in another order, so that a hidden counter or memory shows
            again = self._call(asked, t, x[:, j], u[:, j])
            if again.tobytes() != singles[j].tobytes():
                row = int(np.argmax(again != singles[j]))
                raise PlantError(
                    f"{asked.what} is not deterministic: called twice with "
                    f"{self.told_call(t, x[:, j], u[:, j])} it returned "
                    f"{float(singles[j][row])!r} and {float(again[row])!r} for {asked.rows.names[row]}"
                )
        return singles


def _agree(first: Array, second: Array, scale: Array) -> bool:
    # against the row's own size: near an equilibrium rates are differences of large terms
    same = (np.abs(first - second) <= AGREEMENT * scale[:, np.newaxis]) | (first == second)
    return bool((same | (np.isnan(first) & np.isnan(second))).all())


def _told_reason(error: PlantError, expected: Array, rows: Signals) -> str:
    constant = [name for name, row in zip(rows.names, expected, strict=True) if np.all(row == row[0])]
    if "unlike shape" in str(error) and constant:
        return f"the row of {constant[0]} is a plain number; write it as 0 * x[0] + number"
    return str(error)
