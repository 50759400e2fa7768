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
from .models_binary import read_mat, read_npz
from .models_csv import files_in, read_folder
from .models_json import read_json
from .models_long import read_long
from .reader import Reader
from .scalars import quoted

POINT = "{point}"
SUFFIXES = (".json", ".csv", ".npz", ".mat")
MOST_BYTES = 1 << 30
_READERS: Mapping[str, Callable[[Reader, bytes, str], dict[str, Claim]]] = {
    ".json": read_json,
    ".csv": read_long,
    ".npz": read_npz,
    ".mat": read_mat,
}


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


def read_models(
    source: FileWord, path: Path, shown: str, word: str = "local_models: source", what: str = "models"
) -> Models:
    """Read what lies at `path`; word: what names it, as the spec calls it; what: it should hold.

    A file that is missing or of another format is a mistake at the place of `source`.
    """
    reader = Reader({})
    suffix = Path(source.text).suffix.lower()  # of the text: a point's name may have a dot in it
    known = ", ".join(SUFFIXES)
    if suffix and suffix not in SUFFIXES and not path.is_dir():
        wrong = f"`{word}`: {quoted(source.text)} is no file of {what}"
        reader.tell(source.place, wrong, f"one of {known} is expected, or a folder", nearest(suffix, SUFFIXES))
    elif path.is_dir():
        return _read(reader, files_in(path), shown, path)
    elif not path.exists():
        what = "file" if suffix else "folder"
        reader.tell(source.place, f"there is no {what} {quoted(shown)}", *_near(source, path))
    elif not suffix:
        reader.tell(source.place, f"{quoted(shown)} is no folder", f"a folder is expected, or one of {known}")
    elif path.stat().st_size > MOST_BYTES:
        reader.tell(Place(shown), f"the file is larger than {MOST_BYTES >> 20} MB")
    else:
        return _read(reader, {path.name: path}, shown, path)
    return Models(shown, {}, tuple(reader.problems), (), False)


def _read(reader: Reader, files: Mapping[str, Path], shown: str, path: Path) -> Models:
    data: dict[str, bytes] = {}
    for name, file in files.items():
        try:
            data[name] = file.read_bytes()
        except OSError as error:
            reader.tell(Place(shown), f"{name} cannot be read: {error.strerror}")
    claims: dict[str, Claim] = {}
    if not reader.problems and path.is_dir():
        claims = read_folder(reader, data, shown)
    elif not reader.problems:
        claims = _READERS[path.suffix.lower()](reader, data[path.name], shown)
    return Models(shown, claims, tuple(reader.problems), tuple(files.values()), bool(claims) and "" not in claims)


def _near(source: FileWord, path: Path) -> tuple[str, str]:
    folder = path.parent
    suffix = Path(source.text).suffix
    there = [file.name for file in folder.iterdir() if file.suffix == suffix or not suffix] if folder.is_dir() else []
    return "a path relative to the spec is expected", nearest(path.name, sorted(there))
