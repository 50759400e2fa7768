"""Slopes from difference quotients at falling steps: extrapolation to step zero, entry by entry.

Every entry takes the level whose own error estimate is least. An estimate is the disagreement of neighbouring cells of
the extrapolation table plus the noise of the quotient, each taken thrice; it is raised where finer levels contradict
it, so that two coarse levels which agree by chance (a corner further out, a fast wave) do not win.
"""

from __future__ import annotations

import numpy as np

from ..core.model import Array

ORDERS = 4


def extrapolated(quotients: Array, floors: Array, factor: float) -> tuple[Array, Array]:
    """Limits and their error estimates, both (r, v).

    quotients (L, r, v): difference quotients, coarsest step first, each step a quarter of the one before; NaN where a
    level does not exist. floors (L, r, v): noise of each quotient. factor: how much the leading error falls from level
    to level (16 for central quotients, 4 for one-sided ones).
    """
    best, error = quotients[1:].copy(), np.full_like(quotients[1:], np.inf)
    last = quotients
    for order in range(1, ORDERS + 1):
        gain = (last[1:] - last[:-1]) / (factor**order - 1.0)
        fresh = last[1:] + gain
        spread = 3.0 * np.maximum(np.abs(gain), np.abs(fresh - last[:-1])) + 3.0 * floors[order:]
        levels = slice(order - 1, None)
        better = spread < error[levels]
        best[levels] = np.where(better, fresh, best[levels])
        error[levels] = np.where(better, spread, error[levels])
        last = fresh
    return _chosen(best, _contradicted(best, error))


def _contradicted(best: Array, error: Array) -> Array:
    """Estimates raised to what finer levels say."""
    raised = error.copy()
    for level in range(len(best) - 1):
        away = np.abs(best[level] - best[level + 1 :]) - error[level + 1 :]
        away = np.where(np.isfinite(away), away, 0.0)
        raised[level] = np.maximum(error[level], away.max(axis=0))
    return np.where(np.isfinite(best), raised, np.inf)


def _chosen(best: Array, error: Array) -> tuple[Array, Array]:
    level = np.argmin(error, axis=0)[np.newaxis]
    return np.take_along_axis(best, level, 0)[0], np.take_along_axis(error, level, 0)[0]
