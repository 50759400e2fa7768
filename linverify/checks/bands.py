"""Error bands turned into figures, drive by drive, from the trajectories of plant and local model.

Every band is an error and a limit in the signal's own unit, since the limit of a relative band moves with the plant:
the share is their quotient, and accuracy is judged on their difference. What the envelope cut off does not count.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..core.case import Band
from ..core.model import Array
from ..numerics.rig import wrapped
from ..numerics.simulate import Runs

MISMATCH = 0.2  # of the way from trim to a limit: a plant exit that the model misses by more was not predicted
SHARE_DIGITS = 9  # ranking looks at no more, so that rounding of our own decides nothing


@dataclass(frozen=True, slots=True, eq=False)
class Figures:
    """B rows (bands, and at the end the unpredicted exit) by N drives.

    worst: the error; limit: what it may be; when: time of the worst, NaN for an rms; peak: the plant's own peak
    deviation. ok (N,): drives that were simulated to their end or exit; completed (N,): those that ran the horizon.
    """

    worst: Array
    limit: Array
    when: Array
    peak: Array
    ok: NDArray[np.bool_]
    completed: NDArray[np.bool_]

    @property
    def share(self) -> Array:
        """Used share of the limit, rounded for ranking; infinite where nothing is allowed and something is there."""
        return shares(self.worst, self.limit)

    @property
    def excess(self) -> Array:
        """Error minus limit, (B, N)."""
        return self.worst - self.limit

    def take(self, columns: Sequence[int] | NDArray[np.intp]) -> Figures:
        """The figures of some drives."""
        pick = np.asarray(columns, dtype=np.intp)
        return Figures(
            self.worst[:, pick], self.limit[:, pick], self.when[:, pick], self.peak[:, pick], self.ok[pick],
            self.completed[pick],
        )  # fmt: skip


def shares(worst: Array, limit: Array) -> Array:
    """worst / limit to nine digits; 0 where both are zero, infinite where only the limit is."""
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(limit > 0.0, worst / limit, np.where(worst > 0.0, np.inf, 0.0))
    return np.asarray(np.round(share, SHARE_DIGITS))


def joined(parts: Sequence[Figures]) -> Figures:
    """Figures of several batches as one."""
    return Figures(
        np.concatenate([part.worst for part in parts], axis=1),
        np.concatenate([part.limit for part in parts], axis=1),
        np.concatenate([part.when for part in parts], axis=1),
        np.concatenate([part.peak for part in parts], axis=1),
        np.concatenate([part.ok for part in parts]),
        np.concatenate([part.completed for part in parts]),
    )


def judged(runs: Runs, bands: Sequence[Band], *, model: Array | None = None) -> Figures:
    """The figures of every drive of `runs`: a row for each band, and the last row for unpredicted exits.

    model (q, K, S + 1, N): put in place of the local model's trajectories (to see what a wrong model would do).
    """
    response = runs.model if model is None else model
    counts = runs.counts()
    rows = []
    for band in bands:
        at = runs.signals.index(band.signal)
        rows.append(_row(band, runs, at, response[at], counts))
    rows.append(_exits(runs))
    columns = [np.stack([row[part] for row in rows]) for part in range(4)]
    ok = np.array([outcome.done for outcome in runs.outcomes], dtype=bool)
    return Figures(columns[0], columns[1], columns[2], columns[3], ok, runs.completed)


def _row(band: Band, runs: Runs, at: int, model: Array, counts: NDArray[np.bool_]) -> tuple[Array, Array, Array, Array]:
    """Error, limit, time and plant peak of one band, (N,) each; at: row of its signal; model (K, S + 1, N)."""
    turn = runs.turns[at] if runs.turns else 0.0
    plant, times, tiny = runs.plant[at], runs.arrives(at), 1e-9 * runs.horizon
    counts = counts & (times <= runs.horizon + tiny)[:, :, np.newaxis]
    error = np.where(counts, np.abs(wrapped(plant - model, turn)), 0.0)
    peak = np.max(np.where(counts, np.abs(wrapped(plant, turn)), 0.0), axis=(0, 1))
    from_ = times >= band.start - tiny
    if band.kind == "rms":
        still = max(0.0, times[0, 0] - band.start)  # before the first sample arrives both are at trim
        worst = _rms(error, times, counts & from_[:, :, np.newaxis], still)
        when = np.full(peak.shape, np.nan)
    elif band.kind == "final":
        arrived = times >= runs.horizon - tiny
        last = np.unravel_index(int(np.argmax(arrived)), times.shape) if arrived.any() else (-1, -1)
        worst = np.where(runs.completed, error[last], 0.0)
        when = np.where(runs.completed, runs.horizon, np.nan)
    else:
        worst, when = _peak(np.where(from_[:, :, np.newaxis], error, 0.0), times)
    return worst, _limit(band, peak), when, peak


def _limit(band: Band, peak: Array) -> Array:
    if band.kind == "relative":
        return np.asarray(band.fraction * peak)
    if band.kind == "wider_of":
        return np.maximum(band.limit, band.fraction * peak)
    return np.full(peak.shape, band.limit)


def moves_with_plant(band: Band) -> bool:
    """True where the limit follows the plant's own peak deviation down to nothing."""
    return band.kind == "relative" or (band.kind == "wider_of" and not band.limit > 0.0)


def _peak(error: Array, times: Array) -> tuple[Array, Array]:
    flat = error.reshape(-1, error.shape[2])
    at = np.argmax(flat, axis=0)
    return flat[at, np.arange(flat.shape[1])], times.reshape(-1)[at]


def _rms(error: Array, times: Array, counts: NDArray[np.bool_], still: float) -> Array:
    """Root of the mean over time of the squared error, by the trapezoidal rule between samples that count.

    still: time without any error that belongs to the mean.
    """
    both = counts[:, :-1] & counts[:, 1:]
    width = np.where(both, np.diff(times, axis=1)[:, :, np.newaxis], 0.0)
    squares = error**2
    area = np.sum(0.5 * (squares[:, :-1] + squares[:, 1:]) * width, axis=(0, 1))
    span = still + np.sum(width, axis=(0, 1))
    return np.asarray(np.sqrt(np.divide(area, span, out=np.zeros_like(area), where=span > 0.0)))


def _exits(runs: Runs) -> tuple[Array, Array, Array, Array]:
    """How far the local model still was from the limit that the plant left through, as a share of the way.

    Of a signal that it does not have the local model says nothing, so there is nothing that it could have missed.
    """
    missed = [
        0.0 if left is None or math.isnan(left.model_way) else max(0.0, 1.0 - left.model_way) for left in runs.exits
    ]
    when = [np.nan if left is None else left.time for left in runs.exits]
    count = len(missed)
    return np.array(missed), np.full(count, MISMATCH), np.array(when), np.ones(count)
