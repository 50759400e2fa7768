"""Where a loop's gain is one and where its response is real and negative: by pencils and by a walk, then polished.

Two independent means find the candidates. Eigenvalues of a descriptor pencil of L and its mirror image on the
imaginary axis are the crossings, however close together; but rounding moves them off the axis. A walk whose steps are a
share of the distance to the nearest pole sees every change of sign, and every dip towards one, of a function that has
no other singularities; but it may pass a hair's breadth of two crossings. Each candidate of either is polished on the
response itself, so none is believed and few are missed.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.linalg import eigvals

from ..core.model import Array
from .curve import Complex, Curve

ON_AXIS = 1e-3  # |Re| of |value|: looser than rounding needs, since every candidate is polished and verified
BESIDE = 1e-4  # of a candidate's frequency: walked points to both sides of it
STEP = 0.2  # of the distance to the nearest pole: the walk's steps
WIDE = 1e3  # the walk goes on beyond the outermost poles and candidates by this factor
DIPS, POINTS = 14, 9  # rounds and points a round of the search for the bottom of a dip
HALVINGS = 60
FLAT = 1e-13  # of a measure: what is left to polishing on exact values
POLISH = 4
TOUCH = 1e-9  # a dip that comes this near to a crossing counts as one

Measure = Callable[[Complex], Array]


@dataclass(frozen=True, slots=True)
class Met:
    """One crossing: v; L and the slope dL/dv there; error of L; shift: uncertainty of v."""

    v: float
    at: complex
    slope: complex
    error: float
    shift: float


def size_of(L: Complex) -> Array:
    """log |L|, zero at a gain crossing."""
    size = np.abs(L)
    return np.log(np.where(size > 0.0, size, 1e-300))


def turn_of(L: Complex) -> Array:
    """Sine of the phase, zero where L is real."""
    size = np.abs(L)
    return np.asarray(L.imag / np.where(size > 0.0, size, 1.0))


def size_slope(met: Met) -> float:
    """Change of `size_of` with v."""
    return (met.slope / met.at).real


def turn_slope(met: Met) -> float:
    """Change of `turn_of` with v, where L is real."""
    return (met.slope / met.at).imag * math.copysign(1.0, met.at.real)


def gain_candidates(curve: Curve, level: float = 1.0) -> Array:
    """Frequencies v > 0 at which |L| may equal `level`, from the pencil of L and its mirror image."""
    return on_axis(level_pencil(curve.A, curve.b, curve.c, curve.d, level))


def level_pencil(A: Array, b: Array, c: Array, d: float, level: float) -> Complex:
    """Zeros of level^2 - L(-s) L(s); finite ones."""
    n = len(A)
    # y and u scaled so that the algebraic rows are of the size of A
    size = (float(np.abs(A).max(initial=0.0)) or 1.0) / max(level, abs(d))
    root = float(np.sqrt(size))
    M = np.zeros((2 * n + 2, 2 * n + 2))
    M[:n, :n], M[:n, 2 * n] = A, root * b
    M[n : 2 * n, n : 2 * n], M[n : 2 * n, 2 * n + 1] = -A.T, root * c
    M[2 * n, :n], M[2 * n, 2 * n], M[2 * n, 2 * n + 1] = root * c, size * d, -size * level
    M[2 * n + 1, n : 2 * n], M[2 * n + 1, 2 * n], M[2 * n + 1, 2 * n + 1] = -root * b, -size * level, size * d
    return _finite(M, 2 * n)


def phase_candidates(curve: Curve) -> Array:
    """Frequencies v > 0 at which L may be real, from the pencil of L(s) - L(-s)."""
    n = len(curve.A)
    M = np.zeros((2 * n + 1, 2 * n + 1))
    M[:n, :n], M[:n, 2 * n] = curve.A, curve.b
    M[n : 2 * n, n : 2 * n], M[n : 2 * n, 2 * n] = -curve.A, curve.b
    M[2 * n, :n], M[2 * n, n : 2 * n] = curve.c, curve.c
    return on_axis(_finite(M, 2 * n))


def _finite(M: Array, order: int) -> Complex:
    E = np.zeros_like(M)
    E[:order, :order] = np.eye(order)
    with np.errstate(all="ignore"):
        found = np.asarray(eigvals(M, E, check_finite=False), dtype=np.complex128)
    return found[np.isfinite(found)]


def on_axis(values: Complex) -> Array:
    """Imaginary parts > 0 of those that lie near the imaginary axis."""
    near = (np.abs(values.real) <= ON_AXIS * np.abs(values)) & (values.imag > 0.0)
    return np.sort(np.abs(values[near]))


def walk(singular: Complex, candidates: Array) -> Array:
    """Frequencies v > 0, ascending, steps a share of the distance to the nearest of `singular`; and candidates."""
    sizes = np.concatenate([np.abs(singular), candidates])
    sizes = sizes[(sizes > 0.0) & np.isfinite(sizes)]
    low, high = (float(sizes.min()), float(sizes.max())) if len(sizes) else (1.0, 1.0)
    low, high = max(low / WIDE, 1e-140), min(high * WIDE, 1e140)
    parts = [np.geomspace(low, high, 2 + int(np.log(high / low) / STEP))]
    for pole in singular:
        if pole.imag > 0.0 and abs(pole.real) < pole.imag:
            near = max(abs(pole.real), 1e-13 * pole.imag)
            reach = float(np.arcsinh(pole.imag / near))
            offsets = near * np.sinh(np.linspace(0.0, reach, 2 + int(reach / STEP)))
            parts += [pole.imag + offsets, pole.imag - offsets]
    parts += [candidates, candidates * (1.0 + BESIDE), candidates * (1.0 - BESIDE)]
    nodes = np.unique(np.concatenate(parts))
    return nodes[(nodes >= low) & (nodes <= high)]


def crossings(curve: Curve, measure: Measure, nodes: Array) -> tuple[Array, Array]:
    """Zeros of `measure` of L between `nodes`, and dips that touch zero to within TOUCH; both ascending in v."""

    def ask(v: Array) -> Array:
        return measure(curve.quick(v))

    values = ask(nodes)
    change = np.flatnonzero(np.signbit(values[:-1]) != np.signbit(values[1:]))
    lows, highs = nodes[change], nodes[change + 1]
    size = np.abs(values)
    same = (np.signbit(values[:-2]) == np.signbit(values[1:-1])) & (np.signbit(values[2:]) == np.signbit(values[1:-1]))
    dips = 1 + np.flatnonzero(same & (size[1:-1] <= size[:-2]) & (size[1:-1] <= size[2:]))
    left, bottom, right, depth = _bottoms(ask, nodes[dips - 1], nodes[dips], nodes[dips + 1], np.sign(values[dips]))
    through = depth < 0.0
    touches = bottom[(depth >= 0.0) & (depth <= TOUCH)]
    lows = np.concatenate([lows, left[through], bottom[through]])
    highs = np.concatenate([highs, bottom[through], right[through]])
    return np.sort(_solved(ask, lows, highs)), np.sort(touches)


def _bottoms(
    ask: Callable[[Array], Array], low: Array, middle: Array, high: Array, sign: Array
) -> tuple[Array, Array, Array, Array]:
    """Around each bottom of sign * ask: its neighbours to both sides, itself, and its depth."""
    if not len(low):
        return low, middle, high, low
    left, right = low, high
    share = np.linspace(0.0, 1.0, POINTS)
    rows = np.arange(len(low))
    bottom, depth = middle, sign * ask(middle)
    for _ in range(DIPS):
        grid = low[:, np.newaxis] + (high - low)[:, np.newaxis] * share
        found = sign[:, np.newaxis] * ask(grid.ravel()).reshape(grid.shape)
        place = np.argmin(found, axis=1)
        better = found[rows, place] < depth
        bottom, depth = np.where(better, grid[rows, place], bottom), np.where(better, found[rows, place], depth)
        low, high = grid[rows, np.maximum(place - 1, 0)], grid[rows, np.minimum(place + 1, POINTS - 1)]
        if (depth < 0.0).all():
            break
    return left, bottom, right, depth


def _solved(ask: Callable[[Array], Array], low: Array, high: Array) -> Array:
    """One zero between each low and high, whose values differ in sign; by the method of Illinois beside halving."""
    if not len(low):
        return low
    f_low, f_high = ask(low), ask(high)
    below = np.signbit(f_low)
    for turn in range(HALVINGS):
        with np.errstate(all="ignore"):
            share = f_low / (f_low - f_high)
        plain = (turn % 3 == 2) | ~np.isfinite(share) | (share <= 0.0) | (share >= 1.0)
        middle = low + (high - low) * np.where(plain, 0.5, share)
        f = ask(middle)
        is_low = np.signbit(f) == below
        # halving the value that stays keeps the secant from creeping
        f_high, f_low = np.where(is_low, 0.5 * f_high, f), np.where(is_low, f, 0.5 * f_low)
        low, high = np.where(is_low, middle, low), np.where(is_low, high, middle)
        if ((high - low <= 4e-16 * high) | (np.abs(f) < FLAT)).all():
            break
    return np.asarray(middle)


def polished(curve: Curve, v: float, measure: Measure, slope: Callable[[Met], float]) -> Met:
    """The zero of `measure` beside v, by Newton's method on exact values, with what is left as its uncertainty."""
    best = taken(curve, v)
    left = _left(best, measure)
    for _ in range(POLISH):
        rate = slope(best)
        if left == 0.0 or rate == 0.0 or not math.isfinite(rate):
            break
        new = taken(curve, best.v - left / rate)
        moved = _left(new, measure) if new.v > 0.0 else math.inf
        if not abs(moved) < abs(left):
            break
        best, left = new, moved
    rate = abs(slope(best))
    shift = (abs(left) + best.error / abs(best.at)) / rate if rate > 0.0 else math.inf
    return Met(best.v, best.at, best.slope, best.error, shift + 2e-16 * best.v)


def taken(curve: Curve, v: float) -> Met:
    """The response at v, as it is."""
    value = curve.exact(np.array([v]))
    return Met(float(v), complex(value.at[0]), complex(value.slope[0]), float(value.error[0]), 0.0)


def _left(met: Met, measure: Measure) -> float:
    return float(measure(np.array([met.at]))[0])
