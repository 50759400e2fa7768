"""Margins of a loop of 12 states: the library and python-control on its default grid in one run, with both errors.

    pytest tests/benchmarks/test_margins_speed.py --benchmark-only

The ratio of the two times is what counts; `extra_info` of each holds its relative errors against brute force.
"""

from __future__ import annotations

import math
from typing import Any

import pytest

from tests.benchmarks import margins_job as job


@pytest.mark.parametrize("name", job.DAMPINGS)
@pytest.mark.parametrize("who", ["ours", "theirs", "polynomials"])
def test_margins_of_twelve_states(name: str, who: str, benchmark: Any) -> None:
    benchmark.group = name
    answer = benchmark.pedantic(getattr(job, who), args=(name,), rounds=15, warmup_rounds=2)
    found = {figure: error for figure, error in job.errors(name, answer).items() if not math.isnan(error)}
    benchmark.extra_info |= {f"error of {figure}": error for figure, error in found.items()}
    assert answer.gain_up > 1.0


@pytest.mark.parametrize("name", job.DAMPINGS)
def test_ours_are_right_to_1e_6(name: str, record_property: pytest.RecordProperty) -> None:
    """Not timed: every figure against brute force, and how far the grid is off."""
    assert job.exact(name).stable
    ours, theirs = (job.errors(name, getattr(job, who)(name)) for who in ("ours", "theirs"))
    record_property("errors", str({"linverify": ours, "python-control": theirs}))
    assert max(ours.values()) < 1e-6
    worst = max(theirs.values())
    assert worst < 0.05 if name == "damped" else worst > 0.05
