"""Files of local models: which format a name stands for, and what the file or folder says, point by point.

Formats by suffix: .json, .csv (long form), .npz, .mat (version 5); without a suffix a folder of matrices in CSV.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

from linverify.core.errors import Place, Problem
from linverify.core.signals import nearest

from .claims import Claim
from .layout import FileWord
from .models_json import read_json
from .reader import Reader
from .scalars import quoted

POINT = "{point}"
SUFFIXES = (".json",)
_READERS: Mapping[str, Callable[[Reader, bytes, str], dict[str, Claim]]] = {".json": read_json}


@dataclass(frozen=True, slots=True, eq=False)
class Models:
    """The claims of one file by point ("" for a model without one), its mistakes, and the files that were read."""

    shown: str
    claims: Mapping[str, Claim]
    problems: tuple[Problem, ...]
    files: tuple[Path, ...]
    several: bool  # made for several points, each by its name


def place_of(source: FileWord, point: str, root: Path) -> tuple[Path, str]:
    """Path of the file for `point`, and how messages show it."""
    path = source.folder / source.text.replace(POINT, point)
    return path, Path(os.path.relpath(path.resolve(), root.resolve())).as_posix()


def read_models(source: FileWord, path: Path, shown: str) -> Models:
    """Read what lies at `path`. A file that is missing or of another format is a mistake at the place of `source`."""
    reader = Reader({})
    suffix = path.suffix.lower()
    named = path.name
    if suffix not in _READERS:
        wrong = f"`local_models: source`: {quoted(named)} is no file of models"
        reader.tell(source.place, wrong, f"one of {', '.join(SUFFIXES)} is expected")
        return Models(shown, {}, tuple(reader.problems), (), False)
    if not path.is_file():
        reader.tell(source.place, f"there is no file {quoted(shown)}", *_near(source, path))
        return Models(shown, {}, tuple(reader.problems), (), False)
    try:
        data = path.read_bytes()
    except OSError as error:
        reader.tell(Place(shown), f"the file cannot be read: {error.strerror}")
        return Models(shown, {}, tuple(reader.problems), (), False)
    claims = _READERS[suffix](reader, data, shown)
    return Models(shown, claims, tuple(reader.problems), (path,), bool(claims) and "" not in claims)


def _near(source: FileWord, path: Path) -> tuple[str, str]:
    folder = path.parent
    there = sorted(file.name for file in folder.iterdir() if file.suffix == path.suffix) if folder.is_dir() else []
    return "a path relative to the spec is expected", nearest(path.name, there)
