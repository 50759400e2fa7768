"""The frequency at which two local models differ most, found without a fixed grid.

|difference| / |G| as a function of frequency has its scale set by its singularities: the poles of both models and the
zeros of the reference, all of them known from eigenvalues. The walk over the band takes steps that are a fixed share of
the distance to the nearest of them, so that a resonance of any sharpness is met by as many points as a flat stretch;
what could hide between two points would need a singularity nearer than all there are. (Zeros of the difference itself
need no steps: they only lower it.) The largest points are then enclosed and polished by evaluation.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from ..core.model import Array
from .frequency import Complex, channel_zeros, poles, respond_within
from .pair import Pair

SHARE = 0.1  # of the distance to the nearest singularity: one step of the walk
NEAREST = 1e-13  # of the frequency: steps are not shorter, since numbers end there
ROUNDS, POINTS = 8, 17  # polishing: each round encloses the largest of so many points
MOST = 400_000  # points of a walk; no band comes near


@dataclass(frozen=True, slots=True)
class Channel:
    """How far one input-output pair is off.

    share, error: the largest |difference| / max(|reference|, floor x peak) and our error of it there; frequency: where,
    rad per time unit; highest, lowest: what the share surely keeps below, and surely reaches, in the band; delivered,
    reference: the responses at `frequency`; peak: largest |reference| in the band, infinite for an undamped pole there.
    """

    input: str
    output: str
    share: float
    error: float
    frequency: float
    highest: float
    lowest: float
    delivered: complex
    reference: complex
    peak: float


@dataclass(frozen=True, slots=True, eq=False)
class _Shares:
    """Shares (F,) of one channel, the bounds between which they surely lie, and what they are made of."""

    share: Array
    low: Array
    high: Array
    delivered: Complex
    reference: Complex


def channels(pair: Pair, low: float, high: float, floor: float) -> tuple[Channel, ...]:
    """Every input-output pair, worst first: |difference| over max(|reference|, floor x its peak) between low and high.

    low, high: angular frequencies per time unit, 0 <= low < high, of discrete models not above their Nyquist frequency.
    Raises ValueError for an empty band or a clash of sample times.
    """
    if pair.time_clash or not low < high:
        raise ValueError(pair.time_clash or f"the band from {low} to {high} is empty")
    omega = walk(singularities(pair), low, high)
    both = _both(pair, omega)
    shape = pair.reference.D.shape
    found = [_channel(pair, omega, both, floor, i, j) for i, j in np.ndindex(shape)]
    return tuple(sorted(found, key=lambda channel: -round(channel.share, 9)))


def singularities(pair: Pair) -> Complex:
    """What sets the scale of the shares over frequency, in s, per time unit; (q,)."""
    return np.concatenate([poles(pair.delivered), poles(pair.reference), channel_zeros(pair.reference)])


def walk(singular: Complex, low: float, high: float) -> Array:
    """Frequencies from low to high, each step a share of the distance to the nearest of `singular`; (F,).

    The distance changes no faster than the frequency, so no singularity can be stepped over.
    """
    imag, real = singular.imag, singular.real
    omega, found = low, [low]
    while omega < high and len(found) < MOST:
        distance = float(np.hypot(imag - omega, real).min(initial=high))
        omega = min(high, omega + max(SHARE * distance, NEAREST * max(omega, NEAREST * high)))
        found.append(omega)
    return np.array(found)


_Both = tuple[Complex, Complex, Array, Array]


def _both(pair: Pair, omega: Array) -> _Both:
    """Delivered and reference responses, the error of their difference, and that of the reference alone."""
    delivered, rounding = respond_within(pair.delivered, None, omega)
    reference, error = respond_within(pair.reference, pair.reference.errors, omega)
    return delivered, reference, error + rounding, error


def _channel(pair: Pair, omega: Array, both: _Both, floor: float, i: int, j: int) -> Channel:
    peak = _peak(pair, omega, both, i, j)
    if floor > 0.0 and math.isinf(peak):
        # no floor is a share of what has no bound: what is known is told, and nothing is passed
        return replace(_channel(pair, omega, both, 0.0, i, j), highest=math.inf, lowest=0.0)
    walked = _shares(both, floor * peak, i, j)
    where, polished = omega, walked
    for start in _tops(walked.share):
        more, finer = _polished(pair, omega, start, floor * peak, i, j)
        where, polished = np.append(where, more), _joined(polished, finer)
    best = int(np.argmax(polished.share))
    return Channel(
        pair.reference.inputs.names[j],
        pair.reference.outputs.names[i],
        float(polished.share[best]),
        _error(polished, best),
        float(where[best]),
        float(polished.high.max()),
        float(polished.low.max()),
        complex(polished.delivered[best]),
        complex(polished.reference[best]),
        peak,
    )


def _shares(both: _Both, least: float, i: int, j: int) -> _Shares:
    delivered, reference, error = both[0][:, i, j], both[1][:, i, j], both[2][:, i, j]
    with np.errstate(invalid="ignore", divide="ignore"):
        size, gap = np.abs(reference), np.abs(delivered - reference)
        share = np.where(gap == 0.0, 0.0, gap / np.maximum(size, least))
        low = np.maximum(gap - error, 0.0) / np.maximum(size + error, least)
        high = (gap + error) / np.maximum(size - error, least)
    # at a pole of both nothing can be said; a pole of one alone is seen from the points beside it
    high = np.where(np.isfinite(high) & (high >= 0.0), high, np.inf)
    return _Shares(_known(share), _known(low), high, delivered, reference)


def _known(values: Array) -> Array:
    return np.where(np.isnan(values), 0.0, values)


def _error(found: _Shares, place: int) -> float:
    share, low, high = float(found.share[place]), float(found.low[place]), float(found.high[place])
    if not math.isfinite(share):
        return math.inf
    return max(share - low, high - share)


def _peak(pair: Pair, omega: Array, both: _Both, i: int, j: int) -> float:
    size = np.abs(both[1][:, i, j])
    top = int(np.argmax(size))
    low, high = omega[max(top - 1, 0)], omega[min(top + 1, len(omega) - 1)]
    if not np.isfinite(both[3][:, i, j]).all():
        return math.inf
    best = float(size[top])
    for _ in range(ROUNDS):
        grid = np.linspace(low, high, POINTS)
        fine = np.abs(respond_within(pair.reference, None, grid)[0][:, i, j])
        place = int(np.argmax(fine))
        best = max(best, float(fine[place]))
        low, high = grid[max(place - 1, 0)], grid[min(place + 1, POINTS - 1)]
    return best


def _tops(share: Array) -> list[int]:
    """The highest local maxima of the walk, at most two: a neighbour may overtake the first when both are polished."""
    padded = np.concatenate([[-np.inf], share, [-np.inf]])
    local = np.flatnonzero((share >= padded[:-2]) & (share >= padded[2:]))
    order = local[np.argsort(-share[local], kind="stable")]
    return [int(index) for index in order[:2]]


def _polished(pair: Pair, omega: Array, start: int, least: float, i: int, j: int) -> tuple[Array, _Shares]:
    low, high = omega[max(start - 1, 0)], omega[min(start + 1, len(omega) - 1)]
    wheres, founds = [], []
    for _ in range(ROUNDS):
        grid = np.linspace(low, high, POINTS)
        found = _shares(_both(pair, grid), least, i, j)
        place = int(np.argmax(found.share))
        wheres.append(grid)
        founds.append(found)
        low, high = grid[max(place - 1, 0)], grid[min(place + 1, POINTS - 1)]
    whole = founds[0]
    for found in founds[1:]:
        whole = _joined(whole, found)
    return np.concatenate(wheres), whole


def _joined(one: _Shares, other: _Shares) -> _Shares:
    return _Shares(
        np.concatenate([one.share, other.share]),
        np.concatenate([one.low, other.low]),
        np.concatenate([one.high, other.high]),
        np.concatenate([one.delivered, other.delivered]),
        np.concatenate([one.reference, other.reference]),
    )
