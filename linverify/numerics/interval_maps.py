"""What a local model does in an interval between two instants of a drive, as matrices."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..core.delivered import Course
from ..core.model import Array, LocalModel
from .hold import responses
from .instants import Instants


@dataclass(frozen=True, slots=True, eq=False)
class IntervalMap:
    """x after a part of an interval = state x + before u_before + new u_new, for rows u (m,) of a drive."""

    state: Array
    before: Array
    new: Array


def repeats(model: LocalModel, every: float) -> int:
    """Intervals after which all sampled controllers act as in the first again."""
    return max((round(jump.period / every) for jump in model.jumps), default=1) or 1


def interval_map(model: LocalModel, every: float, course: Course, share: float, number: int = 0) -> IntervalMap:
    """The map over `share` of interval `number`, which begins before what acts at its first instant."""
    if model.jumps:
        return _jumping(model, every, course, share, number)
    if model.step is None:
        return _continuous(model, every, course, share)
    return _discrete(model, max(1, round(every / model.step)), course, share)


def _continuous(model: LocalModel, every: float, course: Course, share: float) -> IntervalMap:
    P, Q, R = responses(model.A, model.B, np.array([every * share]))
    rising = R[0] / every
    if course == "held":
        return IntervalMap(P[0], np.zeros_like(Q[0]), Q[0])
    return IntervalMap(P[0], Q[0] - rising, rising)


def _discrete(model: LocalModel, steps: int, course: Course, share: float) -> IntervalMap:
    """Steps of x[k+1] = A x[k] + B u[k]; a straight course is read at the beginning of each step."""
    found = _nothing(model)
    for step in range(max(1, round(share * steps)) if share > 0.0 else 0):
        found = _driven(found, model.A, model.B, 1.0 if course == "held" else step / steps)
    return found


def _nothing(model: LocalModel) -> IntervalMap:
    n, m = len(model.states), len(model.inputs)
    return IntervalMap(np.eye(n), np.zeros((n, m)), np.zeros((n, m)))


def _driven(found: IntervalMap, A: Array, B: Array, reached: float) -> IntervalMap:
    """`found`, then x -> A x + B u with u so far on its way from the row before to the new one."""
    before, new = A @ found.before + B * (1.0 - reached), A @ found.new + B * reached
    return IntervalMap(A @ found.state, before, new)


def _jumping(model: LocalModel, every: float, course: Course, share: float, number: int) -> IntervalMap:
    """The same with what sampled controllers do at instants within the interval, but for those at its end."""
    begin, found, held = number * every, _nothing(model), course == "held"
    phases = {phase for jump in model.jumps for phase in Instants(jump.period, jump.phase).phases(every)}
    marks = [phase for phase in sorted({0.0, *phases}) if phase < share * every or phase == 0.0]
    for at, mark in enumerate(marks):
        reached = 1.0 if held else mark / every
        for jump in model.jumps:
            if Instants(jump.period, jump.phase).due(begin + mark):
                found = _driven(found, jump.A, jump.B, reached)
        end = min(marks[at + 1] if at + 1 < len(marks) else every, share * every)
        found = _flowed(model, found, every, (mark, end), held)
    return found


def _flowed(model: LocalModel, found: IntervalMap, every: float, part: tuple[float, float], held: bool) -> IntervalMap:
    """`found`, then the model alone over a part (from, to) of the interval."""
    if model.step is not None:
        first, last = (round(time / model.step) for time in part)
        for step in range(first, last):
            found = _driven(found, model.A, model.B, 1.0 if held else step * model.step / every)
        return found
    P, Q, R = responses(model.A, model.B, np.array([part[1] - part[0]]))
    after = _driven(found, P[0], Q[0], 1.0 if held else part[0] / every)
    if held:
        return after
    return IntervalMap(after.state, after.before - R[0] / every, after.new + R[0] / every)
