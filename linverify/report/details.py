"""What a check tells beside its figures, as Markdown: known words get tables of their own, others a plain form."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from . import quantity
from .tables import bullets, escaped, grid

KINDS = {"states": "state", "inputs": "input", "outputs": "output"}
_POLES = ("poles", "eigenvalues")
_POLE_WORDS = ("frequency", "natural_frequency", "damping", "time_constant", "period")  # the order that is read
_MATRICES = {
    "A": ("states", "states"),
    "B": ("states", "inputs"),
    "C": ("outputs", "states"),
    "D": ("outputs", "inputs"),
}
NONE_SHOWS = "none shows"
Signals = Mapping[str, Sequence[Sequence[str]]]  # kind -> [name, unit] in the plant's order


def blocks(details: Mapping[str, Any], signals: Signals, time_unit: str = "") -> list[str]:
    """Blocks of Markdown, known words first and the rest in alphabetical order."""
    rest = dict(details)
    made: list[str] = []
    if any(kind in rest and isinstance(rest[kind], Mapping) for kind in KINDS):
        found = {kind: rest.pop(kind) for kind in KINDS if isinstance(rest.get(kind), Mapping)}
        made.append(trimmed(found, signals))
    for word in _POLES:
        if isinstance(rest.get(word), list) and rest[word]:
            made += [f"Eigenvalues of the local model{per(time_unit)}:", poles(rest.pop(word))]
    for word, (rows, columns) in _MATRICES.items():
        if _is_matrix(rest.get(word)):
            made += [f"{word}:", matrix(rest.pop(word), _names(signals, rows), _names(signals, columns))]
    if isinstance(rest.get("statistics"), Mapping) and "text" in rest["statistics"]:
        made += statistics(rest.pop("statistics"))
    if isinstance(rest.get("smallest_visible"), Mapping):
        made.append(visible(rest.pop("smallest_visible"), time_unit))
    return made + plain_blocks(rest)


def statistics(found: Mapping[str, Any]) -> list[str]:
    """What the random drives say, as the check worded it, and what they were drawn from."""
    sampler = [f"Sampler: {escaped(cell(found['sampler']))}"] if "sampler" in found else []
    return [escaped(cell(found["text"])), *sampler]


def visible(found: Mapping[str, Any], time_unit: str) -> str:
    """The smallest errors of the local model that a set of drives would catch, in all signals and in each."""
    signals = found.get("signals")
    each = signals if isinstance(signals, Mapping) else {}
    rows = [
        (
            name,
            _shown(errors.get("gain"), quantity.percent),
            _shown(errors.get("delay"), lambda late: quantity.quantity(late, time_unit, 4)),
        )
        for name, errors in (("all together", found), *sorted(each.items()))
        if isinstance(errors, Mapping)
    ]
    headers = ("error of the local model in", "smallest gain error that shows", "smallest delay that shows")
    return grid(headers, rows, right=headers[1:])


def _shown(value: Any, worded: Callable[[float], str]) -> str:
    if not _is_number(value):
        return cell(value)
    return worded(value) if math.isfinite(value) else NONE_SHOWS


def per(time_unit: str) -> str:
    """The unit of a rate in words, for a caption."""
    return f", per {time_unit}" if time_unit else ""


def trimmed(found: Mapping[str, Mapping[str, Any]], signals: Signals) -> str:
    """Trimmed values with their units, in the plant's order."""
    rows: list[tuple[str, str, str]] = []
    for kind, values in found.items():
        units = {pair[0]: pair[1] for pair in signals.get(kind, ())}
        order = [name for name in units if name in values] + sorted(set(values) - set(units))
        rows += [(name, KINDS[kind], _valued(values[name], units.get(name, ""))) for name in order]
    return grid(("signal", "kind", "trimmed value"), rows, right=("trimmed value",))


def _valued(value: Any, unit: str) -> str:
    """A number, {"value", "unit"} or [number, unit] as text."""
    if isinstance(value, Mapping) and "value" in value:
        return _valued(value["value"], str(value.get("unit", unit)))
    if isinstance(value, list) and len(value) == 2 and isinstance(value[1], str):
        return _valued(value[0], value[1])
    if not _is_number(value):
        return cell(value)
    return quantity.quantity(value, unit)


