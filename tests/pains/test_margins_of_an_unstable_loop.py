"""A gain margin of 2 and an infinite phase margin, of a loop that is unstable; and which gain margin is meant."""

from __future__ import annotations

import math

import numpy as np
import pytest
from margins.bench import transfer
from margins.oracle import truth
from margins.response import Loop

from linverify.core.verdict import Status
from linverify.numerics.margins import margins


def lone(gain: float) -> Loop:
    """gain / (s - 1): stable in closed loop from a gain of one on."""
    return Loop(np.ones((1, 1)), np.ones(1), np.array([gain]), 0.0)


def test_an_unstable_loop_has_no_margins(record_property: pytest.RecordProperty) -> None:
    """python-control 0.10.2 says gain margin 2, phase margin infinite, disk margin 0.667; its closed-loop pole: 0.5."""
    import control

    found = margins(transfer(lone(0.5)))
    assert not found.stable
    assert found.unstable == pytest.approx((0.5,))
    assert truth(lone(0.5)).unstable == 1
    for name in ("gain_up", "gain_down", "phase", "delay", "disk", "sensitivity", "complementary"):
        assert math.isnan(getattr(found, name).value), name
    system = control.tf([0.5], [1, -1])
    gain, phase, *_ = control.margin(system)
    disk = float(control.disk_margins(system, np.logspace(-4, 3, 1000))[0])
    record_property("python-control", f"gain margin {gain}, phase margin {phase}, disk margin {disk}")
    assert (gain, phase, disk) == pytest.approx((2.0, math.inf, 0.667), abs=1e-3)
    assert control.poles(control.feedback(system)).real == pytest.approx([0.5])


def test_both_gain_margins_are_told() -> None:
    """Of 4/(s - 1): nothing is lost upwards, a quarter is what is left downwards."""
    found = margins(transfer(lone(4.0)))
    assert found.stable
    assert found.gain_up.value == math.inf
    assert found.gain_down.value == pytest.approx(0.25, rel=1e-12)
    assert found.gain_down.frequency == 0.0


def test_a_loop_that_is_only_conditionally_stable_is_bounded_both_ways() -> None:
    """2.5 (s + 1)^2 / s^3: stable above a gain of 1/2 only (Routh: s^3 + k s^2 + 2 k s + k needs 2 k > 1)."""
    A = np.diag([1.0, 1.0], 1)
    loop = Loop(A, np.eye(3)[2], 2.5 * np.array([1.0, 2.0, 1.0]), 0.0)
    found = margins(transfer(loop))
    assert found.stable
    assert found.gain_down.value == pytest.approx(0.5 / 2.5, rel=1e-9)
    assert found.gain_up.value == math.inf


def test_a_gate_fails_on_stability_first(judged) -> None:
    plant = """
    plant = Plant(states={"x": ""}, inputs={"u": ""}, dynamics=lambda t, x, u, p: np.stack([x[0] + u[0]]))
    """
    spec = """
    operating_points: {rest: {hold: {u: 0}}}
    loops:
      weak: {controller: {gain: [[0.5]]}, measures: [x], moves: [u], require: {gain_margin: 6 dB}}
      strong: {controller: {gain: [[4]]}, measures: [x], moves: [u], require: {gain_margin: 6 dB}}
      low: {controller: {gain: [[1.5]]}, measures: [x], moves: [u], require: {gain_margin: 6 dB}}
    """
    found = judged(plant, spec)
    assert found["rest.margins.weak"].status is Status.FAIL
    assert "pole 0.5 per s" in found["rest.margins.weak"].reason
    assert "channels" not in found["rest.margins.weak"].details["margins"]
    assert found["rest.margins.strong"].status is Status.PASS
    assert found["rest.margins.low"].status is Status.FAIL  # downwards only 1.5: 3.5 dB
    assert "3.522 dB" in found["rest.margins.low"].reason
