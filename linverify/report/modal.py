"""Modes of a local model as Markdown: the table of poles with participation, which line chose which, zeros, rules."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

from . import quantity
from .forms import Rows, cell, complex_told, is_number, rows_of
from .tables import escaped, grid

LEAST_SHARE = 0.01  # of participation: smaller ones are left out of the table
_TIMES = ("time_constant", "time_to_half", "time_to_double", "period")
_ORIGIN = {"yes": "at the origin", "maybe": "at the origin, as far as is known"}
PARTICIPATION = (
    "Participation is the share of a state in a mode: of a simple mode the product of the entries of its left and "
    "right eigenvectors; of poles that cannot be told apart, of their common projector. It does not depend on units. A "
    "time that a mode never reaches is left out."
)


def blocks(rest: dict[str, Any], time_unit: str) -> list[str]:
    """Blocks of what `modes` tells; its words are taken out of `rest`."""
    made: list[str] = []
    if rows := rows_of(rest, "modes"):
        made += [f"Modes of the local model, per {time_unit or 'time unit'}:", table(rows, time_unit)]
        if any(isinstance(row.get("participation"), Mapping) for row in rows):
            made += ["Participation of states in modes:", participation(rows), escaped(PARTICIPATION)]
    if rows := rows_of(rest, "mode_lines"):
        made += ["Modes that each line is about:", _lines(rows)]
    if rows := rows_of(rest, "zeros"):
        made += [f"Transmission zeros, per {time_unit or 'time unit'}:", _zeros(rows)]
    if rows := rows_of(rest, "gains_at_rest"):
        made += ["Static gains:", _gains(rows)]
    if rows := rows_of(rest, "rules"):
        made += ["Ready-made limits, where they come from and what to beware of:", rules(rows)]
    return made


def table(rows: Rows, time_unit: str) -> str:
    """One mode a row: pole with its error, frequency, damping, times."""
    unit = time_unit or "time units"
    rate = f"rad/{time_unit}" if time_unit else "rad per time unit"
    told = [
        {
            "mode": pole(row),
            "known to": _small(row.get("error")),
            "z": complex_told(row.get("z_real"), row.get("z_imag")) if "z_real" in row else quantity.ABSENT,
            f"natural frequency, {rate}": _told(row.get("natural_frequency")),
            "Hz": _told(row.get("hertz")),
            "damping ratio": _told(row.get("damping")),
            "cycles to half": _told(row.get("cycles_to_half")),
            **{f"{word.replace('_', ' ')}, {unit}": _told(row.get(word)) for word in _TIMES},
            "note": _note(row),
        }
        for row in rows
    ]
    headers = [word for word in told[0] if word == "mode" or any(row[word] != quantity.ABSENT for row in told)]
    right = [word for word in headers if word not in ("mode", "note")]
    return grid(headers, [[row[word] for word in headers] for row in told], right=right)


def pole(row: Mapping[str, Any]) -> str:
    """A mode's pole to four digits; a pair in one."""
    real, imag = _or_nan(row.get("real")), _or_nan(row.get("imag"))
    if not math.isfinite(real):
        return "at z = 0" if row.get("z_real") == 0 and not row.get("z_imag") else "near z = 0"
    first = quantity.number(real, 4)
    if not imag or math.isnan(imag):
        return first
    sign = "+" if row.get("z_imag") == 0.0 else "+-"
    return f"{first} {sign} {quantity.number(abs(imag), 4)}j"


def _or_nan(value: Any) -> float:
    return float(value) if is_number(value) else math.nan


def _note(row: Mapping[str, Any]) -> str:
    words = [_ORIGIN.get(str(row.get("at_origin")), "")]
    if is_number(row.get("told_together")):
        words.append(f"{row['told_together']} poles told together")
    return ", ".join(word for word in words if word) or quantity.ABSENT


def participation(rows: Rows) -> str:
    """One mode a row, one state a column; states without any share worth telling are left out."""
    shares = [row["participation"] if isinstance(row.get("participation"), Mapping) else {} for row in rows]
    names = list(dict.fromkeys(name for row in shares for name, share in sorted(row.items(), key=_largest_first)))
    names = [name for name in names if any(_of(row, name) >= LEAST_SHARE for row in shares)]
    told = [[pole(row), *(_share(_of(its, name)) for name in names)] for row, its in zip(rows, shares, strict=True)]
    return grid(["mode", *names], told, right=names)


def _share(share: float) -> str:
    return quantity.percent(round(share, 3)) if share >= LEAST_SHARE else ""


def _largest_first(item: tuple[str, Any]) -> tuple[float, str]:
    return -_number(item[1]), item[0]


def _of(row: Mapping[str, Any], name: str) -> float:
    return _number(row.get(name, 0.0))


def _number(value: Any) -> float:
    return float(value) if is_number(value) and math.isfinite(value) else 0.0


def _lines(rows: Rows) -> str:
    told = [(cell(row.get("line", "")), cell(row.get("modes") or "none")) for row in rows]
    return grid(("line", "modes"), told)


def _zeros(rows: Rows) -> str:
    told = []
    for row in rows:
        path = f"{cell(row.get('inputs', []))} to {cell(row.get('outputs', []))}"
        found = row.get("zeros") or []
        told += [(path, pole(one), _small(one.get("error"))) for one in found if isinstance(one, Mapping)]
        if not found:
            told.append((path, "none", quantity.ABSENT))
    return grid(("from and to", "zero", "known to"), told)


def _gains(rows: Rows) -> str:
    told = [
        (f"{row.get('input', '')} to {row.get('output', '')}", _valued(row.get("gain"), str(row.get("unit", ""))))
        for row in rows
    ]
    return grid(("from and to", "gain at rest"), told, right=("gain at rest",))


def rules(rows: Rows) -> str:
    """Ready-made limits with their sources and cautions, one a row."""
    told = [[cell(row.get(word, "")) for word in ("rule", "meaning", "source", "caution")] for row in rows]
    return grid(("rule", "meaning", "source", "beware"), told)


def _valued(value: Any, unit: str) -> str:
    return quantity.quantity(value, unit, 4) if is_number(value) else cell(value)


def _told(value: Any) -> str:
    return quantity.number(value, 4) if is_number(value) else cell(value)


def _small(value: Any) -> str:
    return quantity.number(value, 2) if is_number(value) and value else quantity.ABSENT
