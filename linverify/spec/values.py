"""Readers of single values: one for each kind of scalar or plain list.

Each takes the reader, the row of the word, how messages call the word, the word itself and the node behind it, and
returns the value, or None after telling what is wrong.
"""

from __future__ import annotations

from collections.abc import Iterable

from linverify.core.signals import nearest

from . import scalars
from .layout import FileWord, Location, PlantRef, Quantity, Word
from .reader import Reader
from .scalars import quoted
from .source import Listing, Node, Scalar
from .words import FORMAT, Kind, Row


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
    if not reader.sign(read.value, row, scalar.text, scalar.place, called):
        return None
    return Quantity(read.value, read.unit, scalar.text.strip(), scalar.place)


def size(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Quantity | None:
    """A quantity that is no share: in an error band, per cent is of the plant's own peak deviation."""
    read = quantity(reader, row, called, key, node)
    if read is not None and read.per_cent:
        expected = f"write `relative: {read.text}`, or the size in the signal's unit"
        reader.tell(read.place, f"`{called}`: {quoted(read.text)} is a share, not a size", expected)
        return None
    return read


def number(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> float | None:
    """A number without a unit, of the sign that the row asks for."""
    scalar = reader.scalar(node, called, "a number without a unit is expected")
    if scalar is None:
        return None
    read = reader.judged(scalars.number(scalar.text, scalar.plain), scalar.place, called)
    if read is None or not reader.sign(read, row, scalar.text, scalar.place, called):
        return None
    return read


def fraction(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> float | None:
    """Per cent or a fraction, not more than the whole unless the row allows for it."""
    expected = "per cent or a fraction is expected, as in '5 %' or 0.05"
    scalar = reader.scalar(node, called, expected)
    if scalar is None:
        return None
    read = reader.judged(scalars.fraction(scalar.text, scalar.plain), scalar.place, called)
    if read is None or not reader.sign(read, row, scalar.text, scalar.place, called):
        return None
    if read > 1.0 and row.most is not None:
        # 25 is most likely 25 %: whoever means more than the whole says so in per cent
        if scalar.text.rstrip().endswith("%") and read <= row.most:
            return read
        expected = f"at most {100 * row.most} % is expected, in per cent where it is more than 100 %"
    if read > 1.0:
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
    if row.most is not None and read > row.most:
        reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} is too many", f"at most {row.most} are expected")
        return None
    return read


def format_number(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> int | None:
    """The format number, if it is ours."""
    read = whole(reader, row, called, key, node)
    if read is not None and read != FORMAT:
        reader.tell(node.place, f"format {read} is unknown", f"this version reads format {FORMAT}")
        return None
    return read


def text(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Word | None:
    """Text, as written."""
    scalar = reader.scalar(node, called, "text is expected")
    return None if scalar is None else Word(" ".join(scalar.text.split()), scalar.place)


def name(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Word | None:
    """One name; whether there is something of that name is seen later."""
    scalar = reader.scalar(node, called, "a name is expected")
    return None if scalar is None else Word(scalar.text.strip(), scalar.place)


def truth(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> bool | None:
    """true or false, and nothing else that YAML 1.1 takes for one."""
    scalar = reader.scalar(node, called, "true or false is expected")
    return None if scalar is None else reader.judged(scalars.truth(scalar.text, scalar.plain), scalar.place, called)


def location(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Location | None:
    """A place of the complex plane."""
    scalar = reader.scalar(node, called, "a complex number is expected, as in -0.8 + 2.1j")
    read = None if scalar is None else reader.judged(scalars.location(scalar.text, scalar.plain), scalar.place, called)
    return None if scalar is None or read is None else Location(*read, scalar.text.strip(), scalar.place)


def plant(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> PlantRef | None:
    """FILE:OBJECT or package.module:OBJECT; whether they exist is seen when the spec is bound."""
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


def source(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> FileWord | None:
    """`derive`, or a file that models are read from."""
    scalar = reader.scalar(node, called, 'derive or a file is expected, as in "models/{point}.json"')
    if scalar is None:
        return None
    return FileWord(scalar.text, reader.folder(scalar.place), scalar.place)


def file(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> FileWord | None:
    """The name of a file with the folder that it is relative to; whether it exists is seen when the spec is bound."""
    scalar = reader.scalar(node, called, 'a file is expected, as in "controllers/{point}.json"')
    return None if scalar is None else FileWord(scalar.text, reader.folder(scalar.place), scalar.place)


def choice(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> str | None:
    """One of the row's choices."""
    expected = ", ".join(row.choices[:-1]) + " or " + row.choices[-1] if len(row.choices) > 1 else row.choices[0]
    scalar = reader.scalar(node, called, f"{expected} is expected")
    if scalar is None:
        return None
    if scalar.text in row.choices:
        return scalar.text
    wrong = f"`{called}`: {quoted(scalar.text)} is no choice"
    reader.tell(scalar.place, wrong, f"{expected} is expected", nearest(scalar.text, row.choices))
    return None


def names(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Word, ...] | None:
    """A list of names, each once."""
    what = "patterns" if row.kind is Kind.PATTERNS else "names"
    expected = f"a list of {what} is expected, as in [a, b]"
    items = reader.items(node, called, expected)
    if items is None:
        return None
    return each_once(reader, items, called, expected)


def each_once(reader: Reader, items: Iterable[Node], called: str, expected: str) -> tuple[Word, ...]:
    """The names among `items`; what is no name, and a name that stands there already, is told."""
    read: list[Word] = []
    for item in items:
        scalar = reader.scalar(item, called, expected)
        if scalar is not None and scalar.text in (word.text for word in read):
            reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} is listed twice")
        elif scalar is not None:
            read.append(Word(scalar.text, scalar.place))
    return tuple(read)


def choices(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[str, ...] | None:
    """A list of some of the choices, each once, at least one."""
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


def files(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[FileWord, ...] | None:
    """File patterns with the folder that they are relative to."""
    expected = 'a file pattern is expected, as in "pinned/*.json", or a list of them'
    items = node.items if isinstance(node, Listing) else (node,)
    read = [reader.scalar(item, called, expected) for item in items]
    return tuple(FileWord(found.text, reader.folder(found.place), found.place) for found in read if found is not None)
