"""A local model with sampled controllers closed inside it, taken over the time after which everything repeats.

Between instants its states flow, at instants they jump; over one common period of all controllers both together are one
linear map, whose eigenvalues say whether the model is stable, and how fast its modes are.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from fractions import Fraction

import numpy as np
from scipy.linalg import expm

from ..core.model import Array, LocalModel, frozen_array

LARGEST = 10**6  # denominator of the ratio of two periods
SAME = 1e-9  # of a period: instants that near are one
STEP = 1e-6  # of the largest entry: a step that stands out of rounding


def lifted(model: LocalModel) -> LocalModel:
    """The model at multiples of the common period, for inputs that are held over it; itself where nothing jumps.

    x is the state just before the jumps of an instant. Raises ValueError for a model with a step of its own.
    """
    if not model.jumps:
        return model
    if model.step is not None:
        raise ValueError("a difference equation does not flow between samples")
    n, m = model.B.shape
    period = _common([jump.period for jump in model.jumps])
    flow = np.zeros((n + m, n + m))
    flow[:n, :n], flow[:n, n:] = model.A, model.B
    whole, time = np.eye(n + m), 0.0
    for instant, place in _instants(model, period):
        jump = model.jumps[place]
        leap = np.eye(n + m)
        leap[:n, :n], leap[:n, n:] = jump.A, jump.B
        whole = leap @ (expm(flow * (instant - time)) if instant > time else np.eye(n + m)) @ whole
        time = instant
    whole = expm(flow * (period - time)) @ whole
    return replace(model, A=frozen_array(whole[:n, :n]), B=frozen_array(whole[:n, n:]), step=period, jumps=())


def _common(periods: list[float]) -> float:
    """The shortest time that is a whole multiple of all periods."""
    first = periods[0]
    ratios = [Fraction(period / first).limit_denominator(LARGEST) for period in periods]
    multiple = math.lcm(*(ratio.numerator for ratio in ratios))
    return first * multiple / math.gcd(*(ratio.denominator for ratio in ratios))


def _instants(model: LocalModel, period: float) -> list[tuple[float, int]]:
    """Every jump within one period with the place of what jumps; those of one instant in their order."""
    found = []
    for place, jump in enumerate(model.jumps):
        count = round(period / jump.period)
        found += [(jump.phase + index * jump.period, place) for index in range(count)]
    found.sort()
    made: list[tuple[float, int]] = []
    for instant, place in found:
        near = made and instant - made[-1][0] <= SAME * period
        made.append((made[-1][0] if near else instant, place))
    return sorted(made)


def carried(bare: LocalModel, make: Callable[[LocalModel], LocalModel], made: LocalModel) -> dict[str, Array]:
    """Errors of the entries of `made` = make(bare) from those of `bare`: to first order, summed without regard to sign.

    An entry that is zero in `bare` and known to a billionth of the largest entry is taken for zero.
    """
    totals = {name: np.zeros_like(getattr(made, name)) for name in "ABCD"}
    for name, errors in bare.errors.items():
        entries = getattr(bare, name)
        largest = float(np.abs(entries).max(initial=0.0))
        for place in zip(*np.nonzero(errors), strict=True):
            size = float(errors[place])
            if entries[place] == 0.0 and size <= SAME * largest:
                continue
            step = max(size, STEP * largest)
            moved = np.array(entries)
            moved[place] += step
            other = make(replace(bare, **{name: frozen_array(moved)}))  # type: ignore[arg-type]
            for word, total in totals.items():
                total += np.abs(getattr(other, word) - getattr(made, word)) * (size / step)
    return totals
