"""What the checks tell beside their figures, as Markdown; words not known here get the plain form of `forms`."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from . import quantity
from .forms import cell, is_matrix, is_number, listing, matrix, plain_blocks
from .tables import escaped, grid

KINDS = {"states": "state", "inputs": "input", "outputs": "output"}
NONE_SHOWS = "none shows"
_MATRICES = {
    "A": ("states", "states"),
    "B": ("states", "inputs"),
    "C": ("outputs", "states"),
    "D": ("outputs", "inputs"),
}
_IN_THE_RECORD = tuple(f"error_of_{word}" for word in _MATRICES)  # every entry's error: too much for a page
Signals = Mapping[str, Sequence[Sequence[str]]]  # kind -> [name, unit] in the plant's order


def blocks(details: Mapping[str, Any], signals: Signals, time_unit: str = "") -> list[str]:
    """Blocks of Markdown, known words first and the rest in alphabetical order."""
    rest = dict(details)
    made: list[str] = []
    if found := {kind: rest.pop(kind) for kind in KINDS if isinstance(rest.get(kind), Mapping)}:
        errors = rest.pop("errors") if isinstance(rest.get("errors"), Mapping) else {}
        made.append(trimmed(found, signals, errors))
    if isinstance(rest.get("poles"), list) and rest["poles"]:
        made += [
            f"Eigenvalues of the local model, per {time_unit or 'time unit'}:",
            poles(rest.pop("poles"), time_unit),
        ]
    made += matrices({word: rest.pop(word) for word in _MATRICES if is_matrix(rest.get(word))}, signals)
    rest = {word: value for word, value in rest.items() if word not in _IN_THE_RECORD}
    if isinstance(rest.get("statistics"), Mapping) and "text" in rest["statistics"]:
        made += statistics(rest.pop("statistics"))
    if isinstance(rest.get("smallest_visible"), Mapping):
        made.append(visible(rest.pop("smallest_visible"), time_unit))
    return made + plain_blocks(rest)


def trimmed(found: Mapping[str, Mapping[str, Any]], signals: Signals, errors: Mapping[str, Any]) -> str:
    """Trimmed values with their units, in the plant's order; an output that is a state is told once."""
    rows: list[tuple[str, ...]] = []
    told: set[str] = set()
    for kind, values in found.items():
        units = {pair[0]: pair[1] for pair in signals.get(kind, ())}
        order = [name for name in units if name in values] + sorted(set(values) - set(units))
        for name in order:
            if name not in told:
                value, unit = _valued(values[name], units.get(name, ""))
                rows.append((name, KINDS[kind], value, _known(errors.get(name), unit)))
        told.update(values)
    headers = ("signal", "kind", "trimmed value", "known to")[: 4 if errors else 3]
    return grid(headers, [row[: len(headers)] for row in rows], right=headers[2:])


def _known(error: Any, unit: str) -> str:
    return quantity.quantity(error, unit, 2) if is_number(error) else cell(error)


def _valued(value: Any, unit: str) -> tuple[str, str]:
    """A number, or {"value", "unit"}, as text; and its unit."""
    if isinstance(value, Mapping) and "value" in value:
        return _valued(value["value"], str(value.get("unit", unit)))
    return (quantity.quantity(value, unit) if is_number(value) else cell(value)), unit


def poles(values: Sequence[Any], time_unit: str = "") -> str:
    """Eigenvalues, one a row, with natural frequency, damping and time constant where they are given."""
    rate = f"rad/{time_unit}" if time_unit else "rad per time unit"
    worded = {
        "natural_frequency": f"natural frequency, {rate}",
        "hertz": "frequency, Hz",
        "damping": "damping ratio",
        "time_constant": f"time constant, {time_unit or 'time units'}",
    }
    return listing([_pole(value, worded) for value in values])


def _pole(pole: Any, worded: Mapping[str, str]) -> dict[str, Any]:
    if not isinstance(pole, Mapping):
        return {"eigenvalue": pole}
    joined = {"real": "eigenvalue", "z_real": "z"}
    rest = dict(pole)
    told: dict[str, Any] = {}
    for word, name in joined.items():
        pair = (rest.get(word), rest.get(word.replace("real", "imag")))
        if all(is_number(part) or part is None for part in pair) and word in rest:
            told[name] = _complex(*pair)
            rest = {key: value for key, value in rest.items() if key not in (word, word.replace("real", "imag"))}
    return {**told, **{worded[word]: rest.pop(word) for word in worded if word in rest}, **rest}


def _complex(real: float | None, imaginary: float | None) -> str:
    first = cell(real)
    if not imaginary:
        return first
    return f"{first} {'-' if imaginary < 0 else '+'} {quantity.number(abs(imaginary))}j"


def matrices(found: Mapping[str, Sequence[Sequence[float]]], signals: Signals) -> list[str]:
    """The local model's matrices with the names of their rows and columns."""
    made = []
    for word, rows in found.items():
        down, across = _MATRICES[word]
        made += [f"{word} of the local model:", matrix(rows, _names(signals, down), _names(signals, across))]
    return made


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
    if not is_number(value):
        return cell(value)
    return worded(value) if math.isfinite(value) else NONE_SHOWS


def _names(signals: Signals, kind: str) -> list[str]:
    return [pair[0] for pair in signals.get(kind, ())]
