"""Scheduled numbers: the value in a CSV table at an operating point, by straight lines between the table's rows."""

from __future__ import annotations

import csv
import math
import posixpath
from bisect import bisect_right
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path

from linverify.core import units
from linverify.core.errors import Place
from linverify.core.signals import nearest

from .atoms import FileWord, Quantity, Word
from .columns import cell_of, csv_lines, headings
from .ground import WHOLE, Ground, listed
from .loop_layout import Schedule
from .reader import Reader
from .scalars import quoted


@dataclass(frozen=True, slots=True)
class Known:
    """What is known of an operating point before its trim: values of signals and parameters, in the plant's units."""

    point: str
    values: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Table:
    """Columns by name, in the order of the file; place: of each heading."""

    shown: str
    columns: Mapping[str, tuple[Quantity, ...]]
    places: Mapping[str, Place]


@dataclass(slots=True)
class Tables:
    """Reads each table once. Mutable: tables are kept; `files` are those that were asked for since it was cleared."""

    ground: Ground
    files: dict[Path, None] = field(default_factory=dict)
    _read: dict[Path, Table | None] = field(default_factory=dict)

    def value(self, schedule: Schedule, known: Known, word: str, unit: str | None) -> tuple[float, Quantity] | None:
        """The scheduled number at the values of signals and parameters that are `known`, in `unit`.

        Returns it with a value of its column, which shows how it is written; None after telling what is wrong.
        unit: None where the number must have none.
        """
        at = self._at(schedule, known.values, word)
        table = self._table(schedule.table, word)
        if at is None or table is None:
            return None
        over = self._column(table, schedule.over, f"{word}: over")
        column = self._chosen(table, schedule, word)
        if over is None or column is None:
            return None
        instants = self._ascending(table, over, schedule.over.text)
        values = [self._number(each, f"{word}", unit) for each in column]
        if instants is None or any(math.isnan(each) for each in values):
            return None
        found = self._between(schedule, table, instants, values, at, known.point)
        return None if found is None else (found, column[0])

    def _at(self, schedule: Schedule, known: Mapping[str, float], word: str) -> float | None:
        ground, over = self.ground, schedule.over
        names = (*ground.signals, *ground.plant.parameters)
        if not ground.known(over.text, over.place, names, "a signal or parameter"):
            return None
        if over.text not in known and not ground.complete:
            return None  # it may be among what could not be read
        if over.text not in known:
            wrong = f"`{word}: over`: {quoted(over.text)} is found by the trim, and not known beforehand"
            expected = f"a value that is held or swept, or a parameter, is expected: {listed(known)}"
            ground.report(over.place, wrong, expected)
            return None
        value = known[over.text]
        return None if math.isnan(value) else value

    def _table(self, file: FileWord, word: str) -> Table | None:
        path = file.folder / file.text
        if path not in self._read:
            self._read[path] = self._load(file, path, word)
        if self._read[path] is not None:
            self.files[path] = None
        return self._read[path]

    def _load(self, file: FileWord, path: Path, word: str) -> Table | None:
        try:
            content = path.read_bytes().decode("utf-8-sig")
        except (OSError, ValueError) as error:
            self._no_table(file, path, word, error)
            return None
        shown = posixpath.normpath((Path(file.place.file).parent / file.text).as_posix())
        reader = Reader({})
        try:
            table = _parsed(reader, content, shown)
        except csv.Error as error:
            reader.tell(Place(shown), f"this is not CSV: {error}")
            table = None
        self.ground.problems += reader.problems
        return None if reader.problems else table

    def _no_table(self, file: FileWord, path: Path, word: str, error: Exception) -> None:
        if isinstance(error, FileNotFoundError):
            hint = nearest(path.name, sorted(each.name for each in path.parent.glob("*.csv")))
            wrong = f"`{word}: table`: there is no file {quoted(file.text)}"
            self.ground.report(file.place, wrong, "a path relative to this file is expected", hint)
        else:
            how = " as UTF-8 text" if isinstance(error, UnicodeDecodeError) else ""
            self.ground.report(file.place, f"`{word}: table`: the file {quoted(file.text)} cannot be read{how}")

    def _column(self, table: Table, word: Word, called: str) -> tuple[Quantity, ...] | None:
        if word.text in table.columns:
            return table.columns[word.text]
        wrong = f"`{called}`: {table.shown} has no column {quoted(word.text)}"
        self.ground.report(word.place, wrong, f"it has {listed(table.columns)}", nearest(word.text, table.columns))
        return None

    def _chosen(self, table: Table, schedule: Schedule, word: str) -> tuple[Quantity, ...] | None:
        """The column with the values: the one that is named, else the only one beside `over`."""
        if schedule.column is not None:
            if schedule.column.text == schedule.over.text:
                wrong = f"`{word}: column` names {quoted(schedule.column.text)}, which the table is scheduled over"
                self.ground.report(schedule.column.place, wrong, "another column is expected")
                return None
            return self._column(table, schedule.column, f"{word}: column")
        others = [name for name in table.columns if name != schedule.over.text]
        if len(others) == 1:
            return table.columns[others[0]]
        wrong = f"`{word}`: {table.shown} has {len(others)} columns beside {quoted(schedule.over.text)}"
        expected = (
            f"`column: NAME` is expected, one of {listed(others)}" if others else "a column of values is expected"
        )
        self.ground.report(schedule.place, wrong, expected)
        return None

    def _ascending(self, table: Table, column: tuple[Quantity, ...], name: str) -> list[float] | None:
        values = [self.ground.signal(each, name, name) for each in column]
        if any(math.isnan(value) for value in values):
            return None
        for index in range(1, len(values)):
            if values[index] <= values[index - 1]:
                wrong = f"`{name}`: {quoted(column[index].text)} is not above {quoted(column[index - 1].text)}"
                self.ground.report(column[index].place, wrong, "rows in ascending order are expected")
                return None
        return values

    def _number(self, quantity: Quantity, word: str, unit: str | None) -> float:
        return plain(self.ground, quantity, word) if unit is None else gain_of(self.ground, quantity, unit, word)

    def _between(
        self, schedule: Schedule, table: Table, instants: list[float], values: list[float], at: float, point: str
    ) -> float | None:
        name = schedule.over.text
        low, high = instants[0], instants[-1]
        slack = WHOLE * max(abs(low), abs(high))
        if not low - slack <= at <= high + slack:
            unit = self.ground.plant.unit(name)
            wrong = f"{quoted(name)} is {units.told(at, unit)} at {point}, outside the table {table.shown}"
            self.ground.report(
                schedule.place, wrong, f"it goes from {units.told(low, unit)} to {units.told(high, unit)}"
            )
            return None
        return interpolated(instants, values, at)


