"""What the checks tell beside their figures, as Markdown; words not known here get the plain form of `forms`."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from . import agreement, margins, modal, quantity
from .forms import cell, complex_told, is_matrix, is_number, is_quantity, listing, matrix, plain_blocks
from .tables import escaped, grid

KINDS = {"states": "state", "inputs": "input", "outputs": "output"}
NONE_SHOWS = "none shows"
ENTRIES = (
    "Entries of the local model are in the unit of their row per unit of their column; +- is the estimated error of an "
    "entry, none is told for one that is exact."
)
_MATRICES = {
    "A": ("states", "states"),
    "B": ("states", "inputs"),
    "C": ("outputs", "states"),
    "D": ("outputs", "inputs"),
}
_BESIDE_ENTRIES = tuple(f"error_of_{word}" for word in _MATRICES)
Signals = Mapping[str, Sequence[Sequence[str]]]  # kind -> [name, unit] in the plant's order


def blocks(details: Mapping[str, Any], signals: Signals, time_unit: str = "", *, discrete: bool = False) -> list[str]:
    """Blocks of Markdown, known words first and the rest in alphabetical order.

    discrete: the plant is a difference equation, whose rows are next states and not rates.
    """
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
    per = "" if discrete else time_unit or "time unit"
    errors_of = {word: rest.get(f"error_of_{word}") for word in _MATRICES}
    made += matrices({word: rest.pop(word) for word in _MATRICES if is_matrix(rest.get(word))}, errors_of, signals, per)
    rest = {word: value for word, value in rest.items() if word not in _BESIDE_ENTRIES}
    if isinstance(rest.get("statistics"), Mapping) and "text" in rest["statistics"]:
        made += statistics(rest.pop("statistics"))
    if isinstance(rest.get("smallest_visible"), Mapping):
        made.append(visible(rest.pop("smallest_visible"), time_unit))
    units = {str(pair[0]): str(pair[1]) for pairs in signals.values() for pair in pairs}
    made += agreement.blocks(rest, units, time_unit)
    made += modal.blocks(rest, time_unit) + margins.blocks(rest, time_unit)
    return made + plain_blocks(rest)


def trimmed(found: Mapping[str, Mapping[str, Any]], signals: Signals, errors: Mapping[str, Any]) -> str:
    """Trimmed values with their units, in the plant's order; an output that is a state is told once.

    Values stand in the unit that the spec writes; where that is not the plant's, the plant's stands beside.
    """
    rows: list[tuple[str, ...]] = []
    told: set[str] = set()
    for kind, values in found.items():
        units = {pair[0]: pair[1] for pair in signals.get(kind, ())}
        order = [name for name in units if name in values] + sorted(set(values) - set(units))
        for name in order:
            if name not in told:
                value, own, unit = _valued(values[name], units.get(name, ""))
                rows.append((name, KINDS[kind], value, own, _known(errors.get(name), unit)))
        told.update(values)
    headers = ("signal", "kind", "trimmed value", "in the plant's unit", "known to")
    shown = [0, 1, 2, *([3] if any(row[3] != quantity.ABSENT for row in rows) else []), *([4] if errors else [])]
    return grid([headers[at] for at in shown], [[row[at] for at in shown] for row in rows], right=headers[2:])


def _known(error: Any, unit: str) -> str:
    """How well a trimmed value is known; a dash for one that was given and not found."""
    if is_quantity(error):
        error, unit = error["value"], str(error["unit"])
    if is_number(error):
        return quantity.quantity(error, unit, 2) if error else quantity.ABSENT
    return cell(error)


def _valued(value: Any, unit: str) -> tuple[str, str, str]:
    """A number, or {"value", "unit"}, as text; the same in the plant's unit, if told; and its unit."""
    if is_quantity(value):
        own = cell(value["in_plant"]) if "in_plant" in value else quantity.ABSENT
        return quantity.quantity(value["value"], str(value["unit"])), own, str(value["unit"])
    return (quantity.quantity(value, unit) if is_number(value) else cell(value)), quantity.ABSENT, unit


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
            told[name] = complex_told(*pair)
            rest = {key: value for key, value in rest.items() if key not in (word, word.replace("real", "imag"))}
    return {**told, **{worded[word]: rest.pop(word) for word in worded if word in rest}, **rest}


def matrices(
    found: Mapping[str, Sequence[Sequence[float]]], errors: Mapping[str, Any], signals: Signals, per: str
) -> list[str]:
    """The local model's matrices with names and units at their sides and the error of every entry beside it.

    errors: a matrix for each; per: the unit of time of rates, empty where rows are next states.
    """
    made = [ENTRIES] if found else []
    for word, rows in found.items():
        down, across = _MATRICES[word]
        known: Any = errors.get(word)
        fits = is_matrix(known) and [len(row) for row in known] == [len(row) for row in rows]
        names = _with_units(signals, down, per if word in "AB" else "")
        of = f"{'rates of states' if per else 'next states'}" if word in "AB" else "outputs"
        made += [
            f"{word} of the local model, {of} by {across}:",
            matrix(rows, names, _with_units(signals, across), known if fits else ()),
        ]
    return made


def _with_units(signals: Signals, kind: str, per: str = "") -> list[str]:
    """Names with their units: fore_flap (rad); with the time that rates are per: pitch_rate (rad/s per s)."""
    told = []
    for name, unit, *_ in signals.get(kind, ()):
        words = " ".join(part for part in ("" if unit == "1" else unit, f"per {per}" if per else "") if part)
        told.append(f"{name} ({words})" if words else name)
    return told


def statistics(found: Mapping[str, Any]) -> list[str]:
    """What the random drives say, as the check worded it, and what they were drawn from."""
    sampler = [f"Sampler: {escaped(cell(found['sampler']))}"] if "sampler" in found else []
    return [escaped(cell(found["text"])), *sampler]


def visible(found: Mapping[str, Any], time_unit: str) -> str:
    """The smallest errors of the local model that a set of drives would catch, in all signals and in each."""
    signals, time_unit = found.get("signals"), str(found.get("unit_of_delay", time_unit))
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
