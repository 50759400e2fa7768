"""What is quoted of a band: its worst drive's figure in the words and units that the spec used."""

from __future__ import annotations

import math

from ..core.verdict import Figure
from .bands import MISMATCH
from .comparison import Comparison
from .confirm import Word
from .evidence import key_of

WHAT = {
    "peak": "peak error",
    "rms": "rms error",
    "relative": "relative error",
    "wider_of": "peak error (wider of)",
    "final": "final error",
}


def figure_of(compared: Comparison, word: Word) -> Figure | None:
    """The figure of a row; None for an exit row without any exit, and for a row that no drive was examined for."""
    one = word.examined
    if one is None:
        return None
    if word.row >= len(compared.bands):
        return _exit(compared, word)
    band, row, plant = compared.bands[word.row], word.row, compared.case.plant
    worst, limit, error = float(one.worst[row]), float(one.limit[row]), float(one.error[row])
    unit = compared.units[band.signal]
    if band.kind == "relative":
        # told as the spec tells it, as a share of the plant's own peak deviation
        peak, unit, limit = float(one.peak[row]), "", band.fraction
        worst, error = (0.0, 0.0) if one.quiet[row] else (_ratio(worst, peak), _ratio(error, peak))
    return Figure(
        WHAT[band.kind], band.signal, worst, limit, unit, error=error, when=float(one.when[row]),
        time_unit=plant.time_unit, drive=key_of(compared, one.drive), origin=str(band.place), status=word.status,
    )  # fmt: skip


def _ratio(value: float, peak: float) -> float:
    if peak > 0.0:
        return value / peak
    return math.inf if value > 0.0 else 0.0


def _exit(compared: Comparison, word: Word) -> Figure | None:
    one = word.examined
    if one is None or (left := one.runs.exits[0]) is None:
        return None
    return Figure(
        "way to the limit that the local model had still to go when the plant left",
        left.signal, float(one.worst[word.row]), MISMATCH, error=float(one.error[word.row]), when=left.time,
        time_unit=compared.case.plant.time_unit, drive=key_of(compared, one.drive), origin="exits: mismatch",
        status=word.status,
    )  # fmt: skip
