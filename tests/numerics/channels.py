"""Random transfer functions of several channels, and what they do by scans that share no code with the library."""

from __future__ import annotations

import numpy as np

from linverify.core.model import Array
from linverify.numerics.transfer import Transfer


def modes(rng: np.random.Generator, n: int, lightest: float, unstable: float = 0.0) -> Array:
    """A block diagonal A (n, n) with real poles and pairs; a share of them is unstable."""
    A = np.zeros((n, n))
    i = 0
    while i < n:
        side = 1.0 if rng.random() < unstable else -1.0
        size = 10 ** rng.uniform(-1.5, 2.0)
        if i + 1 < n and rng.random() < 0.7:
            damping = 10 ** rng.uniform(np.log10(lightest), 0.0)
            A[i : i + 2, i : i + 2] = size * np.array([[side * damping, 1.0], [-1.0, side * damping]])
            i += 2
        else:
            A[i, i] = side * size
            i += 1
    return A


def transfer(
    rng: np.random.Generator, n: int, k: int, m: int, lightest: float = 0.05, unstable: float = 0.0, feed: float = 0.0
) -> Transfer:
    """Random and badly scaled: states in mixed units, modes of very different size."""
    A = modes(rng, n, lightest, unstable)
    size = np.sqrt(np.abs(np.linalg.eigvals(A).real)[:, np.newaxis])  # no mode stands alone above all others
    B, C = size * rng.normal(size=(n, m)), (size * rng.normal(size=(n, k))).T
    units = 10 ** rng.uniform(-3.0, 3.0, n)
    return Transfer(
        A * units / units[:, np.newaxis], B / units[:, np.newaxis], C * units, feed * rng.normal(size=(k, m))
    )


def respond(one: Transfer, omega: Array) -> np.ndarray:
    """Responses (F, k, m) with the dead time."""
    s = 1j * omega if one.step is None else np.exp(1j * omega * one.step)
    shifted = s[:, np.newaxis, np.newaxis] * np.eye(len(one.A)) - one.A
    inner = np.linalg.solve(shifted, np.broadcast_to(one.B, (len(s), *one.B.shape)))
    return (one.C @ inner + one.D) * np.exp(-1j * omega * one.delay)[:, np.newaxis, np.newaxis]


def closed(loop: Transfer, factors: np.ndarray | None = None) -> np.ndarray:
    """Poles of u = -F y around a loop, F diagonal."""
    m = len(loop.D)
    F = np.diag(np.ones(m) if factors is None else factors)
    return np.linalg.eigvals(loop.A - loop.B @ F @ np.linalg.solve(np.eye(m) + loop.D @ F, loop.C))


def scan(poles: np.ndarray, low: float = 1e-4, high: float = 1e5, number: int = 2000) -> Array:
    """Frequencies between `low` and `high`, dense about every pole."""
    spread = np.concatenate([-np.geomspace(1e-2, 1e2, 40), [0.0], np.geomspace(1e-2, 1e2, 40)])
    near = np.abs(poles.imag[:, np.newaxis] + np.abs(poles.real)[:, np.newaxis] * spread)
    return np.unique(np.concatenate([np.geomspace(low, high, number), near.ravel()]))


def highest(of: object, omega: Array, poles: np.ndarray) -> float:
    """The largest value of `of`, a function of frequencies, on the scan and refined about its three largest points."""
    values = of(omega)  # type: ignore[operator]
    best = float(values.max())
    for start in np.argsort(-values)[:3]:
        where, width = omega[start], np.abs(1j * omega[start] - poles).min()
        for _ in range(10):
            grid = np.abs(np.linspace(where - width, where + width, 21))
            fine = of(grid)  # type: ignore[operator]
            where, width = grid[np.argmax(fine)], width / 4.0
            best = max(best, float(fine.max()))
    return best


def sigma(matrices: np.ndarray) -> Array:
    return np.linalg.svd(matrices, compute_uv=False)[:, 0]
