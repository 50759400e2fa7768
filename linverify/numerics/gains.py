"""Static gains: where they exist, their singular values, relative gains and the sign of their determinant.

The relative gain array is G o (G^+)^T, with the pseudo-inverse where there are more inputs than outputs or the other
way round. Bristol 1966, "On a new measure of interaction for multivariable process control", IEEE Trans. Automatic
Control 11(1).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from ..core.model import Array, LocalModel
from .frequency import respond_within
from .pair import Pair

TIE = 9  # digits: of changes that differ by rounding alone the first one is quoted, on every machine


@dataclass(frozen=True, slots=True, eq=False)
class StaticGains:
    """G(0), or G(z = 1), of both models in plant units, and the error of their difference; all (k, m)."""

    delivered: Array
    reference: Array
    error: Array


@dataclass(frozen=True, slots=True)
class Moved:
    """A largest change with our error of it; both may be infinite. place: which singular value or element."""

    change: float
    error: float
    delivered: float
    reference: float
    place: tuple[int, ...]


def static_gains(pair: Pair) -> StaticGains | None:
    """The static gains; None where a model has a pole at the origin, as far as its entries are known."""
    theirs, ours = static_gain(pair.delivered), static_gain(pair.reference)
    if theirs is None or ours is None:
        return None
    return StaticGains(theirs[0], ours[0], theirs[1] + ours[1])


def static_gain(model: LocalModel) -> tuple[Array, Array] | None:
    """The static gain and its error, both (k, m); None for a pole at the origin."""
    gain, error = respond_within(model, model.errors, np.zeros(1))
    if not (np.isfinite(gain).all() and np.isfinite(error).all()):
        return None
    return gain[0].real, error[0]


def singular_values(gains: StaticGains, inputs: Array, outputs: Array) -> Moved:
    """The largest change of a singular value, as a share of itself; gains scaled by nominal sizes (m,), (k,)."""
    scale = inputs / outputs[:, np.newaxis]
    theirs = np.linalg.svd(gains.delivered * scale, compute_uv=False)
    ours = np.linalg.svd(gains.reference * scale, compute_uv=False)
    spread = float(np.linalg.norm(gains.error * scale))  # no singular value moves further than this
    with np.errstate(divide="ignore", invalid="ignore"):
        change = np.where(theirs == ours, 0.0, np.abs(theirs - ours) / ours)
        error = spread * (1.0 + change) / ours if spread else np.zeros_like(ours)
    place = int(np.argmax(np.round(np.where(np.isfinite(change), change, np.inf), TIE)))
    return Moved(float(change[place]), float(error[place]), float(theirs[place]), float(ours[place]), (place,))


def relative_gains(gain: Array) -> Array:
    """The relative gain array of a static gain (k, m); independent of units."""
    return np.asarray(gain * np.linalg.pinv(_leveled(gain)[0], rcond=1e-13).T * _leveled(gain)[1])


def relative_gain(gains: StaticGains) -> Moved:
    """The largest change of an element of the relative gain array."""
    theirs, ours = relative_gains(gains.delivered), relative_gains(gains.reference)
    change = np.abs(theirs - ours)
    error = _carried(relative_gains, gains.reference, gains.error)
    row, column = (int(index) for index in np.unravel_index(np.argmax(np.round(change, TIE)), change.shape))
    place = (row, column)
    return Moved(float(change[place]), float(error[place]), float(theirs[place]), float(ours[place]), place)


def determinant_signs(gains: StaticGains) -> tuple[int, int]:
    """Signs of both determinants, 0 where the entries leave them open. Raises ValueError unless square."""
    if gains.reference.shape[0] != gains.reference.shape[1]:
        raise ValueError(f"a determinant needs as many outputs as inputs, not {gains.reference.shape}")
    return _sign(gains.delivered, gains.error), _sign(gains.reference, gains.error)


def _sign(gain: Array, error: Array) -> int:
    level, scale = _leveled(gain)
    smallest = np.linalg.svd(level, compute_uv=False)[-1] if gain.size else 1.0
    if smallest <= np.linalg.norm(error * scale) + 1e-13:
        return 0
    return int(np.sign(np.linalg.det(level)))


def _leveled(gain: Array) -> tuple[Array, Array]:
    """`gain` with rows and columns of one size, and the factors (k, m) that made it so."""
    factors = np.ones_like(gain)
    for _ in range(3):
        for axis in (0, 1):
            size = np.abs(gain * factors).max(axis=axis, keepdims=True)
            factors = factors / np.where(size > 0, 2.0 ** np.round(np.log2(np.where(size > 0, size, 1.0))), 1.0)
    return gain * factors, factors


def _carried(function: Callable[[Array], Array], at: Array, errors: Array) -> Array:
    """What errors of the entries of `at` do to `function`, to first order, summed without regard to sign."""
    base, total = function(at), np.zeros_like(at)
    for place in zip(*np.nonzero(errors), strict=True):
        step = max(float(errors[place]), 1e-7 * float(np.abs(at).max()))
        moved = np.array(at)
        moved[place] += step
        total = total + np.abs(function(moved) - base) * (float(errors[place]) / step)
    return total
