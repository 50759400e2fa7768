"""S, T and (S - T) / 2 of a loop of several channels that is closed by u = -y, in state space."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from .mapped import mapped
from .transfer import Transfer

ILL_POSED = 1e-12  # of the norm: the smallest singular value of 1 + D below which the loop has no solution


@dataclass(frozen=True, slots=True, eq=False)
class Sensitivities:
    """S = (1 + L)^-1, T = L S, difference = (S - T) / 2; poles right of the axis; whether some may be on it."""

    S: Transfer
    T: Transfer
    difference: Transfer
    unstable: tuple[complex, ...]
    edge: bool


def sensitivities(loop: Transfer) -> Sensitivities | None:
    """Of a square loop without dead time; None where 1 + D is singular."""
    S = sensitivity(loop)
    if S is None:
        return None
    eye = np.eye(len(loop.D), dtype=np.float64)
    T = replace(S, C=-S.C, D=np.asarray(eye - S.D, dtype=np.float64))
    difference = replace(S, D=np.asarray(S.D - 0.5 * eye, dtype=np.float64))
    return Sensitivities(S, T, difference, *unstable_poles(S))


def sensitivity(loop: Transfer) -> Transfer | None:
    """S = (1 + L)^-1 of a loop without dead time; None where 1 + D is singular."""
    whole = np.eye(len(loop.D)) + loop.D
    if len(whole) and np.linalg.norm(whole, -2) <= ILL_POSED * np.linalg.norm(whole, 2):
        return None
    E = np.asarray(np.linalg.inv(whole), dtype=np.float64)
    back = loop.B @ E @ loop.C
    change = None if loop.change is None else loop.change - back
    return Transfer(loop.A - back, loop.B @ E, -E @ loop.C, E, step=loop.step, change=change)


def unstable_poles(transfer: Transfer) -> tuple[tuple[complex, ...], bool]:
    """Poles right of the imaginary axis (outside of the unit circle), by falling real part in the mapped plane.

    Besides, whether others lie on it to within rounding. Poles that are not moved by the inputs or not seen at the
    outputs do not count.
    """
    system = mapped(transfer)
    if system.nyquist:
        return (), True
    values, on = system.edge()
    right = values[(values.real > 0.0) & ~on]
    right = right[np.lexsort((-right.imag, -right.real))]
    if transfer.step is not None:
        right = (1.0 + 0.5 * transfer.step * right) / (1.0 - 0.5 * transfer.step * right)
    return tuple(complex(value) for value in right), bool(on.any())
