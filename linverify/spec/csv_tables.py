"""Cells of CSV files with their places, and a model from named tables, whichever CSV form they came from."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from linverify.core.errors import Place
from linverify.core.signals import nearest

from .claims import COLUMNS_OF, ROWS_OF, Claim, Claimed, Listed, Matrix, Number, fewest_digits, finite, half_units
from .layout import Entry, Word
from .reader import Reader
from .scalars import quoted
from .source import Scalar

_CELL = re.compile(r'[ \t]*"(?P<quoted>(?:[^"]|"")*)"[ \t]*(?=,|\Z)|(?P<plain>[^,]*)')
_ANONYMOUS = re.compile(r"#[0-9]+")
SINGLE = ("dt", "time_unit", "hold", "point", "note")  # words with one value

Line = tuple[Word, ...]


@dataclass(frozen=True, slots=True)
class Table:
    """A matrix with its names; cells by (row, column)."""

    rows: tuple[Word, ...]
    columns: tuple[Word, ...]
    cells: Mapping[tuple[str, str], Word]
    place: Place


def claim_of(
    reader: Reader,
    tables: Mapping[str, Table],
    place: Place,
    said: Mapping[str, Word],
    units: tuple[Entry[Word], ...],
    at: Mapping[str, Claimed],
) -> Claim:
    """One model from tables whose names may stand in different orders: that of A, B and C is taken for all."""
    names: dict[str, Listed] = {}
    for word, table in sorted(tables.items()):
        names.setdefault(ROWS_OF[word], Listed(table.rows, table.place))
        names.setdefault(COLUMNS_OF[word], Listed(table.columns, table.place))
    matrices = {}
    for word, table in tables.items():
        sides = ((table.rows, ROWS_OF[word], "row"), (table.columns, COLUMNS_OF[word], "column"))
        same = [_same(reader, word, own, names[kind], side) for own, kind, side in sides]
        if all(same):
            matrices[word] = _ordered(reader, word, table, names)
    states = names.get("states")
    if states and states.words and all(_ANONYMOUS.fullmatch(word.text) for word in states.words):
        del names["states"]
    step = number(reader, said["dt"], "dt") if "dt" in said else None
    texts = [[cell.text for cell in table.cells.values()] for table in tables.values()]
    return Claim(
        file=place.file,
        place=place,
        matrices=MappingProxyType(matrices),
        names=MappingProxyType(names),
        units=units,
        at=MappingProxyType(dict(at)),
        step=step,
        time_unit=said.get("time_unit"),
        hold=said.get("hold"),
        point=said.get("point"),
        digits=fewest_digits(texts),
    )


def _same(reader: Reader, word: str, own: Sequence[Word], due: Listed, side: str) -> bool:
    """The names of one side of a matrix are those that the model has, in any order."""
    texts, wanted = [name.text for name in own], [name.text for name in due.words]
    where = due.place.file
    for name in own:
        if name.text not in wanted:
            expected = f"{where} has {', '.join(wanted) or 'none'}"
            reader.tell(
                name.place, f"`{word}`: foreign {side} {quoted(name.text)}", expected, nearest(name.text, wanted)
            )
    missing = [name for name in wanted if name not in texts]
    if missing and len(set(texts)) < len(wanted) and all(text in wanted for text in texts):
        place = own[0].place if own else due.place
        reader.tell(place, f"`{word}`: the {side} {quoted(missing[0])} is missing", f"{where} has it")
    return not missing and len(texts) == len(wanted)


def _ordered(reader: Reader, word: str, table: Table, names: Mapping[str, Listed]) -> Matrix:
    rows, columns = names[ROWS_OF[word]].words, names[COLUMNS_OF[word]].words
    values = np.zeros((len(rows), len(columns)))
    for i, row in enumerate(rows):
        for j, column in enumerate(columns):
            cell = table.cells.get((row.text, column.text))
            read = None if cell is None else number(reader, cell, f"{word}[{row.text}, {column.text}]")
            values[i, j] = 0.0 if read is None else read.value
    texts = [
        table.cells[row.text, column.text].text
        for row in rows
        for column in columns
        if (row.text, column.text) in table.cells
    ]
    return Matrix(values, table.place, half_units(values, texts))


def lines_of(reader: Reader, data: bytes, shown: str) -> list[Line] | None:
    """The cells of every line that is not blank, each with its place; None, and told, where the file is no text."""
    try:
        text = data.removeprefix(b"\xef\xbb\xbf").decode("utf-8")
    except UnicodeDecodeError:
        reader.tell(Place(shown), "the file is not UTF-8 text", "save it as UTF-8")
        return None
    lines = []
    for count, line in enumerate(re.split(r"\r\n|\r|\n", text), 1):
        if line.strip(" \t,"):
            lines.append(tuple(_cells(line, shown, count)))
    return lines


def _cells(line: str, shown: str, count: int) -> Iterator[Word]:
    at = 0
    while at <= len(line):
        match = _CELL.match(line, at)
        if match is None:
            return
        inner = match["quoted"]
        text = match["plain"].strip() if inner is None else inner.replace('""', '"').strip()
        lead = len(match.group()) - len(match.group().lstrip())
        yield Word(text, Place(shown, count, at + (lead if text else 0) + 1))
        at = match.end() + 1


def number(reader: Reader, cell: Word, called: str) -> Number | None:
    """The finite number in a cell, or None after telling why there is none."""
    if not cell.text:
        reader.tell(cell.place, f"`{called}`: nothing is written here", "a finite number is expected")
        return None
    return finite(reader, Scalar(cell.text, True, cell.place), called)


def separator(header: Sequence[str]) -> str:
    """A word on separators where the line seems to have others."""
    sign = next((sign for sign in (";", "\t", "|") if sign in "".join(header)), "")
    return f"; values are separated by commas, not by {sign!r}" if sign else ""


def counted(count: int, what: str) -> str:
    """`1 value`, `2 values`."""
    return f"{count} {what}{'' if count == 1 else 's'}"
