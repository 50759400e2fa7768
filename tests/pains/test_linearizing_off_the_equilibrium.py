"""A linear model about a point at which the plant does not rest: refused, or with the drift carried along openly."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.core.errors import SpecError
from linverify.core.verdict import Status

PLANT = """
plant = Plant(
    states={"level": "m"},
    inputs={"inflow": "m/s"},
    parameters={"leak": (1.0, "1/m/s")},
    dynamics=lambda t, x, u, p: u - p["leak"] * x**2,
)
"""
LIMITS = "envelope: {level: [0 m, 9 m], inflow: [0 m/s, 9 m/s]}\n"
DRIVES = """
drives: {horizon: 1 s, every: 0.25 s, amplitude: {inflow: 0.1 m/s}, count: 59, search: 1}
error_bands: {level: {peak: 5 cm}}
"""
ELSEWHERE = "operating_points: {high: {hold: {level: 1 m, inflow: 5 m/s}}}\n"
DRIFTING = "operating_points: {high: {hold: {level: 1 m, inflow: 5 m/s}, find: [], rates: {level: free}}}\n"


def test_it_is_refused_before_anything_is_computed(bound, record_property: pytest.RecordProperty) -> None:
    """python-control 0.10.2 returns A = -2.000001 at rates of 4 without a word."""
    import control

    system = control.nlsys(lambda t, x, u, p: np.array([-(x[0] ** 2) + u[0]]), None, inputs=1, outputs=1, states=1)
    record_property("python-control", str(control.linearize(system, [1.0], [5.0]).A.tolist()))
    with pytest.raises(SpecError) as told:
        bound(PLANT, LIMITS + ELSEWHERE)
    (problem,) = told.value.problems
    assert "0 unknowns" in str(problem)
    assert "1 equation" in str(problem)


def test_with_an_expectation_the_real_equilibrium_is_held_against_it(judged) -> None:
    spec = "operating_points: {high: {hold: {inflow: 5 m/s}, expect: {level: 1 m +- 1 %}}}\n"
    found = judged(PLANT, LIMITS + spec)["high.trims"]
    assert found.status is Status.FAIL
    assert found.reason.startswith("level trims at 2.23607 m, 1.23607 m from the expected 1 m")


def test_a_free_rate_is_carried_as_drift_and_the_plant_has_to_keep_it(judged) -> None:
    """The rate of 4 m/s is told; the plant curves away from that course at once, and that is a failure."""
    found = judged(PLANT, LIMITS + DRIFTING + DRIVES)
    assert found["high.trims"].status is Status.PASS
    assert found["high.trims"].details["drift"] == {"level": {"value": 4.0, "unit": "m/s"}}
    assert found["high.differentiable"].details["A"] == [[pytest.approx(-2.0, rel=1e-9)]]
    assert found["high.follows"].status is Status.FAIL


def test_a_steady_drift_is_an_operating_course_like_any_other(judged) -> None:
    """Without a leak the tank fills at 4 m/s for as long as it likes: deviations from that course are exact."""
    filling = DRIFTING.replace("inflow: 5 m/s", "inflow: 4 m/s")
    found = judged(PLANT, "parameters: {leak: 0}\n" + LIMITS + filling + DRIVES)
    assert found["high.trims"].details["drift"] == {"level": {"value": 4.0, "unit": "m/s"}}
    assert found["high.follows"].status is Status.PASS, found["high.follows"].reason
