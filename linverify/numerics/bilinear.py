"""Sampled loops mapped onto the continuous code: v = (2 / step) tan(frequency step / 2), the unit circle on the axis.

Nothing is done in z: at fast sampling all poles crowd at z = 1, and what tells them apart stands in the last digits of
A. It stands in full in F = A - I where that is computed by itself, so the mapping starts from F:

    z - 1 = 2 s / (1 - s),  (z - 1) I - F = ((2 I + F) s - F) / (1 - s)       with s = v step / 2 on the axis

and no difference of nearly equal numbers is left. A pole at z = -1 is one at infinite v.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import expm, matrix_balance

from ..core.model import Array
from .transfer import Transfer

AT_NYQUIST = 1e-13  # change of the entries of 2 I and F, of themselves, that may bring a pole of A = I + F to z = -1


def change(loop: Transfer) -> Array:
    """A of a continuous transfer function, F = A - I of a sampled one, with as many digits as it was given."""
    if loop.step is None:
        return loop.A
    return loop.A - np.eye(len(loop.A)) if loop.change is None else loop.change


def held_change(A: Array, B: Array, step: float) -> tuple[Array, Array]:
    """Discretize x' = A x + B u for held inputs, without losing digits: x+ - x = F x + G u.

    A (n, n), B (n, m), step in time units. Returns F (n, n), which is exp(A step) - I to its own last digits, and
    G (n, m).
    """
    n = len(A)
    _, (scale, _) = matrix_balance(A, permute=False, separate=True) if n else (A, (np.ones(0), None))
    ratio = scale / np.asarray(scale)[:, np.newaxis]
    whole = np.zeros((2 * n, 2 * n))
    whole[:n, :n], whole[:n, n:] = step * A * ratio, np.eye(n)
    # (exp(X) - I) / X is near one for slow modes, so the product keeps what a difference would lose
    mean = expm(whole)[:n, n:] / ratio
    return step * A @ mean, step * mean @ B


def at_nyquist(F: Array) -> bool:
    """True where A = I + F has a pole at z = -1 to within rounding."""
    if not len(F):
        return False
    up = 2.0 * np.eye(len(F)) + F
    try:
        # not |2 I + F|: where the two cancel, that is rounding, and no measure of it
        grown = np.abs(np.linalg.inv(up)) @ (2.0 * np.eye(len(F)) + np.abs(F))
    except np.linalg.LinAlgError:
        return True
    # the least condition number that any scaling of rows and columns gives (Bauer 1963): units of states say nothing,
    # not even where nothing comes back from one state to another and balancing has nothing to go by
    return not (np.isfinite(grown).all() and float(np.abs(np.linalg.eigvals(grown)).max()) < 1.0 / AT_NYQUIST)


def mapped(F: Array, b: Array, c: Array, d: float, step: float) -> tuple[Array, Array, Array, float]:
    """The continuous realization in v of L(z) = c ((z - 1) I - F)^-1 b + d. Needs a loop that is not `at_nyquist`."""
    up = 2.0 * np.eye(len(F)) + F
    A = np.linalg.solve(up, F)
    moved = np.linalg.solve(up, b)
    seen = np.linalg.solve(up.T, c)
    scale = 2.0 / step
    return np.asarray(scale * A), np.asarray(scale * moved), np.asarray(2.0 * seen), float(d - c @ moved)
