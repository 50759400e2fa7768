"""What is quoted of a band: its worst drive's figure in the words and units that the spec used."""

from __future__ import annotations

import math

from ..core.case import Band, Case
from ..core.shown import number, with_unit
from ..core.verdict import Figure
from ..numerics.rig import Exit
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
WAY = ": way that the local model had still to go"  # ends the name of an exit's figure


def figure_of(compared: Comparison, word: Word) -> Figure | None:
    """The figure of a row; None for an exit row without any exit, and for a row that no drive was examined for."""
    one = word.examined
    if one is None:
        return None
    if word.row >= len(compared.bands):
        return _exit(compared, word)
    band, row, case = compared.bands[word.row], word.row, compared.case
    shown, time = case.shown_band(band), case.shown_time(compared.drives)
    unit = shown.unit
    worst, limit, error = (shown.size(float(values[row])) for values in (one.worst, one.limit, one.error))
    if band.kind == "relative":
        # told as the spec tells it, in per cent of the plant's own peak deviation
        peak, unit, limit = shown.size(float(one.peak[row])), "%", 100.0 * band.fraction
        worst, error = (0.0, 0.0) if one.quiet[row] else (_per_cent(worst, peak), _per_cent(error, peak))
    return Figure(
        WHAT[band.kind], band.signal, worst, limit, unit, error=error, when=time.size(float(one.when[row])),
        time_unit=time.unit, drive=key_of(compared, one.drive), origin=str(band.place), status=word.status,
    )  # fmt: skip


def name_of(band: Band) -> str:
    """A band as reports call it: peak error of pitch."""
    return f"{WHAT[band.kind]} of {band.signal}"


def _per_cent(value: float, peak: float) -> float:
    if peak > 0.0:
        return 100.0 * (value / peak)
    return math.inf if value > 0.0 else 0.0


def _exit(compared: Comparison, word: Word) -> Figure | None:
    one, case = word.examined, compared.case
    if one is None or (left := one.runs.exits[0]) is None:
        return None
    time = case.shown_time(compared.drives)
    return Figure(
        f"{exit_told(case, left)}{WAY}", "", 100.0 * float(one.worst[word.row]),
        100.0 * MISMATCH, "%", error=100.0 * float(one.error[word.row]), when=time.size(left.time),
        time_unit=time.unit, drive=key_of(compared, one.drive), origin=case.origin("exits.mismatch"),
        status=word.status,
    )  # fmt: skip


def exit_told(case: Case, left: Exit) -> str:
    """Where a drive left the envelope: unpredicted exit through level (upper limit 2.5 m)."""
    side = "upper" if left.side == "high" else "lower"
    return f"unpredicted exit through {left.signal} ({side} limit {case.shown_limit(left.signal).told(left.limit)})"


def break_told(figure: Figure) -> str:
    """One sentence on a figure that breaks its limit."""
    if not figure.what.endswith(WAY):
        return f"{figure.what} of {figure.signal} breaks its limit"
    when, way = with_unit(number(figure.when, 4), figure.time_unit), number(figure.worst, 3)
    told = f"the local model had still {way} % of the way to go, at most {number(figure.limit, 3)} %"
    return f"{figure.what.removesuffix(WAY)} at t = {when}: {told}"
