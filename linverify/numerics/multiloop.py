"""Margins of a loop of several channels: sensitivities, and how far all channels may be off at once.

The loop is closed by u = -y: S = (1 + L)^-1, T = L S. A disk margin alpha (skew 0) says that the loop stays stable when
every channel is multiplied by its own complex factor (1 + a d / 2) / (1 - a d / 2) with |d| <= 1 and a < alpha, all at
once: 1 / alpha is the supremum over frequency of the structured singular value of (S - T) / 2 for diagonal
perturbations (Seiler, Packard & Gahinet, IEEE Control Systems Magazine 40(5), 2020).
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from ..core.outcome import Outcome
from .mapped import mapped
from .peak_gain import Peak, peak
from .structured import Bounded, structured_peak
from .transfer import Transfer

ILL_POSED = 1e-12  # of the norm: the smallest singular value of 1 + D below which the loop has no solution


@dataclass(frozen=True, slots=True)
class Multiloop:
    """Margins of all channels of a loop at once.

    stable: no pole of the closed loop on or right of the axis (of a sampled loop: on or outside of the unit circle);
    unstable: those that are. Of an unstable loop the peaks are infinite and the disk margin is zero.
    sensitivity, complementary: largest singular value of S and T over frequency; disk: the disk margin of all channels
    with independent perturbations.
    """

    outcome: Outcome
    stable: bool
    unstable: tuple[complex, ...]
    sensitivity: Peak
    complementary: Peak
    disk: Bounded


_UNSTABLE = Peak(math.inf, math.nan, 0.0)
_NO_DISK = Bounded(0.0, 0.0, math.nan)


def multiloop(loop: Transfer) -> Multiloop:
    """Stability and margins at the break of a square `loop`, all channels at once. Raises ValueError where not square.

    Poles that the loop neither moves nor sees do not count. Singular 1 + D is an outcome.
    """
    if loop.D.shape[0] != loop.D.shape[1]:
        raise ValueError(f"a loop has as many outputs as inputs, got D of shape {loop.D.shape}")
    if not all(np.isfinite(each).all() for each in (loop.A, loop.B, loop.C, loop.D)):
        return _none(Outcome.NOT_FINITE)
    S = sensitivity(loop)
    if S is None:
        return _none(Outcome.ILL_POSED)
    unstable = unstable_poles(S)
    if unstable:
        return Multiloop(Outcome.DONE, False, unstable, _UNSTABLE, _UNSTABLE, _NO_DISK)
    eye = np.eye(len(loop.D), dtype=np.float64)
    T = replace(S, C=-S.C, D=np.asarray(eye - S.D, dtype=np.float64))
    difference = replace(S, D=np.asarray(S.D - 0.5 * eye, dtype=np.float64))
    return Multiloop(Outcome.DONE, True, (), peak(S), peak(T), disk(difference))


def both_sides(plant: Transfer, controller: Transfer) -> Bounded:
    """The disk margin with the loop broken at the plant's inputs and at its outputs at once, all channels independent.

    controller: from set point minus measurement to the plant's inputs. Raises ValueError where the two do not fit.
    Factors at `high`: of the plant's inputs, then of its outputs.
    """
    return multiloop(around(plant, controller)).disk


def around(plant: Transfer, controller: Transfer) -> Transfer:
    """The loop of both, broken at the plant's inputs and outputs: from (u, y) into plant and controller to -(u, y)."""
    (k, m), (r, q) = plant.D.shape, controller.D.shape
    if (r, q) != (m, k) or plant.step != controller.step:
        raise ValueError(f"plant of shape {plant.D.shape} and controller of shape {controller.D.shape} do not fit")
    n, p = len(plant.A), len(controller.A)
    A = np.block([[plant.A, np.zeros((n, p))], [np.zeros((p, n)), controller.A]])
    B = np.block([[plant.B, np.zeros((n, k))], [np.zeros((p, m)), controller.B]])
    C = np.block([[np.zeros((m, n)), controller.C], [-plant.C, np.zeros((k, p))]])
    D = np.block([[np.zeros((m, m)), controller.D], [-plant.D, np.zeros((k, k))]])
    # a dead time of the whole loop may be shared out between its two halves
    return Transfer(A, B, C, D, 0.5 * (plant.delay + controller.delay), plant.step)


def sensitivity(loop: Transfer) -> Transfer | None:
    """S = (1 + L)^-1 of a loop without dead time; None where 1 + D is singular."""
    whole = np.eye(len(loop.D)) + loop.D
    if len(whole) and np.linalg.norm(whole, -2) <= ILL_POSED * np.linalg.norm(whole, 2):
        return None
    E = np.asarray(np.linalg.inv(whole), dtype=np.float64)
    return Transfer(loop.A - loop.B @ E @ loop.C, loop.B @ E, -E @ loop.C, E, step=loop.step)


def unstable_poles(transfer: Transfer) -> tuple[complex, ...]:
    """Poles of `transfer` on or right of the imaginary axis, on or outside of the unit circle, to within rounding."""
    system = mapped(transfer)
    values = system.poles()
    step = transfer.step
    if system.nyquist:
        return (complex(-1.0),)
    bad = values[values.real >= -1e-12 * np.abs(values)]
    if step is not None:
        bad = (1.0 + 0.5 * step * bad) / (1.0 - 0.5 * step * bad)
    return tuple(complex(value) for value in sorted(bad, key=lambda value: (-value.real, -value.imag)))


def disk(difference: Transfer) -> Bounded:
    """The disk margin of all channels at once from (S - T) / 2 of a stable loop."""
    system = mapped(difference)
    found = structured_peak(system)
    low = 1.0 / found.high if found.high > 0 else math.inf
    high = 1.0 / found.low if found.low > 0 else math.inf
    factors = tuple(_factor(complex(delta)) for delta in found.deltas)
    return Bounded(low, high, system.told(found.omega), factors, Outcome.DONE if found.done else Outcome.BUDGET)


def _factor(delta: complex) -> complex:
    """(1 + delta / 2) / (1 - delta / 2), infinite at delta = 2."""
    below = 1.0 - 0.5 * delta
    return (1.0 + 0.5 * delta) / below if abs(below) > 1e-12 else complex(math.inf)


def _none(outcome: Outcome) -> Multiloop:
    return Multiloop(outcome, False, (), _UNSTABLE, _UNSTABLE, _NO_DISK)
