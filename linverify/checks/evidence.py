"""Saved drives: the file that a finding can be replayed from, and pinned by copying."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Mapping
from pathlib import Path
from typing import Any

from ..core.case import Options
from ..core.drive import Drive
from ..core.model import Array
from ..core.verdict import Evidence, Figure
from ..drives import pinned
from ..drives.wording import worded
from ..numerics.simulate import Fidelity, Runs
from .comparison import Comparison

FOLDER = "evidence"
DIGITS = 9  # of the saved trajectories: for drawing and comparing, not for judging


def key_of(comparison: Comparison, drive: Drive) -> str:
    """Twelve hexadecimal digits that name this drive at this check: the same step may break several points."""
    return hashlib.sha256(f"{comparison.id}\n{drive.digest}".encode()).hexdigest()[:12]


def text_of(comparison: Comparison, drive: Drive) -> str:
    """The drive in one readable line."""
    case, drives = comparison.case, comparison.drives
    points = case.loops[drives.loop].measures if drives.loop and drives.at == "set_point" else ()
    return worded(drive, case.shown_moves(drives), case.shown_time(drives), points)


def saved(
    comparison: Comparison,
    options: Options,
    role: str,
    drive: Drive,
    runs: Runs,
    fidelity: Fidelity,
    figures: tuple[Figure, ...],
) -> Evidence:
    """Save a drive with its trajectories where reports go, if they are written at all, and name it. Raises OSError.

    fidelity: that of the coarser of both runs, with which a replay begins.
    """
    key, text = key_of(comparison, drive), text_of(comparison, drive)
    if options.reports is not None:
        about = {
            "item": comparison.id,
            "role": role,
            "text": text,
            "fidelity": {"nodes": fidelity.nodes, "tolerance": fidelity.tolerance},
            "figures": [_figure(figure) for figure in figures],
            **plain_runs(runs, comparison.units, comparison.case.plant.time_unit),
        }
        if late := {name: late for name, late in zip(runs.signals, runs.late, strict=False) if late}:
            about["dead_times"] = late  # samples are shown when the plant makes them; these arrive so much later
        try:
            pinned.write(options.reports / FOLDER, drive, about, key)
        except OSError as error:  # a full disk takes nothing from the verdict
            text += f" (not saved: {error.strerror or error})"
    return Evidence(role, key, text)


def plain_runs(runs: Runs, units: Mapping[str, str], time_unit: str) -> dict[str, Any]:
    """The trajectories of one drive as plain values; units: by signal."""
    return {
        "signals": list(runs.signals),
        "units": {name: units[name] for name in runs.signals},
        "time_unit": time_unit,
        "times": _rows(runs.times),
        "plant": {name: _rows(runs.plant[at, :, :, 0]) for at, name in enumerate(runs.signals)},
        "model": {name: _rows(runs.model[at, :, :, 0]) for at, name in enumerate(runs.signals)},
        "ended": float(runs.ended[0]),
    }


def _figure(figure: Figure) -> dict[str, Any]:
    return {
        "what": figure.what,
        "signal": figure.signal,
        "worst": _number(figure.worst),
        "limit": _number(figure.limit),
        "error": _number(figure.error),
        "unit": figure.unit,
        "when": _number(figure.when),
        "time_unit": figure.time_unit,
    }


def _rows(values: Array) -> list[list[float | None]]:
    return [[_number(float(value)) for value in row] for row in values]


def _number(value: float) -> float | None:
    """To nine digits; what is not finite (after the envelope was left) becomes null."""
    return float(f"{value:.{DIGITS}g}") if math.isfinite(value) else None


def opened(path: Path) -> tuple[Drive, str]:
    """A saved drive, and the id of the check that it was saved for (empty where it names none).

    Raises DriveFileError, naming the file.
    """
    drive, about = pinned.read(path, str(path))
    item = about.get("item", "")
    return drive, item if isinstance(item, str) else ""


def kept(path: Path, folder: Path, item: str) -> Path:
    """Pin a saved drive for the check `item`: its file without the trajectories, under the same name, in `folder`.

    Returns the new path. Raises DriveFileError and OSError.
    """
    drive, about = pinned.read(path, str(path))
    text = {"text": about["text"]} if isinstance(about.get("text"), str) else {}
    return pinned.write(folder, drive, {**text, "item": item}, path.stem)
