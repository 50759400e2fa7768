"""Linear models without a plant, and pairs of them, for the comparisons of two models."""

from __future__ import annotations

import numpy as np

from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.signals import Signals
from linverify.numerics.pair import Pair, printed_to


def linear(A, B, C, D, step: float | None = None, error: float = 0.0) -> LocalModel:
    """States x0.., inputs u0.., outputs y0.., without units, about the origin; every entry known to `error`."""
    A, B, C, D = (np.atleast_2d(np.array(block, dtype=float)) for block in (A, B, C, D))
    n, m, k = len(A), B.shape[1], len(C)
    if A.size == 0:
        n, A, B, C = 0, A.reshape(0, 0), B.reshape(0, D.shape[1]), C.reshape(len(D), 0)
        m, k = D.shape[1], len(D)
    names = [Signals(tuple(f"{p}{i}" for i in range(c)), ("1",) * c) for p, c in (("x", n), ("u", m), ("y", k))]
    at = OperatingPoint(np.zeros(n), np.zeros(m), np.zeros(k), np.zeros(n), 0.0, *names)
    errors = {name: np.full(block.shape, error) for name, block in zip("ABCD", (A, B, C, D), strict=True)}
    return LocalModel(A, B, C, D, *names, at, step, errors=errors)


def pair_of(delivered: LocalModel, reference: LocalModel, digits: int = 17) -> Pair:
    rounding = {name: printed_to(getattr(delivered, name), digits) for name in "ABCD"}
    k, m = reference.D.shape
    return Pair(delivered, reference, rounding, np.ones(len(reference.A)), np.ones(m), np.ones(k))


def random_model(generator, n: int, m: int, k: int, *, damping: float, change: float = 0.0) -> LocalModel:
    """Stable modes over four decades in random coordinates; the same generator with `change` gives a neighbour."""
    A, i = np.zeros((n, n)), 0
    while i < n:
        if i + 1 < n and generator.random() < 0.7:
            w, z = 10 ** generator.uniform(-2, 2), 10 ** generator.uniform(np.log10(damping), 0)
            w *= 1.0 + change * z
            A[i : i + 2, i : i + 2] = [[-z * w, w], [-w, -z * w]]
            i += 2
        else:
            A[i, i] = -(10 ** generator.uniform(-2, 2)) * (1.0 + change)
            i += 1
    T = generator.normal(size=(n, n))
    B, C = generator.normal(size=(n, m)), generator.normal(size=(k, n))
    D = generator.normal(size=(k, m)) * (generator.random((k, m)) < 0.3)
    return linear(np.linalg.solve(T, A @ T), B * (1.0 + 0.3 * change), C, D)
