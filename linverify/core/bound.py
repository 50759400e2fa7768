"""A plant with its parameters fixed, called only through the border.

Whether a plant answers many columns in one call is found out by trying (`detect`), never asked: a batched answer is
compared with single calls at several points. Until then, and where it cannot, columns are evaluated one by one.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

import numpy as np

from .border import accepted, called, read_only, require_finite, told_call
from .errors import PlantError
from .model import Array
from .plant import Plant, PlantFunction
from .signals import Signals

AGREEMENT = 1e-11  # batched against single calls: matrix products differ by 1e-15, a wrong axis by whole digits
RECHECK = 64  # every so many batched calls one column is compared with a single call


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
        self._batched = {"dynamics": False, "measurement": plant.measurement is None}
        self._calls = 0

    @property
    def batched(self) -> bool:
        """True where many columns are answered in one call."""
        return all(self._batched.values())

    def rates(self, t: float, x: Array, u: Array) -> Array:
        """Rates of the states, or next states. x (n,) or (n, N), u (m,) or (m, N); returns the shape of x.

        Raises PlantError for an exception, a wrong shape or type, NaN or an infinity.
        """
        return self._answer("dynamics", self.plant.dynamics, self.states, t, x, u)

    def measure(self, t: float, x: Array, u: Array) -> Array:
        """Outputs, (k,) or (k, N). Raises PlantError as `rates` does."""
        if self.plant.measurement is None:
            rows = [self.states.index(name) for name in self.outputs.names]
            return np.array(x, dtype=np.float64)[rows]
        return self._answer("measurement", self.plant.measurement, self.outputs, t, x, u)

    def rates_or_nan(self, t: float, x: Array, u: Array) -> Array:
        """As `rates`, but a column whose call fails comes back as NaN; the error is kept in `last_error`."""
        return self._columns_or_nan("dynamics", self.plant.dynamics, self.states, t, x, u)

    def measure_or_nan(self, t: float, x: Array, u: Array) -> Array:
        """As `measure`, but a column whose call fails comes back as NaN; the error is kept in `last_error`."""
        if self.plant.measurement is None:
            return self.measure(t, x, u)
        return self._columns_or_nan("measurement", self.plant.measurement, self.outputs, t, x, u)

    def detect(self, t: float, points_x: Array, points_u: Array) -> None:
        """Find out whether the plant is deterministic, and whether it answers batches; points (n, P) and (m, P).

        Columns where the plant fails are left out. Raises PlantError where the same call is answered differently.
        """
        self.why_single = ""
        tried = [("dynamics", self.plant.dynamics, self.states)]
        if self.plant.measurement is not None:
            tried.append(("measurement", self.plant.measurement, self.outputs))
        for what, function, rows in tried:
            reason = self._why_single(what, function, rows, t, points_x, points_u)
            self._batched[what] = not reason
            self.why_single = self.why_single or (f"{what}: {reason}" if reason else "")

    def _single(self, what: str, function: PlantFunction, rows: Signals, t: float, x: Array, u: Array) -> Array:
        self.evaluations += 1 if x.ndim == 1 else x.shape[1]
        told = told_call(t, x, u, self.states, self.inputs)
        given_x, given_u = read_only(x), read_only(u)
        answer = called(function, what, t, given_x, given_u, self.parameters, told)
        if not (np.array_equal(given_x, x) and np.array_equal(given_u, u)):
            raise PlantError(f"{what} changed x or u in place when called with {told}")
        return accepted(answer, what, rows, x, told)

    def _finite(self, what: str, function: PlantFunction, rows: Signals, t: float, x: Array, u: Array) -> Array:
        values = self._single(what, function, rows, t, x, u)
        require_finite(values, what, rows, told_call(t, x, u, self.states, self.inputs))
        return values

    def _answer(self, what: str, function: PlantFunction, rows: Signals, t: float, x: Array, u: Array) -> Array:
        x, u = self._shaped(x, u)
        if x.ndim == 1:
            return self._finite(what, function, rows, t, x, u)
        if self._batched[what]:
            values = self._batch(what, function, rows, t, x, u)
            if np.isfinite(values).all():
                return values
            bad = int(np.argmax(~np.isfinite(values).all(axis=0)))
            return self._finite(what, function, rows, t, x[:, bad], u[:, bad])  # names the culprit
        columns = [self._finite(what, function, rows, t, x[:, j], u[:, j]) for j in range(x.shape[1])]
        return np.stack(columns, axis=-1) if columns else np.empty((len(rows), 0))

    def _batch(self, what: str, function: PlantFunction, rows: Signals, t: float, x: Array, u: Array) -> Array:
        values = self._single(what, function, rows, t, x, u)
        self._calls += 1
        if self._calls % RECHECK == 0 and x.shape[1]:
            j = self._calls // RECHECK % x.shape[1]
            alone = self._single(what, function, rows, t, x[:, j], u[:, j])
            if not _agree(values[:, [j]], alone[:, np.newaxis]):
                told = told_call(t, x[:, j], u[:, j], self.states, self.inputs)
                raise PlantError(f"{what} answers {told} differently alone and among {x.shape[1]} columns")
        return values

    def _columns_or_nan(self, what: str, function: PlantFunction, rows: Signals, t: float, x: Array, u: Array) -> Array:
        x, u = self._shaped(x, u)
        if x.ndim == 1:
            return self._columns_or_nan(what, function, rows, t, x[:, np.newaxis], u[:, np.newaxis])[:, 0]
        values = np.full((len(rows), x.shape[1]), np.nan)
        asked = np.isfinite(x).all(axis=0) & np.isfinite(u).all(axis=0)
        if self._batched[what] and asked.any():
            try:
                values[:, asked] = self._batch(what, function, rows, t, x[:, asked], u[:, asked])
            except PlantError:
                self._one_by_one(values, asked, what, function, rows, t, x, u)
        else:
            self._one_by_one(values, asked, what, function, rows, t, x, u)
        bad = ~np.isfinite(values).all(axis=0)
        if self.last_error is None and (bad & asked).any():
            self._keep_error(what, function, rows, t, x, u, int(np.argmax(bad & asked)))
        values[:, bad] = np.nan
        return values

    def _one_by_one(
        self,
        values: Array,
        asked: Array,
        what: str,
        function: PlantFunction,
        rows: Signals,
        t: float,
        x: Array,
        u: Array,
    ) -> None:
        for j in np.flatnonzero(asked):
            try:
                values[:, j] = self._finite(what, function, rows, t, x[:, j], u[:, j])
            except PlantError as error:
                self.last_error = self.last_error or error

    def _keep_error(
        self, what: str, function: PlantFunction, rows: Signals, t: float, x: Array, u: Array, j: int
    ) -> None:
        try:
            self._finite(what, function, rows, t, x[:, j], u[:, j])
        except PlantError as error:
            self.last_error = error

    def _shaped(self, x: Array, u: Array) -> tuple[Array, Array]:
        x, u = np.asarray(x, dtype=np.float64), np.asarray(u, dtype=np.float64)
        if x.ndim == 2 and u.ndim == 1:
            u = np.broadcast_to(u[:, np.newaxis], (self.m, x.shape[1]))
        if x.shape[0] != self.n or u.shape != (self.m, *x.shape[1:]):
            raise ValueError(f"x {x.shape} and u {u.shape} do not fit a plant of {self.n} states and {self.m} inputs")
        return x, u

    def _why_single(self, what: str, function: PlantFunction, rows: Signals, t: float, x: Array, u: Array) -> str:
        usable, singles = self._tried_twice(what, function, rows, t, x, u)
        if len(usable) < 2:
            return "the plant could not be called at enough points to try a batch"
        # a width that is no dimension of the plant, so that a wrong axis cannot pass for a right one
        width = next(size for size in (5, 7, 11, 13, 17) if size not in (self.n, self.m, self.k))
        columns = [usable[j % len(usable)] for j in range(width)]
        expected = np.stack([singles[j] for j in columns], axis=-1)
        try:
            answer = self._single(what, function, rows, t, x[:, columns], u[:, columns])
        except PlantError as error:
            return _told_reason(str(error), expected, rows)
        if not _agree(answer, expected):
            return f"a call with {width} columns answers otherwise than {width} single calls"
        return ""

    def _tried_twice(
        self, what: str, function: PlantFunction, rows: Signals, t: float, x: Array, u: Array
    ) -> tuple[list[int], dict[int, Array]]:
        singles: dict[int, Array] = {}
        for j in range(x.shape[1]):
            try:
                singles[j] = self._finite(what, function, rows, t, x[:, j], u[:, j])
            except PlantError as error:
                self.last_error = self.last_error or error
        for j in reversed(singles):  # in another order, so that a hidden counter or memory shows
            again = self._single(what, function, rows, t, x[:, j], u[:, j])
            if again.tobytes() != singles[j].tobytes():
                told = told_call(t, x[:, j], u[:, j], self.states, self.inputs)
                row = int(np.argmax(again != singles[j]))
                raise PlantError(
                    f"{what} is not deterministic: called twice with {told} it returned {float(singles[j][row])!r} "
                    f"and {float(again[row])!r} for {rows.names[row]}"
                )
        return list(singles), singles


def _agree(first: Array, second: Array) -> bool:
    scale = np.maximum(np.abs(second).max(axis=1, keepdims=True), np.abs(first).max(axis=1, keepdims=True))
    same = (np.abs(first - second) <= AGREEMENT * scale) | (first == second) | (np.isnan(first) & np.isnan(second))
    return bool(same.all())


def _told_reason(error: str, expected: Array, rows: Signals) -> str:
    constant = [name for name, row in zip(rows.names, expected, strict=True) if np.all(row == row[0])]
    if "unlike shape" in error and constant:
        return f"the row of {constant[0]} is a plain number; write it as 0 * x[0] + number"
    return error
