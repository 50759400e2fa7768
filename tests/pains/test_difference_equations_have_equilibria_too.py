"""A discrete-time system rests where x = f(x, u), not where f is zero."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.core.verdict import Status

PLANT = """
def next_state(t, x, u, p):
    return np.stack([0.5 * x[0] + u[0] + 0.1 * x[0] ** 2])

plant = Plant(states={"x": "1"}, inputs={"u": "1"}, dynamics=next_state, step=0.1)
"""
SPEC = """
envelope: {x: [-1, 1.5], u: [-2, 2]}
operating_points:
  rest: {hold: {u: 0.4}, expect: {x: 1 +- 1e-6}}
  moving: {hold: {x: 0.5}, rates: {x: 0.01}}
"""


def test_the_state_repeats_itself(judged, record_property: pytest.RecordProperty) -> None:
    """0.5 x + 0.4 + 0.1 x^2 = x at 1 and at 4. python-control 0.10.2 finds such points as well (once it did not)."""
    import control

    system = control.nlsys(
        lambda t, x, u, p: np.array([0.5 * x[0] + u[0] + 0.1 * x[0] ** 2]), None, inputs=1, outputs=1, states=1, dt=0.1
    )
    record_property("python-control", str(control.find_operating_point(system, [0.0], [0.4]).states))
    found = judged(PLANT, SPEC)
    assert found["rest.trims"].status is Status.PASS, found["rest.trims"].reason
    assert found["rest.trims"].details["states"]["x"]["value"] == pytest.approx(1.0, rel=1e-9)
    (pole,) = found["rest.differentiable"].details["poles"]
    assert (pole["z_real"], pole["z_imag"]) == (pytest.approx(0.7, rel=1e-9), 0.0)


def test_a_prescribed_rate_is_a_change_a_step_or_a_second(judged) -> None:
    """Moving on by 0.01 a second is 0.001 a step of 0.1 s: u = 0.501 - 0.25 - 0.025."""
    found = judged(PLANT, SPEC)["moving.trims"]
    assert found.status is Status.PASS, found.reason
    assert found.details["inputs"]["u"]["value"] == pytest.approx(0.501 - 0.25 - 0.025, rel=1e-9)


def test_where_f_is_zero_is_no_equilibrium(judged) -> None:
    found = judged(PLANT, SPEC.replace("x: 1 +- 1e-6", "x: -1 +- 1e-6"))["rest.trims"]
    assert found.status is Status.FAIL
    assert found.reason.startswith("x trims at 1,")
