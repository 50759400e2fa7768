"""The structured singular value of matrices for diagonal complex perturbations, between two bounds.

From above: the smallest largest singular value of D M D^-1 over positive diagonal D, which is the structured singular
value itself for up to three channels (Packard & Doyle, Automatica 29(1), 1993). In y = log D the sum of
-log(g - s_i^2) over the singular values is convex, and its minimum for falling g leads to the best D by Newton steps.
From below: the spectral radius of M Q over diagonal unitary Q, raised by turning each phase to where the eigenvalue
gains most. Everything works on a stack of matrices at once.
"""

from __future__ import annotations

import numpy as np

from ..core.model import Array
from .mapped import Complex

FIRST, FALL, LAST = 1.0, 0.3, 3e-7  # of g over the largest s^2, relative
ROUNDS = 60  # of Newton steps and smaller g; about twelve are usual
NEWTON = 3  # steps a round
STEP = 2.0  # largest change of log D in a step
RANGE = 9.0  # largest |log D|: scalings beyond gain nothing but rounding errors
EVEN = 1e-6  # unevenness of the vectors of s_1 that counts as none
SWEEPS = 6  # of the first guess
TURNS = 30  # of the phases
TURNED = 1e-7  # rad: turns that are smaller change nothing, since the radius is flat at its maximum
STARTS = 4  # besides the one from singular vectors


def from_above(M: Complex) -> tuple[Array, Array]:
    """Upper bounds (F,) of the structured singular values of M (F, m, m), and the D (F, m) that give them, first 1."""
    F, m, _ = M.shape
    best, at = _sizes(M), np.zeros((F, m))
    if m == 1:
        return best, np.ones((F, m))
    y = _level(M)
    value, uneven = _top(scaled(M, np.exp(y)))
    at = np.where((value < best)[:, np.newaxis], y, at)
    best = np.minimum(value, best)
    margin = np.full(F, FIRST)
    for _ in range(ROUNDS):
        going = np.flatnonzero((uneven > EVEN) & (margin > LAST))
        if len(going) == 0:
            break
        before = best[going]
        best[going], at[going], uneven[going] = _lowered(M[going], before, at[going], uneven[going], margin[going])
        # steps are as short as the margin is small: it falls only where there is little left to gain
        slow = best[going] > before * (1.0 - 0.2 * margin[going])
        margin[going] = np.where(slow, FALL * margin[going], margin[going])
    return best, np.exp(at - at[:, :1])


def _lowered(M: Complex, best: Array, at: Array, uneven: Array, margin: Array) -> tuple[Array, Array, Array]:
    """Bounds, log D and unevenness after Newton steps of the barrier at `margin` above the bounds."""
    y = at
    g = np.maximum(best**2 * (1.0 + margin), 1e-300)
    for _ in range(NEWTON):
        y = _inside(M, y, _newton(scaled(M, np.exp(y)), g), g)
        now, uneven_now = _top(scaled(M, np.exp(y)))
        better = now < best
        best, uneven = np.where(better, now, best), np.where(better, uneven_now, uneven)
        at = np.where(better[:, np.newaxis], y, at)
    return best, at, uneven


def _top(N: Complex) -> tuple[Array, Array]:
    """Largest singular value (F,), and how much its two vectors differ in the sizes of their entries.

    Where they do not, the slope of log s_1 over log D is zero, and the bound is the structured singular value.
    """
    left, values, right = np.linalg.svd(N)
    return values[:, 0], np.abs(np.abs(left[:, :, 0]) ** 2 - np.abs(right[:, 0, :]) ** 2).max(axis=1)


def from_below(M: Complex, D: Array) -> tuple[Array, Array]:
    """Lower bounds (F,) for M (F, m, m), and the phases (F, m) of the Q that give them; D (F, m) as found from above.

    There is a perturbation of size 1 / bound that makes 1 - M Q' singular: Q' = Q / (the eigenvalue of M Q).
    """
    F, m, _ = M.shape
    left, _, right = np.linalg.svd(scaled(M, D))
    first = np.angle(np.conj(right[:, 0, :])) - np.angle(left[:, :, 0])
    others = np.random.default_rng(0).uniform(-np.pi, np.pi, (STARTS, m))
    best, at = np.full(F, -1.0), np.zeros((F, m))
    for start in (first, *(np.broadcast_to(each, (F, m)) for each in others)):
        value, phases = turned(M, start)
        better = value > best
        best = np.where(better, value, best)
        at = np.where(better[:, np.newaxis], phases, at)
    return best, at


