"""Roots counted by turns against roots that are known."""

from __future__ import annotations

import cmath

import numpy as np
import pytest
from scipy.special import lambertw

from linverify.numerics.delay_scan import first_loss
from linverify.numerics.sector import weakly_damped
from linverify.numerics.transfer import Transfer


@pytest.mark.parametrize(("k", "d"), [(1.0, 0.8), (0.5, 0.3), (1.2, 1.0), (3.0, 0.1)])
@pytest.mark.parametrize("damping", [0.1, 0.25, 0.45, 0.7])
@pytest.mark.parametrize("end", [5.0, 30.0, 200.0])
def test_roots_of_an_integrator_with_a_dead_time(k: float, d: float, damping: float, end: float) -> None:
    """s exp(s d) = -k: s = W(-k d) / d on every branch of Lambert's function."""
    loop = Transfer(np.zeros((1, 1)), np.ones((1, 1)), np.array([[k]]), np.zeros((1, 1)), d)
    roots = [complex(lambertw(-k * d, branch)) / d for branch in range(-60, 60)]
    known = [s for s in roots if s.imag > 1e-9 and abs(s) < end and -s.real < damping * abs(s)]
    assert min(abs(abs(s) - end) for s in roots) > 1e-3
    assert weakly_damped(loop, damping, end) == len(known)


def test_poles_of_the_open_loop_do_not_count() -> None:
    """An open-loop pair with a damping of 0.1, moved to 0.5 by rate feedback: no root is left in the sector of 0.4."""
    A = np.array([[0.0, 1.0], [-1.0, -0.2]])
    loop = Transfer(A, np.array([[0.0], [1.0]]), np.array([[0.0, 0.8]]), np.zeros((1, 1)), 1e-6)
    assert weakly_damped(loop, 0.4, 10.0) == 0
    assert weakly_damped(loop, 0.6, 10.0) == 1


def test_the_first_loss_is_refined() -> None:
    found = first_loss(lambda late: late < 0.437, 0.1, 2.0)
    assert found.value == pytest.approx(0.437, rel=1e-8)
    assert abs(found.value - 0.437) <= found.error
    assert first_loss(lambda late: late < 0.437, 0.1, 2.0, whole=True).value == pytest.approx(0.4)
    assert first_loss(lambda late: True, 0.1, 2.0).value == pytest.approx(2.0)
    assert cmath.isnan(first_loss(lambda late: True, 1e-6, 2.0).value)
