"""Batched integration over one smooth piece: many columns step together, error-controlled in the maximum norm.

A piece is what lies between two breakpoints of the drives, so that no step ever crosses a jump or a kink of an input.
All columns share each step; its size follows the largest error over columns and states, each state against its own
absolute weight. A root-mean-square norm, the usual choice, would hide one active column among quiescent ones (its error
then grows with the square root of the batch). A step that meets NaN is rejected, and a column that cannot be continued
is retired alone: the others go on.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from ..core.model import Array
from . import tableau

Mask = NDArray[np.bool_]
Rates = Callable[[float, Array], Array]  # (time since the piece began, x (n, N)) -> (n, N), NaN where it fails

SAFETY = 0.9  # closer to one: fewer, but more rejected steps
SHRINK, GROW = 0.2, 5.0  # limits of the change from step to step; further ones lose what the error tells
ON_NAN = 0.1  # nothing is known about the right step, only that this one is too long
LAGGING = 0.01  # of the largest error: a column below it could take steps at least two and a half times longer
ROUNDING = 1e-12


@dataclass(frozen=True, slots=True, eq=False)
class Attempt:
    """One step, not yet accepted: end (n, N), error (n, N), last: rates at the end (n, N).

    between(shares (r,)) -> (n, r, N): states after these shares of the step.
    """

    end: Array
    error: Array
    last: Array
    between: Callable[[Array], Array]


class Method(Protocol):
    """A one-step method with an error estimate and values within the step."""

    @property
    def name(self) -> str:
        """As records show it."""

    @property
    def order(self) -> int:
        """Exponent of the step in the error estimate."""

    def attempt(self, rates: Rates, start: float, x: Array, first: Array, step: float) -> Attempt:
        """One step of size `step` from (start, x); first (n, N): the rates there."""


@dataclass(frozen=True, slots=True)
class DormandPrince:
    """The explicit pair 5(4): order 5 is carried on, the difference to order 4 is the error."""

    name: str = "Dormand-Prince 5(4)"
    order: int = 5

    def attempt(self, rates: Rates, start: float, x: Array, first: Array, step: float) -> Attempt:
        """One step of size `step` from (start, x); first (n, N): rates there."""
        slopes = np.empty((7, *x.shape))
        flat = slopes.reshape(7, -1)
        slopes[0] = first
        end = x
        for stage, weights in enumerate(tableau.STAGES, start=1):
            end = x + step * (weights @ flat[:stage]).reshape(x.shape)
            slopes[stage] = rates(start + float(tableau.NODES[stage]) * step, end)
        error = step * (tableau.ERROR @ flat).reshape(x.shape)

        def between(shares: Array) -> Array:
            rise = end - x
            bend = step * slopes[0] - rise
            twist = rise - step * slopes[6] - bend
            extra = step * (tableau.DENSE @ flat).reshape(x.shape)
            share = shares[:, np.newaxis]
            inner = twist[:, np.newaxis] + (1.0 - share) * extra[:, np.newaxis]
            outer = rise[:, np.newaxis] + (1.0 - share) * (bend[:, np.newaxis] + share * inner)
            return np.asarray(x[:, np.newaxis] + share * outer)

        return Attempt(end, error, slopes[6], between)


@dataclass(frozen=True, slots=True, eq=False)
class Demand:
    """What a step must keep. scale (n, 1): largest local error; longest and shortest step; attempts: a piece."""

    scale: Array
    longest: float
    shortest: float
    attempts: int


@dataclass(slots=True, eq=False)
class Batch:
    """The columns on their way: x (n, N), active (N,), the step carried over from piece to piece.

    retire(columns (N,) bool) is called for columns that stop; it must put them to rest where rates are harmless.
    leaving(time, x) -> (N,): columns that the caller wants no further; stuck(columns, time, out of attempts) tells of
    those that could not go on. begun: when the piece began; stopped (N,): when a column stopped, else NaN;
    within (N,): the same counted from where this piece began, infinite for those that go on.
    """

    x: Array
    active: Mask
    step: float
    retire: Callable[[Mask], None]
    leaving: Callable[[float, Array], Mask]
    stuck: Callable[[Mask, float, bool], None]
    begun: float = 0.0
    tried: int = 0
    stopped: Array = field(init=False)
    last: Array = field(init=False)
    within: Array = field(init=False)

    def __post_init__(self) -> None:
        self.stopped = np.full(self.x.shape[1], np.nan)
        self.last = self.x.copy()
        self.within = np.full(self.x.shape[1], np.inf)

    def stop(self, columns: Mask, when: float) -> None:
        """Take `columns` out of the race `when` into the piece; `last` keeps where they were."""
        self.stopped[columns], self.within[columns] = self.begun + when, when
        self.last[:, columns] = self.x[:, columns]
        self.active &= ~columns
        self.retire(columns)


def advance(method: Method, rates: Rates, batch: Batch, length: float, nodes: int, demand: Demand) -> Array:
    """Carry `batch` over a piece of `length`; returns the states at nodes + 1 equal distances, (n, nodes + 1, N).

    Columns that stop within the piece are NaN at the nodes after it.
    """
    instants = length * np.arange(nodes + 1) / nodes
    out = np.full((batch.x.shape[0], nodes + 1, batch.x.shape[1]), np.nan)
    out[:, 0] = batch.x
    batch.within = np.where(batch.active, np.inf, -1.0)
    first, now, done, tries = rates(0.0, batch.x), 0.0, 0, 0
    while now < length and batch.active.any():
        parts = max(1, math.ceil((length - now) / min(batch.step, demand.longest) - 1e-9))
        step = (length - now) / parts
        attempt = method.attempt(rates, now, batch.x, first, step)
        tries += 1
        sizes = _sizes(attempt, batch.active, demand.scale)
        size = float(sizes.max())
        gone = None
        if size <= 1.0:
            ahead = length if parts == 1 else now + step
            done = _sample(out, instants, done, attempt, now, ahead)
            now, batch.x, first = ahead, attempt.end, attempt.last
            grown = step * (GROW if size == 0 else min(GROW, SAFETY * size ** (-1.0 / method.order)))
            # a step cut to fit the end of the piece says nothing against the one that was wanted
            batch.step = max(grown, batch.step if parts == 1 and size < 0.5 else 0.0)
            gone = batch.leaving(now, batch.x) & batch.active
        else:
            batch.step = step * (ON_NAN if math.isinf(size) else max(SHRINK, SAFETY * size ** (-1.0 / method.order)))
        slow = tries >= demand.attempts and now < length
        if slow or batch.step < demand.shortest:
            # those that ask for much shorter steps than the others; all of them where no step is short enough
            gone = batch.active & (sizes > (LAGGING * min(size, 1e300) if slow else 1.0))
            batch.stuck(gone, now, slow)
            batch.step, tries = step, tries - demand.attempts // 4
        if gone is not None and gone.any():
            batch.stop(gone, now)
            first = rates(now, batch.x)
    batch.tried += tries
    out[:, instants[:, np.newaxis] > batch.within * (1 + ROUNDING)] = np.nan
    return out


def _sample(out: Array, instants: Array, done: int, attempt: Attempt, now: float, ahead: float) -> int:
    """Fill the nodes of `out` between `now` and `ahead`; `done` and the result: the last node that is filled."""
    last = int(np.searchsorted(instants, ahead * (1 + ROUNDING), side="right")) - 1
    inner = slice(done + 1, last + 1)
    if last > done and instants[last] >= ahead * (1 - ROUNDING):
        out[:, last] = attempt.end
        inner = slice(done + 1, last)
    if inner.stop > inner.start:
        out[:, inner] = attempt.between((instants[inner] - now) / (ahead - now))
    return last


def _sizes(attempt: Attempt, active: Mask, scale: Array) -> Array:
    """Largest scaled error of each column, (N,): infinite where anything is not finite, zero for what has stopped."""
    sizes = np.abs(attempt.error / scale).max(axis=0)
    good = np.isfinite(sizes) & np.isfinite(attempt.end).all(axis=0) & np.isfinite(attempt.last).all(axis=0)
    result: Array = np.where(active, np.where(good, sizes, np.inf), 0.0)
    return result