def poles(values: Sequence[Any]) -> str:
    """Eigenvalues, one a row: as mappings with their own words, or as pairs of real and imaginary part."""
    if all(isinstance(value, Mapping) for value in values):
        return listing([_complex_joined(value) for value in values])
    rows = [(_complex(value) if _is_pair(value) else cell(value),) for value in values]
    return grid(("eigenvalue",), rows, right=("eigenvalue",))


def _complex_joined(pole: Mapping[str, Any]) -> dict[str, Any]:
    """A pole whose real and imaginary parts are one text, in front."""
    if not (_is_number(pole.get("real")) and _is_number(pole.get("imag"))):
        return dict(pole)
    known = {word: pole[word] for word in _POLE_WORDS if word in pole}
    rest = {word: value for word, value in pole.items() if word not in ("real", "imag")}
    return {"eigenvalue": _complex([pole["real"], pole["imag"]]), **known, **rest}


def _complex(pair: Sequence[float]) -> str:
    real, imaginary = quantity.number(pair[0]), quantity.number(abs(pair[1]))
    return real if pair[1] == 0.0 else f"{real} {'-' if pair[1] < 0 else '+'} {imaginary}j"


def matrix(rows: Sequence[Sequence[float]], down: Sequence[str], across: Sequence[str]) -> str:
    """A matrix with names at its sides where they fit."""
    width = len(rows[0])
    columns = list(across) if len(across) == width else [str(index + 1) for index in range(width)]
    names = list(down) if len(down) == len(rows) else [str(index + 1) for index in range(len(rows))]
    cells = [(name, *(quantity.number(value) for value in row)) for name, row in zip(names, rows, strict=True)]
    return grid(("", *columns), cells, right=columns)


def plain_blocks(values: Mapping[str, Any], depth: int = 0) -> list[str]:
    """Any plain data: short values in one table, texts as sentences, lists and mappings under their word."""
    short = [(label(word), cell(value)) for word, value in sorted(values.items()) if _is_short(value)]
    made = [grid(("told", "value"), short)] if short else []
    for word, value in sorted(values.items()):
        if not _is_short(value) and value not in ([], {}):
            made += _long_blocks(label(word), value, depth)
    return made


def _long_blocks(name: str, value: Any, depth: int) -> list[str]:
    title = f"{escaped(name)}:"
    if isinstance(value, str):
        return [f"{title} {escaped(value)}"]
    if isinstance(value, Mapping):
        return [title, *plain_blocks(value, depth + 1)]
    if all(isinstance(item, Mapping) for item in value):
        return [title, listing(value)]
    if _is_matrix(value):
        return [title, matrix(value, (), ())]
    return [title, bullets(cell(item) for item in value)]


def listing(values: Sequence[Mapping[str, Any]]) -> str:
    """A list of mappings as one table; columns in order of first appearance."""
    columns = list(dict.fromkeys(word for value in values for word in value))
    rows = [[cell(value[word]) if word in value else quantity.ABSENT for word in columns] for value in values]
    return grid([label(word) for word in columns], rows)


def label(word: str) -> str:
    """A key as a reader sees it."""
    return word.replace("_", " ")


def cell(value: Any) -> str:
    """Plain data as the text of one cell."""
    if value is None:
        return quantity.ABSENT
    if isinstance(value, bool):
        return "yes" if value else "no"
    if _is_number(value):
        return quantity.number(value)
    if isinstance(value, Mapping):
        return ", ".join(f"{label(word)} {cell(item)}" for word, item in sorted(value.items()))
    if isinstance(value, list):
        return ", ".join(cell(item) for item in value)
    return str(value)


def _is_number(value: Any) -> bool:
    return isinstance(value, (int, float)) and not isinstance(value, bool)


def _is_pair(value: Any) -> bool:
    return isinstance(value, list) and len(value) == 2 and all(_is_number(item) for item in value)


def _is_matrix(value: Any) -> bool:
    if not (isinstance(value, list) and value and all(isinstance(row, list) and row for row in value)):
        return False
    return len({len(row) for row in value}) == 1 and all(_is_number(item) for row in value for item in row)


def _is_short(value: Any) -> bool:
    return (
        value is None or _is_number(value) or isinstance(value, bool) or (isinstance(value, str) and len(value) <= 40)
    )


def _names(signals: Signals, kind: str) -> list[str]:
    return [pair[0] for pair in signals.get(kind, ())]
