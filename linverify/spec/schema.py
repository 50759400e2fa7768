"""A JSON Schema (draft 7) of the language, for editors that complete and check YAML while it is written.

It is made from `words` and says less than the reader: names, units and whatever depends on several words at once are
left to `linverify check`. Lists of fixed length are written with `items` and `minItems`, because draft 7 knows no
other form that editors heed.
"""

from __future__ import annotations

from typing import Any

from .words import FORMAT, SPEC_WORDS, Kind, Row

Schema = dict[str, Any]

_NUMBER_OR_TEXT: Schema = {"type": ["number", "string"]}
_PAIR: Schema = {"type": "array", "items": _NUMBER_OR_TEXT, "minItems": 2, "maxItems": 2}
_TEXTS: Schema = {"type": "array", "items": {"type": "string"}, "uniqueItems": True}

_SCHEDULE: Schema = {
    "type": "object",
    "properties": {word: {"type": "string"} for word in ("table", "over", "column")},
    "required": ["table", "over"],
    "additionalProperties": False,
}
_GAIN: Schema = {"anyOf": [_NUMBER_OR_TEXT, _SCHEDULE]}
_GAINS: Schema = {"type": "array", "items": _GAIN, "minItems": 1}
_BAND: Schema = {
    "type": "object",
    "properties": {"time": _NUMBER_OR_TEXT, "within": _NUMBER_OR_TEXT},
    "required": ["time"],
    "additionalProperties": False,
}

_SIMPLE: dict[Kind, Schema] = {
    Kind.FORMAT: {"const": FORMAT},
    Kind.TEXT: {"type": ["string", "number", "boolean"]},
    Kind.NAME: {"type": ["string", "number", "boolean"]},
    Kind.TRUTH: {"type": "boolean"},
    Kind.LOCATION: _NUMBER_OR_TEXT,
    Kind.PLANT: {"type": "string", "pattern": "^.+:.+$"},
    Kind.QUANTITY: _NUMBER_OR_TEXT,
    Kind.SIZE: _NUMBER_OR_TEXT,
    Kind.NUMBER: {"type": "number"},
    Kind.FRACTION: _NUMBER_OR_TEXT,
    Kind.COUNT: {"type": "integer"},
    Kind.NAMES: _TEXTS,
    Kind.PATTERNS: _TEXTS,
    Kind.SOURCE: {"type": "string"},
    Kind.FILES: {"anyOf": [{"type": "string"}, _TEXTS]},
    Kind.RANGE: _PAIR,
    Kind.EXPECT: {"type": "string", "pattern": r"\+-|\+/-|±"},
    Kind.RATE: _NUMBER_OR_TEXT,
    Kind.RELATIVE: {"type": "string", "pattern": "%"},
    Kind.WIDER_OF: _PAIR,
    Kind.FILE: {"type": "string"},
    Kind.GAIN: _GAIN,
    Kind.COEFFICIENTS: _GAINS,
    Kind.MATRIX: {"anyOf": [_GAIN, _GAINS, {"type": "array", "items": _GAINS, "minItems": 1}]},
    Kind.SETTLING: {"anyOf": [_NUMBER_OR_TEXT, _BAND]},
    Kind.RULES: {"anyOf": [{"type": "string"}, _TEXTS]},
}


def schema() -> Schema:
    """The schema of a spec as plain data, JSON-ready; the same every time."""
    return {
        "$schema": "http://json-schema.org/draft-07/schema#",
        "title": f"linverify spec, format {FORMAT}",
        **_group(SPEC_WORDS),
    }


def _group(rows: tuple[Row, ...]) -> Schema:
    words = [row for row in rows if row.available and row.word != "*"]
    group: Schema = {
        "type": "object",
        "properties": {row.word: _described(row) for row in words},
        "additionalProperties": next((_behind(row) for row in rows if row.word == "*"), False),
    }
    required = [row.word for row in words if row.required]
    return group | ({"required": required} if required else {})


def _described(row: Row) -> Schema:
    told = row.meaning + (f"; default {row.default}" if row.default else "")
    return {"description": told, **_behind(row)}


def _behind(row: Row) -> Schema:
    if row.kind is Kind.COUNT:
        lowest = {"+": {"minimum": 1}, "0+": {"minimum": 0}}.get(row.sign, {})
        return {**_SIMPLE[row.kind], **lowest, **({} if row.most is None else {"maximum": row.most})}
    if row.kind in _SIMPLE:
        return _SIMPLE[row.kind]
    if row.kind in (Kind.CHOICE, Kind.CHOICES):
        choice: Schema = {"enum": list(row.choices)}
        return choice if row.kind is Kind.CHOICE else {"type": "array", "items": choice, "minItems": 1}
    if row.kind is Kind.BOUNDS:
        sides = {"type": "object", "properties": {"min": _NUMBER_OR_TEXT, "max": _NUMBER_OR_TEXT}}
        return {"anyOf": [_PAIR, {**sides, "additionalProperties": False, "minProperties": 1}]}
    if row.kind is Kind.MODES:
        return {"type": "array", "items": _group(row.of), "minItems": 1}
    if row.kind is Kind.GROUPS:
        return {"anyOf": [_group(row.of), {"type": "array", "items": _group(row.of), "minItems": 1}]}
    if row.kind is Kind.LIMITS:
        return {"anyOf": [_PAIR, _group(row.of)]}
    if row.kind is Kind.AMPLITUDE:
        until: Schema = {"type": "object", "additionalProperties": _NUMBER_OR_TEXT, "minProperties": 1}
        group = {"type": "object", "properties": {"until": until}, "required": ["until"], "additionalProperties": False}
        return {"anyOf": [_NUMBER_OR_TEXT, _PAIR, group]}
    if row.kind is Kind.SWEPT:
        return {"anyOf": [{"type": "array", "items": _NUMBER_OR_TEXT, "minItems": 1}, _group(row.of)]}
    if row.kind is Kind.DRIVES:
        # horizon and every may come from another level, so nothing is required here
        one = {key: value for key, value in _group(row.of).items() if key != "required"}
        return {"anyOf": [one, {"type": "object", "additionalProperties": one}]}
    if row.kind is Kind.BANDS:
        band = _group(row.of)
        by_set: Schema = {"type": "object", "additionalProperties": band}
        return {"type": "object", "additionalProperties": {"anyOf": [band, by_set]}}
    return _group(row.of)
