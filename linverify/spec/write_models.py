"""Local models written to files, in every format that is read; what is written reads back equal, to the last bit."""

from __future__ import annotations

import io
import json
import os
import secrets
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType

import numpy as np

from linverify.core.delivered import DeliveredModel
from linverify.core.errors import LinverifyError, Place
from linverify.core.model import Array, LocalModel

from .claims import COLUMNS_OF, EXACT, MATRICES, NAMES, POINTS, ROWS_OF, half_units, shown_digits
from .models import POINT, SUFFIXES


class ModelFileError(LinverifyError):
    """A file of models cannot be written: its format, its name, or something that is there already."""


@dataclass(frozen=True, slots=True, eq=False)
class Sheet:
    """A model to be written. units: by signal, those of the plant that it is for; time_unit likewise."""

    model: DeliveredModel
    units: Mapping[str, str]
    time_unit: str


def sheet(model: LocalModel, point: str, time_unit: str) -> Sheet:
    """A derived model with the operating point that it was derived at, under the name of that point."""
    at = model.at
    units: dict[str, str] = {}
    for signals in (at.states, at.inputs, at.outputs):
        units |= dict(zip(signals.names, signals.units, strict=True))
    delivered = DeliveredModel(
        file="",
        place=Place(""),
        A=model.A,
        B=model.B,
        C=model.C,
        D=model.D,
        states=None if model.anonymous else model.states.names,
        inputs=model.inputs.names,
        outputs=model.outputs.names,
        step=model.step,
        course=model.course,
        x0=MappingProxyType(dict(zip(at.states.names, map(float, at.x), strict=True))),
        u0=MappingProxyType(dict(zip(at.inputs.names, map(float, at.u), strict=True))),
        y0=MappingProxyType(dict(zip(at.outputs.names, map(float, at.y), strict=True))),
        point=point,
    )
    return Sheet(delivered, units, time_unit)


def targets(to: str, points: Sequence[str]) -> dict[str, Path]:
    """Path by point; with `{point}` in its name a file each, else one for all. Raises ModelFileError."""
    suffix = Path(to).suffix.lower() if Path(to).suffix != POINT else ""
    if suffix and suffix not in SUFFIXES:
        raise ModelFileError(f"{to}: models are written to {', '.join(SUFFIXES)} or, without a suffix, to a folder")
    if not suffix and POINT not in to and len(points) > 1:
        raise ModelFileError(
            f"{to}: a folder holds one model; put {POINT} into its name, as in {to.rstrip('/')}/{POINT}"
        )
    return {point: Path(to.replace(POINT, point)) for point in points}


def check_targets(to: str, points: Sequence[str], *, force: bool) -> dict[str, Path]:
    """As `targets`, and refuses what is there already unless `force` is set. Raises ModelFileError."""
    paths = targets(to, points)
    there = [path for path in dict.fromkeys(paths.values()) if path.exists()]
    if there and not force:
        raise ModelFileError(f"{there[0]}: is there already; --force replaces it")
    return paths


def write_models(sheets: Mapping[str, Sheet], to: str, *, force: bool = False) -> tuple[Path, ...]:
    """Write models by point to `to`; returns the paths written. All or none, as far as the disk allows.

    Raises ModelFileError where something is there already and `force` is not set, and OSError.
    """
    paths = check_targets(to, list(sheets), force=force)
    grouped: dict[Path, dict[str, Sheet]] = {}
    for point, path in paths.items():
        grouped.setdefault(path, {})[point] = sheets[point]
    folder = Path(to).suffix.lower() not in SUFFIXES
    contents: dict[Path, bytes] = {}
    for path, group in grouped.items():
        alone = POINT in to or len(group) == 1
        if folder:
            (only,) = group.values()
            contents |= {path / name: text.encode() for name, text in _folder(only).items()}
        else:
            contents[path] = _encoded(path.suffix.lower(), group, alone=alone)
    _replace(contents)
    return tuple(grouped)


def _replace(contents: Mapping[Path, bytes]) -> None:
    """Every file under a name of its own first, so that a full disk leaves what was there."""
    waiting: list[tuple[Path, Path]] = []
    try:
        for path, data in contents.items():
            path.parent.mkdir(parents=True, exist_ok=True)
            temporary = path.with_name(f".{path.name}.{secrets.token_hex(4)}.part")
            waiting.append((temporary, path))
            temporary.write_bytes(data)
        for temporary, path in waiting:
            os.replace(temporary, path)
    finally:
        for temporary, _ in waiting:
            temporary.unlink(missing_ok=True)


def _encoded(suffix: str, group: Mapping[str, Sheet], *, alone: bool) -> bytes:
    if suffix == ".json":
        return _json(group, alone=alone).encode()
    if suffix == ".csv":
        return _long(group, alone=alone).encode()
    from . import write_binary

    stream = io.BytesIO()
    try:
        write_binary.write(stream, suffix, {"" if alone else point: sheet for point, sheet in group.items()})
    except ValueError as error:
        raise ModelFileError(f"{error}; put {POINT} into the name, for a file each") from None
    return stream.getvalue()


