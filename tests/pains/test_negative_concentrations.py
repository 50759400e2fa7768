"""A steady state that no vessel can have: limits are part of the search, not an afterthought."""

from __future__ import annotations

import pytest
from scipy.optimize import root

from linverify.core.errors import SpecError
from linverify.core.verdict import Status

PLANT = """
plant = Plant(states={"acid": "mol/l"}, inputs={}, dynamics=lambda t, x, u, p: -(x + 3.0) * (x - 2.0))
"""


def _spec(low: float, high: float, start: str = "") -> str:
    return f"envelope: {{acid: [{low}, {high}]}}\noperating_points: {{steady: {{{start}}}}}\n"


def test_the_physical_one_of_two(judged, record_property: pytest.RecordProperty) -> None:
    """scipy 1.17: root from -1 gives -3."""
    theirs = root(lambda x: -(x + 3.0) * (x - 2.0), -1.0)
    record_property("scipy root", f"success {theirs.success}, x {theirs.x}")
    found = judged(PLANT, _spec(0, 10, "start: {acid: 0.1}"))["steady.trims"]
    assert found.status is Status.PASS
    assert found.details["states"]["acid"]["value"] == pytest.approx(2.0, rel=1e-12)
    assert "other_equilibria" not in found.details


def test_a_first_guess_that_cannot_be_is_a_mistake_in_the_spec(bound) -> None:
    with pytest.raises(SpecError) as told:
        bound(PLANT, _spec(0, 10, "start: {acid: -1}"))
    (problem,) = told.value.problems
    assert "acid" in str(problem)
    assert "envelope" in str(problem)


def test_where_both_are_allowed_both_are_told(judged) -> None:
    found = judged(PLANT, _spec(-10, 10))["steady.trims"]
    assert found.status is Status.UNDECIDED
    assert found.reason.startswith("2 equilibria lie inside the envelope")
    values = [other["acid"]["value"] for other in found.details["other_equilibria"]]
    assert sorted(values) == pytest.approx([-3.0, 2.0])
    chosen = judged(PLANT, _spec(-10, 10, "start: {acid: 1}"))["steady.trims"]
    assert chosen.status is Status.PASS
    assert chosen.details["states"]["acid"]["value"] == pytest.approx(2.0)
    assert [other["acid"]["value"] for other in chosen.details["other_equilibria"]] == pytest.approx([-3.0])


def test_none_inside_the_limits_is_a_failure(judged) -> None:
    found = judged(PLANT, _spec(3, 10))["steady.trims"]
    assert found.status is Status.FAIL
    assert found.details["closest"]["acid"]["value"] == pytest.approx(3.0)
    assert "acid at its lower limit 3" in found.reason