def _level(M: Complex) -> Array:
    """y (F, m) at which every row of D M D^-1 is about as large as the column of its number (Osborne 1960)."""
    F, m, _ = M.shape
    y = np.zeros((F, m))
    off = np.abs(M) ** 2 * (1.0 - np.eye(m))
    for _ in range(SWEEPS):
        for i in range(m):
            share = np.exp(2.0 * (y - y[:, i : i + 1]))
            row = np.sum(off[:, i, :] / share, axis=1)
            column = np.sum(off[:, :, i] * share, axis=1)
            known = (row > 0) & (column > 0)
            ratio = np.divide(column, row, out=np.ones(F), where=known)
            y[:, i] = np.clip(y[:, i] + 0.25 * np.log(ratio), -RANGE, RANGE)
    return y


def turned(M: Complex, phases: Array) -> tuple[Array, Array]:
    """The spectral radius of M Q (F,) and the phases (F, m) of Q, raised from those given."""
    F = len(M)
    best, at = np.full(F, -1.0), np.array(phases)
    turn, pace = np.zeros(at.shape), np.ones(F)
    going = np.arange(F)
    for _ in range(TURNS):
        tried = at[going] + pace[going, np.newaxis] * turn[going]
        value, wanted = _eigen(M[going], tried)
        better = value > best[going]
        ahead = going[better]
        best[ahead], at[ahead], turn[ahead] = value[better], tried[better], wanted[better]
        # a turn that lost is taken back and tried shorter
        pace[going] = np.where(better, np.minimum(1.0, 2.0 * pace[going]), 0.3 * pace[going])
        going = going[pace[going] * np.abs(turn[going]).max(axis=1) > TURNED]
        if len(going) == 0:
            break
    return best, at


def scaled(M: Complex, D: Array) -> Complex:
    """D M D^-1 for diagonals D (F, m)."""
    return M * (D[:, :, np.newaxis] / D[:, np.newaxis, :])


def _eigen(M: Complex, phases: Array) -> tuple[Array, Array]:
    """Spectral radius of M Q, and how far each phase is to be turned so that the eigenvalue grows."""
    values, right = np.linalg.eig(M * np.exp(1j * phases)[:, np.newaxis, :])
    largest = np.argmax(np.abs(values), axis=1)
    rows = np.arange(len(M))
    left = np.linalg.pinv(right)
    # d log(eigenvalue) = j sum(share_i d phase_i), so that at a maximum every share is real and positive
    share = left[rows, largest, :] * right[rows, :, largest]
    return np.abs(values[rows, largest]), -np.angle(share)


def _sizes(M: Complex) -> Array:
    return np.asarray(np.linalg.svd(M, compute_uv=False)[:, 0])


def _barrier(N: Complex, g: Array) -> Array:
    """-sum log(1 - s^2 / g), infinite where a singular value of N has reached the root of g."""
    room = 1.0 - np.linalg.svd(N, compute_uv=False) ** 2 / g[:, np.newaxis]
    return np.asarray(np.where(room.min(axis=1) > 0, -np.log(np.maximum(room, 1e-300)).sum(axis=1), np.inf))


def _newton(N: Complex, g: Array) -> Array:
    """The Newton step of the barrier in y = log D for scaled N; (F, m), bounded."""
    m = N.shape[1]
    N = N / np.sqrt(g)[:, np.newaxis, np.newaxis]
    H = np.conj(np.swapaxes(N, 1, 2))
    P, Q = np.linalg.inv(np.eye(m) - H @ N), np.linalg.inv(np.eye(m) - N @ H)
    ahead, behind = np.einsum("fii->fi", Q).real, np.einsum("fii->fi", P).real
    slope = 2.0 * (ahead - behind)
    PH, QN, cross = P @ H, Q @ N, np.swapaxes(H @ N @ P, 1, 2)
    back = np.swapaxes(N @ H @ Q, 1, 2)
    bend = 4.0 * ((Q * back).real + (P * cross).real - np.abs(QN) ** 2 - np.abs(PH) ** 2)
    # y is free but for a common number; a little is added where the barrier is flat
    bend = 0.5 * (bend + np.swapaxes(bend, 1, 2)) + np.ones((m, m))
    size = np.abs(bend).max(axis=(1, 2))[:, np.newaxis, np.newaxis]
    step = -np.linalg.solve(bend + 1e-9 * size * np.eye(m), slope[:, :, np.newaxis])[:, :, 0]
    longest = np.abs(step).max(axis=1, keepdims=True)
    return np.asarray(step * np.minimum(1.0, STEP / np.maximum(longest, 1e-300)))


def _inside(M: Complex, y: Array, step: Array, g: Array) -> Array:
    """y moved along `step` by the best of some factors, so that the barrier falls."""
    best, at = _barrier(scaled(M, np.exp(y)), g), y
    for factor in (1.0, 0.5, 0.2, 0.05):
        moved = np.clip(y + factor * step, -RANGE, RANGE)
        value = _barrier(scaled(M, np.exp(moved)), g)
        better = value < best
        best = np.where(better, value, best)
        at = np.where(better[:, np.newaxis], moved, at)
    return at
