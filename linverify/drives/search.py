"""Drives drawn by Hypothesis: compact descriptions with boundary values, and nothing but small integers and booleans.

Hypothesis mixes integers beyond +-99 with constants that it finds in whatever modules happen to be loaded, so the same
seed would draw other drives in another process; within +-99 it does not. Every drive is a few parts (which input, what
shape, how large, when, how long), which reach the worst courses far sooner than lists of floats do. One example holds
many drives, because an example costs more than simulating another drive in the batch. Nothing is simulated in here:
no use is made of feedback, so the drives can be run afterwards in batches of any size.

The only module that imports Hypothesis.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from hypothesis import HealthCheck, Phase, Verbosity, given, seed, settings
from hypothesis import strategies as st

from ..core.drive import Drive
from ..core.model import Array
from . import shapes
from .declared import Limits
from .seeds import unique

TOP = 99  # beyond it Hypothesis mixes in constants of loaded modules
AN_EXAMPLE = 8  # drives an example at most
PARTS = 3  # parts of a drive at most
OFFSETS = 2  # offsets of a drive at most
# Integers beyond these mean the full amplitude, no delay, the whole horizon: a part in three, where an integer alone
# would hit the boundary, which is where the worst drives are, once in a hundred.
FULL, AT_ONCE, WHOLE = 66, 33, 80


@dataclass(frozen=True, slots=True)
class _Part:
    """One part: kind of shape, input, share of amplitude, start and length, all as small integers."""

    kind: int
    channel: int
    size: int
    start: int
    length: int


Sketch = tuple[list[_Part], list[tuple[int, int]]]
_SMALL = st.integers(-TOP, TOP)
_COUNT = st.integers(0, TOP)
_PART = st.builds(_Part, st.integers(0, 5), _COUNT, _SMALL, _COUNT, _COUNT)


@st.composite
def _sketches(draw: st.DrawFn, inputs: int, offsets: int) -> list[Sketch]:
    found = []
    for _ in range(draw(st.integers(1, AN_EXAMPLE))):
        parts = [draw(_PART) for _ in range(draw(st.integers(1, PARTS)) if inputs else 0)]
        wanted = draw(st.integers(0 if inputs else 1, min(OFFSETS, offsets))) if offsets else 0
        found.append((parts, [(draw(_COUNT), draw(_SMALL)) for _ in range(wanted)]))
    return found


def searched(limits: Limits, examples: int, number: int) -> tuple[Drive, ...]:
    """Drives of `examples` Hypothesis examples, seeded by `number`; the same in every process and on every worker."""
    if examples < 1:
        return ()
    found: list[Drive] = []

    @seed(number)
    @settings(
        max_examples=examples,
        derandomize=False,
        database=None,
        deadline=None,
        phases=[Phase.generate],
        suppress_health_check=list(HealthCheck),
        print_blob=False,
        verbosity=Verbosity.quiet,
        backend="hypothesis",
    )
    @given(_sketches(len(limits.inputs), len(limits.offsets)))
    def hunt(sketches: list[Sketch]) -> None:
        found.extend(_drive(limits, parts, offsets) for parts, offsets in sketches)

    hunt()
    return unique(found)


def _drive(limits: Limits, parts: list[_Part], offsets: list[tuple[int, int]]) -> Drive:
    values = np.zeros((limits.intervals, len(limits.inputs)))
    for part in parts:
        column = part.channel % len(limits.inputs)
        share = limits.turned(_share(part.size), column)
        values[:, column] += limits.sized(share * _shape(limits, part), column)
    start: dict[str, float] = {}
    for channel, size in offsets:
        column = channel % len(limits.offsets)
        start[limits.offsets[column]] = limits.offset(column, _share(size))
    return limits.drive(values, start)


def _share(size: int) -> float:
    """From -1 to 1, and the full amplitude in a third of all draws."""
    return max(-1.0, min(1.0, size / FULL))


def _shape(limits: Limits, part: _Part) -> Array:
    at, count = shapes.instants(limits.intervals, limits.course), limits.intervals
    late = max(0, part.start - AT_ONCE) / (TOP - AT_ONCE)
    start = float(at[0]) + round(late * (count - 1))
    length = float(max(1, round(count ** min(1.0, part.length / WHOLE))))
    if part.kind == 0:
        return shapes.pulse(at, start, length)
    if part.kind == 1:
        return shapes.doublet(at, start, max(1.0, round(length / 2)))
    if part.kind == 2:
        return shapes.square(at, start, 2.0 * length)
    if part.kind == 3:
        return shapes.ramp(at, start, length)
    if part.kind == 4:
        return shapes.sine(at, start, 2.0 * length)
    return shapes.pulse(at, start, length) + shapes.pulse(at, start + 2.0 * length, length)
