"""Linearized at the corner of a saturation a plant has two slopes: that is a finding, not a number."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.core.verdict import Status

PLANT = """
plant = Plant(
    states={"level": "m"},
    inputs={"valve": "m/s"},
    dynamics=lambda t, x, u, p: -x + np.clip(u, -1.0, 1.0),
)
"""
SPEC = """
envelope: {level: [-3 m, 3 m], valve: [-3 m/s, 3 m/s]}
operating_points: {POINTS}
drives: {horizon: 2 s, every: 0.5 s, amplitude: {valve: 0.1 m/s}, count: 59, search: 1}
error_bands: {level: {peak: 2 cm}}
"""


def _spec(**valves: str) -> str:
    points = ", ".join(f"{name}: {{hold: {{valve: {valve}}}}}" for name, valve in valves.items())
    return SPEC.replace("POINTS", points)


def test_the_corner_is_named_and_nothing_is_built_on_it(judged, record_property: pytest.RecordProperty) -> None:
    """python-control 0.10.2: B = 0 on the corner, B = 1 just below it, and no word about either."""
    import control

    system = control.nlsys(
        lambda t, x, u, p: np.array([-x[0] + np.clip(u[0], -1, 1)]), None, inputs=1, outputs=1, states=1
    )
    slopes = [float(control.linearize(system, [at], [at]).B[0, 0]) for at in (1.0, 1.0 - 2e-6)]
    record_property("python-control", f"B {slopes} on the corner and 2e-6 below it")
    found = judged(PLANT, _spec(corner="1 m/s", just_below="0.999998 m/s"))
    for point in ("corner", "just_below"):
        slope = found[f"{point}.differentiable"]
        assert slope.status is Status.FAIL, point
        assert "kink" in slope.reason
        assert "valve" in slope.reason
        (corner,) = (one for one in slope.details["corners"] if one["entry"].endswith("/ d valve"))
        assert (corner["kind"], corner["on_point"]) == ("kink", True)
        assert corner["below"]["value"] == pytest.approx(1.0, abs=1e-3)
        assert corner["above"]["value"] == pytest.approx(0.0, abs=1e-3)
        assert found[f"{point}.trims"].status is Status.PASS
        assert found[f"{point}.follows"].status is Status.UNDECIDED
        assert "kink" in found[f"{point}.follows"].reason


def test_on_either_side_of_it_the_plant_has_one_slope(judged) -> None:
    found = judged(PLANT, _spec(open="0.5 m/s", shut="2 m/s"))
    for point, slope in (("open", 1.0), ("shut", 0.0)):
        assert found[f"{point}.differentiable"].status is Status.PASS
        assert found[f"{point}.differentiable"].details["B"] == [[pytest.approx(slope, abs=1e-12)]]
    # open: the model is exact for these drives; shut: nothing moves, so that a pass would say nothing
    assert found["open.follows"].status is Status.PASS
    assert found["shut.follows"].status is Status.UNDECIDED
    assert "predicts no motion at all would pass" in found["shut.follows"].reason
