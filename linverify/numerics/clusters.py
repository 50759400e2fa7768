"""Eigenvalues of a real matrix taken together until something can be said of every group.

Only those on or above the real axis are listed; a group that is joined with its own mirror image holds the conjugates
as well and has its centre on the axis.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import TypeVar

T = TypeVar("T")


@dataclass(frozen=True, slots=True)
class Cluster:
    """members: places of listed eigenvalues; mirrored: conjugates belong to it; values: all eigenvalues in it.

    center: their mean; inside: distance of the farthest of them from it; gap: distance of the nearest foreign one,
    infinite where there is none.
    """

    members: tuple[int, ...]
    mirrored: bool
    values: tuple[complex, ...]
    center: complex
    inside: float
    gap: float


def settled(values: Sequence[complex], attempt: Callable[[Cluster], T | None]) -> list[tuple[Cluster, T]]:
    """Groups of `values`, imaginary parts >= 0, for each of which `attempt` gave something else than None.

    A group that gets None is joined with the nearest foreign eigenvalue's. Raises ValueError where the group of all of
    them gets None.
    """
    waiting: list[tuple[tuple[int, ...], bool]] = [((at,), value.imag == 0.0) for at, value in enumerate(values)]
    done: list[tuple[Cluster, T]] = []
    while waiting:
        members, mirrored = waiting.pop(0)
        cluster, nearest = _cluster(values, members, mirrored)
        if (found := attempt(cluster)) is not None:
            done.append((cluster, found))
            continue
        if nearest is None:
            raise ValueError("nothing could be said of all eigenvalues together")
        place, below = nearest
        others = [group for group in (*waiting, *((one.members, one.mirrored) for one, _ in done)) if place in group[0]]
        joined = {*members, *(at for group in others for at in group[0])}
        waiting = [group for group in waiting if place not in group[0]]
        done = [(one, its) for one, its in done if place not in one.members]
        both = mirrored or below or any(group[1] for group in others)
        waiting.insert(0, (tuple(sorted(joined)), both))
    return done


def _cluster(
    values: Sequence[complex], members: tuple[int, ...], mirrored: bool
) -> tuple[Cluster, tuple[int, bool] | None]:
    """The group, and the place of the nearest foreign eigenvalue with whether it is the one below the axis."""
    own = [values[at] for at in members]
    if mirrored:
        own += [value.conjugate() for value in own if value.imag > 0.0]
    center = sum(own) / len(own)
    if mirrored:
        center = complex(center.real, 0.0)
    foreign = [(abs(value - center), at, False) for at, value in enumerate(values) if at not in members]
    foreign += [
        (abs(value.conjugate() - center), at, True)
        for at, value in enumerate(values)
        if value.imag > 0.0 and (at not in members or not mirrored)
    ]
    inside = max(abs(value - center) for value in own)
    if not foreign:
        return Cluster(members, mirrored, tuple(own), center, inside, math.inf), None
    gap, place, below = min(foreign)
    # what lies as far below the axis as above it is the same neighbour to a group on the axis
    return Cluster(members, mirrored, tuple(own), center, inside, gap), (place, below and not mirrored)
