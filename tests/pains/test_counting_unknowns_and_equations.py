"""An operating point that is over- or under-determined, or does not exist, is told as such and by name."""

from __future__ import annotations

import pytest

from linverify.core.errors import SpecError
from linverify.core.verdict import Status

TANK = """
def rates(t, x, u, p):
    return np.stack([u[0] + u[1] - np.sqrt(np.maximum(x[0], 0.0)), x[0] - x[1]])

plant = Plant(states={"upper": "m", "lower": "m"}, inputs={"pump": "m/s", "rain": "m/s"}, dynamics=rates)
"""
LIMITS = "envelope: {upper: [0 m, 9 m], lower: [0 m, 9 m], pump: [0 m/s, 3 m/s], rain: [0 m/s, 3 m/s]}\n"


def test_too_few_equations(bound) -> None:
    with pytest.raises(SpecError) as told:
        bound(TANK, LIMITS + "operating_points: {half: {hold: {upper: 4 m}}}\n")
    (problem,) = told.value.problems
    text = str(problem)
    assert "3 unknowns" in text
    assert all(name in text for name in ("lower", "pump", "rain"))
    assert text.startswith("plant.yaml:4:")


def test_too_many_equations(bound) -> None:
    with pytest.raises(SpecError) as told:
        bound(TANK, LIMITS + "operating_points: {half: {hold: {upper: 4 m, lower: 3 m, pump: 1 m/s}}}\n")
    (problem,) = told.value.problems
    assert "1 unknown" in str(problem)
    assert "rain" in str(problem)
    assert "2 equations" in str(problem)


def test_one_more_hold_settles_it(judged) -> None:
    found = judged(TANK, LIMITS + "operating_points: {half: {hold: {upper: 4 m, rain: 0.5 m/s}}}\n")
    assert found["half.trims"].status is Status.PASS
    assert found["half.trims"].details["inputs"]["pump"]["value"] == pytest.approx(1.5, rel=1e-9)
    assert found["half.trims"].details["states"]["lower"]["value"] == pytest.approx(4.0, rel=1e-9)


def test_right_count_and_no_equilibrium(judged, record_property: pytest.RecordProperty) -> None:
    """python-control 0.10.2 with root_method="lm": success at x near 0, where the rate is 0.001."""
    import control

    system = control.nlsys(lambda t, x, u, p: x[:1] ** 2 + 1e-3, None, inputs=1, outputs=1, states=1)
    theirs = control.find_operating_point(system, [1.0], [0.0], root_method="lm")
    record_property("python-control", f"success {theirs.result.success}, states {theirs.states}")
    plant = """
    plant = Plant(states={"x": "m"}, inputs={}, dynamics=lambda t, x, u, p: x**2 + 1e-3)
    """
    found = judged(plant, "envelope: {x: [-2 m, 2 m]}\noperating_points: {rest: {start: {x: 1 m}}}\n")
    assert found["rest.trims"].status is Status.FAIL
    assert found["rest.trims"].reason.startswith("no equilibrium was found inside the envelope: the rate of x cannot")
    assert "0.001 m per s" in found["rest.trims"].reason
