"""Nodes to values of the layout, one reader a kind of value; mistakes are collected, never raised.

A reader returns None for what it cannot use, after telling why. `Broken` nodes were told of before and are passed
over in silence.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any, TypeVar

from ..core.errors import Place, Problem
from ..core.signals import nearest
from . import scalars
from .layout import AmplitudeAsk, Entry, Expect, FileWord, Limits, PlantRef, Quantity, Word
from .scalars import Wrong, quoted
from .source import Block, Broken, Listing, Node, Scalar
from .words import FORMAT, SPEC_WORDS, Kind, Row, row_of

T = TypeVar("T")
Values = dict[str, Any]  # word -> what its reader made of it; a word that could not be read is left out
_MOST_LISTED = 10
_NAME = re.compile(r"[A-Za-z0-9_\-+.]+")


class Reader:
    """Reads nodes by the grammar and collects what is wrong.

    folders: shown name of a file -> its folder, to which file names in it are relative.
    """

    def __init__(self, folders: Mapping[str, Path]) -> None:
        self.problems: list[Problem] = []
        self._folders = folders

    def tell(self, place: Place, wrong: str, expected: str = "", hint: str = "") -> None:
        """Add a mistake."""
        self.problems.append(Problem(place, wrong, expected, hint))

    def folder(self, place: Place) -> Path:
        """Folder of the file that `place` is in."""
        return self._folders[place.file]

    def words(self, node: Node, rows: tuple[Row, ...], called: str) -> Iterator[tuple[Row, Scalar, Node]]:
        """The known, available words of a block with their rows; the others are told."""
        if not isinstance(node, Block):
            self.misfit(node, called, "a group of " + _listed(rows))
            return
        for key, value in node.entries:
            row = row_of(rows, key.text)
            if row is None:
                self._unknown(key, rows, called)
            elif not row.available:
                self.tell(key.place, f"`{row.word}` is not available in this version")
            elif not self.is_missing(value, key, row.word, row.kind.value):
                yield row, key, value

    def block(self, node: Node, rows: tuple[Row, ...], called: str) -> Values:
        """All words of a block, read by the kinds of their rows."""
        values: Values = {}
        for row, key, value in self.words(node, rows, called):
            read = READERS[row.kind](self, row, row.word, key, value)
            if read is not None:
                values[row.word] = read
        return values

    def require(self, node: Block, rows: tuple[Row, ...], place: Place, called: str) -> bool:
        """Tell of required words that are not written; place is that of the block's own word."""
        missing = [row.word for row in rows if row.required and row.word not in node.words]
        for word in missing:
            if not misspelt(word, node, rows):
                self.tell(place, f"`{word}` is missing in `{called}`" if called else f"`{word}` is missing")
        return not missing

    def named(self, node: Node, called: str, wanted: str = "") -> Iterator[tuple[Scalar, Node]]:
        """Names and values of a group whose names are the user's own."""
        if not isinstance(node, Block):
            self.misfit(node, called, "a group of `name: value` is expected")
            return
        for key, value in node.entries:
            if not self.is_missing(value, key, f"{called}: {key.text}", wanted or "a value"):
                yield key, value

    def is_missing(self, node: Node, key: Scalar, called: str, wanted: str) -> bool:
        """True, and told, where nothing stands behind a word."""
        if isinstance(node, Broken):
            return True
        if isinstance(node, Scalar) and node.plain and scalars.is_null(node.text):
            if ":" in key.text and " " not in key.text.split(":")[0]:
                self.tell(key.place, f"{quoted(key.text)} is one word to YAML", "write a space after ':'")
            else:
                self.tell(key.place, f"nothing is written after `{called}`", f"{wanted} is expected")
            return True
        return False

    def misfit(self, node: Node, called: str, expected: str) -> None:
        """Tell that a node has the wrong form: text, a list or a group where another is due."""
        form = {Scalar: "text", Listing: "a list", Block: "a group"}
        if isinstance(node, Scalar):
            self.tell(node.place, f"`{called}`: {quoted(node.text)} is no value for this word", expected)
        elif not isinstance(node, Broken):
            self.tell(node.place, f"`{called}`: {form[type(node)]} is no value for this word", expected)

    def scalar(self, node: Node, called: str, expected: str) -> Scalar | None:
        """The node if it is a scalar with something in it."""
        if isinstance(node, Scalar) and not (node.plain and scalars.is_null(node.text)):
            return node
        if isinstance(node, Scalar):
            self.tell(node.place, f"`{called}`: nothing is written here", expected)
        else:
            self.misfit(node, called, expected)
        return None

    def judged(self, read: T | Wrong, place: Place, called: str) -> T | None:
        """What a scalar reader returned, or None and a mistake."""
        if isinstance(read, Wrong):
            self.tell(place, f"`{called}`: {read.wrong}", read.expected)
            return None
        return read

    def items(self, node: Node, called: str, expected: str, count: int | None = None) -> tuple[Node, ...] | None:
        """Items of a list, of a fixed count where one is given."""
        if not isinstance(node, Listing):
            self.misfit(node, called, expected)
            return None
        if count is not None and len(node.items) != count:
            many = f"{len(node.items)} value{'' if len(node.items) == 1 else 's'}"
            self.tell(node.place, f"`{called}`: {many} in the list", expected)
            return None
        return node.items

    def sign(self, value: float, row: Row, text: str, place: Place, called: str) -> bool:
        """True where the value has the sign that its word asks for; else told."""
        if (row.sign == "+" and value <= 0) or (row.sign == "0+" and value < 0):
            limit = "more than 0" if row.sign == "+" else "0 or more"
            self.tell(place, f"`{called}`: {quoted(text)} is not {limit}", f"{limit} is expected")
            return False
        return True

    def _unknown(self, key: Scalar, rows: tuple[Row, ...], called: str) -> None:
        known = [row.word for row in rows]
        where = f"in `{called}` " if called else ""
        homes = _homes(key.text)
        hint = nearest(key.text, known)
        if ":" in key.text:
            self.tell(key.place, f"unknown word {quoted(key.text)}", "a space belongs after ':'")
        elif homes:
            self.tell(key.place, f"unknown word {quoted(key.text)}", f"{where}it has no place; it belongs in {homes}")
        elif hint and len(known) > _MOST_LISTED:
            self.tell(key.place, f"unknown word {quoted(key.text)}", hint=hint)
        else:
            self.tell(key.place, f"unknown word {quoted(key.text)}", f"{where}{_listed(rows)}", hint)