def interpolated(instants: list[float], values: list[float], at: float) -> float:
    """The value at `at` on the straight line between its neighbours; the first or last value beyond the ends."""
    index = bisect_right(instants, at)
    if index == 0 or index == len(instants):
        return values[min(index, len(instants) - 1)]
    share = (at - instants[index - 1]) / (instants[index] - instants[index - 1])
    return values[index - 1] + share * (values[index] - values[index - 1])


def gain_of(ground: Ground, quantity: Quantity, unit: str, word: str) -> float:
    """The quantity in `unit`, temperatures as differences; NaN after telling why not."""
    return ground.amount(quantity, unit, word, difference=True)


def plain(ground: Ground, quantity: Quantity, word: str) -> float:
    """A number that has no unit of its own; NaN after telling where it was given one."""
    if quantity.unit:
        wrong = f"`{word}`: {quoted(quantity.text)} has a unit"
        ground.report(quantity.place, wrong, "a plain number, for the plant's units, is expected")
        return math.nan
    return quantity.value


def _parsed(reader: Reader, content: str, shown: str) -> Table | None:
    lines = list(csv_lines(content))
    if len(lines) < 2:
        reader.tell(Place(shown), "the table has no rows", "a line of names and a line for each value are expected")
        return None
    columns = headings(reader, lines[0], shown)
    cells: dict[str, list[Quantity]] = {name: [] for name, _, _ in columns if name}
    for number, fields in lines[1:]:
        if len(fields) != len(columns):
            expected = f"{len(columns)} are expected, as in the first line"
            reader.tell(Place(shown, number, 1), f"{len(fields)} values in this row", expected)
            continue
        for column, (text, at) in zip(columns, fields, strict=True):
            cell = cell_of(reader, column, text, Place(shown, number, at))
            if cell is not None:
                cells[cell.name].append(cell.value)
    if reader.problems:
        return None
    return Table(shown, {name: tuple(values) for name, values in cells.items()}, {name: at for name, _, at in columns})
