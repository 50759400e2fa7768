"""Loops of every shape from a spec to the verdict: stability and margins as algebra has them, frequency by frequency.

The short form runs always; `pytest tests/margins/test_road_bench.py -m slow -s` runs many and prints the table.
"""

from __future__ import annotations

import pytest
from margins.road_bench import Result, report, run

SHORT, LONG = range(12), range(300)


def agreed(results: list[Result]) -> None:
    told = report(results)
    print(told)
    assert not [line for result in results if not result.near_tie for line in result.wrong], told


def test_two_loops_of_every_shape() -> None:
    results = run(SHORT)
    agreed(results)
    assert sum(result.figures for result in results) > 50


@pytest.mark.slow
def test_many_loops_of_every_shape() -> None:
    results = run(LONG)
    agreed(results)
    assert sum(result.wired.stable for result in results) > 0.6 * len(results)
