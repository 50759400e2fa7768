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


@dataclass(frozen=True, slots=True)
class _Part:
    """One part: kind of shape, input, share of amplitude, start, length and period, all as small integers."""

    kind: int
    channel: int
    full: bool
    size: int
    early: bool
    start: int
    long: bool
    length: int


_SMALL = st.integers(-TOP, TOP)
_COUNT = st.integers(0, TOP)
_PART = st.builds(_Part, st.integers(0, 5), _COUNT, st.booleans(), _SMALL, st.booleans(), _COUNT, st.booleans(), _COUNT)


@st.composite
def _sketches(draw: st.DrawFn) -> list[tuple[list[_Part], list[tuple[bool, int]]]]:
    found = []
    for _ in range(draw(st.integers(1, AN_EXAMPLE))):
        parts = [draw(_PART) for _ in range(draw(st.integers(1, PARTS)))]
        found.append((parts, [draw(st.tuples(st.booleans(), _SMALL)) for _ in range(2)]))
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
    @given(_sketches())
    def hunt(sketches: list[tuple[list[_Part], list[tuple[bool, int]]]]) -> None:
        found.extend(_drive(limits, parts, offsets) for parts, offsets in sketches)

    hunt()
    return unique(found)


def _drive(limits: Limits, parts: list[_Part], offsets: list[tuple[bool, int]]) -> Drive:
    values = np.zeros((limits.intervals, len(limits.inputs)))
    if limits.inputs:
        for part in parts:
            column = part.channel % len(limits.inputs)
            values[:, column] += limits.sized(_share(part.full, part.size) * _shape(limits, part), column)
    start: dict[str, float] = {}
    for (full, size), turn in zip(offsets, range(len(limits.offsets)), strict=False):
        column = (abs(size) + turn) % len(limits.offsets)
        start[limits.offsets[column]] = limits.offset(column, _share(full, size))
    return limits.drive(values, start)


def _share(full: bool, size: int) -> float:
    """From -1 to 1; the full amplitude far more often than an integer alone would give it."""
    return (1.0 if size >= 0 else -1.0) if full else size / TOP


def _shape(limits: Limits, part: _Part) -> Array:
    at, count = shapes.instants(limits.intervals, limits.course), limits.intervals
    start = float(at[0]) + (0 if part.early else round(part.start / TOP * (count - 1)))
    length = float(count) if part.long else float(max(1, round(count ** (part.length / TOP))))
    if part.kind == 0:
        return shapes.pulse(at, start, length)
    if part.kind == 1:
        return shapes.doublet(at, start, length if not part.long else max(1.0, round(count / 2)))
    if part.kind == 2:
        return shapes.square(at, start, max(2.0, 2.0 * length))
    if part.kind == 3:
        return shapes.ramp(at, start, length)
    if part.kind == 4:
        return shapes.sine(at, start, max(2.0, 2.0 * length))
    return shapes.pulse(at, start, length) + shapes.pulse(at, start + 2.0 * length, length)
