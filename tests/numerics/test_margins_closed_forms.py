"""Margins of continuous loops against closed forms: what counts, at both ends of the axis, and what cannot be told."""

from __future__ import annotations

import math

import numpy as np
import pytest
from open_loops import product, ratio, scaled, static

from linverify.core.model import Array
from linverify.core.outcome import Outcome
from linverify.numerics.crossings import gain_candidates, walk
from linverify.numerics.curve import curve
from linverify.numerics.encirclements import right_of_axis, surely_stable
from linverify.numerics.loop_stability import of_matrix
from linverify.numerics.margins import guarantee, margins
from linverify.numerics.transfer import Transfer


def test_three_lags() -> None:
    # closed forms: gain margin 8/3 at sqrt(3), largest |S| 11/5 at sqrt(7/4)
    found = margins(ratio([3], product([1, 1], [1, 1], [1, 1])))
    assert found.outcome is Outcome.DONE
    assert found.stable
    assert found.gain_up.value == pytest.approx(8 / 3, rel=1e-12)
    assert found.gain_up.frequency == pytest.approx(math.sqrt(3), rel=1e-12)
    assert found.gain_down.value == 0.0
    assert found.sensitivity.value == pytest.approx(2.2, rel=1e-9)
    assert found.sensitivity.frequency == pytest.approx(math.sqrt(1.75), rel=1e-6)
    assert len(found.crossovers) == len(found.phase_crossings) == 1


def test_gain_that_must_not_fall() -> None:
    # k (s + 1)^2 / s^3: s^3 + k s^2 + 2 k s + k is stable for k > 1/2
    found = margins(ratio(2 * product([1, 1], [1, 1]), [1, 0, 0, 0]))
    assert found.stable
    assert found.gain_down.value == pytest.approx(0.25, rel=1e-12)
    assert found.gain_down.frequency == pytest.approx(1.0, rel=1e-12)
    assert math.isinf(found.gain_up.value)


def test_unstable_plant_needs_gain_at_zero_frequency() -> None:
    # 3 / (s - 1): stable above a gain of one third, met at frequency zero
    found = margins(ratio([3], [1, -1]))
    assert found.stable
    assert found.gain_down.value == pytest.approx(1 / 3, rel=1e-12)
    assert found.gain_down.frequency == 0.0
    assert math.isinf(found.gain_up.value)


def test_gain_limit_at_infinite_frequency() -> None:
    # (1 - s) / (2 s + 4): D = -1/2, so twice the gain leaves no solution; L(0) = 1/4
    found = margins(ratio([-1, 1], [2, 4]))
    assert found.gain_up.value == pytest.approx(2.0, rel=1e-12)
    assert math.isinf(found.gain_up.frequency)
    assert found.sensitivity.value == pytest.approx(2.0, rel=1e-7)
    assert math.isinf(found.sensitivity.frequency)
    assert math.isinf(found.phase.value)


def test_unstable_loop_has_no_margins() -> None:
    # 0.5 / (s - 1): a gain margin of 2 can be read off the curve, yet the closed loop has a pole at 0.5
    found = margins(ratio([0.5], [1, -1]))
    assert found.outcome is Outcome.DONE
    assert not found.stable
    assert found.unstable == (pytest.approx(0.5),)
    assert not found.opposite_stable
    for figure in (found.gain_up, found.gain_down, found.phase, found.delay, found.disk, found.sensitivity):
        assert math.isnan(figure.value)


def test_wrong_sign_is_recognized() -> None:
    found = margins(ratio([-3], [1, 1]))
    assert not found.stable
    assert found.opposite_stable


def test_poles_on_the_axis_are_not_called_stable_or_unstable() -> None:
    found = margins(ratio([1], [1, 0, 0]))
    assert found.outcome is Outcome.ON_THE_EDGE
    assert not found.stable
    assert found.unstable == ()


def test_count_from_the_response_alone() -> None:
    loops = {
        0: ratio([3], product([1, 1], [1, 1], [1, 1])),
        1: ratio([0.5], [1, -1]),
        2: ratio([9], product([1, 1], [1, 1], [1, 1])),
    }
    for number, loop in loops.items():
        L = curve(loop)
        nodes = walk(of_matrix(L.A, None).values, gain_candidates(L))
        assert right_of_axis(L, nodes) == number
    # a pole of the loop on the axis; a response through -1
    for loop in (ratio([1], [1, 0]), ratio([8], product([1, 1], [1, 1], [1, 1]))):
        L = curve(loop)
        nodes = np.append(walk(of_matrix(L.A, None).values, gain_candidates(L)), math.sqrt(3))
        assert right_of_axis(L, np.sort(nodes)) is None


