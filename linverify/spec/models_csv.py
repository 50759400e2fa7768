"""A local model as a folder of tables in CSV, one a matrix.

A.csv, B.csv, C.csv and D.csv have the names of their columns in the first line and of their rows in the first column;
point.csv (name,value,unit) has the operating point and units, model.csv (word,value) dt, time_unit, hold and point.
States called #1, #2, ... are anonymous.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from pathlib import Path

from linverify.core.errors import Place
from linverify.core.signals import nearest

from .claims import ANY, MATRICES, Claim, Claimed, unknown
from .csv_tables import SINGLE, Line, Table, claim_of, counted, lines_of, number, separator
from .layout import Entry, Word
from .reader import Reader
from .scalars import quoted

FILES = ("A.csv", "B.csv", "C.csv", "D.csv", "point.csv", "model.csv")


def files_in(folder: Path) -> dict[str, Path]:
    """The CSV files of a folder by name, in order."""
    return {path.name: path for path in sorted(folder.glob("*.csv"))}


def read_folder(reader: Reader, files: Mapping[str, bytes], shown: str) -> dict[str, Claim]:
    """The model of a folder; files: what lies in it, by name. Mistakes go to `reader`."""
    before = len(reader.problems)
    tables: dict[str, Table] = {}
    for name, data in files.items():
        if name not in FILES:
            where = Place(f"{shown}/{name}")
            reader.tell(where, "no part of a model", f"one of {', '.join(FILES)} is expected", nearest(name, FILES))
        elif name[:-4] in MATRICES and (table := _table(reader, data, f"{shown}/{name}", name[:-4])) is not None:
            tables[name[:-4]] = table
    said: dict[str, Word] = {}
    units: tuple[Entry[Word], ...] = ()
    at: dict[str, Claimed] = {}
    if "model.csv" in files:
        said = _said(reader, files["model.csv"], f"{shown}/model.csv")
    if "point.csv" in files:
        at, units = _point(reader, files["point.csv"], f"{shown}/point.csv")
    claim = claim_of(reader, tables, Place(shown), said, units, at)
    return {"": claim} if len(reader.problems) == before else {}


def _table(reader: Reader, data: bytes, shown: str, word: str) -> Table | None:
    """A matrix with the names of its columns in the first line and those of its rows in the first column."""
    lines = lines_of(reader, data, shown)
    if lines is None:
        return None
    if not lines:
        reader.tell(Place(shown), "nothing is written in this file", "names of columns are expected in its first line")
        return None
    columns = lines[0][1:]
    if not columns and separator([cell.text for cell in lines[0]]):
        header = [cell.text for cell in lines[0]]
        reader.tell(lines[0][0].place, f"the first line is one name{separator(header)}")
        return None
    cells: dict[tuple[str, str], Word] = {}
    for line in lines[1:]:
        if len(line) - 1 != len(columns):
            wrong = f"`{word}`: {counted(len(line) - 1, 'number')} in the row {quoted(line[0].text)}"
            reader.tell(line[0].place, wrong, f"{counted(len(columns), 'column')} are named in the first line")
            return None
        for column, value in zip(columns, line[1:], strict=True):
            cells.setdefault((line[0].text, column.text), value)
    rows = tuple(line[0] for line in lines[1:])
    twice = [_twice(reader, word, names, what) for names, what in ((rows, "row"), (columns, "column"))]
    return None if any(twice) else Table(rows, columns, cells, Place(shown))


def _twice(reader: Reader, word: str, names: Iterable[Word], what: str) -> bool:
    seen: set[str] = set()
    for name in names:
        if name.text in seen:
            reader.tell(name.place, f"`{word}`: the {what} {quoted(name.text)} stands there twice")
            return True
        seen.add(name.text)
    return False


def _said(reader: Reader, data: bytes, shown: str) -> dict[str, Word]:
    said: dict[str, Word] = {}
    for line in _body(reader, data, shown, ("word", "value")):
        word = line[0]
        if word.text not in SINGLE:
            unknown(reader, word, SINGLE)
        elif word.text in said:
            reader.tell(word.place, f"{quoted(word.text)} is written twice")
        else:
            said[word.text] = line[1]
    return said


def _point(reader: Reader, data: bytes, shown: str) -> tuple[dict[str, Claimed], tuple[Entry[Word], ...]]:
    """Values by name, whichever of x0, u0 and y0 they belong to, and units."""
    values, units = [], []
    lines = _body(reader, data, shown, ("name", "value", "unit"))
    _twice(reader, "point", [line[0] for line in lines], "row")
    for name, value, *unit in lines:
        if value.text:
            read = number(reader, value, name.text)
            values += [] if read is None else [Entry(name.text, name.place, read)]
        if unit and unit[0].text:
            units.append(Entry(name.text, name.place, unit[0]))
    return {ANY: Claimed(tuple(values), None, Place(shown))}, tuple(units)


def _body(reader: Reader, data: bytes, shown: str, header: tuple[str, ...]) -> list[Line]:
    """Lines under a fixed first line; the last column may be left out."""
    lines = lines_of(reader, data, shown)
    if lines is None:
        return []
    given = tuple(cell.text for cell in lines[0]) if lines else ()
    if given not in (header, header[:-1] if len(header) > 2 else header):
        place = lines[0][0].place if lines else Place(shown)
        reader.tell(place, f"the first line is {quoted(','.join(given))}", f"{','.join(header)} is expected")
        return []
    for line in lines[1:]:
        if len(line) != len(given):
            reader.tell(line[0].place, f"{counted(len(line), 'value')} in this line", f"{len(given)} are expected")
    return [line for line in lines[1:] if len(line) == len(given)]
