"""Controllers from words to state space in the plant's units: pid, num and den, matrices, static gains."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from linverify.core import realize, units
from linverify.core.errors import Place
from linverify.core.loop import Controller
from linverify.core.model import Array, frozen_array
from linverify.core.realize import StateSpace

from .atoms import Quantity
from .ground import Ground
from .loop_layout import Gain, Grid, Line, MatricesAsk, PidAsk, RationalAsk, Schedule
from .schedules import Known, Tables, gain_of, plain

_SISO = "one signal measured and one moved are expected"


@dataclass(frozen=True, slots=True)
class Wiring:
    """What a controller stands between. called: the loop, as messages call it.

    measured, moved: names in order with the plant's units; sample: sample time in the plant's time unit, None for a
    continuous controller; known: what is known before the trim.
    """

    called: str
    measured: tuple[tuple[str, str], ...]
    moved: tuple[tuple[str, str], ...]
    sample: float | None
    known: Known

    @property
    def siso(self) -> bool:
        """One signal in, one out."""
        return len(self.measured) == 1 and len(self.moved) == 1

    @property
    def shape(self) -> str:
        """`2 measured and 1 moved signal`."""
        k, m = len(self.measured), len(self.moved)
        return f"{k} measured and {m} moved signal{'' if m == 1 else 's'}"


@dataclass(slots=True)
class Written:
    """Binds controllers that are written in the spec itself. Mutable: `told` collects what became of schedules."""

    ground: Ground
    tables: Tables
    wiring: Wiring
    told: list[str] = field(default_factory=list)

    def bind(self, ask: PidAsk | RationalAsk | MatricesAsk) -> StateSpace | None:
        """(A, B, C, D), or None after telling what is wrong."""
        if isinstance(ask, PidAsk):
            return self._pid(ask)
        return self._rational(ask) if isinstance(ask, RationalAsk) else self._matrices(ask)

    def _number(self, gain: Gain, word: str, unit: Callable[[], str] | None) -> float:
        """The number in a unit of the plant's, or a plain one where there is no `unit`; NaN where it was refused."""
        if isinstance(gain, Quantity):
            if unit is None:
                return plain(self.ground, gain, word)
            return gain_of(self.ground, gain, unit(), word) if gain.unit else gain.value
        found = self.tables.value(gain, self.wiring.known, word, None if unit is None else unit())
        if found is None:
            return math.nan
        value, written = found
        self._tell(gain, word, value, "" if unit is None else unit(), written.unit)
        return value

    def _tell(self, gain: Schedule, word: str, value: float, unit: str, written: str) -> None:
        over = gain.over.text
        at = units.told(self.wiring.known.values[over], self.ground.plant.unit(over))
        told = units.told(value, unit)
        if written and written != unit and not math.isnan(value):  # as the reader of the table knows it
            told += f" ({units.told(units.convert(value, unit, written, difference=True), written)})"
        self.told.append(f"{word.rpartition(': ')[2]} = {told} at {over} = {at}")

    def _gain_unit(self, row: int, column: int, above: Sequence[str] = (), below: Sequence[str] = ()) -> str:
        """The unit of what is moved over that of what is measured, times `above` over `below`."""
        return _composed((self.wiring.moved[row][1], *above), (self.wiring.measured[column][1], *below))

    def _pid(self, ask: PidAsk) -> StateSpace | None:
        called, time = f"{self.wiring.called}: controller: pid", self.ground.plant.time_unit
        if not self._is_siso(called, ask.place):
            return None
        due = {
            "kp": lambda: self._gain_unit(0, 0),
            "ki": lambda: self._gain_unit(0, 0, below=(time,)),
            "kd": lambda: self._gain_unit(0, 0, above=(time,)),
            "filter": lambda: time,
        }
        read = {
            word: self._number(gain, f"{called}: {word}", unit)
            for word, unit in due.items()
            if (gain := getattr(ask, word)) is not None
        }
        if any(math.isnan(value) for value in read.values()):
            return None
        if ask.filter is not None and read["filter"] <= 0.0:
            wrong = f"`{called}: filter`: {units.told(read['filter'], time)} is not above zero"
            self.ground.report(ask.filter.place, wrong, "a time constant is expected")
            return None
        made = realize.pid(*(read.get(word, 0.0) for word in due))
        if self.wiring.sample is None:
            return made
        sample = units.told(self.wiring.sample, time)
        self.told.append(f"a difference equation by the trapezoidal rule at {sample}")
        if ask.kd is not None and 2.0 * read["filter"] < self.wiring.sample:
            self.told.append("its filter is shorter than half the sample time, and rings")
        return realize.trapezoidal(*made, self.wiring.sample)

    def _is_siso(self, called: str, place: Place) -> bool:
        if self.wiring.siso:
            return True
        self.ground.report(place, f"`{called}` for {self.wiring.shape}", _SISO)
        return False

    def _rational(self, ask: RationalAsk) -> StateSpace | None:
        called = f"{self.wiring.called}: controller"
        if not self._is_siso(f"{called}: num", ask.num.place):
            return None
        num, den = self._line(ask.num, f"{called}: num"), self._line(ask.den, f"{called}: den")
        if num is None or den is None:
            return None
        if not any(den):
            wrong = f"`{called}: den` is zero"
            self.ground.report(ask.den.place, wrong, "at least one coefficient that is not zero is expected")
            return None
        above, below = _degree(num), _degree(den)
        if above > below:
            wrong = f"`{called}`: num of degree {above} over den of degree {below} is improper"
            self.ground.report(ask.num.place, wrong, "a degree of num that is no higher than that of den is expected")
            return None
        with np.errstate(over="ignore", invalid="ignore"):
            return realize.rational(num, den)

    def _line(self, line: Line, word: str) -> list[float] | None:
        numbers = [self._number(gain, word, None) for gain in line.numbers]
        return None if any(math.isnan(number) for number in numbers) else numbers

    def _matrices(self, ask: MatricesAsk) -> StateSpace | None:
        called, wiring = f"{self.wiring.called}: controller", self.wiring
        n = 0 if ask.A is None else self._side(ask.A, f"{called}: A")
        if n is None:
            return None
        k, m = len(wiring.measured), len(wiring.moved)
        measured, moved = _counted(k, "measured signal"), _counted(m, "signal moved", "signals moved")
        states = _counted(n, "state")
        A = self._grid(ask.A, f"{called}: A", (n, n), (states, states))
        B = self._grid(ask.B, f"{called}: B", (n, k), (states, measured))
        C = self._grid(ask.C, f"{called}: C", (m, n), (moved, states))
        D = self._grid(ask.D, f"{called}: {'gain' if ask.gain else 'D'}", (m, k), (moved, measured), self._gain_unit)
        if A is None or B is None or C is None or D is None:
            return None
        return A, B, C, D

    def _side(self, grid: Grid, called: str) -> int | None:
        """How many states a square A has."""
        rows, columns = len(grid.rows), len(grid.rows[0].numbers)
        if rows == columns:
            return rows
        self.ground.report(grid.place, f"`{called}` is {rows} x {columns}", "a square matrix is expected")
        return None

    def _grid(
        self,
        grid: Grid | None,
        called: str,
        shape: tuple[int, int],
        due: tuple[str, str],
        unit: Callable[[int, int], str] | None = None,
    ) -> Array | None:
        """The numbers of a matrix of `shape`; due: what its rows and columns stand for; zeros where there is none."""
        if grid is None:
            return np.zeros(shape)
        rows, columns = shape
        gains = [gain for line in grid.rows for gain in line.numbers]
        size = (len(grid.rows), len(grid.rows[0].numbers))
        one_way = grid.flat and len(gains) == rows * columns and 1 in shape
        if size != shape and not one_way:
            told = _counted(len(gains), "number") if grid.flat else f"{size[0]} x {size[1]}"
            turned = "; its rows and columns seem to be swapped" if not grid.flat and size == shape[::-1] else ""
            wrong = f"`{called}` is {told}"
            self.ground.report(grid.place, wrong, f"rows for {due[0]} and columns for {due[1]} are expected{turned}")
            return None
        numbers = []
        for index, gain in enumerate(gains):
            row, column = divmod(index, columns)
            of_entry = None if unit is None else _at(unit, row, column)
            numbers.append(self._number(gain, called, of_entry))
        return None if any(math.isnan(number) for number in numbers) else np.array(numbers).reshape(shape)


def controller_of(
    ground: Ground, found: StateSpace | None, step: float | None, text: str, place: Place, called: str
) -> Controller | None:
    """A controller of finite numbers, or None after telling that they are not."""
    if found is None:
        return None
    if not all(np.isfinite(each).all() for each in found):
        ground.report(place, f"`{called}: controller` holds numbers too large in the plant's units")
        return None
    A, B, C, D = (frozen_array(each) for each in found)
    return Controller(A, B, C, D, step, text)


def _at(unit: Callable[[int, int], str], row: int, column: int) -> Callable[[], str]:
    return lambda: unit(row, column)


def _composed(above: Sequence[str], below: Sequence[str]) -> str:
    try:
        return units.composed(above, below)
    except units.UnitError:  # of the plant's own units, which is told where they are converted into
        return f"{'*'.join(above)}/({'*'.join(below)})"


def _degree(coefficients: Sequence[float]) -> int:
    return max((len(coefficients) - 1 - index for index, value in enumerate(coefficients) if value), default=0)


def _counted(count: int, noun: str, nouns: str = "") -> str:
    return f"{count} {noun}" if count == 1 else f"{count} {nouns or noun + 's'}"
