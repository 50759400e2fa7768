"""Margins against published loops and closed forms."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.signal import tf2ss

from linverify.core.model import Array
from linverify.core.outcome import Outcome
from linverify.numerics.margins import guarantee, margins
from linverify.numerics.transfer import Transfer


def ratio(num: object, den: object, delay: float = 0.0) -> Transfer:
    A, B, C, D = tf2ss(np.asarray(num, dtype=float), np.asarray(den, dtype=float))
    return Transfer(A, B, C, D, delay)


def product(*factors: list[float]) -> Array:
    out = np.ones(1)
    for factor in factors:
        out = np.polymul(out, factor)
    return out


def test_three_lags() -> None:
    # closed forms: gain margin 8/3 at sqrt(3), largest |S| 11/5 at sqrt(7/4)
    found = margins(ratio([3], product([1, 1], [1, 1], [1, 1])))
    assert found.outcome is Outcome.DONE
    assert found.stable
    assert found.gain_up.value == pytest.approx(8 / 3, rel=1e-12)
    assert found.gain_up.frequency == pytest.approx(math.sqrt(3), rel=1e-12)
    assert found.gain_down.value == 0.0
    assert math.degrees(found.phase.value) == pytest.approx(41.6903, abs=1e-4)
    assert found.phase.frequency == pytest.approx(1.039271, rel=1e-6)
    assert found.sensitivity.value == pytest.approx(2.2, rel=1e-9)
    assert found.sensitivity.frequency == pytest.approx(math.sqrt(1.75), rel=1e-6)


def test_unstable_loop_has_no_margins() -> None:
    # 0.5 / (s - 1): a gain margin of 2 can be read off the curve, yet the closed loop has a pole at 0.5
    found = margins(ratio([0.5], [1, -1]))
    assert found.outcome is Outcome.DONE
    assert not found.stable
    assert found.unstable == (pytest.approx(0.5),)
    assert math.isnan(found.gain_up.value)
    assert math.isnan(found.disk.value)


def test_guarantee_of_a_disk() -> None:
    gain, phase = guarantee(0.4)
    assert 20 * math.log10(gain) == pytest.approx(3.5, abs=0.03)
    assert math.degrees(phase) == pytest.approx(22.6, abs=0.05)


@pytest.mark.parametrize("gain, delay", [(1.0, 1.0), (2.0, 0.7), (0.1, 15.0), (30.0, 0.052)])
def test_integrator_with_dead_time(gain: float, delay: float) -> None:
    # closed form: k exp(-s tau) / s is stable for k tau < pi / 2; crossover at k, phase left pi / 2 - k tau
    found = margins(ratio([gain], [1, 0], delay))
    used = gain * delay
    assert found.stable
    assert found.gain_up.value == pytest.approx(0.5 * math.pi / used, rel=1e-9)
    assert found.phase.value == pytest.approx(0.5 * math.pi - used, rel=1e-9)
    assert found.delay.value == pytest.approx(0.5 * math.pi / gain - delay, rel=1e-9)
    more = margins(ratio([gain], [1, 0], delay + 1.001 * found.delay.value))
    assert not more.stable
    assert [abs(each.imag) for each in more.unstable] == pytest.approx([gain, gain], rel=2e-3)
    assert margins(ratio([gain], [1, 0], delay + 0.999 * found.delay.value)).stable
