"""A drive in one readable line: what an engineer would say to a colleague who has to repeat it by hand."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass

import numpy as np

from ..core.drive import Drive
from ..core.model import Array
from ..core.shown import Shown

MOST_MOVES = 6  # a course with more moves is told by its range
DIGITS = 4
PLAIN = Shown()
WIDTH = 3  # changes in a row that read as one ramp


@dataclass(frozen=True, slots=True)
class _Move:
    """From instant `first` to instant `last` (equal for a jump) the input goes to `value`."""

    first: int
    last: int
    value: float


def worded(drive: Drive, shown: Mapping[str, Shown], time: Shown, set_points: Collection[str] = ()) -> str:
    """For example "fore_flap steps to +1.5 deg at 0.4 s, back at 1.2 s; pitch starts 0.5 deg high".

    shown: the units that inputs and states are told in; time: that of instants; set_points: inputs that are set points
    of the signals of that name, told so. Values are deviations from trim.
    """
    parts = []
    for column, name in enumerate(drive.inputs):
        course = drive.values[:, column]
        if np.any(course):
            called = f"set point of {name}" if name in set_points else name
            parts.append(f"{called} {_course(course, drive, shown.get(name, PLAIN), time)}")
    for name, value in drive.offsets.items():
        if value != 0.0:
            side = "high" if value > 0.0 else "low"
            parts.append(f"{name} starts {shown.get(name, PLAIN).told_size(abs(value), DIGITS)} {side}")
    return "; ".join(parts) if parts else "nothing moves"


def _course(course: Array, drive: Drive, shown: Shown, time: Shown) -> str:
    moves = _held_moves(course) if drive.course == "held" else _straight_moves(course)
    if len(moves) > MOST_MOVES:
        low, high = float(np.min(course)), float(np.max(course))
        changes = int(np.count_nonzero(np.diff(course, prepend=0.0)))
        first = int(np.flatnonzero(course)[0]) + (0 if drive.course == "held" else 1)
        return (
            f"changes {changes} times between {shown.told_range(low, high, 'and', DIGITS)} "
            f"from {_time(first, drive, time)} on"
        )
    said: list[str] = []
    before = 0.0
    for position, move in enumerate(moves):
        target = "back" if move.value == 0.0 and position else f"to {shown.told_change(move.value, DIGITS)}"
        if move.first == move.last:
            verb = "steps " if not said else ""
            said.append(f"{verb}{target} at {_time(move.first, drive, time)}")
        else:
            span = f"from {_time(move.first, drive, time)} to {_time(move.last, drive, time)}"
            verb = "ramps " if not said or target != "back" else ""
            said.append(f"{verb}{target} {span}")
        before = move.value
    if before != 0.0 and len(moves) > 1:
        said[-1] += " and stays there"
    return ", ".join(said)


def _held_moves(course: Array) -> list[_Move]:
    """Jumps; three or more changes the same way in a row are one ramp."""
    changes = np.diff(course, prepend=0.0)
    moves: list[_Move] = []
    k = 0
    while k < changes.size:
        if changes[k] == 0.0:
            k += 1
            continue
        last = k
        while last + 1 < changes.size and changes[last + 1] * changes[k] > 0.0:
            last += 1
        if last - k + 1 >= WIDTH:
            moves.append(_Move(k, last, float(course[last])))
        else:
            moves += [_Move(j, j, float(course[j])) for j in range(k, last + 1)]
        k = last + 1
    return moves


def _straight_moves(course: Array) -> list[_Move]:
    """Straight pieces with a slope, from instant to instant; row k is reached at instant k + 1."""
    points = np.concatenate(([0.0], course))
    slopes = np.diff(points)
    size = float(np.max(np.abs(slopes), initial=0.0))
    moves: list[_Move] = []
    k = 0
    while k < slopes.size:
        last = k
        while last + 1 < slopes.size and abs(slopes[last + 1] - slopes[k]) <= 1e-9 * size:
            last += 1
        if slopes[k] != 0.0:
            moves.append(_Move(k, last + 1, float(points[last + 1])))
        k = last + 1
    return moves


def _time(instant: int, drive: Drive, time: Shown) -> str:
    return time.told_size(instant * drive.every, DIGITS)
