"""Tables in CSV whose first line names the columns, `speed` or `speed [kn]`, and whose rows hold quantities."""

from __future__ import annotations

import csv
import re
from collections.abc import Iterator
from typing import TypeAlias

from linverify.core.errors import Place

from . import scalars
from .atoms import Entry, Quantity
from .reader import Reader
from .scalars import quoted

_HEADING = re.compile(r"\s*([^\s\[\]]+)\s*(?:\[([^\[\]]*)\])?\s*")

Column: TypeAlias = tuple[str, str, Place]  # name, unit, place of the heading; all empty for what is no name


def csv_lines(content: str) -> Iterator[tuple[int, list[tuple[str, int]]]]:
    """Lines that hold something: their number, and each field with its column."""
    for number, line in enumerate(content.splitlines(), 1):
        if line.strip() and not line.startswith("#"):
            fields, at = [], 1
            for field in next(csv.reader([line])):
                fields.append((field.strip(), at + len(field) - len(field.lstrip())))
                at += len(field) + 1
            yield number, fields


def headings(reader: Reader, line: tuple[int, list[tuple[str, int]]], shown: str) -> list[Column]:
    """The columns that the first line names; what is no name, or stands there twice, is told."""
    columns: list[Column] = []
    for field, at in line[1]:
        place = Place(shown, line[0], at)
        match = _HEADING.fullmatch(field)
        if match is None:
            reader.tell(
                place, f"{quoted(field)} is no name of a column", "a name is expected, as in speed or speed [kn]"
            )
        elif match.group(1) in (name for name, _, _ in columns):
            reader.tell(place, f"the column {quoted(match.group(1))} is there twice")
        columns.append((match.group(1), (match.group(2) or "").strip(), place) if match else ("", "", place))
    return columns


def cell_of(reader: Reader, column: Column, field: str, place: Place) -> Entry[Quantity] | None:
    """The quantity in one field, in the unit of its column or in its own; None after telling why there is none."""
    name, unit, heading = column
    if not name:
        return None
    read = reader.judged(scalars.amount(field), place, name)
    if read is None:
        return None
    if read.unit and unit:
        reader.tell(place, f"`{name}`: {quoted(field)} has a unit, and so has the column", "one of them is enough")
        return None
    told = field if read.unit or not unit else f"{field} {unit}"
    return Entry(name, heading, Quantity(read.value, read.unit or unit, told, place))
