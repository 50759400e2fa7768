"""How fast the modes of a closed local model grow or decay, sampled controllers included."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from ..core.model import LocalModel
from .interval_maps import interval_map

Complex = NDArray[np.complex128]
TINY = 1e-300


def pace(model: LocalModel) -> tuple[Complex, Complex]:
    """Poles (n,) in s, per time unit, and their states (n, n), a column each; of jumps: just before those at time zero.

    A pole in z at the origin comes back as far left as numbers go.
    """
    period = model.jumps[0].period if model.jumps else model.step
    if period is None:
        values, vectors = np.linalg.eig(model.A)
        return np.asarray(values, dtype=np.complex128), np.asarray(vectors, dtype=np.complex128)
    over = interval_map(model, period, "held", 1.0).state if model.jumps else model.A
    values, vectors = np.linalg.eig(over)
    values = np.where(np.abs(values) > TINY, values, TINY).astype(np.complex128)
    return np.log(values) / period, np.asarray(vectors, dtype=np.complex128)


def clock(model: LocalModel) -> float | None:
    """After how much time what a model does at instants repeats; None for a continuous one."""
    return model.jumps[0].period if model.jumps else model.step
