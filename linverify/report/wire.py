"""Verdicts as plain JSON: what travels between processes and what the run record is made of.

One JSON string a verdict, with nothing but built-in types inside, so that no channel can drop it. Numbers are rounded
to six significant digits here and nowhere else; one that JSON has no word for is written as {"$float": "nan"}, "inf"
or "-inf".
"""

from __future__ import annotations

import json
import math
import re
from collections.abc import Iterable, Mapping
from dataclasses import asdict, replace
from typing import Any

import numpy as np

from ..core.errors import Place, RecordError
from ..core.verdict import Evidence, Figure, Sense, Status, Verdict

FORMAT = 1  # 1: the first
DIGITS = 6

_NOT_FINITE = {"nan": math.nan, "inf": math.inf, "-inf": -math.inf}
_ADDRESS = re.compile(r"\b0x[0-9a-fA-F]{6,}\b")
_TEXTS = ("what", "signal", "unit", "time_unit", "drive", "origin")
_NUMBERS = ("worst", "limit", "error", "when")
_KEYS = frozenset({"id", "spec", "point", "check", "status", "place", "reason", "figures", "notes", "requirements",
                   "evidence", "details"})  # fmt: skip
_WHERE = frozenset({"at_frequency", "frequency_unit"})  # of figures that were met at a frequency, else left out
_RANGE = frozenset({"low"})  # of figures with a range, else left out
_DERIVED = frozenset({"headroom"})  # written for readers of the file; computed anew when read back


def rounded(value: float) -> float:
    """`value` to six significant digits; never a negative zero."""
    return float(f"{value:.{DIGITS}g}") + 0.0 if math.isfinite(value) else value


def plain(value: Any, *, exact: bool = False) -> Any:
    """Plain JSON data of `value`: the one place where numpy's numbers and arrays become Python's.

    exact: floats keep every digit, as drives need. Raises RecordError for anything else than None, truth values,
    numbers, texts, lists and mappings with text keys.
    """
    if isinstance(value, (np.generic, np.ndarray)):
        value = value.tolist()
    if value is None or isinstance(value, (bool, int)):
        return value
    if isinstance(value, float):
        if not math.isfinite(value):
            return {"$float": str(float(value))}
        return float(value) if exact else rounded(value)
    if isinstance(value, str):
        return _ADDRESS.sub("0x...", str(value))  # addresses differ from process to process
    if isinstance(value, (list, tuple)):
        return [plain(item, exact=exact) for item in value]
    if isinstance(value, Mapping):
        return {_key(key): plain(item, exact=exact) for key, item in value.items()}
    raise RecordError(f"a verdict cannot hold a {type(value).__name__}: {value!r}")


def _key(key: object) -> str:
    if not isinstance(key, str) or key.startswith("$"):
        raise RecordError(f"keys in a verdict's details are texts that do not begin with '$', got {key!r}")
    return str(key)


def restored(value: Any) -> Any:
    """Back from `plain`; raises RecordError for a foreign `$` word."""
    if isinstance(value, list):
        return [restored(item) for item in value]
    if not isinstance(value, dict):
        return value
    if any(key.startswith("$") for key in value):
        if set(value) != {"$float"} or value["$float"] not in _NOT_FINITE:
            raise RecordError(f"not a number that this version knows: {value!r}")
        return _NOT_FINITE[value["$float"]]
    return {key: restored(item) for key, item in value.items()}


def _figure_data(figure: Figure) -> dict[str, Any]:
    written = replace(
        figure,
        worst=rounded(float(figure.worst)),
        limit=rounded(float(figure.limit)),
        error=rounded(float(figure.error)),
        when=rounded(float(figure.when)),
        at_frequency=rounded(float(figure.at_frequency)),
        low=rounded(float(figure.low)),
    )
    left_out = _WHERE if math.isnan(written.at_frequency) else frozenset()
    left_out |= _RANGE if math.isnan(written.low) else frozenset()
    data = {name: plain(value) for name, value in asdict(written).items() if name not in left_out}
    return data | {"sense": figure.sense.value, "status": figure.status.value, "headroom": plain(written.headroom)}


def to_data(verdict: Verdict) -> dict[str, Any]:
    """Plain JSON data of a verdict, figures to six significant digits. Raises RecordError."""
    return {
        "id": verdict.id,
        "spec": verdict.spec,
        "point": verdict.point,
        "check": verdict.check,
        "status": verdict.status.value,
        "place": plain(asdict(verdict.place)),
        "reason": plain(verdict.reason),
        "figures": [_figure_data(figure) for figure in verdict.figures],
        "notes": plain(verdict.notes),
        "requirements": plain(verdict.requirements),
        "evidence": [plain(asdict(evidence)) for evidence in verdict.evidence],
        "details": plain(verdict.details),
    }


