"""Any plain data as Markdown: short values in a table, matrices with their names, everything else under its word."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import Any

from . import quantity
from .tables import bullets, escaped, grid

Rows = Sequence[Mapping[str, Any]]
CELL_WIDTH = 40
CELL_NUMBERS = 8
_WORDED = {  # words of the record that read better in full
    "accuracy": "accuracy of the trim (largest scaled residual)",
    "accuracy_asked": "accuracy as asked, in nominal sizes",
    "completed": "share of random drives that ran their whole horizon",
    "drives": "drives that were run, by kind",
    "error_90": "error of our own in each band's figure, 90th percentile over a fixed batch of drives",
    "errors": "trimmed values are known to",
    "evaluations": "states and inputs at which the plant was evaluated",
    "failed_calls": "calls of the plant that failed",
    "nearest_holds": "nearest held values at which a trim exists",
    "closest": "nearest the search came",
    "nodes": "samples between two instants",
    "noise": "noise of one evaluation of the plant (standard deviation)",
    "on_point": "on the point",
    "residuals": "scaled residuals (what is left of each equation, in nominal sizes of its signal)",
    "starts": "starts of the search",
    "tolerance": "tolerance (share of the state errors that the bands allow)",
}
_QUANTITY = {"value", "unit"}


def matrix(
    rows: Sequence[Sequence[float]],
    down: Sequence[str],
    across: Sequence[str],
    errors: Sequence[Sequence[float]] = (),
) -> str:
    """A matrix with names at its sides where they fit, and errors, of the same shape, beside its entries."""
    width = len(rows[0])
    columns = list(across) if len(across) == width else [str(index + 1) for index in range(width)]
    names = list(down) if len(down) == len(rows) else [str(index + 1) for index in range(len(rows))]
    known = errors or [[0.0] * width] * len(rows)
    cells = [
        (name, *(_entry(value, error) for value, error in zip(row, own, strict=True)))
        for name, row, own in zip(names, rows, known, strict=True)
    ]
    return grid(("", *columns), cells, right=columns)


def _entry(value: float, error: float) -> str:
    told = quantity.number(value)
    return f"{told} +- {quantity.number(error, 2)}" if error else told


def plain_blocks(values: Mapping[str, Any], worded: Callable[[str], str] | None = None) -> list[str]:
    """Any plain data: short values in one table, texts as sentences, lists and mappings under their word.

    worded: how keys read; by default as `label` has it. Keys further down may be names and stay as they are.
    """
    words = [(word, value) for word, value in sorted(values.items()) if value not in ([], {})]
    named = worded or label
    short = [(named(word), cell(value)) for word, value in words if is_short(value)]
    made = [grid(("what", "value"), short)] if short else []
    for word, value in words:
        if not is_short(value):
            made += _long_blocks(_caption(named(word)), value)
    return made


def _caption(words: str) -> str:
    return escaped(words[:1].upper() + words[1:] if " " in words else words) + ":"


def _long_blocks(title: str, value: Any) -> list[str]:
    if isinstance(value, str):
        return [f"{title} {escaped(value)}"]
    if isinstance(value, Mapping):
        return [title, *plain_blocks(value, lambda name: _WORDED.get(name, name))]
    if all(isinstance(item, Mapping) for item in value):
        return [title, listing(value)]
    if is_matrix(value):
        return [title, matrix(value, (), ())]
    return [title, bullets(cell(item) for item in value)]


def listing(values: Sequence[Mapping[str, Any]]) -> str:
    """A list of mappings as one table; columns in order of first appearance."""
    columns = list(dict.fromkeys(word for value in values for word in value))
    rows = [[cell(value[word]) if word in value else quantity.ABSENT for word in columns] for value in values]
    return grid([label(word) for word in columns], rows)


def label(word: str) -> str:
    """A word of the record as a reader sees it."""
    return _WORDED.get(word, word.replace("_", " "))


def cell(value: Any) -> str:
    """Plain data as the text of one cell."""
    if value is None:
        return quantity.ABSENT
    if isinstance(value, bool):
        return "yes" if value else "no"
    if is_number(value):
        return quantity.number(value)
    if is_quantity(value):
        told = quantity.quantity(value["value"], str(value["unit"]))
        return f"{told} ({cell(value['in_plant'])})" if "in_plant" in value else told
    if isinstance(value, Mapping):
        return ", ".join(f"{word} {cell(item)}" for word, item in sorted(value.items()))
    if isinstance(value, list):
        return ", ".join(cell(item) for item in value)
    return str(value)


def complex_told(real: float | None, imaginary: float | None) -> str:
    """A complex number in one cell; a real one without its zero part."""
    first = cell(real)
    if not imaginary:
        return first
    return f"{first} {'-' if imaginary < 0 else '+'} {quantity.number(abs(imaginary))}j"


def rows_of(rest: dict[str, Any], word: str) -> Rows:
    """The rows under a word, taken out of `rest`; empty where there are none of this form."""
    found = rest.get(word)
    if not isinstance(found, list) or not all(isinstance(row, Mapping) for row in found):
        return ()
    rest.pop(word)
    return found


def is_number(value: Any) -> bool:
    """True for a number that is no truth value."""
    return isinstance(value, (int, float)) and not isinstance(value, bool)


def is_quantity(value: Any) -> bool:
    """True for {"value": number, "unit": text}, which may have the same value in the plant's unit under "in_plant"."""
    return isinstance(value, Mapping) and set(value) - {"in_plant"} == _QUANTITY and is_number(value["value"])


def is_matrix(value: Any) -> bool:
    """True for a list of equally long lists of numbers."""
    if not (isinstance(value, list) and value and all(isinstance(row, list) and row for row in value)):
        return False
    return len({len(row) for row in value}) == 1 and all(is_number(item) for row in value for item in row)


def is_short(value: Any) -> bool:
    """True for what fits into one cell: a number, with or without its unit, a truth value, a short text, nothing."""
    if isinstance(value, str):
        return len(value) <= CELL_WIDTH
    if isinstance(value, list):
        return len(value) <= CELL_NUMBERS and all(is_number(item) for item in value)
    return value is None or isinstance(value, bool) or is_number(value) or is_quantity(value)
