"""Closed-loop poles that oscillate, with their damping: those that the loop moves, up to where it matters.

A loop with a dead time has infinitely many poles, in chains along which damping fades to nothing while they go out to
infinite frequency: no such loop would keep any limit. So the poles of these loops are judged up to ten times the
highest crossover (common practice, no published source), and that none is missed there is shown by counting.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from ..core.loop import Loop
from ..core.shown import number, with_unit
from ..core.verdict import Status
from ..numerics.loop_margins import LoopMargins, in_s
from ..numerics.margins import Found
from ..numerics.sector import weakly_damped

BEYOND = 10.0  # of the highest crossover of a loop with dead time: poles up to there are judged
POLISHED = 1e-9  # relative: a pole of a loop with dead time is known to that
CLEAR = 1e-6  # of the damping: the region of the count keeps away from poles by so much


def dampings(found: LoopMargins) -> list[Found]:
    """Damping ratio, natural frequency and error of each pole that oscillates; one of each pair."""
    made: list[Found] = []
    for value, error in poles(found):
        s = in_s(value, found.loop.step)
        natural = abs(s)
        if s.imag <= 0.0 or math.isinf(natural):
            continue
        # of a sampled loop the error is one of |z|, a distance of log(|z|) / step
        scale = 1.0 if found.loop.step is None else 1.0 / (abs(value) * found.loop.step)
        made.append(Found(-s.real / natural, natural, error * scale / natural))
    return made


def poles(found: LoopMargins) -> Sequence[tuple[complex, float]]:
    """Poles that are judged, in z of a sampled loop, with their errors."""
    if found.poles is not None:
        return [(complex(v), float(e)) for v, e in zip(found.poles.values, found.poles.error, strict=True)]
    return [(value, POLISHED * abs(value)) for value in found.delayed if abs(value) <= reach(found)]


def reach(found: LoopMargins) -> float:
    """The frequency up to which poles of a loop with dead time are judged."""
    crossovers = [each.frequency for channel in found.channels for each in channel.margins.crossovers]
    return BEYOND * max(crossovers, default=math.pi / (BEYOND * found.loop.delay) if found.loop.delay else math.inf)


def counted(loop: Loop, found: LoopMargins, time_unit: str) -> tuple[list[tuple[Status, str]], list[str]]:
    """Of a loop with dead time: a reason to be undecided where a pole may be missed, and a note on what was judged."""
    asked = [limit for limit in loop.require if limit.word == "damping"]
    if not found.loop.delay or not found.delayed or not asked:
        return [], []
    limit, end = asked[0].low, reach(found)
    told = f"closed-loop poles were judged up to {with_unit(number(end, 4), f'rad/{time_unit}')}"
    note = f"{told}, {BEYOND:g} times the highest crossover: a loop with dead time has infinitely many"
    known = sum(1 for each in dampings(found) if each.value < limit * (1.0 - CLEAR))
    if math.isfinite(limit) and weakly_damped(found.loop, limit * (1.0 - CLEAR), end) != known:
        return [(Status.UNDECIDED, f"{told}, and one of them may have been missed")], [note]
    return [], [note]
