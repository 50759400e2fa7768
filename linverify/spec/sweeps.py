"""Cells of a swept point: every combination of the swept values, in fixed order, with the names that ids show."""

from __future__ import annotations

import csv
import itertools
import posixpath
import re
from dataclasses import dataclass
from pathlib import Path

from linverify.core import units
from linverify.core.errors import Place
from linverify.core.signals import nearest

from .columns import cell_of, csv_lines, headings
from .kinds import block
from .layout import Cell, Entry, Quantity, Word, matches
from .reader import Reader
from .scalars import quoted
from .source import Block, Listing, Node, Scalar
from .values import quantity, text
from .words import AXIS_WORDS, Kind, Row

MOST_CELLS = 100_000
_NOT_IN_NAMES = re.compile(r"[^A-Za-z0-9_\-+.]")
_PLAIN = Row("*", Kind.QUANTITY, "")


@dataclass(frozen=True, slots=True)
class Sweep:
    """Combinations of swept values in order, each with its place if it has one; names: what is swept."""

    names: tuple[Word, ...]
    rows: tuple[tuple[tuple[Entry[Quantity], ...], Place | None], ...]


def read_sweep(reader: Reader, key: Scalar, node: Node, files: list[Path]) -> Sweep | None:
    """The sweep of a point; a table that was read is added to `files`."""
    if isinstance(node, Block) and node.get("table") is not None:
        return _table(reader, node, files)
    axes: list[tuple[Entry[Quantity], ...]] = []
    names: list[Word] = []
    sound = True
    for name, value in reader.named(node, "sweep", "values to sweep over"):
        values = _axis(reader, f"sweep: {name.text}", name, value)
        names.append(Word(name.text, name.place))
        sound = sound and values is not None
        axes.append(tuple(Entry(name.text, name.place, each) for each in values or ()))
    if isinstance(node, Block) and node.empty:
        reader.tell(key.place, "nothing is written after `sweep`", "`name: values` is expected")
    if not axes or not sound:
        return None
    count = 1
    for axis in axes:
        count *= len(axis)
    if count > MOST_CELLS:
        reader.tell(key.place, f"`sweep` makes {count} operating points", f"at most {MOST_CELLS} are expected")
        return None
    return Sweep(tuple(names), tuple((cell, None) for cell in itertools.product(*axes)))


def _axis(reader: Reader, called: str, key: Scalar, node: Node) -> list[Quantity] | None:
    if isinstance(node, Listing):
        read = [quantity(reader, _PLAIN, called, key, item) for item in node.items]
        if not read:
            reader.tell(node.place, f"`{called}`: the list is empty", "values are expected")
        return None if not read or None in read else [each for each in read if each is not None]
    if isinstance(node, Block):
        return _steps(reader, called, key, node)
    reader.misfit(node, called, "a list of values or {from: , to: , count: } is expected")
    return None


def _steps(reader: Reader, called: str, key: Scalar, node: Block) -> list[Quantity] | None:
    values = block(reader, node, AXIS_WORDS, called)
    if not reader.require(node, AXIS_WORDS, key.place, called) or len(values) < len(AXIS_WORDS):
        return None
    first, last, count = values["from"], values["to"], values["count"]
    end = _end(reader, called, first, last)
    if end is None:
        return None
    if count < 2 or first.value == end:
        reader.tell(node.place, f"`{called}` is a single value", "a count of 2 or more, and two different ends")
    elif count > MOST_CELLS:
        reader.tell(node.place, f"`{called}` has {count} values", f"at most {MOST_CELLS} are expected")
    else:
        step = (end - first.value) / (count - 1)
        inner = [first.value + step * i for i in range(1, count - 1)]
        return [first, *(_computed(value, first) for value in inner), last]
    return None


