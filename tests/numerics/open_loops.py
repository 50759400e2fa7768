"""Loop transfer functions for tests, and what is done to them."""

from __future__ import annotations

import numpy as np
from scipy.signal import tf2ss

from linverify.core.model import Array
from linverify.numerics.bilinear import held_change
from linverify.numerics.transfer import Transfer


def ratio(num: object, den: object, delay: float = 0.0, step: float | None = None) -> Transfer:
    """A ratio of polynomials, highest power first; in z where `step` is given."""
    A, B, C, D = tf2ss(np.asarray(num, dtype=float), np.asarray(den, dtype=float))
    return Transfer(A, B, C, D, delay, step)


def product(*factors: list[float]) -> Array:
    out = np.ones(1)
    for factor in factors:
        out = np.polymul(out, factor)
    return out


def static(gain: float, delay: float = 0.0, step: float | None = None) -> Transfer:
    return Transfer(np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)), np.array([[gain]]), delay, step)


def scaled(loop: Transfer, factors: Array) -> Transfer:
    """The same with states in other units."""
    return Transfer(
        loop.A * factors / factors[:, np.newaxis], loop.B / factors[:, np.newaxis], loop.C * factors, loop.D,
        loop.delay, loop.step,
    )  # fmt: skip


def held(loop: Transfer, step: float) -> Transfer:
    """A continuous loop behind a hold, with all digits of A - I."""
    F, G = held_change(loop.A, loop.B, step)
    return Transfer(F + np.eye(len(F)), G, loop.C, loop.D, 0.0, step, change=F)
