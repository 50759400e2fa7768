"""Independent random drives from the declared sampler.

The sampler, in words (a report quotes `SAMPLER`): each draw is independent of all others and has the same law. One
input alone with probability one half, else each input with probability one half (at least one). Every moved input gets
a shape of the menu, a sign (the only one where its range is one-sided), and its full amplitude with probability one
half, else a share that is uniform between a tenth and one. Starts, lengths and periods are drawn over the horizon.
Every declared offset is there with probability one half, at a share that is uniform over its range. What a rate limit
forbids is followed as fast as it allows.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable

import numpy as np

from ..core.drive import Drive
from ..core.model import Array
from . import shapes
from .declared import Limits

SAMPLER = (
    "independent draws: one input alone or several, shapes of the menu with random start, length, period and sign, "
    "full amplitude in half of them, offsets uniform over their range"
)
SMALLEST_SHARE = 0.1
Draw = Callable[[Array, np.random.Generator], Array]


def seed_of(seed: int, *words: str) -> int:
    """A 64-bit seed from the user's seed and the words that name what it is for; the same on every machine."""
    text = "\n".join((str(seed), *words))
    return int.from_bytes(hashlib.sha256(text.encode()).digest()[:8], "big")


def sample(limits: Limits, menu: tuple[str, ...], count: int, rng: np.random.Generator) -> tuple[Drive, ...]:
    """`count` independent, identically distributed drives of the declared set; `menu`: names of shapes to draw from."""
    return tuple(_one(limits, menu, rng) for _ in range(count))


def _one(limits: Limits, menu: tuple[str, ...], rng: np.random.Generator) -> Drive:
    at = shapes.instants(limits.intervals, limits.course)
    values = np.zeros((limits.intervals, len(limits.inputs)))
    for column in _moved(len(limits.inputs), rng):
        shape = SHAPES[menu[int(rng.integers(len(menu)))]](at, rng)
        values[:, column] = limits.sized(limits.turned(_share(rng), column) * shape, column)
    offsets = {}
    for column, name in enumerate(limits.offsets):
        there, share = rng.random() < 0.5, rng.uniform(-1.0, 1.0)
        # With no input to move, a draw without any offset would be no drive at all.
        if there or not limits.inputs:
            offsets[name] = limits.offset(column, share)
    return limits.drive(values, offsets)


def _moved(count: int, rng: np.random.Generator) -> list[int]:
    if count == 0:
        return []
    alone = int(rng.integers(count))
    chosen = rng.random(count) < 0.5
    if rng.random() < 0.5 or not np.any(chosen):
        return [alone]
    return [int(column) for column in np.flatnonzero(chosen)]


def _share(rng: np.random.Generator) -> float:
    sign = 1.0 if rng.random() < 0.5 else -1.0
    return sign * (1.0 if rng.random() < 0.5 else rng.uniform(SMALLEST_SHARE, 1.0))


def _start(at: Array, rng: np.random.Generator) -> float:
    """At once in a third of the draws, else anywhere in the first two thirds of the horizon."""
    late = rng.random() >= 1.0 / 3.0
    return float(int(rng.uniform(0.0, 2.0 / 3.0) * at.size)) if late else 0.0


def _length(at: Array, rng: np.random.Generator) -> float:
    """Whole intervals, uniform in the logarithm: short pulses and long ones alike."""
    return float(max(1, round(float(np.exp(rng.uniform(0.0, np.log(max(at.size, 2))))))))


def _period(at: Array, rng: np.random.Generator) -> float:
    """From two intervals to twice the horizon, uniform in the logarithm."""
    return float(np.exp(rng.uniform(np.log(2.0), np.log(2.0 * at.size + 2.0))))


def _step(at: Array, rng: np.random.Generator) -> Array:
    return shapes.step(at, _start(at, rng))


def _pulse(at: Array, rng: np.random.Generator) -> Array:
    return shapes.pulse(at, _start(at, rng), _length(at, rng))


def _doublet(at: Array, rng: np.random.Generator) -> Array:
    return shapes.doublet(at, _start(at, rng), _length(at, rng))


def _ramp(at: Array, rng: np.random.Generator) -> Array:
    return shapes.ramp(at, _start(at, rng), _length(at, rng))


def _sine(at: Array, rng: np.random.Generator) -> Array:
    return shapes.sine(at, _start(at, rng), _period(at, rng))


def _sweep(at: Array, rng: np.random.Generator) -> Array:
    return shapes.sweep(at, _start(at, rng), _period(at, rng), _period(at, rng))


def _multisine(at: Array, rng: np.random.Generator) -> Array:
    count = int(rng.integers(2, 7))
    return shapes.multisine(at, [_period(at, rng) for _ in range(count)], list(rng.uniform(0.0, 2.0 * np.pi, count)))


def _walk(at: Array, rng: np.random.Generator) -> Array:
    """Holds of geometric length; half of the levels are full ones."""
    mean = _length(at, rng)
    starts: list[float] = []
    levels: list[float] = []
    here = 0.0
    while here < at.size:
        starts.append(here)
        full, level = rng.random() < 0.5, rng.uniform(-1.0, 1.0)
        levels.append(float(np.sign(level) if full else level))
        here += float(rng.geometric(1.0 / mean))
    return shapes.walk(at, starts, levels)


SHAPES: dict[str, Draw] = {
    "step": _step,
    "pulse": _pulse,
    "doublet": _doublet,
    "ramp": _ramp,
    "sine": _sine,
    "sweep": _sweep,
    "multisine": _multisine,
    "walk": _walk,
}
