"""The dead time that a sampled loop of any build bears: tried in small steps, and refined where stability is lost."""

from __future__ import annotations

import math
from collections.abc import Callable

from .margins import Found

MOST = 1200  # dead times that are tried
WITHIN = 1e-9  # relative: to which the first loss is refined


def first_loss(stable: Callable[[float], bool], step: float, most: float, *, whole: bool = False) -> Found:
    """The smallest additional dead time that makes a stable loop unstable, found in steps of `step` up to `most`.

    whole: only multiples of `step` mean anything; then the largest of them before the loss. Where nothing is lost, the
    value is the last dead time that was tried, with NaN for its frequency: the loop bears at least so much. NaN where
    that would take too many trials.
    """
    count = math.ceil(most / step)
    if count > MOST:
        return Found(math.nan, math.nan, math.nan)
    for k in range(1, count + 1):
        if not stable(k * step):
            return Found((k - 1) * step) if whole else _refined(stable, (k - 1) * step, k * step)
    return Found(count * step)


def _refined(stable: Callable[[float], bool], low: float, high: float) -> Found:
    while high - low > WITHIN * high:
        middle = 0.5 * (low + high)
        low, high = (middle, high) if stable(middle) else (low, middle)
    return Found(0.5 * (low + high), math.nan, 0.5 * (high - low))
