"""The shrinker ends at the simplest drive that keeps half the excess."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import pytest
from declared_sets import limits

from linverify.core.drive import Drive
from linverify.core.model import Array
from linverify.drives.sample import SHAPES, sample
from linverify.drives.shrink import shrunk, simplicity

ALLOWED = limits()


def area_over(drives: Sequence[Drive]) -> Array:
    """Excess of a plant that integrates the flap and ignores the rest, over a limit of 2."""
    return np.array([abs(float(np.sum(drive.values[:, 0]))) - 2.0 for drive in drives])


@pytest.mark.parametrize("seed", range(5))
def test_from_anywhere_to_one_input_and_few_changes(seed: int) -> None:
    found = sample(ALLOWED, tuple(SHAPES), 400, np.random.default_rng(seed))
    start = max(found, key=lambda drive: float(area_over([drive])[0]) if drive.offsets else -1.0)
    worst = float(area_over([start])[0])
    simple = shrunk(start, ALLOWED, area_over, worst)
    assert area_over([simple])[0] >= 0.5 * worst > 0.0
    assert not simple.offsets
    assert not np.any(simple.values[:, 1])
    assert simplicity(simple)[1] <= 2
    assert ALLOWED.contains(simple)


def test_a_drive_that_is_simple_already_stays() -> None:
    start = ALLOWED.drive(np.column_stack([np.ones(24), np.zeros(24)]))

    def only_this(drives: Sequence[Drive]) -> Array:
        return np.array([1.0 if drive.digest == start.digest else np.nan for drive in drives])

    assert shrunk(start, ALLOWED, only_this, 1.0).digest == start.digest


def test_a_rate_limit_is_kept_while_shrinking() -> None:
    allowed = limits(rate=0.3)
    start = allowed.drive(np.column_stack([np.sin(np.arange(24)), np.zeros(24)]) + 0.4, {"pitch": 0.1})
    worst = float(area_over([start])[0])
    simple = shrunk(start, allowed, area_over, worst)
    assert allowed.contains(simple)
    assert simplicity(simple) < simplicity(start)


def test_a_straight_line_counts_as_one_change() -> None:
    line = Drive(0.1, ("flap",), np.linspace(0.1, 1.0, 10)[:, np.newaxis], "straight")
    assert simplicity(line)[1] == 1