def _end(reader: Reader, called: str, first: Quantity, last: Quantity) -> float | None:
    """The last value in the unit of the first one; None, and told, where both cannot be compared."""
    if first.unit == last.unit:
        return last.value
    if not (first.unit and last.unit):
        wrong = f"`{called}`: only one of {first.text} and {last.text} has a unit"
        reader.tell(last.place, wrong, "units on both ends, or on neither, are expected")
        return None
    try:
        return units.convert(last.value, last.unit, first.unit, text=last.text)
    except units.UnitError as error:
        expected = f"the other end is {first.text}: {error.expected}" if error.expected else ""
        reader.tell(last.place, f"`{called}`: {error.wrong}", expected, error.hint)
        return None


def _computed(value: float, like: Quantity) -> Quantity:
    """A value between the ends, rounded to the 6 digits that its name shows, so that name and value agree."""
    told = f"{value:.6g}"
    return Quantity(float(told), like.unit, f"{told} {like.unit}".strip(), like.place)


def _table(reader: Reader, node: Block, files: list[Path]) -> Sweep | None:
    for key, _ in node.entries:
        if key.text != "table":
            reader.tell(key.place, f"`sweep`: {quoted(key.text)} beside `table`", "all columns belong in the table")
    table_key, value = next(entry for entry in node.entries if entry[0].text == "table")
    word = text(reader, Row("table", Kind.TEXT, ""), "sweep: table", table_key, value)
    if word is None:
        return None
    path = reader.folder(word.place) / word.text
    try:
        content = path.read_bytes().decode("utf-8-sig")
    except (OSError, ValueError) as error:
        _no_table(reader, word, path, error)
        return None
    files.append(path)
    shown = posixpath.normpath((Path(word.place.file).parent / word.text).as_posix())
    try:
        return _rows(reader, content, shown)
    except csv.Error as error:
        reader.tell(Place(shown), f"this is not CSV: {error}")
        return None


def _no_table(reader: Reader, word: Word, path: Path, error: Exception) -> None:
    if isinstance(error, FileNotFoundError):
        hint = nearest(path.name, [each.name for each in path.parent.glob("*.csv")])
        reader.tell(word.place, f"`sweep: table`: there is no file {quoted(word.text)}", "", hint)
    else:
        how = " as UTF-8 text" if isinstance(error, UnicodeDecodeError) else ""
        reader.tell(word.place, f"`sweep: table`: the file {quoted(word.text)} cannot be read{how}")


def _rows(reader: Reader, content: str, shown: str) -> Sweep | None:
    told = len(reader.problems)
    lines = list(csv_lines(content))
    if len(lines) < 2:
        reader.tell(Place(shown), "the table has no rows", "a line of names and a line for each point are expected")
        return None
    columns = headings(reader, lines[0], shown)
    rows = []
    for number, fields in lines[1:]:
        place = Place(shown, number, 1)
        if len(fields) != len(columns):
            reader.tell(
                place, f"{len(fields)} values in this row", f"{len(columns)} are expected, as in the first line"
            )
            continue
        cells = [
            cell_of(reader, column, field, Place(shown, number, at))
            for column, (field, at) in zip(columns, fields, strict=True)
        ]
        rows.append((tuple(cell for cell in cells if cell is not None), place))
    if len(reader.problems) > told:
        return None
    return Sweep(tuple(Word(name, place) for name, _, place in columns), tuple(rows))


def cells(reader: Reader, name: Scalar, sweep: Sweep | None, skip: tuple[Word, ...]) -> tuple[Cell, ...]:
    """The cells of a point, named and marked as skipped; a pattern that fits none of them is told."""
    if sweep is None:
        return (Cell(name.text, (), None, name.place),)
    made = []
    for values, place in sweep.rows:
        cell = "-".join([name.text, *(_NOT_IN_NAMES.sub("", entry.value.text) for entry in values)])
        skipped = next((pattern for pattern in skip if matches(pattern.text, cell)), None)
        made.append(Cell(cell, values, skipped, place or name.place))
    for pattern in skip:
        if not any(matches(pattern.text, cell.name) for cell in made):
            hint = nearest(pattern.text, [cell.name for cell in made[:1000]])
            reader.tell(pattern.place, f"`skip`: {quoted(pattern.text)} fits no point of this sweep", "", hint)
    return tuple(made)
