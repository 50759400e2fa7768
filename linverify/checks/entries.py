"""Delivered matrices against derived ones, entry by entry, in a scaling in which one number means the same everywhere.

An entry counts by what it does to its row: |delivered - derived| x nominal size of the column, as a share of the row's
largest term. Rows of a discrete model are scaled by what they change in a step (A - I): against A itself a fast sample
time would make every error of the dynamics look small. A rounding in the delivered file is an error of the delivered
model and counts; the message says where a difference is no more than that.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..core.model import Array, LocalModel
from ..core.units import composed
from ..core.verdict import Figure, Status
from ..numerics.linearize import LEAST_SCALE
from ..numerics.pair import MATRICES, Pair
from .claims import status_of

TOLD = 3  # entries that a message names; all that break the limit are in the details


@dataclass(frozen=True, slots=True)
class Entry:
    """One entry in the plant's units; away, error: difference, and error of ours, as shares of the row's scale."""

    matrix: str
    row: str
    column: str
    unit: str
    delivered: float
    ours: float
    known: float
    away: float
    error: float
    printed: bool

    @property
    def name(self) -> str:
        """`A[pitch_rate, speed]`."""
        return f"{self.matrix}[{self.row}, {self.column}]"

    def told(self) -> str:
        """`A[pitch_rate, speed]: delivered 0.412, plant 0.397 +- 2e-06 rad/(m s)`."""
        unit = "" if self.unit == "1" else f" {self.unit}"
        words = f"{self.name}: delivered {self.delivered:.9g}, plant {self.ours:.9g} +- {self.known:.1g}{unit}"
        return f"{words} (within the printed digits)" if self.printed else words


def entries(pair: Pair, time_unit: str) -> tuple[Entry, ...]:
    """Every entry, largest share first. Raises ValueError where states are anonymous or the times clash."""
    if pair.anonymous or pair.time_clash:
        raise ValueError("only models with the same named states and the same time have entries to compare")
    shares = shares_of(pair)
    found = [
        _entry(pair, shares, name, int(i), int(j), time_unit)
        for name in MATRICES
        for i, j in np.ndindex(getattr(pair.reference, name).shape)
    ]
    return tuple(sorted(found, key=lambda entry: -round(entry.away, 9)))


def shares_of(pair: Pair) -> dict[str, tuple[Array, Array]]:
    """By matrix: |delivered - reference| and the error of the reference, both as shares of the row's largest term."""
    scales = row_scales(pair)
    columns = {"A": pair.states, "B": pair.inputs, "C": pair.states, "D": pair.inputs}
    shares = {}
    for name in MATRICES:
        scale = scales[0 if name in "AB" else 1][:, np.newaxis]
        away = np.abs(getattr(pair.delivered, name) - getattr(pair.reference, name)) * columns[name]
        known = pair.reference.errors[name] * columns[name]
        shares[name] = (away / scale, known / scale)
    return shares


def row_scales(pair: Pair) -> tuple[Array, Array]:
    """Largest term of every state's and every output's row; of the delivered model where the reference has none."""
    ours, theirs = _largest(pair, pair.reference), _largest(pair, pair.delivered)
    floors = LEAST_SCALE * pair.states, LEAST_SCALE * pair.outputs
    states, outputs = (
        np.where(own > floor, own, np.maximum(floor, other))
        for own, other, floor in zip(ours, theirs, floors, strict=True)
    )
    return states, outputs


def _largest(pair: Pair, model: LocalModel) -> tuple[Array, Array]:
    moved = model.A if model.step is None else model.A - np.eye(len(model.A))
    rates = np.abs(np.hstack([moved * pair.states, model.B * pair.inputs]))
    outputs = np.abs(np.hstack([model.C * pair.states, model.D * pair.inputs]))
    return rates.max(axis=1, initial=0.0), outputs.max(axis=1, initial=0.0)


def _entry(pair: Pair, shares: dict[str, tuple[Array, Array]], name: str, i: int, j: int, time_unit: str) -> Entry:
    model = pair.reference
    rows, columns = (model.states if name in "AB" else model.outputs), (model.states if name in "AC" else model.inputs)
    theirs, ours = float(getattr(pair.delivered, name)[i, j]), float(getattr(model, name)[i, j])
    known = float(model.errors[name][i, j])
    per = [time_unit] if name in "AB" and model.step is None else []
    gap = abs(theirs - ours)
    known_unit = not {rows.names[i], columns.names[j]} & pair.unitless
    return Entry(
        name,
        rows.names[i],
        columns.names[j],
        composed([rows.units[i]], [columns.units[j], *per]) if known_unit else "1",
        theirs,
        ours,
        known,
        float(shares[name][0][i, j]),
        float(shares[name][1][i, j]),
        bool(known < gap <= pair.rounding[name][i, j] + known),
    )


def judged(found: tuple[Entry, ...], limit: float, origin: str) -> tuple[Figure, ...]:
    """The figure of the entry that decides: the worst that fails, else the worst that is undecided, else the worst."""
    if not found:
        return ()
    ranked = [(status_of(entry.away, entry.error, limit), entry) for entry in found]
    status, entry = next(
        (pair for wanted in (Status.FAIL, Status.UNDECIDED) for pair in ranked if pair[0] is wanted), ranked[0]
    )
    return (
        Figure(
            what="entry against the plant",
            signal=entry.name,
            worst=100 * entry.away,
            limit=100 * limit,
            unit="%",
            error=100 * entry.error,
            origin=origin,
            status=status,
        ),
    )


def differ(pair: Pair) -> bool:
    """True where an entry differs by more than printed digits and our own error explain."""
    return any(
        bool(
            (
                np.abs(getattr(pair.delivered, name) - getattr(pair.reference, name))
                > pair.rounding[name] + pair.reference.errors[name]
            ).any()
        )
        for name in MATRICES
    )


def broken(found: tuple[Entry, ...], limit: float) -> tuple[Entry, ...]:
    """The entries that do not keep the limit for sure, largest share first."""
    return tuple(entry for entry in found if status_of(entry.away, entry.error, limit) is not Status.PASS)


def reason(found: tuple[Entry, ...]) -> str:
    """What a reader is told of the entries in `found`; empty for none."""
    if not found:
        return ""
    more = len(found) - TOLD
    words = "; ".join(entry.told() for entry in found[:TOLD])
    return f"{words}; and {more} more entries" if more > 0 else words
