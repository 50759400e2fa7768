"""Bounds against their definition: the binomial sum itself, in exact fractions."""

from __future__ import annotations

from fractions import Fraction
from math import comb

import pytest

from linverify.numerics.confidence import interval, lower_bound, upper_bound, wilks


def at_most(k: int, n: int, p: float) -> float:
    share = Fraction(p)
    return float(sum(comb(n, i) * share**i * (1 - share) ** (n - i) for i in range(k + 1)))


@pytest.mark.parametrize(("k", "n"), [(0, 59), (1, 93), (3, 300), (17, 40), (299, 300)])
def test_bounds_solve_the_binomial_equation(k: int, n: int) -> None:
    assert at_most(k, n, upper_bound(k, n, 0.95)) == pytest.approx(0.05, rel=1e-9)
    if k:
        assert 1 - at_most(k - 1, n, lower_bound(k, n, 0.95)) == pytest.approx(0.05, rel=1e-9)


def test_bounds_at_the_ends() -> None:
    assert upper_bound(7, 7, 0.95) == 1.0
    assert lower_bound(0, 7, 0.95) == 0.0
    assert interval(0, 20, 0.95)[1] == pytest.approx(1 - 0.025 ** (1 / 20), rel=1e-12)


def test_tighter_confidence_for_many_points_widens_the_bound() -> None:
    assert upper_bound(0, 300, 1 - 0.05 / 40) == pytest.approx(1 - (0.05 / 40) ** (1 / 300), rel=1e-12)


@pytest.mark.parametrize(("order", "sides"), [(1, 1), (1, 2), (2, 1), (3, 2)])
def test_wilks_is_the_smallest_number(order: int, sides: int) -> None:
    n = wilks(0.9, 0.95, order, sides)
    assert at_most(n - order * sides, n, 0.9) >= 0.95
    assert at_most(n - 1 - order * sides, n - 1, 0.9) < 0.95


@pytest.mark.parametrize("arguments", [(-1, 5, 0.9), (6, 5, 0.9), (0, 0, 0.9), (0, 5, 1.0), (0, 5, 0.0)])
def test_senseless_trials_are_refused(arguments: tuple[int, int, float]) -> None:
    with pytest.raises(ValueError, match=r"make sense|between 0 and 1"):
        upper_bound(*arguments)


@pytest.mark.parametrize("arguments", [(1.0, 0.9, 1, 1), (0.9, 0.0, 1, 1), (0.9, 0.9, 0, 1), (0.9, 0.9, 1, 3)])
def test_senseless_sample_sizes_are_refused(arguments: tuple[float, float, int, int]) -> None:
    with pytest.raises(ValueError, match=r"between 0 and 1|order must be"):
        wilks(*arguments)
