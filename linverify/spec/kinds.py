"""The table of readers: what is behind a word is read by the kind that `words` gives it."""

from __future__ import annotations

import math
from collections.abc import Callable
from typing import Any

from linverify.core.errors import Place

from . import forms, gains, values
from .layout import AmplitudeAsk, Entry, Expect, Limits, Quantity
from .reader import Reader
from .source import Listing, Node, Scalar
from .words import Kind, Row

Values = dict[str, Any]  # word -> what its reader made of it; a word that could not be read is left out


def block(reader: Reader, node: Node, rows: tuple[Row, ...], called: str, above: str | None = None) -> Values:
    """All words of a block, each read by the kind of its row.

    called: what messages call the block; above: what they put before its words, `called` where it is left out.
    """
    above = called if above is None else above
    read: Values = {}
    for row, key, value in reader.words(node, rows, called):
        found = READERS[row.kind](reader, row, f"{above}: {row.word}" if above else row.word, key, value)
        if found is not None:
            read[row.word] = found
    return read


def named(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Entry[Any], ...]:
    """`name: value` pairs, each value of the one kind that the row says."""
    inner = row.of[0]
    entries: list[Entry[Any]] = []
    for name, value in reader.named(node, called, inner.kind.value):
        read = READERS[inner.kind](reader, inner, f"{called}: {name.text}", name, value)
        if read is None and inner.kind in _REFUSED:
            read = _REFUSED[inner.kind](value.place)  # its name is still to be judged
        if read is not None:
            entries.append(Entry(name.text, name.place, read))
    return tuple(entries)


def _block(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Values:
    return block(reader, node, row.of, called)


def _groups(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Entry[Values], ...] | None:
    """One group of words, or a list of them; the entries have the places of the groups and no names."""
    items = node.items if isinstance(node, Listing) else (node,)
    return tuple(Entry("", item.place, block(reader, item, row.of, called)) for item in items)


def _raw(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Node:
    """Left as a node: read where what belongs to it is known."""
    return node


def _no_number(place: Place) -> Quantity:
    return Quantity(math.nan, "", "", place)


# what stands for a value that was refused and told: nothing more can be said against it
_REFUSED: dict[Kind, Callable[[Place], Any]] = {
    Kind.QUANTITY: _no_number,
    Kind.RATE: _no_number,
    Kind.LIMITS: lambda place: Limits(None, None, None, place),
    Kind.AMPLITUDE: lambda place: AmplitudeAsk(None, None, None, place),
    Kind.EXPECT: lambda place: Expect(_no_number(place), _no_number(place), "", place),
    Kind.NUMBER: lambda place: math.nan,
}

READERS: dict[Kind, Callable[[Reader, Row, str, Scalar, Node], Any]] = {
    Kind.FORMAT: values.format_number,
    Kind.TEXT: values.text,
    Kind.NAME: values.name,
    Kind.TRUTH: values.truth,
    Kind.LOCATION: values.location,
    Kind.PLANT: values.plant,
    Kind.QUANTITY: values.quantity,
    Kind.SIZE: values.size,
    Kind.NUMBER: values.number,
    Kind.FRACTION: values.fraction,
    Kind.COUNT: values.whole,
    Kind.CHOICE: values.choice,
    Kind.NAMES: values.names,
    Kind.CHOICES: values.choices,
    Kind.PATTERNS: values.names,
    Kind.FILES: values.files,
    Kind.SOURCE: values.source,
    Kind.RANGE: forms.span,
    Kind.BOUNDS: forms.bounds,
    Kind.LIMITS: forms.limits,
    Kind.AMPLITUDE: forms.amplitude,
    Kind.EXPECT: forms.expect,
    Kind.RATE: forms.rate,
    Kind.RELATIVE: forms.relative,
    Kind.WIDER_OF: forms.wider_of,
    Kind.GROUPS: _groups,
    Kind.BLOCK: _block,
    Kind.NAMED: named,
    Kind.POINTS: _raw,
    Kind.SWEEP: _raw,
    Kind.DRIVES: _raw,
    Kind.BANDS: _raw,
    Kind.MODES: _raw,
    Kind.FILE: values.file,
    Kind.GAIN: gains.gain,
    Kind.COEFFICIENTS: gains.coefficients,
    Kind.MATRIX: gains.matrix,
    Kind.SETTLING: gains.settling,
    Kind.RULES: gains.rules,
}
