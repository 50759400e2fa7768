"""Polynomials in z lose the margins of a loop that is sampled fast: poles crowd at 1, their differences round off."""

from __future__ import annotations

import math
import warnings

import numpy as np
import pytest
import scipy.signal
from margins.bench import transfer
from margins.oracle import truth
from margins.response import Loop
from scipy.linalg import expm

from linverify.core.verdict import Status
from linverify.numerics.margins import margins

NUM, DEN = [2.0], [1.0, 3.0, 2.0, 0.0]  # 2 / (s (s + 1) (s + 2)): gain margin 3, phase margin 32.613 deg
GAIN_MARGIN, PHASE_MARGIN = 3.0, 32.61309704777443


def sampled(step: float) -> Loop:
    """The plant behind a hold: x+ = x + F x + G u with F and G by the exponential."""
    A, B, C, _ = scipy.signal.tf2ss(NUM, DEN)
    bordered = np.zeros((4, 4))
    bordered[:3, :3], bordered[:3, 3:] = A, B
    both = expm(bordered * step)
    return Loop(both[:3, :3], both[:3, 3], C[0], 0.0, step=step)


@pytest.mark.parametrize("step", [1e-3, 1e-4, 1e-5])
def test_margins_of_a_fast_sampled_loop(step: float, record_property: pytest.RecordProperty) -> None:
    """python-control 0.10.2 says 2.895 and 30.79 deg at 1e-5 s; a hold of that length costs 1e-4 of a degree."""
    import control

    loop = sampled(step)
    found, exact = margins(transfer(loop)), truth(loop)
    assert found.stable
    for name in ("gain_up", "phase", "sensitivity", "disk"):
        assert getattr(found, name).value == pytest.approx(getattr(exact, name), rel=1e-6), name
    # by the continuous loop: a hold lags by half a sample
    crossover, phase = 0.7493682758222622, math.degrees(found.phase.value)
    assert phase == pytest.approx(PHASE_MARGIN - math.degrees(crossover * step / 2.0), abs=1e-4)
    assert found.gain_up.value == pytest.approx(GAIN_MARGIN, rel=2.0 * step)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # of its fear of inaccuracy, which 1e-3 s sets off too
        gain, angle, *_ = control.margin(control.sample_system(control.tf(NUM, DEN), step))
    record_property("python-control", f"at {step} s: gain margin {gain}, phase margin {angle} deg")
    if step == 1e-3:
        assert (gain, angle) == pytest.approx((found.gain_up.value, phase), rel=1e-5)
    if step == 1e-5:  # as documented; exactly 3.0 to 1e-5 here
        assert gain == pytest.approx(2.895, abs=0.02)
        assert angle == pytest.approx(30.79, abs=0.2)


PLANT = """
plant = Plant(
    states={"x": "", "v": "", "a": ""},
    inputs={"u": ""},
    dynamics=lambda t, x, u, p: np.stack([x[1], x[2], 2.0 * u[0] - 2.0 * x[1] - 3.0 * x[2]]),
)
"""
SPEC = """
operating_points: {rest: {hold: {x: 0}}}
loops:
  fast:
    controller: {gain: [[1]]}
    measures: [x]
    moves: [u]
    sample: 10 us
    require: {gain_margin: 2.9999, phase_margin: 32.6 deg}
"""


def test_a_gate_on_these_margins_passes_at_10_us(judged) -> None:
    """Both would be missed by the margins that polynomials in z give."""
    found = judged(PLANT, SPEC)["rest.margins.fast"]
    assert found.status is Status.PASS, found.reason
    (told,) = found.details["margins"]["channels"]
    exact = truth(sampled(1e-5))
    assert told["gain_up"]["value"] == pytest.approx(exact.gain_up, rel=1e-6)
    assert told["phase"]["value"] == pytest.approx(math.degrees(exact.phase), rel=1e-6)
