"""Delivered against plant, as Markdown: claims, entries, responses, poles, zeros, gains, where an error comes from."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from typing import Any

from . import quantity
from .forms import cell, complex_told, is_number
from .tables import grid

Rows = Sequence[Mapping[str, Any]]
Units = Mapping[str, str]  # unit of every signal


def blocks(rest: dict[str, Any], units: Units, time_unit: str) -> list[str]:
    """Blocks of what `agrees` and the split of `follows` tell; their words are taken out of `rest`."""
    rate = f"rad/{time_unit}" if time_unit else "rad per time unit"
    known: dict[str, tuple[str, Callable[[Rows], str]]] = {
        "claimed_point": ("Operating point that the delivered model claims:", _claims),
        "entries": ("Entries outside their limit, worst first:", _entries),
        "response": (
            "Frequency response, each channel at its worst frequency:",
            lambda rows: _response(rows, units, rate),
        ),
        "poles_moved": (f"Poles, per {time_unit or 'time unit'}:", _pairs),
        "zeros_moved": (f"Transmission zeros, per {time_unit or 'time unit'}:", _pairs),
        "static_gains": ("Static gains:", lambda rows: _gains(rows, units)),
        "error_split": ("Where the worst error of each band comes from, at its worst instant:", _split),
    }
    made: list[str] = []
    for word, (title, table) in known.items():
        if _is_rows(rest.get(word)):
            rows = rest.pop(word)
            made += [title, table(rows)] if rows else []
    return made


def _is_rows(value: Any) -> bool:
    return isinstance(value, list) and all(isinstance(row, Mapping) for row in value)


def _claims(rows: Rows) -> str:
    found = [
        (
            str(row.get("signal", "")),
            _valued(row.get("claimed"), str(row.get("unit", ""))),
            _valued(row.get("trimmed"), str(row.get("unit", ""))),
            _share(row.get("nominal_sizes")),
        )
        for row in rows
    ]
    return grid(("signal", "claimed", "trimmed", "off, of its nominal size"), found, right=("claimed", "trimmed"))


def _entries(rows: Rows) -> str:
    found = []
    for row in rows:
        unit, error = str(row.get("unit", "")), row.get("error")
        plant = _valued(row.get("plant"), "")
        known = f" +- {quantity.number(error, 2)}" if is_number(error) and error else ""
        found.append(
            (
                str(row.get("entry", "")),
                _valued(row.get("delivered"), ""),
                f"{plant}{known}",
                unit,
                _share(row.get("share")),
            )
        )
    return grid(("entry", "delivered", "plant", "unit", "off, of its row's largest term"), found)


def _response(rows: Rows, units: Units, rate: str) -> str:
    found = []
    for row in rows:
        unit = _gain_unit(row, units)
        sides = [
            f"{_valued(row.get(f'{side}_gain'), unit)} at {_valued(row.get(f'{side}_phase'), 'deg')}"
            for side in ("delivered", "plant")
        ]
        found.append((_channel(row), _valued(row.get("frequency"), rate), *sides, _share(row.get("share"))))
    return grid(("channel", "frequency", "delivered", "plant", "off"), found)


def _pairs(rows: Rows) -> str:
    return grid(("delivered", "plant"), [(_complex(row.get("delivered")), _complex(row.get("plant"))) for row in rows])


def _gains(rows: Rows, units: Units) -> str:
    found = [
        (_channel(row), *(_valued(row.get(side), _gain_unit(row, units)) for side in ("delivered", "plant")))
        for row in rows
    ]
    return grid(("channel", "delivered", "plant"), found, right=("delivered", "plant"))


def _split(rows: Rows) -> str:
    parts = ("total", "nonlinearity", "reduction", "delivered")
    found = [
        (
            f"{row.get('signal', '')} ({row.get('kind', '')})",
            *(_valued(row.get(part), str(row.get("unit", ""))) for part in parts),
            _valued(row.get("when"), str(row.get("time_unit", ""))),
        )
        for row in rows
    ]
    headers = ("error", "total", "from nonlinearity", "from the reduction", "from the delivered numbers", "at")
    return grid(headers, found, right=headers[1:])


def _channel(row: Mapping[str, Any]) -> str:
    return f"{row.get('input', '')} to {row.get('output', '')}"


def _gain_unit(row: Mapping[str, Any], units: Units) -> str:
    """Output per input, as in m per rad."""
    above, below = (units.get(str(row.get(side)), "") for side in ("output", "input"))
    if above == below:
        return ""
    return f"{above or '1'} per {below}" if below not in ("", "1") else above


def _valued(value: Any, unit: str) -> str:
    return quantity.quantity(value, unit) if is_number(value) else cell(value)


def _share(value: Any) -> str:
    return quantity.percent(value) if is_number(value) and math.isfinite(value) else quantity.ABSENT


def _complex(value: Any) -> str:
    """A pole or zero; a dash where one side has none to pair."""
    if not isinstance(value, Mapping) or not is_number(value.get("real")):
        return cell(value)
    return complex_told(value["real"], value.get("imag"))
