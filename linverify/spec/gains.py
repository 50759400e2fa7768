"""Readers of what controllers are written with: numbers that may be scheduled, lists of them, and matrices."""

from __future__ import annotations

from linverify.core.errors import Place

from .atoms import FileWord, Quantity, Word
from .loop_layout import Gain, Grid, Line, Schedule
from .loop_words import SCHEDULE_WORDS, SETTLING_WORDS
from .reader import Reader
from .scalars import fraction as a_fraction
from .source import Block, Broken, Listing, Node, Scalar
from .values import each_once, fraction, quantity, text
from .words import Kind, Row, default_of

_NO_KEY = Scalar("", True, Place(""))
_NUMBER = "a number is expected, alone or with its unit, or {table: FILE, over: NAME}"
_ROWS = "a list of rows is expected, as in [[1, 0], [0, 1]]"


def gain(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Gain | None:
    """A number, or a schedule of it."""
    if isinstance(node, Block):
        return _schedule(reader, called, key, node)
    if isinstance(node, Listing):
        reader.misfit(node, called, _NUMBER)
        return None
    return quantity(reader, row, called, key, node)


def _schedule(reader: Reader, called: str, key: Scalar, node: Block) -> Schedule | None:
    if node.empty:
        reader.tell(node.place, f"`{called}`: an empty group", _NUMBER)
        return None
    read: dict[str, Word] = {}
    for row, inner, value in reader.words(node, SCHEDULE_WORDS, called):
        word = text(reader, row, f"{called}: {row.word}", inner, value)
        if word is not None:
            read[row.word] = word
    if not reader.require(node, SCHEDULE_WORDS, key.place if key.text else node.place, called):
        return None
    table, over = read.get("table"), read.get("over")
    if table is None or over is None or len(read) < len(node.entries):
        return None
    file = FileWord(table.text, reader.folder(table.place), table.place)
    return Schedule(file, over, read.get("column"), node.place)


def coefficients(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Line | None:
    """A list of numbers, at least one."""
    return _line(reader, row, called, node, "a list of numbers is expected, as in [1, 0.5]")


def _line(reader: Reader, row: Row, called: str, node: Node, expected: str) -> Line | None:
    items = reader.items(node, called, expected)
    if items is None:
        return None
    if not items:
        reader.tell(node.place, f"`{called}`: the list is empty", expected)
        return None
    inner = Row("*", Kind.GAIN, "", dimension=row.dimension)
    numbers = [gain(reader, inner, called, _NO_KEY, item) for item in items]
    found = tuple(number for number in numbers if number is not None)
    return Line(found, node.place) if len(found) == len(items) else None


def matrix(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Grid | None:
    """A list of rows of equal length; a line of numbers or one number, which the loop's signals give a shape."""
    if isinstance(node, Scalar | Block):
        number = gain(reader, row, called, key, node)
        return None if number is None else Grid((Line((number,), node.place),), True, node.place)
    if not isinstance(node, Listing):
        return None
    if not any(isinstance(item, Listing) for item in node.items):
        line = _line(reader, row, called, node, _ROWS)
        return None if line is None else Grid((line,), True, node.place)
    rows = []
    for item in node.items:
        if isinstance(item, Scalar | Block):
            reader.tell(item.place, f"`{called}`: a number stands beside rows", _ROWS)
            return None
        rows.append(None if isinstance(item, Broken) else _line(reader, row, called, item, _ROWS))
    read = [line for line in rows if line is not None]
    if len(read) < len(rows):
        return None
    odd = next((line for line in read if len(line.numbers) != len(read[0].numbers)), None)
    if odd is not None:
        wrong = f"`{called}`: rows of {len(read[0].numbers)} and of {len(odd.numbers)}"
        reader.tell(odd.place, wrong, "as many numbers in each row are expected")
        return None
    return Grid(tuple(read), False, node.place)


def settling(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Quantity, float] | None:
    """A time, or a time and the band that the response must stay in, as a fraction of the final value."""
    band = a_fraction(default_of(SETTLING_WORDS, "within"))
    within = band if isinstance(band, float) else 0.0
    if not isinstance(node, Block):
        time = quantity(reader, SETTLING_WORDS[0], called, key, node)
        return None if time is None else (time, within)
    time = None
    sound = reader.require(node, SETTLING_WORDS, key.place, called)
    for inner, inner_key, value in reader.words(node, SETTLING_WORDS, called):
        if inner.word == "time":
            time = quantity(reader, inner, f"{called}: time", inner_key, value)
        else:
            share = fraction(reader, inner, f"{called}: within", inner_key, value)
            sound, within = sound and share is not None, share or within
    if within >= 1.0:
        place = next(value.place for inner_key, value in node.entries if inner_key.text == "within")
        reader.tell(place, f"`{called}: within`: a band as wide as the step", "less than 100 % is expected")
        return None
    return (time, within) if sound and time is not None else None


def rules(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Word, ...] | None:
    """A name or a list of names, each once."""
    expected = "the name of a rule is expected, or a list of names"
    items = node.items if isinstance(node, Listing) else (node,)
    if not items:
        reader.tell(node.place, f"`{called}`: the list is empty", expected)
        return None
    return each_once(reader, items, called, expected) or None
