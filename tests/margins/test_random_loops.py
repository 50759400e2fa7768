"""No crossing is missed and no margin is wrong on random loops, and stability is told right.

The short form runs always; `pytest tests/margins -m slow -s` runs all loops and prints the tables.
"""

from __future__ import annotations

import pytest
from margins.bench import Result, disagreements, report, run

SHORT, LONG = range(120), range(2000)


def agreed(results: list[Result]) -> None:
    told = report(results)
    print(told)
    assert not [result.ask.told for result in results if "wrong" in result.words.values() and not result.near_tie], told
    assert sum(result.near_tie for result in results) <= 0.01 * len(results)


def test_a_few_loops_of_every_kind() -> None:
    results = run(SHORT)
    agreed(results)
    assert not disagreements(results)
    assert sum(result.truth.stable for result in results) > 0.6 * len(results)


@pytest.mark.slow
def test_two_thousand_loops() -> None:
    """Undecided may be what is so near the edge that rounding decides: one in five hundred at most."""
    results = run(LONG)
    agreed(results)
    undecided = sum("undecided" in result.words.values() for result in results)
    stated = sum(word == "stated" for result in results for word in result.words.values())
    assert undecided <= 0.002 * len(results)
    assert stated <= 0.002 * len(results)
