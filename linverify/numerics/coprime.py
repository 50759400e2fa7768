"""Normalized coprime factors: the graph of a transfer function as the range of a stable one.

P = N M^-1 = Mt^-1 Nt with all of them stable, N~ N + M~ M = 1 and Nt Nt~ + Mt Mt~ = 1, from one Riccati equation each
(Vidyasagar 1988; Meyer & Franklin 1987). Poles anywhere, also on the axis, become poles in the left half plane.
"""

from __future__ import annotations

import numpy as np
from scipy.linalg import solve_continuous_are, solve_continuous_lyapunov

from ..core.model import Array
from .mapped import Mapped

NEWTON = 2  # steps after the Riccati solver, which leaves errors with badly scaled models


def right_graph(system: Mapped) -> Mapped | None:
    """[N; M] of a system in continuous time without dead time; (k + m, m). None where no Riccati solution was found.

    The system must have no parts that are neither moved nor seen unless these are stable.
    """
    A, B, C, D = system.A, system.B, system.C, system.D
    m = D.shape[1]
    weight = np.eye(m) + D.T @ D
    root = _inverse_root(weight)
    feedback = _feedback(A, B, C, D, weight)
    if feedback is None:
        return None
    outputs = np.vstack([C + D @ feedback, feedback])
    return Mapped(A + B @ feedback, B @ root, outputs, np.vstack([D, np.eye(m)]) @ root, step=system.step)


def left_graph(system: Mapped) -> Mapped | None:
    """[Nt Mt], (k, m + k), as `right_graph`."""
    dual = right_graph(Mapped(system.A.T, system.C.T, system.B.T, system.D.T, step=system.step))
    return None if dual is None else Mapped(dual.A.T, dual.C.T, dual.B.T, dual.D.T, step=system.step)


def _feedback(A: Array, B: Array, C: Array, D: Array, weight: Array) -> Array | None:
    n = len(A)
    if n == 0:
        return np.zeros((B.shape[1], 0))
    gain = np.linalg.solve(weight, np.hstack([D.T @ C, B.T]))
    ahead, moved = A - B @ gain[:, :n], gain[:, n:]
    cost = C.T @ np.linalg.solve(np.eye(len(C)) + D @ D.T, C)
    try:
        X = np.asarray(solve_continuous_are(ahead, B, cost, weight), dtype=np.float64)
        for _ in range(NEWTON):
            X = _newton(ahead, B @ moved, cost, X)
    except np.linalg.LinAlgError:
        return None
    feedback = np.asarray(-gain[:, :n] - moved @ X, dtype=np.float64)
    stable = np.linalg.eigvals(A + B @ feedback).real.max() < 0 and np.isfinite(feedback).all()
    return feedback if stable else None


def _newton(A: Array, moved: Array, cost: Array, X: Array) -> Array:
    """One step of Kleinman 1968: the cost of the feedback that belongs to X."""
    closed = A - moved @ X
    return np.asarray(solve_continuous_lyapunov(closed.T, -(cost + X @ moved @ X)), dtype=np.float64)


def _inverse_root(weight: Array) -> Array:
    values, vectors = np.linalg.eigh(weight)
    return np.asarray((vectors / np.sqrt(values)) @ vectors.T, dtype=np.float64)
