"""Random smooth vector functions with their Jacobians, corners to plant into them, and noise to put on them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.interpolate import CubicSpline

Scalar = tuple[Callable, Callable]  # a function and its derivative


def _scalar(rng: np.random.Generator) -> Scalar:
    kind, fast, shift = int(rng.integers(8)), 10 ** rng.uniform(-1, 0.7), rng.uniform(-2, 2)
    calm = min(fast, 2.0)
    if kind == 0:
        return (lambda y: np.sin(fast * y + shift)), (lambda y: fast * np.cos(fast * y + shift))
    if kind == 1:
        return (lambda y: np.exp(calm * np.tanh(y))), (lambda y: calm / np.cosh(y) ** 2 * np.exp(calm * np.tanh(y)))
    if kind == 2:
        return (lambda y: np.sqrt(3 + np.tanh(y))), (lambda y: 0.5 / np.cosh(y) ** 2 / np.sqrt(3 + np.tanh(y)))
    if kind == 3:
        return (lambda y: np.tanh(fast * y + shift)), (lambda y: fast / np.cosh(fast * y + shift) ** 2)
    if kind == 4:
        table = CubicSpline(np.linspace(-12, 12, 49), rng.normal(size=49))
        return table, table.derivative()
    if kind == 5:
        return (lambda y: shift * y**2 + y), (lambda y: 2 * shift * y + 1)
    if kind == 6:
        bottom = lambda y: 2 + np.cos(fast * y)  # noqa: E731
        return (lambda y: 1 / bottom(y)), (lambda y: fast * np.sin(fast * y) / bottom(y) ** 2)
    return (lambda y: np.arctan2(fast * y, 1.5) + shift * y), (lambda y: 1.5 * fast / (2.25 + (fast * y) ** 2) + shift)


@dataclass(frozen=True)
class Smooth:
    """f about z0, its Jacobian there; sizes (v,): on which it bends; nominal (v,): as an engineer guesses them."""

    f: Callable
    z0: np.ndarray
    jacobian: np.ndarray
    sizes: np.ndarray
    nominal: np.ndarray

    @property
    def scales(self) -> np.ndarray:
        """Largest term of each row."""
        return np.abs(self.jacobian * self.nominal).max(axis=1)


def smooth(seed: int) -> Smooth:
    """Sums of products of smooth functions of mixed variables, badly scaled in rows and columns."""
    rng = np.random.default_rng(seed)
    v, r = int(rng.integers(1, 7)), int(rng.integers(1, 6))
    terms = [
        (
            int(row),
            rng.choice([-1, 1]) * 10 ** rng.uniform(-2, 2),
            _scalar(rng),
            _scalar(rng),
            rng.normal(size=v) * (rng.random(v) < 0.6),
            rng.normal(size=v) * (rng.random(v) < 0.3),
        )
        for row in np.repeat(np.arange(r), rng.integers(1, 4, size=r))
    ]
    row_scale = 10 ** rng.uniform(-6, 6, size=r)
    sizes = 10 ** rng.uniform(-6, 6, size=v)
    z0 = sizes * rng.choice([0, 1, 10], size=v) * rng.uniform(-1, 1, size=v)
    centre = rng.uniform(-2, 2, size=v)
    nominal = sizes * 10 ** rng.uniform(-1, 1, size=v)

    def f(z: np.ndarray) -> np.ndarray:
        y = (z - z0[:, np.newaxis]) / sizes[:, np.newaxis] + centre[:, np.newaxis]
        out = np.zeros((r, z.shape[1]))
        for row, factor, (p, _), (q, _), along, across in terms:
            out[row] += row_scale[row] * factor * p(along @ y) * q(across @ y)
        return out

    jacobian = np.zeros((r, v))
    for row, factor, (p, dp), (q, dq), along, across in terms:
        a, b = along @ centre, across @ centre
        jacobian[row] += row_scale[row] * factor * (dp(a) * q(b) * along + p(a) * dq(b) * across)
    return Smooth(f, z0, jacobian / sizes, sizes, nominal)


# functions of the distance from the corner, in nominal sizes; each changes its slope there by one (or its value)
CORNERS = {
    "abs": lambda w: np.abs(w) / 2,
    "clip": lambda w: np.clip(w, -3.0, 0.0),
    "dead zone": lambda w: w - np.clip(w, -1.0, 0.0),
    "table": lambda w: np.interp(w, [-2.0, -1.0, 0.0, 1.0, 2.0], [-1.0, 0.5, 0.0, 0.5, 0.0]),
    "max": lambda w: np.maximum(w, 0.0),
    "relay": lambda w: np.where(w >= 0, 0.01, 0.0),
}


@dataclass(frozen=True)
class Planted:
    """A smooth function with a corner in one entry."""

    f: Callable
    base: Smooth
    row: int
    column: int
    kind: str
    distance: float
    gap: float  # as a share of the row's scale

    @property
    def resolution(self) -> float:
        """Distance of floating-point numbers at the point, in nominal sizes."""
        return float(np.spacing(np.abs(self.base.z0[self.column])) / self.base.nominal[self.column])


def planted(seed: int, kind: str, distance: float) -> Planted | None:
    """A corner of `kind` put `distance` nominal sizes from the point; None where the chosen row is constant."""
    base = smooth(seed)
    rng = np.random.default_rng([seed, 1])
    row, column = int(rng.integers(len(base.jacobian))), int(rng.integers(len(base.z0)))
    share = 10 ** rng.uniform(-0.9, 1.0)
    gap = share * base.scales[row]
    if gap == 0:
        return None
    at = base.z0[column] + distance * base.nominal[column]

    def f(z: np.ndarray) -> np.ndarray:
        out = base.f(z)
        out[row] += gap * CORNERS[kind]((z[column] - at) / base.nominal[column])
        return out

    return Planted(f, base, row, column, kind, distance, share)


def scattered(values: np.ndarray) -> np.ndarray:
    """Numbers in [-1/2, 1/2] that depend on every bit of `values` and on nothing else."""
    bits = np.ascontiguousarray(values).view(np.uint64)
    bits = (bits * np.uint64(0x9E3779B97F4A7C15)) ^ (bits >> np.uint64(29))
    bits = bits * np.uint64(0xBF58476D1CE4E5B9)
    return ((bits ^ (bits >> np.uint64(32))).astype(np.float64) / 2.0**64 - 0.5).reshape(np.shape(values))
