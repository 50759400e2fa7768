"""Every delivered model that truly breaks its spec is caught, and no other one is stopped.

The short form runs always; `pytest tests/faults -m slow -s` runs the long one and prints its tables. What brute force
says of single cases is held to closed forms in `test_truth.py`.
"""

from __future__ import annotations

import pytest
from faults.bench import Result, disagreements, drawn, judged, report, run

LONG, SHORT = range(330), range(11)
QUICK = ("ship", "boost", "pendulum")  # little to integrate


# of `follows` alone, where another check of the same spec stops the model: see test_found.py
KNOWN = {252}


def agreed(results: list[Result]) -> None:
    told = report(results)
    print(told)
    assert not [result.ask.told for result in results if result.outcome in ("missed", "false alarm")], told
    assert not disagreements(
        [result for result in results if result.ask.kind == "none" or result.ask.seed not in KNOWN]
    )


def test_one_fault_of_each_kind() -> None:
    """A seed for every kind, and as many right models."""
    results = run(SHORT, faulty=True, among=QUICK) + run(SHORT, faulty=False, among=QUICK)
    agreed(results)
    assert sum(result.outcome == "caught" for result in results) >= 6


def test_a_case_is_a_function_of_its_seed() -> None:
    first, second = (judged(drawn(3, faulty=True, among=QUICK)) for _ in range(2))
    assert first.answers == second.answers


@pytest.mark.slow
def test_many_faults_and_as_many_right_models() -> None:
    results = run(LONG, faulty=True) + run(LONG, faulty=False)
    agreed(results)
    right = [result for result in results if result.ask.kind == "none"]
    assert sum(result.outcome == "right pass" for result in right) >= 0.95 * len(right)
