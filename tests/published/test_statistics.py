"""Published sample sizes and confidence intervals."""

from __future__ import annotations

import pytest

from linverify.numerics.confidence import interval, upper_bound, wilks

# S. S. Wilks, Ann. Math. Statist. 12 (1941) 91-96; table for 95 % content after H. Glaeser, NURETH-14, GRS method,
# slide 8
CONFIDENCES = (0.50, 0.80, 0.90, 0.95, 0.99)
ONE_SIDED = (14, 32, 45, 59, 90)
TWO_SIDED = (34, 59, 77, 93, 130)


@pytest.mark.parametrize(("confidence", "n"), list(zip(CONFIDENCES, ONE_SIDED, strict=True)))
def test_wilks_one_sided(confidence: float, n: int) -> None:
    assert wilks(0.95, confidence) == n


@pytest.mark.parametrize(("confidence", "n"), list(zip(CONFIDENCES, TWO_SIDED, strict=True)))
def test_wilks_two_sided(confidence: float, n: int) -> None:
    assert wilks(0.95, confidence, sides=2) == n


# derived from the same formula, no published source: higher orders, and other contents at first order
@pytest.mark.parametrize(
    ("content", "confidence", "order", "sides", "n"),
    [
        (0.95, 0.95, 2, 1, 93),
        (0.95, 0.95, 3, 1, 124),
        (0.95, 0.95, 4, 1, 153),
        (0.95, 0.95, 2, 2, 153),
        (0.95, 0.95, 3, 2, 208),
        (0.95, 0.95, 4, 2, 260),
        (0.90, 0.95, 1, 1, 29),
        (0.90, 0.95, 1, 2, 46),
        (0.99, 0.95, 1, 1, 299),
        (0.99, 0.95, 1, 2, 473),
        (0.99, 0.99, 1, 1, 459),
        (0.99, 0.99, 1, 2, 662),
    ],
)
def test_wilks_derived(content: float, confidence: float, order: int, sides: int, n: int) -> None:
    assert wilks(content, confidence, order, sides) == n


# R. G. Newcombe, Statistics in Medicine 17 (1998) 857-872, Table I method 5 (exact intervals, 95 %)
@pytest.mark.parametrize(
    ("k", "n", "low", "high"),
    [(81, 263, 0.2527, 0.3676), (15, 148, 0.0578, 0.1617), (0, 20, 0.0, 0.1684), (1, 29, 0.0009, 0.1776)],
)
def test_exact_intervals(k: int, n: int, low: float, high: float) -> None:
    assert interval(k, n, 0.95) == pytest.approx((low, high), abs=5e-5)


# the rule of three (3/n) against the exact one-sided bound, derived: 1 - 0.05^(1/n)
@pytest.mark.parametrize(("n", "bound"), [(30, 0.095034), (59, 0.049508), (100, 0.029513), (300, 0.009936)])
def test_no_event_at_all(n: int, bound: float) -> None:
    assert upper_bound(0, n, 0.95) == pytest.approx(bound, abs=5e-7)
    assert upper_bound(0, n, 0.95) < 3 / n