def _json(group: Mapping[str, Sheet], *, alone: bool) -> str:
    if alone:
        (only,) = group.values()
        return _json_group(_words(only), "") + "\n"
    points = {name: _words(sheet, alone=False) for name, sheet in group.items()}
    inner = ",\n".join(f"  {json.dumps(name)}: {_json_group(words, '  ')}" for name, words in points.items())
    return '{"points": {\n' + inner + "\n}}\n"


def _words(sheet: Sheet, *, alone: bool = True) -> dict[str, object]:
    """The words of a model in the order in which one reads it."""
    model = sheet.model
    words: dict[str, object] = {"point": model.point} if alone and model.point else {}
    for kind in NAMES:
        names = getattr(model, kind)
        words |= {} if names is None else {kind: list(names)}
    words["units"] = {name: unit for name, unit in sheet.units.items() if unit}
    words["time_unit"] = sheet.time_unit
    words |= {} if model.step is None else {"dt": model.step, "hold": model.course}
    for word in POINTS:
        values = dict(getattr(model, word))
        words |= {word: values} if values else {}
    return words | {name: getattr(model, name) for name in MATRICES}


def _json_group(words: Mapping[str, object], indent: str) -> str:
    """A word a line, a row of a matrix a line, so that a change shows as the line that changed."""
    lines = []
    for word, value in words.items():
        if isinstance(value, np.ndarray):
            rows = f",\n{indent}    ".join(f"[{', '.join(row)}]" for row in _exact(value))
            lines.append(f"{indent}  {json.dumps(word)}: " + (f"[\n{indent}    {rows}]" if len(value) else "[]"))
        else:
            lines.append(f"{indent}  {json.dumps(word)}: {json.dumps(value, allow_nan=False)}")
    return "{\n" + ",\n".join(lines) + f"\n{indent}}}"


def _exact(values: Array) -> list[list[str]]:
    """The numbers of a matrix in their shortest form, one of them in full where they would be taken for rounded ones.

    Raises ValueError for a number that is not finite.
    """
    if not np.isfinite(values).all():
        raise ValueError("a model holds a number that is not finite")
    flat = [float(value) for value in values.ravel()]
    texts = [repr(value) for value in flat]
    if texts and half_units(values, texts) is not None:
        longest = max(range(len(texts)), key=lambda at: shown_digits(texts[at]))
        texts[longest] = f"{flat[longest]:.{EXACT - 1}e}"
    width = values.shape[1]
    return [texts[row * width : (row + 1) * width] for row in range(len(values))]


def _states(model: DeliveredModel) -> tuple[str, ...]:
    """Labels of the states in CSV; anonymous ones are numbered."""
    return tuple(f"#{index + 1}" for index in range(len(model.A))) if model.states is None else model.states


def _table(sheet: Sheet, word: str) -> tuple[tuple[str, ...], tuple[str, ...], list[list[str]]]:
    model = sheet.model
    names = {"states": _states(model), "inputs": model.inputs, "outputs": model.outputs}
    return names[ROWS_OF[word]], names[COLUMNS_OF[word]], _exact(getattr(model, word))


def _folder(sheet: Sheet) -> dict[str, str]:
    texts = {}
    for word in MATRICES:
        rows, columns, values = _table(sheet, word)
        lines = [
            [word, *columns],
            *([row, *line] for row, line in zip(rows, values, strict=True)),
        ]
        texts[f"{word}.csv"] = _csv(lines)
    model = sheet.model
    claimed = {name: value for word in POINTS for name, value in dict(getattr(model, word)).items()}
    named = dict.fromkeys((*claimed, *(name for name, unit in sheet.units.items() if unit)))
    lines = [[name, repr(claimed[name]) if name in claimed else "", sheet.units.get(name, "")] for name in named]
    texts["point.csv"] = _csv([["name", "value", "unit"], *lines])
    texts["model.csv"] = _csv([["word", "value"], *_said(sheet)])
    return texts


def _said(sheet: Sheet, *, alone: bool = True) -> Iterator[list[str]]:
    model = sheet.model
    if alone and model.point:
        yield ["point", model.point]
    yield ["time_unit", sheet.time_unit]
    if model.step is not None:
        yield ["dt", repr(model.step)]
        yield ["hold", model.course]


def _long(group: Mapping[str, Sheet], *, alone: bool) -> str:
    lines = [["op", "matrix", "row", "col", "value"]]
    for name, sheet in group.items():
        op = "" if alone else name
        lines += [[op, word, "", "", value] for word, value in _said(sheet, alone=alone)]
        lines += [[op, "units", signal, "", unit] for signal, unit in sheet.units.items() if unit]
        for word in POINTS:
            lines += [[op, word, signal, "", repr(value)] for signal, value in getattr(sheet.model, word).items()]
        for word in MATRICES:
            rows, columns, values = _table(sheet, word)
            for i, row in enumerate(rows):
                lines += [[op, word, row, column, values[i][j]] for j, column in enumerate(columns)]
    return _csv(lines)


def _csv(lines: Sequence[Sequence[str]]) -> str:
    return "".join(",".join(map(_cell, line)) + "\n" for line in lines)


def _cell(text: str) -> str:
    return '"' + text.replace('"', '""') + '"' if any(sign in text for sign in ',"') else text
