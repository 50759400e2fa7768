"""Writing reports and evidence: whole files or none, and never over a fuller report.

Every file is written under a temporary name in its own folder, flushed to the disk and then renamed; a set of files is
renamed only when all of them are on the disk. What existed before stays until that moment.
"""

from __future__ import annotations

import os
import secrets
from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from typing import Any

from ..core.errors import RecordError
from . import markdown, record, tables

FULL = {"record": "linverify.json", "page": "compliance.md", "rows": "compliance.csv"}
QUICK = {"record": "linverify-quick.json", "page": "linverify-quick.md", "rows": "linverify-quick.csv"}
PARTIAL = {"record": "linverify-partial.json", "page": "linverify-partial.md", "rows": "linverify-partial.csv"}


def write(run: Mapping[str, Any], folder: Path) -> tuple[Path, ...]:
    """Write the record, the compliance report and its rows; returns their paths.

    A partial run and a quick one have names of their own. Raises RecordError, with all earlier files as they were.
    """
    names = PARTIAL if run["body"]["partial"] else QUICK if run["body"]["profile"] == "quick" else FULL
    texts = {
        folder / names["record"]: record.canonical(run),
        folder / names["page"]: markdown.page(run),
        folder / names["rows"]: tables.compliance_csv(record.verdicts_of(run)),
    }
    write_texts(texts)
    return tuple(texts)


def write_texts(texts: Mapping[Path, str]) -> None:
    """Write every file or none. Raises RecordError that names the file."""
    waiting: list[tuple[Path, Path]] = []
    try:
        for path, text in texts.items():
            waiting.append((_written_aside(path, text), path))
        for temporary, path in waiting:
            _renamed(temporary, path)
    finally:
        for temporary, _ in waiting:
            with suppress(OSError):
                temporary.unlink(missing_ok=True)


def _written_aside(path: Path, text: str) -> Path:
    """A file beside `path` that holds `text` and is on the disk."""
    temporary = path.with_name(f".{path.name}.{os.getpid()}.{secrets.token_hex(4)}.part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        if path.is_dir():
            raise IsADirectoryError("a folder of that name is in the way")
        with temporary.open("xb") as stream:
            stream.write(text.encode("utf-8"))
            stream.flush()
            os.fsync(stream.fileno())
    except (OSError, UnicodeEncodeError) as error:
        with suppress(OSError):
            temporary.unlink(missing_ok=True)
        raise RecordError(f"{path} cannot be written: {getattr(error, 'strerror', None) or error}") from error
    return temporary


def _renamed(temporary: Path, path: Path) -> None:
    try:
        temporary.replace(path)
    except OSError as error:
        raise RecordError(f"{path} cannot be written: {getattr(error, 'strerror', None) or error}") from error
    with suppress(OSError, AttributeError):  # not every system can flush a folder
        folder = os.open(path.parent, os.O_RDONLY | os.O_DIRECTORY)
        try:
            os.fsync(folder)
        finally:
            os.close(folder)
