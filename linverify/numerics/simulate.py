"""Drive plant and local model alike, and tell where the comparison ends.

`run` takes many drives in batches of fixed widths; its figures depend, within the tolerance, on the companions of a
drive, since a batch shares its steps. `run_alone` is the canonical run of one drive, the same bits whenever it is
repeated on the same machine: every figure that is quoted comes from it. Widths are fixed because a matrix product
rounds differently at another width.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from ..core.drive import Drive
from ..core.model import Array, LocalModel
from ..core.outcome import Outcome
from . import exits
from .courses import Courses, courses, linear, linear_signals
from .pieces import grid
from .plant_side import Followed, follow
from .rig import Exit, Fidelity, Rig, Runs

__all__ = ["Exit", "Fidelity", "Rig", "Runs", "respond", "run", "run_alone", "watched"]

WIDTHS = (8, 64, 256)  # below 64 columns a vectorised plant costs what one costs; above 256 little is gained
ALONE = 2  # canonical runs: wide enough for the plant's batched path, narrow enough to cost what one column costs
SAMPLES = 20_000_000  # numbers of one signal array of a batch; longer drives are taken in narrower batches
SINGLE = 16  # plants without a batched path share steps in small groups, since the worst column slows all


def run(rig: Rig, drives: Sequence[Drive], fidelity: Fidelity) -> Runs:
    """Simulate `drives`, which share every, intervals and course, on plant and local model.

    Raises ValueError where they do not, or name signals that the plant does not have. Figures may differ within the
    tolerance from those of `run_alone`.
    """
    stacked = courses(rig, drives, fidelity)
    each = len(watched(rig)) * stacked.count * (stacked.pieces.nodes + 1)
    widths = WIDTHS if rig.plant.batched else (SINGLE,)
    widest = max((width for width in widths if width * each <= SAMPLES), default=widths[0])
    parts = [stacked.part(first, first + widest) for first in range(0, stacked.width, widest)]
    return _joined([_simulated(rig, part, _width(rig, part.width), fidelity) for part in parts])


def run_alone(rig: Rig, drive: Drive, fidelity: Fidelity) -> Runs:
    """The canonical run of one drive (N = 1): same bits for same rig, drive and fidelity, on its own or in a replay."""
    alone = courses(rig, [drive], fidelity)
    return _simulated(rig, alone, ALONE if rig.plant.batched else 1, fidelity)


def respond(rig: Rig, model: LocalModel, drive: Drive, fidelity: Fidelity) -> Array:
    """What another local model answers to a drive, at the samples of `run_alone`: (q, K, W); NaN for what it lacks.

    Sampled models must have the step of the rig's. Raises ValueError as `run` does.
    """
    # as wide as the run it is set against: an equal model then gives equal bits
    drives = courses(rig, [drive], fidelity).padded(ALONE if rig.plant.batched else 1)
    other = replace(rig, model=model, signals=())
    with np.errstate(all="ignore"):
        signals = linear_signals(other, drives, linear(other, drives), rig.signals)
    found: Array = drives.pieces.folded(signals)[:, :, :, 0]
    return found


def watched(rig: Rig) -> tuple[str, ...]:
    """Compared signals first, then what the envelope limits besides."""
    known = [name for name in rig.envelope if name in rig.plant.states or name in rig.plant.outputs]
    return (*rig.signals, *(name for name in known if name not in rig.signals))


def _width(rig: Rig, count: int) -> int:
    if not rig.plant.batched:
        return count
    return next(width for width in WIDTHS if count <= width)


def _simulated(rig: Rig, drives: Courses, width: int, fidelity: Fidelity) -> Runs:
    wide = drives.padded(width)
    times = grid(drives.pieces, drives.intervals)
    names = watched(rig)
    with np.errstate(all="ignore"):  # what is not finite is told by outcomes
        followed = follow(rig, wide, names, times, fidelity)
        states = linear(rig, wide)
        model = linear_signals(rig, wide, states, names)
        if rig.plant.step is not None:  # its outputs are read at instants only: there is no left side of a jump
            model[:, :-1, -1] = model[:, 1:, 0]
        left, first = exits.find(rig, names, times, followed, model)
    return _narrowed(rig, drives, times, followed, model, left, first)


def _narrowed(
    rig: Rig,
    drives: Courses,
    times: Array,
    followed: Followed,
    model: Array,
    left: tuple[Exit | None, ...],
    first: exits.Indices,
) -> Runs:
    """Drop padding and signals that are only watched, and settle what ended each drive: the earlier event counts."""
    q, count, pieces = len(rig.signals), drives.width, drives.pieces
    ended, last = np.full(count, times[-1, -1]), np.full(count, times.size)
    outcomes, errors, found = [], [], []
    for column in range(count):
        gone, outcome, text = left[column], followed.outcomes[column], followed.errors[column]
        if gone is not None and (outcome.done or gone.time <= followed.until[column]):
            ended[column], last[column], outcome, text = gone.time, first[column], Outcome.DONE, ""
        elif not outcome.done:
            ended[column], gone = followed.until[column], None
        outcomes.append(outcome)
        errors.append(text)
        found.append(gone)
    plant = np.array(followed.deviations[:q, :, :, :count])
    order = np.arange(times.size).reshape(times.shape)
    plant[:, (times[:, :, np.newaxis] > ended) | (order[:, :, np.newaxis] >= last)] = np.nan
    late = tuple(rig.delays.outputs.get(name, 0.0) for name in rig.signals)
    turns = tuple(rig.turns.get(name, 0.0) for name in rig.signals)
    return Runs(
        rig.signals, pieces.folded(times[np.newaxis])[0], pieces.folded(plant),
        pieces.folded(np.array(model[:q, :, :, :count])), ended, tuple(found), tuple(outcomes), tuple(errors),
        followed.method, followed.evaluations, late, turns,
    )  # fmt: skip


def _joined(parts: Sequence[Runs]) -> Runs:
    if len(parts) == 1:
        return parts[0]
    return Runs(
        parts[0].signals,
        parts[0].times,
        np.concatenate([part.plant for part in parts], axis=3),
        np.concatenate([part.model for part in parts], axis=3),
        np.concatenate([part.ended for part in parts]),
        tuple(item for part in parts for item in part.exits),
        tuple(item for part in parts for item in part.outcomes),
        tuple(item for part in parts for item in part.errors),
        parts[0].method,
        sum(part.evaluations for part in parts),
        parts[0].late,
        parts[0].turns,
    )
