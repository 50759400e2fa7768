"""Overshoot and settling time of a stable closed loop's step response, with what is not known about them.

The deviation from the final value is a sum of modes, r exp(p t), so it is known at any time without marching there, and
what may still come is bounded by the sum of their envelopes. Overshoot is sought from the beginning until the envelope
falls below what was found; settling from the time at which the envelope enters the band, backwards to the last time
outside. So a slow mode cannot hide behind a fast one, and a lightly damped one costs no more than others.

Poles that lie on each other have no such modes: entries are then moved by parts in 1e13 to 1e10 until the poles part.
What that costs is measured at the times that matter, against the matrix exponential.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.linalg import expm

from ..core.model import Array
from .curve import Complex, balanced
from .margins import Found
from .minimal import minimal
from .step_sampled import Response, sampled_response
from .transfer import Transfer

PER_TURN = 40  # samples of one turn (or 2 pi time constants) of the fastest mode present
BLOCK = 400  # samples looked at together
MOST = 1_000_000  # samples in all
ABSENT = 1e-8  # of the final value: a mode that can contribute less is not followed
NO_FINAL = 1e-10  # of the sizes it is the difference of: a smaller final value is zero
PART = (0.0, 1e-13, 1e-12, 1e-11, 1e-10)  # relative changes of entries that are tried to part equal poles
SLACK = 1e-6  # of the band: settling is told for bands this much narrower and wider


@dataclass(frozen=True, slots=True)
class StepFigures:
    """final: value that a unit step approaches; overshoot: fraction of it by which it is passed; peak_time: when, NaN
    for never; settling: time units after which the response stays within the band. NaN where the final value is zero.

    The error of `settling` covers that a swing may only just leave the band.
    """

    final: float
    overshoot: Found
    peak_time: float
    settling: Found


NO_FIGURES = Found(math.nan, math.nan, math.nan)


@dataclass(frozen=True, slots=True, eq=False)
class _Modes:
    """Deviation from the final value: real part of sum of r exp(p t)."""

    p: Complex
    r: Complex

    def at(self, t: Array, order: int = 0) -> Array:
        """The deviation, or its derivative of that order, at times (T,)."""
        return np.asarray(((self.r * self.p**order) @ np.exp(np.outer(self.p, t))).real)

    def envelope(self, t: float) -> float:
        """A bound of the deviation at all times from t on."""
        return float(np.abs(self.r) @ np.exp(self.p.real * t))

    def present(self, t: float, least: float) -> _Modes:
        """Those that can still contribute more than `least`."""
        here = np.abs(self.r) * np.exp(self.p.real * t) > least
        return _Modes(self.p[here], self.r[here])

    @property
    def pace(self) -> float:
        """Time between samples that shows every swing."""
        return 2.0 * math.pi / PER_TURN / float(np.abs(self.p).max(initial=1e-300))


def step_figures(closed: Transfer, within: float = 0.02) -> StepFigures:
    """Figures of the response of a stable closed loop, reference to measured signal, to a unit step.

    within: half width of the band of `settling`, as a fraction of the final value. A sampled closed loop is judged at
    its instants. A dead time in `closed` delays the whole. Raises ValueError for several channels, a band that is not
    positive, or a closed loop that is not stable.
    """
    if closed.D.shape != (1, 1) or not within > 0.0:
        raise ValueError("one channel and a positive band are needed")
    A, b, c = balanced(closed.A, closed.B[:, 0], closed.C[0])
    A, B, C = minimal(A, b[:, np.newaxis], c[np.newaxis])
    d = float(closed.D[0, 0])
    if closed.step is None:
        if len(A) and np.linalg.eigvals(A).real.max() >= 0.0:
            raise ValueError("the closed loop is not stable")
        start = np.linalg.solve(A, B[:, 0]) if len(A) else B[:, 0]
    else:
        if len(A) and np.abs(np.linalg.eigvals(A)).max() >= 1.0:
            raise ValueError("the closed loop is not stable")
        start = np.linalg.solve(A - np.eye(len(A)), B[:, 0]) if len(A) else B[:, 0]
    final = d - float(C[0] @ start)
    if abs(final) <= NO_FINAL * (abs(d) + float(np.abs(C[0]) @ np.abs(start))):
        return StepFigures(0.0, NO_FIGURES, math.nan, NO_FIGURES)
    seen = C[0] / final
    if closed.step is not None:
        found = sampled_response(A, seen, np.asarray(start), within, closed.step)
    else:
        found = _response(A, seen, np.asarray(start), within)
    return _told(final, found, closed.delay)


def _told(final: float, found: Response, delay: float) -> StepFigures:
    settling = 0.0 if found.settled == 0.0 and delay == 0.0 else found.settled + delay
    return StepFigures(
        final,
        Found(max(found.highest, 0.0), math.nan, found.unseen),
        found.when + delay if found.highest > 0.0 else math.nan,
        Found(settling, math.nan, found.doubt),
    )


def _response(A: Array, c: Array, start: Array, within: float) -> Response:
    modes = _modes(A, c, start)
    highest, when, unseen = _highest(modes)
    early, late = (_last_outside(modes, within * share) for share in (1.0 + SLACK, 1.0 - SLACK))
    lost = max(abs(float(modes.at(np.array([t]))[0] - c @ expm(A * t) @ start)) for t in (when, early) if t < math.inf)
    if lost > 0.1 * SLACK * within:
        early, late = (_last_outside(modes, max(within + side, 0.1 * within)) for side in (10.0 * lost, -10.0 * lost))
    settled = _last_outside(modes, within)
    return Response(highest, when, unseen + 2.0 * lost, settled, late - early)


def _modes(A: Array, c: Array, start: Array) -> _Modes:
    """Modes whose parts do not cancel more than they must."""
    if not len(A):
        return _Modes(np.zeros(0, complex), np.zeros(0, complex))
    best, least = None, math.inf
    for part in PART:
        change = 1.0 + part * np.random.default_rng(0).uniform(-1.0, 1.0, A.shape)
        p, V = np.linalg.eig(A * change)
        try:
            r = (c @ V) * np.linalg.solve(V, start)
        except np.linalg.LinAlgError:
            continue
        # rounding grows with what cancels, the change of entries with itself
        cost = 2.0**-52 * float(np.abs(r).sum()) + 10.0 * part
        if np.isfinite(cost) and cost < least and p.real.max() < 0.0:
            best, least = _Modes(p.astype(np.complex128), r.astype(np.complex128)), cost
    if best is None:
        raise ValueError("the closed loop is not stable")
    return best


def _highest(modes: _Modes) -> tuple[float, float, float]:
    """Largest deviation, when, and what a longer search might find above it."""
    best, when, t, looked = float(modes.at(np.zeros(1))[0]), 0.0, 0.0, 0
    while modes.envelope(t) > max(best, ABSENT) and looked < MOST:
        active = modes.present(t, ABSENT / (1 + len(modes.p)))
        if not len(active.p):
            break
        times = _swings(active, np.asarray(t + active.pace * np.arange(BLOCK + 1)), max(best, 0.0))
        values = active.at(times)
        top = int(np.argmax(values))
        if values[top] > best:
            best, when = float(values[top]), float(times[top])
        t, looked = float(times[-1]), looked + BLOCK
    return best, when, max(0.0, modes.envelope(t) - max(best, 0.0))


def _last_outside(modes: _Modes, band: float) -> float:
    """The last time at which the deviation is larger than `band`; 0 for never, infinite where the search had to end."""
    end, looked = _within_envelope(modes, band), 0
    span = BLOCK * modes.present(end, ABSENT).pace if end > 0.0 else 0.0
    while end > 0.0 and looked < MOST:
        begin = max(0.0, end - span)
        active = modes.present(begin, ABSENT / (1 + len(modes.p)) * min(1.0, band))
        begin = max(begin, end - 8 * BLOCK * active.pace)
        count = 2 + int((end - begin) / active.pace)
        times = _swings(active, np.linspace(begin, end, count), 0.9 * band)
        outside = np.flatnonzero(np.abs(active.at(times)) > band)
        if len(outside):
            last = int(outside[-1])
            return float(times[-1]) if last == len(times) - 1 else _entered(modes, times[last], times[last + 1], band)
        end, span, looked = begin, 2.0 * span, looked + count
    return 0.0 if end <= 0.0 else math.inf


def _within_envelope(modes: _Modes, band: float) -> float:
    """When the envelope enters the band for good."""
    if not len(modes.p) or modes.envelope(0.0) <= band:
        return 0.0
    low, high = 0.0, 1.0 / float(-modes.p.real.max())
    while modes.envelope(high) > band:
        low, high = high, 2.0 * high
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if modes.envelope(middle) > band else (low, middle)
    return high


def _entered(modes: _Modes, low: float, high: float, band: float) -> float:
    """When |deviation| falls to `band` between a time outside and one inside."""
    for _ in range(60):
        middle = 0.5 * (low + high)
        outside = abs(float(modes.at(np.array([middle]))[0])) > band
        low, high = (middle, high) if outside else (low, middle)
    return 0.5 * (low + high)


def _swings(modes: _Modes, times: Array, worth: float) -> Array:
    """`times` and, between them, where the deviation turns back beyond `worth`."""
    values, slopes = np.abs(modes.at(times)), modes.at(times, 1)
    height = np.maximum(values[:-1], values[1:]) + np.abs(slopes[:-1]) * np.diff(times)
    turning = np.flatnonzero((np.signbit(slopes[:-1]) != np.signbit(slopes[1:])) & (height >= worth))
    if not len(turning):
        return times
    low, high, before = times[turning], times[turning + 1], np.signbit(slopes[turning])
    for _ in range(45):
        middle = 0.5 * (low + high)
        same = np.signbit(modes.at(middle, 1)) == before
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    return np.sort(np.concatenate([times, 0.5 * (low + high)]))
