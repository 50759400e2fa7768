"""What a number of independent random trials says about a probability, exactly.

C. J. Clopper, E. S. Pearson 1934, "The use of confidence or fiducial limits illustrated in the case of the binomial",
Biometrika 26(4), 404-413; S. S. Wilks 1941, "Determination of sample sizes for setting tolerance limits",
Ann. Math. Statist. 12(1), 91-96.
"""

from __future__ import annotations

from scipy.special import bdtr, betaincinv


def upper_bound(k: int, n: int, confidence: float) -> float:
    """One-sided upper bound of a probability after k events in n independent trials (Clopper-Pearson).

    0 of 59 at 0.95 gives 0.0495. Raises ValueError unless 0 <= k <= n, n > 0 and 0 < confidence < 1.
    """
    _check(k, n, confidence)
    return 1.0 if k == n else float(betaincinv(k + 1, n - k, confidence))


def lower_bound(k: int, n: int, confidence: float) -> float:
    """One-sided lower bound of a probability after k events in n trials; raises ValueError as `upper_bound` does."""
    _check(k, n, confidence)
    return 0.0 if k == 0 else float(betaincinv(k, n - k + 1, 1.0 - confidence))


def interval(k: int, n: int, confidence: float) -> tuple[float, float]:
    """Two-sided Clopper-Pearson interval; raises ValueError as `upper_bound` does."""
    _check(k, n, confidence)
    one_sided = 0.5 * (1.0 + confidence)
    return lower_bound(k, n, one_sided), upper_bound(k, n, one_sided)


def wilks(content: float, confidence: float, order: int = 1, sides: int = 1) -> int:
    """Fewest trials whose `order`-th largest value (and smallest, with two sides) bounds `content` of all values.

    The smallest n with P(at most n - order x sides of n values fall inside) >= confidence. Raises ValueError for shares
    outside (0, 1), an order below 1 or other than one or two sides.
    """
    if not 0.0 < content < 1.0 or not 0.0 < confidence < 1.0:
        raise ValueError(f"content and confidence must lie between 0 and 1, got {content!r} and {confidence!r}")
    if order < 1 or sides not in (1, 2):
        raise ValueError(f"order must be at least 1 and sides 1 or 2, got {order!r} and {sides!r}")
    left_out = order * sides

    def enough(n: int) -> bool:
        return float(bdtr(n - left_out, n, content)) >= confidence

    high = left_out
    while not enough(high):
        high *= 2
    low = max(left_out, high // 2)
    while low < high:  # the probability grows with n
        middle = (low + high) // 2
        low, high = (low, middle) if enough(middle) else (middle + 1, high)
    return low


def _check(k: int, n: int, confidence: float) -> None:
    if n < 1 or not 0 <= k <= n:
        raise ValueError(f"{k!r} events in {n!r} trials do not make sense")
    if not 0.0 < confidence < 1.0:
        raise ValueError(f"confidence must lie between 0 and 1, got {confidence!r}")
