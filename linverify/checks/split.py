"""Where an error comes from: from the plant's nonlinearity, from leaving states out, or from the numbers delivered.

At the worst instant of the worst drive the error is a sum of three differences: plant less the full derived model, that
less what an exact delivery would be, and that less the verified model. No part needs another run of the plant.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from ..core.model import LocalModel
from ..core.units import told
from ..numerics.rig import wrapped
from ..numerics.simulate import respond
from .comparison import Comparison
from .confirm import Word
from .evidence import key_of
from .study import Study


@dataclass(frozen=True, slots=True)
class Split:
    """The error of one band's signal at one instant (plant less model, signed, in the band's unit) and its parts."""

    signal: str
    kind: str
    when: float
    total: float
    nonlinearity: float
    reduction: float
    delivered: float
    drive: str
    unit: str
    time_unit: str

    def to_data(self) -> dict[str, Any]:
        """Plain values for the record."""
        return {name: getattr(self, name) for name in self.__slots__}


def splits(study: Study, compared: Comparison, settled: Sequence[Word]) -> list[Split]:
    """One for each band whose worst drive was examined; none where all was derived here, or nothing could be."""
    local = study.case.local
    if (local.delivered is None and local.keep is None) or study.unmet("derived"):
        return []
    full = study.derived()
    reference = full if study.unmet("reference") else study.reference()
    found = [_split(compared, word, full, reference) for word in settled if word.row < len(compared.bands)]
    return [one for one in found if one is not None]


def _split(compared: Comparison, word: Word, full: LocalModel, reference: LocalModel) -> Split | None:
    one = word.examined
    if one is None:
        return None
    band, runs = compared.bands[word.row], one.runs
    row = runs.signals.index(band.signal)
    if band.signal not in {*reference.states.names, *reference.outputs.names}:
        return None
    error, times = runs.error[row, :, :, 0], runs.arrives(row)
    counts = np.isfinite(error) & (times <= runs.horizon * (1.0 + 1e-9)) & (times >= band.start - 1e-9 * runs.horizon)
    if band.kind == "final":
        counts &= times >= runs.horizon * (1.0 - 1e-9)
    if not counts.any():
        return None
    at = np.unravel_index(int(np.argmax(np.where(counts, np.abs(error), -1.0))), error.shape)
    fidelity = one.fidelity.finer()  # the quoted run is the finer one
    lines = [respond(compared.rig, model, one.drive, fidelity)[row][at] for model in (full, reference)]
    plant, mine = float(runs.plant[row, :, :, 0][at]), float(runs.model[row, :, :, 0][at])
    turn = runs.turns[row] if runs.turns else 0.0
    parts = (plant - lines[0], lines[0] - lines[1], lines[1] - mine)
    shown, time = compared.case.shown_band(band), compared.case.shown_time(compared.drives)
    curved, left_out, numbers = (shown.size(float(wrapped(np.array(part), turn))) for part in parts)
    when, total = time.size(float(times[at])), shown.size(float(error[at]))
    drive = key_of(compared, one.drive)
    return Split(
        band.signal, band.kind, when, total, curved, left_out, numbers, drive, shown.unit, time.unit
    )  # fmt: skip


def sentences(compared: Comparison, found: Sequence[Split]) -> list[str]:
    """One line a band that broke or not: how much of its worst error comes from where."""
    lines = []
    for one in found:
        unit, time = one.unit, one.time_unit
        parts = [f"{told(one.nonlinearity, unit)} from nonlinearity"]
        if compared.case.local.keep is not None:
            parts.append(f"{told(one.reduction, unit)} from the states left out")
        if compared.case.local.delivered is not None:
            parts.append(f"{told(one.delivered, unit)} from the delivered numbers")
        error = f"error of {one.signal} ({one.kind}) at its worst, {told(one.total, unit)} at {told(one.when, time)}"
        lines.append(f"{error}: {', '.join(parts)}")
    return lines
