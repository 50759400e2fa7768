"""States of size 1e6 and 1e-6 in one plant: one absolute difference step cannot serve both."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.core.verdict import Status

PLANT = """
plant = Plant(
    states={"reservoir": "m^3", "trace": "m^3"},
    inputs={"inflow": "m^3/s", "dose": "m^3/s"},
    nominal={"reservoir": 1e6, "trace": 1e-6, "inflow": 1e6, "dose": 1e-6},
    dynamics=lambda t, x, u, p: np.stack([u[0] - x[0] ** 2 / 1e6, u[1] - x[1] ** 2 * 1e6]),
)
"""
POINT = """
operating_points:
  full:
    hold: {reservoir: 1e6, trace: 1e-6}
    start: {inflow: 1e6, dose: 1e-6}
    expect: {inflow: 1e6 +- 0.0001 %, dose: 1e-6 +- 0.0001 %}
"""


def test_both_slopes_are_right_and_their_errors_are_told(judged, record_property: pytest.RecordProperty) -> None:
    """Exactly diag(-2, -2). python-control 0.10.2 says -2.00001523 and -3.0: one absolute one-sided step of 1e-6."""
    import control

    system = control.nlsys(
        lambda t, x, u, p: np.array([u[0] - x[0] ** 2 / 1e6, u[1] - x[1] ** 2 * 1e6]),
        None, inputs=2, outputs=2, states=2,
    )  # fmt: skip
    record_property("python-control", str(control.linearize(system, [1e6, 1e-6], [1e6, 1e-6]).A.tolist()))
    found = judged(PLANT, POINT)
    assert found["full.trims"].status is Status.PASS, found["full.trims"].reason
    details = found["full.differentiable"].details
    assert found["full.differentiable"].status is Status.PASS
    A, error = np.array(details["A"]), np.array(details["error_of_A"])
    np.testing.assert_allclose(np.diag(A), [-2.0, -2.0], rtol=1e-9)
    # between the two states lie twelve powers of ten: what is no influence must be small against that
    assert abs(A[0, 1]) * 1e-6 <= 1e-9 * 1e6
    assert abs(A[1, 0]) * 1e6 <= 1e-9 * 1e-6
    np.testing.assert_array_less(np.abs(A - np.diag([-2.0, -2.0])), error + 1e-15)
    assert np.diag(error).max() < 1e-6
