"""Readers of values that have a form of their own: ranges, amplitudes, tolerances, rates and shares."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from linverify.core.errors import Place
from linverify.core.signals import nearest

from . import scalars
from .layout import AmplitudeAsk, Bounds, Entry, Expect, Limits, Quantity, Word
from .merge import shown
from .reader import Reader
from .scalars import quoted
from .source import Block, Broken, Listing, Node, Scalar
from .values import quantity, size
from .words import Kind, Row

_NO_KEY = Scalar("", True, Place(""))
_PLAIN = Row("*", Kind.QUANTITY, "")
_ABOVE_ZERO = Row("*", Kind.QUANTITY, "", sign="+")


def _span(reader: Reader, row: Row, called: str, node: Node) -> tuple[Quantity, Quantity] | None:
    """`[low, high]`, both quantities; their order is judged by the caller."""
    items = reader.items(node, called, "[low, high] is expected", 2)
    if items is None:
        return None
    read = [quantity(reader, row, called, _NO_KEY, item) for item in items]
    low, high = read
    return None if low is None or high is None else (low, high)


def span(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Quantity, Quantity] | None:
    """`[low, high]`, low below high as far as that shows without a unit."""
    read = _span(reader, _PLAIN, called, node)
    return read if read is not None and _apart(reader, *read, called) else None


def limits(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Limits | None:
    """One line of the envelope."""
    if isinstance(node, Listing):
        span = _span(reader, _PLAIN, called, node)
        return None if span is None or not _apart(reader, *span, called) else Limits(*span, None, node.place)
    if not isinstance(node, Block):
        reader.misfit(node, called, "[low, high] or a group of min, max, range, rate is expected")
        return None
    if not node.entries:
        reader.tell(key.place, f"nothing is written after `{called}`", "[low, high] or a group is expected")
    values: dict[str, Any] = {}
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


def bounds(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Bounds | None:
    """A limit on a figure: `{min: low, max: high}`, one of the two, or `[low, high]`."""
    side = replace(row, word="*", kind=Kind.QUANTITY)
    if isinstance(node, Listing):
        pair = _span(reader, side, called, node)
        if pair is None or not _apart(reader, *pair, called):
            return None
        return Bounds(*pair, shown(node), node.place)
    if not isinstance(node, Block):
        told = node.text if isinstance(node, Scalar) else "..."
        reader.misfit(node, called, f"{{min: {told}}}, {{max: {told}}} or [low, high] is expected")
        return None
    if not node.entries:
        reader.tell(key.place, f"nothing is written after `{called}`", "min, max or both are expected")
        return None
    sides = (replace(side, word="min", required=False), replace(side, word="max", required=False))
    read = {each.word: quantity(reader, each, f"{called}: {each.word}", inner, value)
            for each, inner, value in reader.words(node, sides, called)}  # fmt: skip
    low, high = read.get("min"), read.get("max")
    if low is not None and high is not None and not _apart(reader, low, high, called):
        return None
    return None if low is None and high is None else Bounds(low, high, shown(node), node.place)


def amplitude(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> AmplitudeAsk | None:
    """How far a drive may move an input: `a`, `[a, b]` or `{until: {signal: size}}`."""
    expected = "a size, [low, high] or {until: {signal: size}} is expected"
    if isinstance(node, Listing):
        span = _span(reader, _PLAIN, called, node)
        if span is None:
            return None
        low, high = span
        if low.value > 0 or high.value < 0 or low.value == high.value == 0:
            why = "moves nothing" if low.value == high.value == 0 else "leaves out 0, the trimmed value"
            expected = "low <= 0 <= high about trim is expected, and not both 0"
            reader.tell(node.place, f"`{called}`: [{low.text}, {high.text}] {why}", expected)
            return None
        return AmplitudeAsk(low, high, None, node.place)
    if isinstance(node, Block):
        return _until(reader, called, node, expected)
    if not isinstance(node, Scalar):
        return None
    read = quantity(reader, _ABOVE_ZERO, called, key, node)
    return None if read is None else AmplitudeAsk(None, read, None, node.place)


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
    read = quantity(reader, _ABOVE_ZERO, f"{called}: until: {signal.text}", signal, value)
    return None if read is None else AmplitudeAsk(None, None, Entry(signal.text, signal.place, read), node.place)


def expect(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Expect | None:
    """`V +- T`."""
    expected = "V +- T is expected, as in '61 kN +- 2 %'"
    scalar = reader.scalar(node, called, expected)
    if scalar is None:
        return None
    parts = scalar.text.replace("±", "+-").replace("+/-", "+-").split("+-")
    if len(parts) != 2 or not all(part.strip() for part in parts):
        reader.tell(scalar.place, f"`{called}`: {quoted(scalar.text)} is no value with a tolerance", expected)
        return None
    read: list[Quantity] = []
    for part in parts:
        amount = reader.judged(scalars.amount(part), scalar.place, called)
        if amount is None:
            return None
        read.append(Quantity(amount.value, amount.unit, part.strip(), scalar.place))
    value, tolerance = read
    if not reader.sign(tolerance.value, _ABOVE_ZERO, tolerance.text, scalar.place, called):
        return None
    if tolerance.per_cent and value.value == 0:
        wrong = f"`{called}`: a per cent of 0 is no tolerance"
        reader.tell(scalar.place, wrong, "a tolerance in the unit of the value is expected")
        return None
    return Expect(value, tolerance, scalar.text.strip(), scalar.place)


def rate(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> Quantity | Word | None:
    """A prescribed rate, or the word `free`."""
    if isinstance(node, Scalar) and node.text == "free":
        return Word("free", node.place)
    if isinstance(node, Scalar) and nearest(node.text, ["free"]):
        reader.tell(node.place, f"`{called}`: {quoted(node.text)} is no rate", "a rate or free is expected", "free")
        return None
    return quantity(reader, row, called, key, node)


def relative(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> float | None:
    """Per cent of the plant's own peak deviation, as a fraction."""
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


def wider_of(reader: Reader, row: Row, called: str, key: Scalar, node: Node) -> tuple[Quantity, float] | None:
    """`[size, per cent]`."""
    items = reader.items(node, called, "[size, per cent] is expected, as in [0.3 deg, 10 %]", 2)
    if items is None:
        return None
    size_read = size(reader, row, called, key, items[0])
    share = relative(reader, row, called, key, items[1])
    return None if size_read is None or share is None else (size_read, share)
