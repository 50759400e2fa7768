"""A controller's zero on an unstable pole, a plant's on an integrator: the response looks well, the loop is not."""

from __future__ import annotations

import math

import pytest

from linverify.core.verdict import Status

PLANT = """
plant = Plant(
    states={"x": "", "w": ""},
    inputs={"u": "", "v": ""},
    outputs={"rate": "", "x": "", "w": ""},
    dynamics=lambda t, x, u, p: np.stack([u[0] - x[0], x[1] + u[1]]),
    measurement=lambda t, x, u, p: np.stack([u[0] - x[0], x[0], x[1]]),
)
"""
SPEC = """
operating_points: {rest: {hold: {u: 0, v: 0}}}
loops:
  cancels: {controller: {num: [1, -1], den: [1, 3]}, measures: [w], moves: [v]}
  nearly: {controller: {num: [1, -1.001], den: [1, 3]}, measures: [w], moves: [v]}
  integrates: {controller: {pid: {kp: 0, ki: 1}}, measures: [rate], moves: [u], leaves: [w]}
  elsewhere: {controller: {gain: [[2]]}, measures: [x], moves: [u]}
  leaves_it: {controller: {gain: [[2]]}, measures: [x], moves: [u], leaves: [w]}
"""


def test_what_cancels_fails_by_name(judged) -> None:
    """L = 1/(s + 3) of the first loop has infinite margins; 1/(s - 1) is inside it all the same."""
    import control

    plain = control.minreal(control.tf([1, -1], [1, 3]) * control.tf([1], [1, -1]), verbose=False)
    assert control.margin(plain)[:2] == pytest.approx((math.inf, math.inf))
    found = judged(PLANT, SPEC)
    for loop, words in {
        "cancels": ("does not move the pole 1 of w", "not stable"),
        "nearly": ("unstable: pole 1",),
        "integrates": ("does not move the pole", "integrates.1"),
        "elsewhere": ("does not move the pole 1 of w",),
    }.items():
        verdict = found[f"rest.margins.{loop}"]
        assert verdict.status is Status.FAIL, loop
        assert all(each in verdict.reason for each in words), verdict.reason
    assert found["rest.margins.leaves_it"].status is Status.PASS