def placed(poles: Array, wanted: float) -> Transfer:
    """Distinct real poles under the state feedback that puts all closed-loop poles at one place."""
    n = len(poles)
    gains = [(each - wanted) ** n / math.prod(each - other for other in poles if other != each) for each in poles]
    return Transfer(np.diag(poles), np.ones((n, 1)), np.array([gains]), np.zeros((1, 1)))


@pytest.mark.parametrize("poles", [np.linspace(0.1, 1.0, 7), np.linspace(-0.1, 0.9, 8), np.linspace(0.0, 0.7, 8)])
def test_stable_although_its_eigenvalues_cannot_tell(poles: Array) -> None:
    # all closed-loop poles at -1, where rounding spreads them so far that no eigenvalue bound decides
    loop = placed(poles, -1.0)
    assert len(of_matrix(loop.A - loop.B @ loop.C, None).undecided) > 0
    assert surely_stable(curve(loop))
    assert margins(loop).stable
    # and at +0.01, or on the axis, where nothing may be called stable
    for wanted in (0.01, 0.0):
        assert not margins(placed(poles - 0.03, wanted)).stable


def test_ill_posed() -> None:
    found = margins(ratio([-1, 3], [1, 1]))
    assert found.outcome is Outcome.ILL_POSED
    assert not found.stable


@pytest.mark.parametrize("power", [0.3, 1.0, 7.0])
def test_resonance_as_narrow_as_a_millionth(power: float) -> None:
    # g / (s^2 + 2 zeta s + 1) with zeta 1e-6 and g = 2 zeta sqrt(1 + power^2) crosses one beside its peak
    zeta = 1e-6
    g = 2 * zeta * math.sqrt(1 + power**2)
    found = margins(ratio([g], [1, 2 * zeta, 1]))
    inner = math.sqrt(g**2 - 4 * zeta**2 * (1 - zeta**2))
    crossings = [math.sqrt(1 - 2 * zeta**2 - inner), math.sqrt(1 - 2 * zeta**2 + inner)]
    assert [each.frequency for each in found.crossovers] == pytest.approx(crossings, rel=1e-12)
    left = [math.pi - math.atan2(2 * zeta * w, 1 - w * w) for w in crossings]
    assert [each.margin for each in found.crossovers] == pytest.approx(left, rel=1e-7)
    assert found.phase.value == pytest.approx(min(left), rel=1e-7)
    # S = (s^2 + 2 zeta s + 1) / (s^2 + 2 zeta s + 1 + g) has its peak where |S|^2 is stationary
    w = np.linspace(1.0, 1.0 + 3 * g, 200_001)
    s = 1j * w
    assert found.sensitivity.value >= np.abs((s * s + 2 * zeta * s + 1) / (s * s + 2 * zeta * s + 1 + g)).max() * (
        1 - 1e-9
    )
    assert found.sensitivity.value == pytest.approx(
        np.abs((s * s + 2 * zeta * s + 1) / (s * s + 2 * zeta * s + 1 + g)).max(), rel=1e-6
    )


def test_gain_that_touches_one_counts() -> None:
    # the peak of a resonance, 2 zeta / (2 zeta sqrt(1 - zeta^2)), brought to one exactly and to a hair's breadth below
    zeta = 0.1
    peak = 2 * zeta * math.sqrt(1 - zeta**2)
    for gain, number in ((peak * (1 - 1e-13), 1), (peak * (1 - 1e-6), 0)):
        found = margins(ratio([gain], [1, 2 * zeta, 1]))
        assert (len(found.crossovers) > 0) is bool(number)
        if number:
            assert found.crossovers[0].frequency == pytest.approx(math.sqrt(1 - 2 * zeta**2), rel=1e-5)


def test_two_crossings_a_hair_apart() -> None:
    zeta = 0.1
    found = margins(ratio([2 * zeta * math.sqrt(1 - zeta**2) * (1 + 1e-8)], [1, 2 * zeta, 1]))
    assert len(found.crossovers) == 2
    assert found.crossovers[1].frequency / found.crossovers[0].frequency - 1 < 1e-4


