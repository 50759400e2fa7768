"""A dead time replaced by a Pade approximation of order one flatters the loop; and a MIMO loop has margins too."""

from __future__ import annotations

import math

import numpy as np
import pytest
from margins.bench import transfer
from margins.oracle import truth
from margins.response import Loop

from linverify.core.verdict import Status
from linverify.numerics.margins import margins


def lag(gain: float, dead_time: float) -> Loop:
    """gain / (s + 1) and a dead time."""
    return Loop(-np.ones((1, 1)), np.ones(1), np.array([gain]), 0.0, delay=dead_time)


def pade(gain: float, dead_time: float) -> tuple[float, float]:
    """Gain and phase margin by python-control with an approximation of order one."""
    import control

    loop = control.tf([gain], [1, 1]) * control.tf(*control.pade(dead_time, 1))
    found = control.margin(loop)
    return float(found[0]), float(found[1])


def test_the_phase_margin_is_that_of_the_dead_time(record_property: pytest.RecordProperty) -> None:
    """|L| = 1 at sqrt(8); phase margin pi - atan sqrt(8) - 0.5 sqrt(8), in closed form. Order one adds 10 deg to 28."""
    found = margins(transfer(lag(3.0, 0.5)))
    exact = math.degrees(math.pi - math.atan(math.sqrt(8.0)) - 0.5 * math.sqrt(8.0))
    assert math.degrees(found.phase.value) == pytest.approx(exact, rel=1e-9)
    assert found.gain_up.value == pytest.approx(truth(lag(3.0, 0.5)).gain_up, rel=1e-9)
    flattered = pade(3.0, 0.5)[1]
    record_property("python-control", f"phase margin {flattered} deg with order one, exact {exact}")
    assert exact == pytest.approx(28.4, abs=0.05)
    assert flattered == pytest.approx(38.9, abs=0.05)


def test_an_unstable_loop_that_order_one_takes_for_stable() -> None:
    """Gain 4: in closed form the phase at |L| = 1 (sqrt 15) is -75.5 - 111.0 deg, beyond -180."""
    found = margins(transfer(lag(4.0, 0.5)))
    assert not found.stable
    assert truth(lag(4.0, 0.5)).unstable == 2
    gain, phase = pade(4.0, 0.5)
    assert gain > 1.2
    assert phase > 15.0


def test_python_control_refuses_several_channels() -> None:
    """Ours are told one at a time with the others closed, and all at once: tests/numerics and the published loops."""
    import control

    with pytest.raises(NotImplementedError, match="SISO"):
        control.stability_margins(control.ss(-np.eye(2), np.eye(2), np.eye(2), np.zeros((2, 2))))


def test_a_gate_takes_the_dead_time_exactly(judged) -> None:
    """Order one would pass the phase margin of 30 deg, and take the gain of 4 for stable."""
    plant = """
    plant = Plant(states={"x": ""}, inputs={"u": ""}, dynamics=lambda t, x, u, p: np.stack([u[0] - x[0]]))
    """
    spec = """
    operating_points: {rest: {hold: {u: 0}}}
    loops:
      three: {controller: {gain: [[3]]}, measures: [x], moves: [u], delay: 0.5 s, require: {phase_margin: 30 deg}}
      less: {controller: {gain: [[3]]}, measures: [x], moves: [u], delay: 0.5 s, require: {phase_margin: 28 deg}}
      four: {controller: {gain: [[4]]}, measures: [x], moves: [u], delay: 0.5 s}
    """
    found = judged(plant, spec)
    assert found["rest.margins.three"].status is Status.FAIL
    assert "28.44 deg" in found["rest.margins.three"].reason
    assert found["rest.margins.less"].status is Status.PASS
    assert found["rest.margins.four"].status is Status.FAIL
    assert "unstable" in found["rest.margins.four"].reason
