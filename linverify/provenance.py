"""Where a run came from: files, commit, versions, machine. Gathered here, kept apart from what was found.

It stands outside `report`, which only renders what it is given: this module asks git, the installed packages and the
processor. Nothing here enters the body of a record.
"""

from __future__ import annotations

import ctypes
import hashlib
import os
import platform
import subprocess
import sys
from collections.abc import Iterable, Mapping
from datetime import UTC, datetime
from importlib import metadata
from pathlib import Path
from typing import Any

import numpy as np

from .core.case import Options

PACKAGES = ("linverify", "numpy", "scipy", "hypothesis", "pint", "pytest", "PyYAML", "tabulate")
_GIT_SECONDS = 10.0
_GIT_WORDS = ("GIT_DIR", "GIT_WORK_TREE", "GIT_INDEX_FILE", "GIT_PREFIX", "GIT_COMMON_DIR")
_UNKNOWN = "unknown"


def gathered(
    sources: Iterable[Path],
    root: Path,
    options: Options,
    *,
    threads: str = "",
    tolerances: Mapping[str, Any] | None = None,
    now: datetime | None = None,
) -> dict[str, Any]:
    """Plain data on one run.

    sources: specs, plants, defaults, tables, hashed under their path relative to `root`. threads: how linear algebra
    came to one thread. tolerances: what was computed with, by name. now: time of the run, default the clock's.
    """
    return {
        "sha256": hashes(sources, root),
        "git": git_state(root, options.reports),
        "versions": versions(),
        "machine": machine()
        | {"threads": threads or f"OPENBLAS_NUM_THREADS={os.environ.get('OPENBLAS_NUM_THREADS', '')}"},
        "seed": options.seed,
        "profile": options.profile,
        "tolerances": dict(tolerances or {}),
        "time": (now or datetime.now(UTC)).astimezone(UTC).strftime("%Y-%m-%d %H:%M:%S UTC"),
    }


def hashes(files: Iterable[Path], root: Path) -> dict[str, str]:
    """SHA-256 of each file under its path relative to `root`; a word where a file cannot be read."""
    return {_shown(path, root): _sha256(path if path.is_absolute() else root / path) for path in sorted(set(files))}


def _shown(path: Path, root: Path) -> str:
    try:
        return path.resolve().relative_to(root.resolve()).as_posix() if path.is_absolute() else path.as_posix()
    except ValueError:
        return path.name  # outside the root: the folder's name belongs to one machine


def _sha256(path: Path) -> str:
    try:
        return hashlib.sha256(path.read_bytes()).hexdigest()
    except OSError:
        return "cannot be read"


def git_state(root: Path, outputs: Path | None = None) -> dict[str, Any]:
    """Commit of `root` and whether its working tree differs from it; None for both where git cannot tell."""
    commit = _git(root, "rev-parse", "--verify", "HEAD")
    if commit is None:
        return {"commit": None, "dirty": None}
    spared = [f":(exclude){_shown(outputs, root)}"] if outputs is not None and _inside(outputs, root) else []
    changes = _git(root, "status", "--porcelain", "--", ".", *spared)
    return {"commit": commit.strip(), "dirty": None if changes is None else bool(changes.strip())}


def _inside(path: Path, root: Path) -> bool:
    return (path if path.is_absolute() else root / path).resolve().is_relative_to(root.resolve())


def _git(root: Path, *arguments: str) -> str | None:
    # inside a hook git names another index or folder; and reading must not touch the index
    inherited = {word: value for word, value in os.environ.items() if word not in _GIT_WORDS}
    environment = {**inherited, "GIT_OPTIONAL_LOCKS": "0", "LC_ALL": "C"}
    try:
        done = subprocess.run(
            ["git", "-C", str(root), *arguments],
            capture_output=True,
            text=True,
            timeout=_GIT_SECONDS,
            check=True,
            env=environment,
        )
    except (OSError, subprocess.SubprocessError, UnicodeDecodeError):
        return None
    return done.stdout


def versions() -> dict[str, str]:
    """Versions of Python and of the packages whose arithmetic or search decides verdicts."""
    found = {"python": f"{platform.python_implementation()} {platform.python_version()}"}
    for name in PACKAGES:
        try:
            found[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            found[name] = _UNKNOWN
    return found


def machine() -> dict[str, Any]:
    """Processor, system, vector extensions and BLAS kernel: what decides the last bits of a result."""
    config = np.show_config(mode="dicts") or {}
    blas = config.get("Build Dependencies", {}).get("blas", {})
    return {
        "processor": processor(),
        "architecture": platform.machine() or _UNKNOWN,
        "system": platform.system() or _UNKNOWN,
        "vector_extensions": list(config.get("SIMD Extensions", {}).get("found", [])),
        "blas": f"{blas.get('name', _UNKNOWN)} {blas.get('version', '')}".strip(),
        "blas_kernel": blas_kernel(),
    }


def processor() -> str:
    """The processor's type in words."""
    words: dict[str, str] = {}
    try:
        lines = Path("/proc/cpuinfo").read_text(encoding="utf-8", errors="replace").splitlines()
    except OSError:
        lines = []
    for line in lines:
        name, _, value = line.partition(":")
        words.setdefault(name.strip(), value.strip())
    if "model name" in words:
        parts = [f"{word} {words[word]}" for word in ("cpu family", "model", "stepping") if word in words]
        return f"{words['model name']} ({', '.join(parts)})" if parts else words["model name"]
    return platform.processor() or platform.machine() or _UNKNOWN


def blas_kernel() -> str:
    """The kernel that OpenBLAS chose for this processor; "unknown" where another library works or does not tell."""
    package = Path(np.__file__).parent
    folders = (package.parent / "numpy.libs", package / ".dylibs") if sys.platform != "win32" else ()
    for library in sorted(path for folder in folders for path in folder.glob("*openblas*")):
        for symbol in ("scipy_openblas_get_corename64_", "openblas_get_corename64_", "openblas_get_corename"):
            try:
                ask = getattr(ctypes.CDLL(str(library)), symbol)
            except (OSError, AttributeError):
                continue
            ask.restype = ctypes.c_char_p
            name = ask()
            return name.decode("ascii", "replace") if isinstance(name, bytes) else _UNKNOWN
    return _UNKNOWN