def test_static_loops() -> None:
    found = margins(static(-0.4))
    assert found.stable
    assert found.gain_up.value == pytest.approx(2.5, rel=1e-14)
    assert found.sensitivity.value == pytest.approx(1 / 0.6, rel=1e-7)
    assert math.isinf(found.phase.value)
    assert margins(static(3.0)).delay.value == 0.0
    assert not margins(static(0.5)).delay.value < math.inf


def test_more_gain_than_one_at_infinite_frequency_bears_no_dead_time() -> None:
    found = margins(ratio([2, 1], [1, 1]))
    assert found.stable
    assert (found.delay.value, found.delay.frequency) == (0.0, math.inf)


@pytest.mark.parametrize("size", [1e-8, 1e8])
def test_units_of_states_do_not_matter(size: float) -> None:
    loop = ratio(8.75 * np.array([4, 0.4, 1]), product([100, 1], [1, 0.22, 1], [0.01, 0.008, 1]))
    one, other = margins(loop), margins(scaled(loop, np.array([1.0, size, 1.0, 1 / size, size])))
    for name in ("gain_up", "phase", "delay", "disk", "sensitivity", "complementary"):
        assert getattr(other, name).value == pytest.approx(getattr(one, name).value, rel=1e-10)
    assert len(other.crossovers) == len(one.crossovers) == 3


def test_a_heading_that_the_loop_neither_moves_nor_sees_changes_no_figure() -> None:
    one = ratio([3], product([1, 1], [1, 1], [1, 1]))
    A = np.zeros((4, 4))
    A[:3, :3], A[3, 3] = one.A, -1e-3
    found = margins(Transfer(A, np.vstack([one.B, [[0.0]]]), np.hstack([one.C, [[1.0]]]), one.D))
    assert found.gain_up.value == pytest.approx(8 / 3, rel=1e-12)
    assert found.sensitivity.value == pytest.approx(2.2, rel=1e-9)


def test_errors_are_told() -> None:
    found = margins(ratio([3], product([1, 1], [1, 1], [1, 1])))
    for figure in (found.gain_up, found.phase, found.delay):
        assert 0.0 < figure.error < 1e-11
    for figure in (found.disk, found.sensitivity, found.complementary):
        assert 0.0 < figure.error < 1e-7


def test_guarantee_of_a_disk() -> None:
    gain, phase = guarantee(0.4)
    assert 20 * math.log10(gain) == pytest.approx(3.5, abs=0.03)
    assert math.degrees(phase) == pytest.approx(22.6, abs=0.05)
    assert guarantee(2.0)[0] == math.inf


def test_several_channels_are_refused() -> None:
    with pytest.raises(ValueError, match="one input and one output"):
        margins(Transfer(-np.eye(2), np.eye(2), np.eye(2), np.zeros((2, 2))))
    with pytest.raises(ValueError, match="not finite"):
        margins(Transfer(np.array([[math.nan]]), np.ones((1, 1)), np.ones((1, 1)), np.zeros((1, 1))))


def test_critical_damping_behind_two_integrators() -> None:
    # (2 s + 1) / s^2 closes to s^2 / (s + 1)^2: both poles at -1, phase 180 deg - atan 2 w where w^2 = 2 + sqrt(5)
    found = margins(ratio([2, 1], [1, 0, 0]))
    assert found.outcome is Outcome.DONE
    assert found.stable
    assert found.phase.value == pytest.approx(math.atan(2 * math.sqrt(2 + math.sqrt(5))), rel=1e-12)
    assert found.sensitivity.value == pytest.approx(1.0, rel=1e-7)


def test_poles_that_repeat_on_the_axis_are_not_stable() -> None:
    # 2 (s^2 + 1/2) / (s^4 + ...): closes to (s^2 + 1)^2
    found = margins(ratio([1, 0, 0.5], [1, 0, 1, 0, 0.5]))
    assert not found.stable
    assert found.outcome is Outcome.ON_THE_EDGE


@pytest.mark.parametrize("alpha", [2.0 - 1e-15, 2.0 - 1e-8, 1.9999])
def test_a_disk_margin_just_below_two_promises_no_absurd_gain(alpha: float) -> None:
    up, phase = guarantee(alpha)
    assert up == 1e4
    assert phase == pytest.approx(0.5 * math.pi, abs=1e-4)