def _listed(rows: Sequence[Row]) -> str:
    words = [row.word for row in rows if row.available]
    return (words[0] if len(words) == 1 else "one of " + ", ".join(words)) + " is expected"


def _homes(word: str) -> str:
    """Where a word of the language belongs, for one that was written elsewhere."""
    found: dict[str, None] = {}

    def walk(rows: tuple[Row, ...], home: str) -> None:
        for row in rows:
            if row.word == word and home:
                found[f"`{home}`"] = None
            walk(row.of, home if row.word == "*" else row.word)

    walk(SPEC_WORDS, "the spec itself")
    return " or ".join(home.replace("`the spec itself`", "the spec itself") for home in found)


def misspelt(word: str, node: Block, rows: tuple[Row, ...]) -> bool:
    """True where an unknown word, told already, was probably meant to be `word`."""
    return bool(nearest(word, [each for each in node.words if row_of(rows, each) is None]))


def check_name(reader: Reader, name: Scalar, what: str) -> bool:
    """True where `name` can stand in an id; else told."""
    if _NAME.fullmatch(name.text):
        return True
    expected = "a name is made of letters, digits, '_', '-', '+' and '.'"
    reader.tell(name.place, f"{quoted(name.text)} is no name for {what}", expected)
    return False


# readers of one kind each: (reader, row, how messages call the word, the word, the value)


def quantity(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Quantity | None:
    """A number, alone or with a unit, of the sign that the row asks for."""
    scalar = reader.scalar(node, called, "a number is expected, alone or with its unit, as in '12 s'")
    if scalar is None:
        return None
    read = reader.judged(scalars.amount(scalar.text, scalar.plain), scalar.place, called)
    if read is None:
        return None
    if "+-" in read.unit:
        reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} has a tolerance", "only `expect` takes one")
        return None
    if row.kind in (Kind.QUANTITY, Kind.WIDER_OF) and row.sign == "+" and row.dimension == "the signal's" \
            and read.unit == "%" and row.word in _BANDS_WITH_SIZE:  # fmt: skip
        expected = f"write `relative: {scalar.text}`, or the size in the signal's unit"
        reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} is a share, not a size", expected)
        return None
    if not reader.sign(read.value, row, scalar.text, scalar.place, called):
        return None
    return Quantity(read.value, read.unit, scalar.text.strip(), scalar.place)