def _figure(data: Mapping[str, Any]) -> Figure:
    where = _WHERE if _WHERE & set(data) else frozenset()
    low = _RANGE & set(data)
    expect_keys(data, {*_TEXTS, *_NUMBERS, "sense", "status", *_DERIVED, *where, *low}, "a figure")
    texts = {name: _text(data, name) for name in _TEXTS}
    numbers = {name: _float(data, name) for name in _NUMBERS}
    figure = Figure(**texts, **numbers, sense=Sense(data["sense"]), status=Status(data["status"]))  # type: ignore[arg-type]
    if low:
        figure = replace(figure, low=_float(data, "low"))
    if not where:
        return figure
    return replace(figure, at_frequency=_float(data, "at_frequency"), frequency_unit=_text(data, "frequency_unit"))


def _place(data: Mapping[str, Any]) -> Place:
    expect_keys(data, {"file", "line", "column"}, "a place")
    return Place(_text(data, "file"), int(data["line"]), int(data["column"]))


def _evidence(data: Mapping[str, Any]) -> Evidence:
    expect_keys(data, {"role", "drive", "text"}, "a piece of evidence")
    return Evidence(_text(data, "role"), _text(data, "drive"), _text(data, "text"))


def _float(data: Mapping[str, Any], name: str) -> float:
    value = restored(data[name])
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise RecordError(f"{name!r} is a number, got {value!r}")
    return float(value)


def _text(data: Mapping[str, Any], name: str) -> str:
    if not isinstance(data[name], str):
        raise RecordError(f"{name!r} is a text, got {data[name]!r}")
    return str(data[name])


def _texts(data: Mapping[str, Any], name: str) -> tuple[str, ...]:
    if not isinstance(data[name], list) or not all(isinstance(item, str) for item in data[name]):
        raise RecordError(f"{name!r} is a list of texts, got {data[name]!r}")
    return tuple(data[name])


def expect_keys(data: Mapping[str, Any], keys: Iterable[str], what: str) -> None:
    """Raises RecordError unless `data` is a mapping with exactly these keys."""
    if not isinstance(data, Mapping) or set(data) != set(keys):
        found = sorted(data) if isinstance(data, Mapping) else data
        raise RecordError(f"{what} has the words {', '.join(sorted(keys))}; got {found}")


def from_data(data: Mapping[str, Any]) -> Verdict:
    """Back from `to_data`. Raises RecordError for data of another form."""
    expect_keys(data, _KEYS, "a verdict")
    try:
        verdict = Verdict(
            spec=_text(data, "spec"),
            point=_text(data, "point"),
            check=_text(data, "check"),
            status=Status(data["status"]),
            place=_place(data["place"]),
            reason=_text(data, "reason"),
            figures=tuple(_figure(figure) for figure in data["figures"]),
            notes=_texts(data, "notes"),
            requirements=_texts(data, "requirements"),
            evidence=tuple(_evidence(item) for item in data["evidence"]),
            details=dict(restored(data["details"])),
        )
    except (KeyError, TypeError, ValueError, AttributeError) as error:
        raise RecordError(f"not a verdict of format {FORMAT}: {error}") from error
    if verdict.id != data["id"]:
        raise RecordError(f"the verdict's id {data['id']!r} does not fit its parts: {verdict.id!r}")
    return verdict


def text_of(data: Any, *, indent: int | None = None) -> str:
    """The one JSON text of plain data: sorted keys, ASCII, no NaN. Raises RecordError."""
    separators = (",", ":") if indent is None else (",", ": ")
    try:
        return json.dumps(data, sort_keys=True, allow_nan=False, separators=separators, indent=indent)
    except (TypeError, ValueError) as error:
        raise RecordError(f"cannot be written as JSON: {error}") from error


def dumps(verdict: Verdict) -> str:
    """One JSON string of a verdict, safe to send between processes. Raises RecordError."""
    return text_of({"format": FORMAT, "verdict": to_data(verdict)})


def loads(text: str) -> Verdict:
    """Back from `dumps`. Raises RecordError for other text or another format."""
    data = parsed(text, "a verdict")
    expect_keys(data, {"format", "verdict"}, "a verdict's message")
    expect_format(data, "the verdict")
    return from_data(data["verdict"])


def parsed(text: str, what: str) -> Any:
    """The data of a JSON text. Raises RecordError for what is not JSON, bare NaN among it."""

    def refuse(word: str) -> float:
        raise ValueError(f"{word} is not JSON")

    try:
        return json.loads(text, parse_constant=refuse)
    except ValueError as error:
        raise RecordError(f"{what} is not JSON: {error}") from error


def expect_format(data: Mapping[str, Any], what: str) -> None:
    """Raises RecordError unless `data` has this version's format number."""
    found = data.get("format")
    if found != FORMAT or isinstance(found, bool):
        raise RecordError(f"{what} has format {found!r}; this version of linverify reads format {FORMAT}")
