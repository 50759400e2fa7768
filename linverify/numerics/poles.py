"""Poles of a local model with natural frequency, damping and time constant, in an order that does not wander."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ..core.model import Array

AT_ZERO = 1e-9  # of the largest natural frequency: a pole this small is printed as it is, yet counts as at the origin


@dataclass(frozen=True, slots=True)
class Pole:
    """One pole. value: per time unit (of a difference equation: log(z) / step); z: the discrete one, else NaN.

    natural: |value| in rad per time unit; hertz: the same in Hz, given the seconds of a time unit; damping: -Re /
    |value|, NaN at the origin; time_constant: -1 / Re in time units, infinite on the imaginary axis, negative when
    unstable.
    """

    value: complex
    natural: float
    hertz: float
    damping: float
    time_constant: float
    z: complex = complex(math.nan, math.nan)

    @property
    def stable(self) -> bool:
        """True left of the imaginary axis."""
        return self.value.real < 0


def eigenvalues(
    A: Array, scale: Array | None = None, *, step: float | None = None, seconds: float = 1.0
) -> tuple[Pole, ...]:
    """Poles of x' = A x, or of x[k+1] = A x where `step` (time units) is given.

    A (n, n); scale (n,): nominal sizes of the states, by which A is scaled before LAPACK balances it further, so that
    units do not cost digits; seconds: of one time unit. Sorted by natural frequency, then real part; a conjugate pair
    stands together, positive imaginary part first. Raises ValueError for a matrix that is not square or not finite.
    """
    matrix = np.asarray(A, dtype=np.float64)
    if matrix.ndim != 2 or matrix.shape[0] != matrix.shape[1] or not np.isfinite(matrix).all():
        raise ValueError(f"A must be square and finite, got shape {matrix.shape}")
    if matrix.size == 0:
        return ()
    # powers of two, so that scaling rounds nothing
    sizes = np.ones(len(matrix)) if scale is None else 2.0 ** np.round(np.log2(np.asarray(scale, dtype=np.float64)))
    values = np.linalg.eigvals(matrix * sizes / sizes[:, np.newaxis])  # LAPACK permutes and balances
    poles = [_pole(complex(value), step, seconds) for value in values]
    return tuple(sorted(poles, key=_order))


def _pole(value: complex, step: float | None, seconds: float) -> Pole:
    z = complex(math.nan, math.nan)
    if step is not None:
        z = value
        value = (
            complex(-math.inf, 0.0) if z == 0 else complex(math.log(abs(z)) / step, math.atan2(z.imag, z.real) / step)
        )
    natural = abs(value)
    damping = math.nan if natural == 0 else 1.0 if math.isinf(natural) else -value.real / natural
    time_constant = math.inf if value.real == 0 else -1.0 / value.real
    return Pole(value, natural, natural / (2.0 * math.pi * seconds), damping, time_constant, z)


def _order(pole: Pole) -> tuple[float, float, float]:
    # nine digits: the last bits of a pair's parts, or of a repeated pole, must not decide the order
    return _rounded(pole.natural), _rounded(pole.value.real), -pole.value.imag


def _rounded(value: float) -> float:
    return value if value == 0 or math.isinf(value) else float(f"{value:.9g}")