_BANDS_WITH_SIZE = ("peak", "rms", "final", "wider_of")


def _number(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> float | None:
    scalar = reader.scalar(node, called, "a number without a unit is expected")
    if scalar is None:
        return None
    read = reader.judged(scalars.number(scalar.text, scalar.plain), scalar.place, called)
    if read is None or not reader.sign(read, row, scalar.text, scalar.place, called):
        return None
    return read


def _fraction(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> float | None:
    expected = "per cent or a fraction is expected, as in '5 %' or 0.05"
    scalar = reader.scalar(node, called, expected)
    if scalar is None:
        return None
    read = reader.judged(scalars.fraction(scalar.text, scalar.plain), scalar.place, called)
    if read is None or not reader.sign(read, row, scalar.text, scalar.place, called):
        return None
    if read > 1:
        reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} is more than the whole", expected)
        return None
    return read


def whole(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> int | None:
    """A whole number of the sign that the row asks for."""
    scalar = reader.scalar(node, called, "a whole number is expected")
    if scalar is None:
        return None
    read = reader.judged(scalars.whole(scalar.text, scalar.plain), scalar.place, called)
    if read is None or not reader.sign(read, row, scalar.text, scalar.place, called):
        return None
    return read


def _format(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> int | None:
    read = whole(reader, row, called, key, node)
    if read is not None and read != FORMAT:
        reader.tell(node.place, f"format {read} is unknown", f"this version reads format {FORMAT}")
        return None
    return read


def text(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Word | None:
    """Text, as written."""
    scalar = reader.scalar(node, called, "text is expected")
    return None if scalar is None else Word(" ".join(scalar.text.split()), scalar.place)


def _plant(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> PlantRef | None:
    expected = "FILE:OBJECT or package.module:OBJECT is expected, as in plant.py:ferry"
    scalar = reader.scalar(node, called, expected)
    if scalar is None:
        return None
    where, colon, name = scalar.text.strip().rpartition(":")
    is_file = where.endswith(".py") or "/" in where or "\\" in where
    dotted = all(part.isidentifier() for part in where.split("."))
    if not colon or not where or not (is_file or dotted) or not all(part.isidentifier() for part in name.split(".")):
        reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} names no object in a file", expected)
        return None
    folder = reader.folder(scalar.place)
    return PlantRef(where if is_file else "", "" if is_file else where, name, folder, scalar.text, scalar.place)


def choice(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> str | None:
    """One of the row's choices."""
    expected = ", ".join(row.choices[:-1]) + " or " + row.choices[-1] if len(row.choices) > 1 else row.choices[0]
    scalar = reader.scalar(node, called, f"{expected} is expected")
    if scalar is None:
        return None
    if scalar.text in row.choices:
        return scalar.text
    wrong = f"`{called}`: {quoted(scalar.text)} is no choice"
    if row.refusal:
        wrong = f"`{called}`: {row.refusal}"
    reader.tell(scalar.place, wrong, f"{expected} is expected", nearest(scalar.text, row.choices))
    return None


def names(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Word, ...] | None:
    """A list of names, each once."""
    what = "patterns" if row.kind is Kind.PATTERNS else "names"
    expected = f"a list of {what} is expected, as in [a, b]"
    items = reader.items(node, called, expected)
    if items is None:
        return None
    read: list[Word] = []
    for item in items:
        scalar = reader.scalar(item, called, expected)
        if scalar is not None and scalar.text in (word.text for word in read):
            reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} is listed twice")
        elif scalar is not None:
            read.append(Word(scalar.text, scalar.place))
    return tuple(read)


def _choices(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[str, ...] | None:
    listed = names(reader, row, called, key, node)
    if listed is None:
        return None
    if not listed:
        reader.tell(node.place, f"`{called}`: the list is empty", "some of " + ", ".join(row.choices) + " are expected")
        return None
    for word in listed:
        if word.text not in row.choices:
            expected = "some of " + ", ".join(row.choices) + " are expected"
            hint = nearest(word.text, row.choices)
            reader.tell(word.place, f"`{called}`: {quoted(word.text)} is no choice", expected, hint)
    return tuple(word.text for word in listed if word.text in row.choices)


def _files(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[FileWord, ...] | None:
    expected = 'a file pattern is expected, as in "pinned/*.json", or a list of them'
    items = node.items if isinstance(node, Listing) else (node,)
    read = [reader.scalar(item, called, expected) for item in items]
    return tuple(FileWord(found.text, reader.folder(found.place), found.place) for found in read if found is not None)


def _span(reader: Reader, row: Row, called: str, node: Node) -> tuple[Quantity, Quantity] | None:
    """`[low, high]`, both quantities; their order is judged by the caller."""
    items = reader.items(node, called, "[low, high] is expected", 2)
    if items is None:
        return None
    read = [quantity(reader, row, called, _NO_KEY, item) for item in items]
    low, high = read
    return None if low is None or high is None else (low, high)


_NO_KEY = Scalar("", True, Place(""))
_PLAIN = Row("*", Kind.QUANTITY, "")


def _limits(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Limits | None:
    if isinstance(node, Listing):
        span = _span(reader, _PLAIN, called, node)
        return None if span is None or not _apart(reader, *span, called) else Limits(*span, None, node.place)
    if not isinstance(node, Block):
        reader.misfit(node, called, "[low, high] or a group of min, max, range, rate is expected")
        return None
    if not node.entries:
        reader.tell(key.place, f"nothing is written after `{called}`", "[low, high] or a group is expected")
    values: Values = {}
    for inner, inner_key, value in reader.words(node, row.of, called):
        of = f"{called}: {inner.word}"
        if inner.kind is Kind.RANGE:
            values[inner.word] = _span(reader, _PLAIN, of, value)
        else:
            values[inner.word] = quantity(reader, inner, of, inner_key, value)
    span = values.get("range")
    for word in ("min", "max"):
        if "range" in values and word in values:
            place = next(key.place for key, _ in node.entries if key.text == word)
            reader.tell(place, f"`{called}`: `range` and `{word}` both say where the limit is", "one of them is enough")
    low, high = span or (values.get("min"), values.get("max"))
    if low is not None and high is not None and not _apart(reader, low, high, called):
        return None
    return Limits(low, high, values.get("rate"), node.place)


def _apart(reader: Reader, low: Quantity, high: Quantity, called: str) -> bool:
    if low.unit == high.unit and low.value >= high.value:
        reader.tell(
            high.place, f"`{called}`: {low.text} to {high.text} is an empty range", "low below high is expected"
        )
        return False
    return True


def _amplitude(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> AmplitudeAsk | None:
    expected = "a size, [low, high] or {until: {signal: size}} is expected"
    if isinstance(node, Listing):
        span = _span(reader, _PLAIN, called, node)
        if span is None:
            return None
        low, high = span
        if low.value > 0 or high.value < 0 or low.value == high.value == 0:
            wrong = f"`{called}`: [{low.text}, {high.text}] does not reach from below trim to above"
            reader.tell(node.place, wrong, "low <= 0 <= high about trim is expected, not both 0")
            return None
        return AmplitudeAsk(low, high, None, node.place)
    if isinstance(node, Block):
        return _until(reader, called, node, expected)
    if not isinstance(node, Scalar):
        return None
    size = quantity(reader, Row("*", Kind.QUANTITY, "", sign="+"), called, key, node)
    return None if size is None else AmplitudeAsk(None, size, None, node.place)


def _until(reader: Reader, called: str, node: Block, expected: str) -> AmplitudeAsk | None:
    inner = node.get("until")
    if node.words != ("until",):
        extra = next((key for key, _ in node.entries if key.text != "until"), None)
        place = extra.place if extra else node.place
        reader.tell(
            place, f"`{called}`: " + (f"unknown word {quoted(extra.text)}" if extra else "an empty group"), expected
        )
        return None
    if not isinstance(inner, Block) or len(inner.entries) != 1:
        if not isinstance(inner, Broken):
            reader.tell(inner.place if inner else node.place, f"`{called}: until` takes one signal", expected)
        return None
    signal, value = inner.entries[0]
    size = quantity(reader, Row("*", Kind.QUANTITY, "", sign="+"), f"{called}: until: {signal.text}", signal, value)
    return None if size is None else AmplitudeAsk(None, None, Entry(signal.text, signal.place, size), node.place)


def _expect(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Expect | None:
    expected = "V +- T is expected, as in '61 kN +- 2 %'"
    scalar = reader.scalar(node, called, expected)
    if scalar is None:
        return None
    parts = scalar.text.replace("±", "+-").replace("+/-", "+-").split("+-")
    if len(parts) != 2:
        reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} is no value with a tolerance", expected)
        return None
    read: list[Quantity] = []
    for part in parts:
        amount = reader.judged(scalars.amount(part), scalar.place, called)
        if amount is None:
            return None
        read.append(Quantity(amount.value, amount.unit, part.strip(), scalar.place))
    value, tolerance = read
    if not reader.sign(tolerance.value, Row("*", Kind.QUANTITY, "", sign="+"), tolerance.text, scalar.place, called):
        return None
    if tolerance.per_cent and value.value == 0:
        wrong = f"`{called}`: a per cent of 0 is no tolerance"
        reader.tell(scalar.place, wrong, "a tolerance in the unit of the value is expected")
        return None
    return Expect(value, tolerance, scalar.text.strip(), scalar.place)


def _rate(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Quantity | Word | None:
    if isinstance(node, Scalar) and node.text == "free":
        return Word("free", node.place)
    if isinstance(node, Scalar) and nearest(node.text, ["free"]):
        reader.tell(node.place, f"`{called}`: {quoted(node.text)} is no rate", "a rate or free is expected", "free")
        return None
    return quantity(reader, row, called, key, node)


def _relative(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> float | None:
    expected = "per cent of the plant's own peak deviation is expected, as in '20 %'"
    scalar = reader.scalar(node, called, expected)
    if scalar is None:
        return None
    read = reader.judged(scalars.amount(scalar.text, scalar.plain), scalar.place, called)
    if read is None:
        return None
    if read.unit != "%":
        reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} is not in per cent", expected)
        return None
    return read.value / 100 if reader.sign(read.value, row, scalar.text, scalar.place, called) else None


def _wider_of(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Quantity, float] | None:
    items = reader.items(node, called, "[size, per cent] is expected, as in [0.3 deg, 10 %]", 2)
    if items is None:
        return None
    size = quantity(reader, row, called, key, items[0])
    share = _relative(reader, row, called, key, items[1])
    return None if size is None or share is None else (size, share)


def named(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Entry[Any], ...]:
    """`name: value` pairs, each value of the one kind that the row says."""
    inner = row.of[0]
    entries: list[Entry[Any]] = []
    for name, value in reader.named(node, called, inner.kind.value):
        read = READERS[inner.kind](reader, inner, f"{called}: {name.text}", name, value)
        if read is not None:
            entries.append(Entry(name.text, name.place, read))
    return tuple(entries)


def _block(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Values:
    return reader.block(node, row.of, called)


def _raw(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Node:
    """Left as a node: read where what belongs to it is known."""
    return node


READERS: dict[Kind, Callable[[Reader, Row, str, Scalar, Node], Any]] = {
    Kind.FORMAT: _format,
    Kind.TEXT: text,
    Kind.PLANT: _plant,
    Kind.QUANTITY: quantity,
    Kind.NUMBER: _number,
    Kind.FRACTION: _fraction,
    Kind.COUNT: whole,
    Kind.CHOICE: choice,
    Kind.NAMES: names,
    Kind.CHOICES: _choices,
    Kind.PATTERNS: names,
    Kind.FILES: _files,
    Kind.LIMITS: _limits,
    Kind.AMPLITUDE: _amplitude,
    Kind.EXPECT: _expect,
    Kind.RATE: _rate,
    Kind.RELATIVE: _relative,
    Kind.WIDER_OF: _wider_of,
    Kind.BLOCK: _block,
    Kind.NAMED: named,
    Kind.POINTS: _raw,
    Kind.SWEEP: _raw,
    Kind.DRIVES: _raw,
    Kind.BANDS: _raw,
}
