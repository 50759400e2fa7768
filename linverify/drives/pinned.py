"""Drive files: JSON with the drive, the names it belongs to, and the evidence it was saved with.

A saved counterexample is pinned by copying its file to where the spec's `pinned:` looks. A file that no longer fits
(names gone, outside the declared set) is told with what to do; it is never passed over.
"""

from __future__ import annotations

import json
import os
import secrets
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from ..core.drive import Drive
from ..core.errors import DriveFileError
from ..core.signals import nearest
from .declared import Limits

FORMAT = 1
WORD = "linverify_drive"


def to_text(drive: Drive, about: Mapping[str, Any]) -> str:
    """A drive file's text: canonical, so that the same finding gives the same bytes. `about`: plain JSON values."""
    data = {**about, WORD: FORMAT, "digest": drive.digest, "drive": drive.to_data()}
    return json.dumps(data, sort_keys=True, allow_nan=False, indent=1) + "\n"


def write(folder: Path, drive: Drive, about: Mapping[str, Any], name: str = "") -> Path:
    """Write FOLDER/NAME.json at once or not at all, and return its path; without a name it is the digest.

    Raises OSError.
    """
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / f"{name or drive.digest}.json"
    # not by mkstemp: its files can be read by their owner only, and others look at evidence too
    temporary = path.with_name(f".{path.name}.{os.getpid()}.{secrets.token_hex(4)}.part")
    try:
        with temporary.open("x", encoding="utf-8", newline="\n") as stream:
            stream.write(to_text(drive, about))
        temporary.replace(path)
    except BaseException:
        temporary.unlink(missing_ok=True)
        raise
    return path


def read(path: Path, shown: str = "") -> tuple[Drive, dict[str, Any]]:
    """The drive of a file and everything else that stands in it. Raises DriveFileError, naming the file.

    shown: how messages call the file; left out: by its name.
    """
    shown = shown or path.name
    try:
        data = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise DriveFileError(f"{shown}: cannot be read: {error.strerror or error}") from error
    except ValueError as error:
        raise DriveFileError(f"{shown}: is no JSON: {error}") from error
    if not isinstance(data, dict) or WORD not in data:
        raise DriveFileError(f"{shown}: is no drive file: the word {WORD!r} is missing")
    if data[WORD] != FORMAT:
        raise DriveFileError(f"{shown}: has format {data[WORD]!r}; this version reads format {FORMAT}")
    try:
        drive = Drive.from_data(data["drive"])
    except (KeyError, TypeError, ValueError) as error:
        raise DriveFileError(f"{shown}: holds no usable drive: {error}") from error
    return drive, {key: value for key, value in data.items() if key not in (WORD, "drive")}


def misfits(name: str, drive: Drive, limits: Limits, inputs: Sequence[str], states: Sequence[str]) -> tuple[str, ...]:
    """Why a drive file does not fit this point, a line each with what to do; empty where it fits.

    name: of the file; inputs, states: all names that the plant has.
    """
    gone = [(word, inputs, "input") for word in drive.inputs if word not in inputs]
    gone += [(word, states, "state") for word in drive.offsets if word not in states]
    if gone:
        return tuple(_gone(name, word, words, kind) for word, words, kind in gone)
    reasons = limits.problems(drive)
    return tuple(f"pinned drive {name}: {reason}; widen the set or remove the file" for reason in reasons)


def _gone(name: str, word: str, words: Sequence[str], kind: str) -> str:
    near = nearest(word, words)
    hint = f", did you mean {near!r}?" if near else ""
    return f"pinned drive {name}: the plant has no {kind} {word!r}{hint}; rename it in the file or remove the file"


def fitted(drive: Drive, limits: Limits) -> Drive:
    """A drive that fits the set, with the set's inputs in the set's order; its digest may differ."""
    if drive.inputs == limits.inputs:
        return drive
    values = np.zeros((drive.intervals, len(limits.inputs)))
    for column, name in enumerate(drive.inputs):
        values[:, limits.inputs.index(name)] = drive.values[:, column]
    return Drive(drive.every, limits.inputs, values, drive.course, drive.offsets, drive.text)
