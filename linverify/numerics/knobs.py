"""One number that explains a difference: a stale parameter, or a held value of another operating point.

The model is derived anew at each value that is tried, trim and all, and must in the end explain every number of the
delivered model. A number that moves fewer than two of them has explained nothing: any single entry can be met that way.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ..core.model import Array, LocalModel
from .target import Target

FIRST = 1e-3  # of the value, or of its size: the first change that is tried
TRIES = 12  # derivations for one number; Newton needs three to six
ALIKE = 0.2  # least cosine between what the number moves and what is to be explained
DIGITS, EDGE = 10, 0.1  # most digits that are told; share of what is allowed that a told value keeps off its ends
SETTLED = 1e-9  # of the value: a smaller correction changes no digit that is told
LEAST = 2  # numbers of the delivered model that must have moved
SHRINK = 0.3  # a value that would change its sign is only made smaller


@dataclass(frozen=True, slots=True)
class Knob:
    """A number that may be stale.

    kind: "parameter", "hold", or "gain" of what a loop gives; size: what a change of it is measured by.
    """

    name: str
    kind: str
    value: float
    unit: str
    size: float


Derive = Callable[[Knob, float], LocalModel | None]


@dataclass(frozen=True, slots=True, eq=False)
class _Tried:
    """A value with its model and the gap that is left, (q,), in units of what printed digits and errors allow."""

    value: float
    gap: Array
    model: LocalModel


@dataclass(frozen=True, slots=True, eq=False)
class _Search:
    knob: Knob
    derive: Derive
    target: Target

    def at(self, value: float) -> _Tried | None:
        model = self.derive(self.knob, value)
        return None if model is None else self.tried(value, model)

    def tried(self, value: float, model: LocalModel) -> _Tried:
        return _Tried(value, self.target.gap(model) / self.target.allowed(model), model)


def fitted(knob: Knob, derive: Derive, target: Target, reference: LocalModel) -> float | None:
    """The value of `knob` that explains the whole delivered model; None where none does.

    reference: the model at the knob's present value.
    """
    if int(target.unexplained(reference).sum()) < LEAST:
        return None
    search = _Search(knob, derive, target)
    first = search.tried(knob.value, reference)
    second = search.at(knob.value + FIRST * max(abs(knob.value), knob.size))
    if second is None or not _alike(first, second):
        return None
    slope = (second.gap - first.gap) / (second.value - first.value)
    here, slope = _descended(search, first, slope)
    if here is first:
        return None
    return _shortest(search, here, _allowed(here, slope))


def _descended(search: _Search, here: _Tried, slope: Array) -> tuple[_Tried, Array]:
    """Secant steps on all numbers at once, in the least-squares sense; shortened while they do not help."""
    start = float(np.linalg.norm(here.gap))
    for turn in range(TRIES):
        step = _limited(search.knob, here.value, -float(slope @ here.gap) / max(float(slope @ slope), 1e-300))
        ahead = _better(search, here, step)
        if ahead is None:
            break
        slope = (ahead.gap - here.gap) / (ahead.value - here.value)
        settled = abs(ahead.value - here.value) <= SETTLED * max(abs(ahead.value), search.knob.size)
        here = ahead
        if settled or (turn == TRIES // 2 and np.linalg.norm(here.gap) > 0.5 * start):
            break
    return here, slope


def _better(search: _Search, here: _Tried, step: float) -> _Tried | None:
    for _ in range(4):
        if here.value + step == here.value:
            return None
        tried = search.at(here.value + step)
        if tried is not None and np.linalg.norm(tried.gap) < np.linalg.norm(here.gap):
            return tried
        step *= 0.4
    return None


def _allowed(here: _Tried, slope: Array) -> tuple[float, float]:
    """Between which values every number is within what is allowed, as far as slopes tell; empty where low > high.

    The best fit of rounded numbers need not lie there.
    """
    moving = np.abs(slope) > 1e-12 * np.abs(slope).max(initial=0.0)
    gap, slope = here.gap[moving], slope[moving]
    ends = np.sort(np.stack([(-1.0 - gap) / slope, (1.0 - gap) / slope]), axis=0)
    return here.value + float(ends[0].max(initial=-np.inf)), here.value + float(ends[1].min(initial=np.inf))


def _shortest(search: _Search, here: _Tried, allowed: tuple[float, float]) -> float | None:
    """The value with fewest digits that explains everything: more digits than printed ones tell would be invented."""
    low, high = allowed
    middle = 0.5 * (low + high) if low <= high and np.isfinite(high - low) else here.value
    short = [float(f"{middle:.{digits}g}") for digits in range(1, DIGITS)]
    inside = [value for value in short if low + EDGE * (high - low) <= value <= high - EDGE * (high - low)]
    for value in (*inside[:1], middle, here.value):
        tried = search.at(value)
        if tried is not None and search.target.explained(tried.model):
            return value
    return None


def _limited(knob: Knob, value: float, step: float) -> float:
    if knob.kind == "parameter" and value != 0.0 and (value + step) / value < SHRINK:
        return (SHRINK - 1.0) * value
    longest = 4.0 * max(abs(value), knob.size)
    return float(np.clip(step, -longest, longest))


def _alike(first: _Tried, second: _Tried) -> bool:
    move = second.gap - first.gap
    sizes = float(np.linalg.norm(move)) * float(np.linalg.norm(first.gap))
    return sizes > 0.0 and abs(float(move @ first.gap)) >= ALIKE * sizes
