"""Shapes of input sequences: pure functions of time, within [-1, 1].

Time is counted in intervals (instant k is at k) so that a shape knows no units; sizes come from `Limits.sized`. All
functions take the instants `at` (K,) and return (K,).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from ..core.case import Course
from ..core.model import Array


def instants(intervals: int, course: Course) -> Array:
    """When the value of each row counts, in intervals: at its beginning where held, at its end where straight."""
    return np.arange(intervals, dtype=np.float64) + (0.0 if course == "held" else 1.0)


def step(at: Array, start: float) -> Array:
    """Zero before `start`, one from there on."""
    return np.where(at >= start, 1.0, 0.0)


def pulse(at: Array, start: float, length: float) -> Array:
    """One from `start` for `length`, zero elsewhere."""
    return np.where((at >= start) & (at < start + length), 1.0, 0.0)


def doublet(at: Array, start: float, length: float) -> Array:
    """One for `length`, then minus one for `length`."""
    return pulse(at, start, length) - pulse(at, start + length, length)


def ramp(at: Array, start: float, length: float) -> Array:
    """From zero at `start` in a straight line to one after `length`, and there it stays."""
    return np.clip((at - start) / max(length, 1e-9), 0.0, 1.0)


def square(at: Array, start: float, period: float) -> Array:
    """Plus and minus one in turn, from `start` on, half a period each."""
    halves = np.floor((at - start) / max(0.5 * period, 1e-9) + 1e-9)
    return np.where(at >= start, np.where(halves % 2 == 0, 1.0, -1.0), 0.0)


def sine(at: Array, start: float, period: float) -> Array:
    """A sine from `start` on."""
    return np.where(at >= start, np.sin(2.0 * np.pi * (at - start) / period), 0.0)


def sweep(at: Array, start: float, first: float, last: float) -> Array:
    """A sine whose period goes from `first` to `last` geometrically, from `start` to the last instant."""
    span = max(float(at[-1]) - start, 1e-9)
    since = np.clip(at - start, 0.0, None)
    growth = np.log(first / last) / span
    turns = since / first if abs(growth) * span < 1e-9 else np.expm1(growth * since) / (growth * first)
    return np.where(at >= start, np.sin(2.0 * np.pi * turns), 0.0)


def multisine(at: Array, periods: Sequence[float], phases: Sequence[float]) -> Array:
    """A sum of sines with equal weights, scaled so that its largest |value| is one."""
    total = np.zeros_like(at)
    for period, phase in zip(periods, phases, strict=True):
        total += np.sin(2.0 * np.pi * at / period + phase)
    largest = float(np.max(np.abs(total), initial=0.0))
    # sines that vanish at all instants are rounding only, and are not blown up
    return total / largest if largest > 1e-9 else np.zeros_like(at)


def walk(at: Array, starts: Sequence[float], levels: Sequence[float]) -> Array:
    """Levels held in turn: `levels[i]` from `starts[i]` on; zero before the first; `starts` ascend."""
    position = np.searchsorted(np.asarray(starts, dtype=np.float64), at, side="right")
    return np.concatenate(([0.0], np.asarray(levels, dtype=np.float64)))[position]
