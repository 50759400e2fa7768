"""From many drives to a word on each band: the worst drive alone, on both grids, a failure by a second integrator too.

The batch figures only choose which drives are looked at. A drive near or over a limit is doubled in a batch; what stays
near or over is examined alone, worst first, until one failure is confirmed or every one of them is settled.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..core.drive import Drive
from ..core.model import Array
from ..core.verdict import Status
from ..drives.shrink import shrunk
from ..numerics.independent import run_independent
from .accuracy import LEVELS, Examined, Flags, State, examine, within
from .bands import judged
from .campaign import Campaign
from .comparison import Comparison

TOP = 4  # drives a row that are doubled whatever their share: one of them is quoted
DOUBLED = 256  # drives that are doubled at most
EXAMINED = 8  # drives a row that are examined alone at most
NEAR = 10.0  # errors of ours within which a drive counts as near its limit


@dataclass(frozen=True, slots=True, eq=False)
class Word:
    """What one row (a band, or the unpredicted exit) came to. examined: the drive that is quoted."""

    row: int
    status: Status
    reason: str
    examined: Examined | None


def words(comparison: Comparison, found: Campaign) -> list[Word]:
    """One word for each row of the campaign's figures, in their order."""
    order, doubtful = _ranked(comparison, found)
    rows = range(found.figures.worst.shape[0])
    return [_word(comparison, found, row, order[row], doubtful[row]) for row in rows]


def _ranked(comparison: Comparison, found: Campaign) -> tuple[list[list[int]], list[set[int]]]:
    """For each row: columns by finer share, worst first, and those of them that are not clearly within the limit."""
    noise = found.noise.at(found.fidelity)[:, np.newaxis]
    allowed = found.noise.allowed(found.fidelity)
    coarse, share = found.figures, found.shares
    near = (coarse.worst + NEAR * noise > coarse.limit) & ~within(comparison, coarse.worst, noise, allowed)
    columns = _doubled(share, near)
    fine, _, _ = comparison.figures([found.drives[column] for column in columns], found.fidelity.finer())
    error = np.maximum(2.0 * np.abs(fine.excess - coarse.take(columns).excess), noise)
    quiet = within(comparison, fine.worst, error, allowed)
    finer = np.where(quiet, 0.0, fine.share)
    clear = (fine.worst + error <= fine.limit) | quiet
    broken = (fine.worst - error > fine.limit) & ~quiet
    order, doubtful = [], []
    for row in range(len(share)):
        # the worst is quoted; behind it what is clearly broken comes before what may be within our own error
        ranking = np.lexsort((np.array(columns), -finer[row], ~broken[row]))
        order.append([columns[int(at)] for at in ranking])
        left = set(np.flatnonzero(near[row]).tolist()) - set(columns)
        doubtful.append({columns[int(at)] for at in np.flatnonzero(~clear[row])} | left)
        order[-1] += sorted(left, key=lambda column, row=row: (-share[row, column], column))  # type: ignore[misc]
    return order, doubtful


def _doubled(share: Array, near: Flags) -> list[int]:
    """Columns to be run on the halved grid: the worst of each row, then what is near its limit, worst first."""
    chosen: dict[int, None] = {}
    for row in share:
        for column in np.lexsort((np.arange(row.size), -row))[:TOP]:
            chosen.setdefault(int(column))
    worst = np.max(np.where(near, share, -np.inf), axis=0)
    for column in np.lexsort((np.arange(worst.size), -worst)):
        if len(chosen) >= DOUBLED or not near[:, column].any():
            break
        chosen.setdefault(int(column))
    return sorted(chosen)


def _word(
    comparison: Comparison,
    found: Campaign,
    row: int,
    order: Sequence[int],
    doubtful: set[int],
) -> Word:
    """The worst drive of a row first, then every doubtful one; a confirmed failure ends it."""
    first = order[0]
    queue = [first, *(column for column in order[1:] if column in doubtful)]
    open_reason, quoted = "", None
    for column in queue[:EXAMINED]:
        # once something stays open only a failure can change the word, and that shows without more accuracy
        levels = 0 if open_reason or not found.settled else LEVELS
        one = examine(comparison, found.drives[column], found.fidelity, found.noise, row, levels=levels)
        if quoted is None or one.share[row] > quoted.share[row]:
            quoted = one
        if one.states[row] is State.BAD:
            if confirmed(comparison, one, row):
                return Word(row, Status.FAIL, "", one)
            open_reason = open_reason or "the second integrator does not confirm the error of the first"
        elif one.states[row] is State.UNCLEAR:
            open_reason = open_reason or "the figure is nearer to its limit than our own error, at every accuracy tried"
        elif not one.error[row] <= found.noise.allowed(one.fidelity)[row]:
            open_reason = open_reason or "our own error stayed above 1 % of the band, at every accuracy tried"
    if len(queue) > EXAMINED and not open_reason:
        open_reason = f"{len(queue)} drives are nearer to the limit than our own error"
    return Word(row, Status.UNDECIDED if open_reason else Status.PASS, open_reason, quoted)


def confirmed(comparison: Comparison, one: Examined, row: int) -> bool:
    """True where an integrator that shares no code with the first finds the same limit broken beyond our own error."""
    runs = run_independent(comparison.rig, one.drive, one.fidelity.finer())
    figures = judged(runs, comparison.bands)
    return bool(figures.ok[0] and figures.worst[row, 0] - one.error[row] > figures.limit[row, 0])


def simplest(comparison: Comparison, found: Campaign, word: Word) -> Examined | None:
    """The simplest drive that still breaks this row clearly, confirmed as the worst was; None where none is simpler."""
    worst = word.examined
    if worst is None:
        return None
    row = word.row

    def excess(drives: Sequence[Drive]) -> Array:
        figures, _, _ = comparison.figures(drives, worst.fidelity)
        return np.where(figures.ok, figures.excess[row], np.nan)

    kept = float(worst.worst[row] - worst.limit[row])
    drive = shrunk(worst.drive, comparison.limits, excess, kept)
    if drive.digest == worst.drive.digest:
        return None
    one = examine(comparison, drive, worst.fidelity, found.noise, row)
    if one.states[row] is State.BAD and confirmed(comparison, one, row):
        return one
    return None


def random_breaks(found: Campaign, judged_rows: int) -> tuple[int, int]:
    """(violations, draws) among the random drives: a limit broken, or a draw that did not complete."""
    columns = found.of("random")
    if not columns:
        return 0, 0
    broken = np.any(found.shares[:judged_rows, columns] > 1.0, axis=0)
    failed = broken | ~found.figures.completed[columns]
    return int(np.count_nonzero(failed)), len(columns)
