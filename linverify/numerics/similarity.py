"""Are two local models the same but for the coordinates of their states?

Two models of n and N states whose responses agree at more than n + N frequencies agree at all of them: what is compared
is never a canonical form, which would lose digits on the way.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from ..core.model import Array
from .frequency import blocks, poles, respond_within
from .pair import Pair

SOLVED = 1e-5  # residual of the coordinates' equations, as a share of their size: printed digits do not reach further
REGULAR = 1e10  # condition of a change of coordinates that is one
ALIKE = 1e-9  # of a channel's size: two responses that near are the same whatever their errors are


def same_behaviour(pair: Pair) -> bool:
    """True where inputs do the same to outputs in both models, to within errors and printed digits."""
    if pair.time_clash or not pair.reference.D.size:
        return False
    omega = frequencies(pair)
    delivered, printed = respond_within(pair.delivered, pair.rounding, omega)
    reference, error = respond_within(pair.reference, pair.reference.errors, omega)
    size = np.abs(reference).max(axis=0)
    gap = np.abs(delivered - reference)
    return bool((gap <= printed + error + ALIKE * size).all()) and bool(np.isfinite(printed + error).any())


def similar(pair: Pair) -> bool:
    """True where a regular change of coordinates turns the delivered states into those of the reference.

    It solves the equations to within what printed digits leave, and is unique for models that are controllable and
    observable. Ask `same_behaviour` first.
    """
    n = len(pair.reference.A)
    if len(pair.delivered.A) != n or n == 0:
        return False
    ours = blocks(pair.reference)
    theirs = blocks(pair.delivered)
    eye = np.eye(n)
    parts: tuple[tuple[Any, Any], ...] = (
        (np.kron(ours.A, eye) - np.kron(eye, theirs.A.T), np.zeros(n * n)),
        (np.kron(eye, theirs.B.T), ours.B.ravel()),
        (np.kron(ours.C, eye), theirs.C.ravel()),
    )
    scaled = [_leveled(matrix, right) for matrix, right in parts if len(right)]
    whole = np.asarray(np.vstack([matrix for matrix, _ in scaled]), dtype=np.float64)
    right = np.asarray(np.concatenate([side for _, side in scaled]), dtype=np.float64)
    solution = np.linalg.lstsq(whole, right, rcond=1e-12)[0]
    if np.linalg.norm(whole @ solution - right) > SOLVED * max(float(np.linalg.norm(right)), 1e-300):
        return False
    T = solution.reshape(n, n)
    return bool(np.linalg.cond(T) < REGULAR)


def _leveled(matrix: Array, right: Array) -> tuple[Array, Array]:
    size = float(np.abs(matrix).max(initial=0.0)) or 1.0
    return matrix / size, right / size


def frequencies(pair: Pair) -> Array:
    """More points than both orders together, about where the poles are; of discrete models inside (0, Nyquist)."""
    speeds = np.abs(np.concatenate([poles(pair.delivered), poles(pair.reference)]))
    speeds = speeds[(speeds > 1e-12 * speeds.max(initial=1.0)) & np.isfinite(speeds)]
    low, high = (0.01, 100.0) if not speeds.size else (0.03 * speeds.min(), 30.0 * speeds.max())
    count = 3 * (len(pair.delivered.A) + len(pair.reference.A)) + 5
    if pair.reference.step is not None:
        high = np.pi / pair.reference.step
        low = min(low, 1e-3 * high)
    grid = np.geomspace(low, high, count)
    # half a step off, so that no undamped pole is met by design; poles themselves carry the most
    return np.unique(np.concatenate([grid, 1.01 * speeds[speeds < high / 1.02]]))
