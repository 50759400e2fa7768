"""How sure a figure is: every quoted figure is run twice, the second time on the halved grid.

The error of a figure is twice the difference of both runs, and at least the 90th percentile of the differences over a
fixed batch of 64 drives: twice the difference alone has missed the true error of single saturated trajectories. That is
evidence, not proof.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from enum import StrEnum

import numpy as np
from numpy.typing import NDArray

from ..core.drive import Drive
from ..core.model import Array
from ..numerics.simulate import Fidelity, Runs
from .bands import Figures, moves_with_plant, shares
from .comparison import Comparison

BATCH = 64  # drives of the fixed batch, at least
QUANTILE = 0.9
LARGEST = 0.01  # error of a figure as a share of its band, in the end
LEVELS = 3  # times that accuracy is raised: to steps of an eighth and a tolerance of 1 / 32 768 of the first
Flags = NDArray[np.bool_]


class State(StrEnum):
    """What a figure with its error says against its limit."""

    GOOD = "good"
    BAD = "bad"
    UNCLEAR = "unclear"


@dataclass(slots=True)
class Noise:
    """Our own error over the fixed batch, by fidelity; each fidelity is run once and kept (not frozen: a memory)."""

    comparison: Comparison
    batch: Sequence[Drive]
    examined: dict[tuple[str, Fidelity], Examined] = field(default_factory=dict)
    _runs: dict[Fidelity, Figures] = field(default_factory=dict)

    def figures(self, fidelity: Fidelity) -> Figures:
        """The figures of the fixed batch."""
        if fidelity not in self._runs:
            self._runs[fidelity] = self.comparison.figures(self.batch, fidelity)[0]
        return self._runs[fidelity]

    def at(self, fidelity: Fidelity) -> Array:
        """90th percentile, row by row, of how much error minus limit changes on the halved grid, (B,)."""
        coarse, fine = self.figures(fidelity), self.figures(fidelity.finer())
        change = np.abs(fine.excess - coarse.excess)[:, coarse.ok & fine.ok]
        if not change.shape[1]:
            return np.zeros(len(change))
        return np.asarray(np.quantile(change, QUANTILE, axis=1, method="higher"))

    def allowed(self, fidelity: Fidelity) -> Array:
        """Largest error of a figure in the end, (B,): 1 % of the band; of a relative band, of its widest limit here."""
        figures = self.figures(fidelity)
        widest, error = np.max(figures.limit, axis=1, initial=0.0), np.max(figures.worst, axis=1, initial=0.0)
        allowed = np.full(len(widest), np.inf)  # the unpredicted exit has no band
        for row, band in enumerate(self.comparison.bands):
            size = band.limit
            if moves_with_plant(band):  # where the plant never moves, the model's motion is what must be resolved
                size = widest[row] if widest[row] > 0.0 else error[row]
            allowed[row] = LARGEST * size if size > 0.0 else np.inf
        return allowed

    def settled(self, start: Fidelity) -> tuple[Fidelity, bool]:
        """The first fidelity, from `start` on, whose errors are small enough, and whether one was found at all.

        Where none is found nothing can pass any more, and the cheapest is returned to look for failures with.
        """
        fidelity = start
        for _ in range(LEVELS):
            if np.all(self.at(fidelity) <= self.allowed(fidelity)):
                return fidelity, True
            fidelity = fidelity.finer()
        done = bool(np.all(self.at(fidelity) <= self.allowed(fidelity)))
        return (fidelity, True) if done else (start, False)


def within(comparison: Comparison, worst: Array, error: Array, allowed: Array) -> Flags:
    """Rows, (B, ...), of relative bands whose figure is within our own small error of zero: nothing is broken there."""
    moving = np.array([*(moves_with_plant(band) for band in comparison.bands), False])
    shape = (len(moving), *(1,) * (worst.ndim - 1))
    return np.asarray(moving.reshape(shape) & (worst <= error) & (error <= allowed.reshape(shape)), dtype=bool)


def states(worst: Array, limit: Array, error: Array, quiet: Flags) -> list[State]:
    """One state a row. quiet: rows in which an error that is within ours of zero breaks nothing."""
    found = []
    for w, most, e, still in zip(worst, limit, error, quiet, strict=True):
        if w + e <= most or still:
            found.append(State.GOOD)
        else:
            # written so that a figure that is not a number counts as unclear
            found.append(State.BAD if w - e > most else State.UNCLEAR)
    return found


@dataclass(frozen=True, slots=True, eq=False)
class Examined:
    """One drive alone on both grids. worst, limit, error, when, peak (B,): the finer run's; states: one a row.

    quiet: rows where error and limit are both within our own error of zero; runs: the finer run.
    """

    drive: Drive
    fidelity: Fidelity
    worst: Array
    limit: Array
    error: Array
    when: Array
    peak: Array
    states: list[State]
    quiet: Flags
    runs: Runs

    @property
    def share(self) -> Array:
        """Used shares for ranking; zero where nothing is there beyond our own error."""
        return np.where(self.quiet, 0.0, shares(self.worst, self.limit))


def examine(
    comparison: Comparison, drive: Drive, fidelity: Fidelity, noise: Noise, row: int, *, levels: int = LEVELS
) -> Examined:
    """The quoted figures of one drive; accuracy is raised up to `levels` times where `row` is not settled yet.

    A function of the drive and the row alone, so that a replay comes to the same figures.
    """
    found = at(comparison, drive, fidelity, noise)
    for _ in range(levels):
        exact = found.error[row] <= noise.allowed(fidelity)[row]
        if not found.runs.outcomes[0].done or (found.states[row] is not State.UNCLEAR and exact):
            break
        fidelity = fidelity.finer()
        found = at(comparison, drive, fidelity, noise)
    return found


def at(comparison: Comparison, drive: Drive, fidelity: Fidelity, noise: Noise) -> Examined:
    """The quoted figures of one drive at one fidelity; kept, since several bands often share their worst drive."""
    key = (drive.digest, fidelity)
    if key not in noise.examined:
        noise.examined[key] = _at(comparison, drive, fidelity, noise)
    return noise.examined[key]


def _at(comparison: Comparison, drive: Drive, fidelity: Fidelity, noise: Noise) -> Examined:
    coarse, _ = comparison.alone(drive, fidelity)
    fine, runs = comparison.alone(drive, fidelity.finer())
    change = 2.0 * np.abs(fine.excess[:, 0] - coarse.excess[:, 0])
    error = np.maximum(change, noise.at(fidelity))
    worst, limit = fine.worst[:, 0], fine.limit[:, 0]
    quiet = within(comparison, worst, error, noise.allowed(fidelity))
    return Examined(
        drive, fidelity, worst, limit, error, fine.when[:, 0], fine.peak[:, 0],
        states(worst, limit, error, quiet), quiet, runs,
    )  # fmt: skip
