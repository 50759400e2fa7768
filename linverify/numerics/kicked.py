"""A closed loop left to itself after a small kick: does it come to rest, grow, or go on in between?

The size of the motion is the largest deviation over a window of half a period of the mode in question, each signal
against its nominal size. The kick lies along that mode, so that in a linear system the logarithm of the size is a
straight line.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ..core.drive import Drive
from ..core.model import Array
from ..core.outcome import Outcome
from .rig import Exit, Fidelity, Rig, Runs

STEADY = 0.02  # spread of the sizes of windows, relative, of a motion that neither grows nor decays


@dataclass(frozen=True, slots=True, eq=False)
class Kicked:
    """What became of a kick. sizes: of the motion in each window that was run to its end; window: their length.

    growth: logarithm of the last size over the first; left: the exit from the envelope, if any.
    """

    sizes: Array
    window: float
    growth: float
    left: Exit | None
    outcome: Outcome
    text: str
    runs: Runs

    @property
    def sustained(self) -> bool:
        """Whether the last third of the windows has one size: a limit cycle, or a motion on the edge."""
        tail = self.sizes[-max(3, len(self.sizes) // 3) :]
        if self.left is not None or not self.outcome.done or len(self.sizes) < 5 or not tail.min() > 0.0:
            return False
        return float(tail.max() / tail.min()) <= 1.0 + STEADY


@dataclass(frozen=True, slots=True, eq=False)
class Trial:
    """A kick to be run: offsets from trim, the time between nodes' groups, and how many groups make a window.

    rows: of the rig's signals that count as motion; nominal: their sizes; linear: sizes up to which growth is measured,
    in sizes of the first window.
    """

    rig: Rig
    drive: Drive
    group: int
    rows: tuple[int, ...]
    nominal: Array
    linear: float

    def run(self, simulated: Callable[[Rig, Drive, Fidelity], Runs], fidelity: Fidelity) -> Kicked:
        """Run it by one of the integrators."""
        runs = simulated(self.rig, self.drive, fidelity)
        scaled = np.abs(runs.plant[list(self.rows), :, :, 0]) / self.nominal[:, np.newaxis, np.newaxis]
        each = scaled.max(axis=(0, 2)) if len(self.rows) else np.zeros(self.drive.intervals)
        count = self.drive.intervals // self.group
        sizes = each[: count * self.group].reshape(count, self.group).max(axis=1)
        sizes = sizes[np.isfinite(sizes)]
        return Kicked(
            sizes, self.drive.every * self.group, _growth(sizes, self.linear), runs.exits[0], runs.outcomes[0],
            runs.errors[0], runs,
        )  # fmt: skip


def swing(found: Kicked, row: int) -> tuple[float, float]:
    """Size and period of a sustained motion of one signal, over the last third of the run; NaN where it never turns."""
    values, times = found.runs.plant[row, :, :, 0].ravel(), found.runs.times.ravel()
    tail = slice(2 * len(values) // 3, None)
    values, times = values[tail], times[tail]
    middle = 0.5 * (float(values.max()) + float(values.min()))
    size = 0.5 * (float(values.max()) - float(values.min()))
    ups = np.flatnonzero((values[:-1] < middle) & (values[1:] >= middle))
    if len(ups) < 2:
        return size, math.nan
    return size, float(times[ups[-1]] - times[ups[0]]) / (len(ups) - 1)


def _growth(sizes: Array, linear: float) -> float:
    """From the first window to the last, or to where the motion is no longer small."""
    if len(sizes) < 2 or not sizes[0] > 0.0:
        return math.nan
    beyond = np.flatnonzero(sizes > linear * sizes[0])
    last = float(sizes[int(beyond[0])] if beyond.size else sizes[-1])
    return math.log(max(last, 1e-300) / float(sizes[0]))
