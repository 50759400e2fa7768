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
from .delayed_loop import StandIn, beyond, exact_peaks, stand_in
from .mapped import mapped
from .peak_gain import Peak, peak
from .sensitivities import Sensitivities, sensitivities
from .structured import Bounded, structured_peak
from .transfer import Transfer

FED = 0.3  # feedthrough of a controller, once scaled, beside a plant without: the loop of both needs less than one


@dataclass(frozen=True, slots=True)
class Multiloop:
    """Margins of all channels of a loop at once.

    stable: no pole of the closed loop on or right of the axis (of a sampled loop: on or outside of the unit circle);
    unstable: those surely right of it (outside); the outcome says where others may lie on it to within rounding.
    Of an unstable loop the peaks are infinite and the disk margin is zero.
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

    Poles that the loop neither moves nor sees do not count. A dead time is common to all channels and needs |D| < 1;
    unstable poles are then those of its rational stand-in, as many as there are with it. Singular 1 + D is an outcome.
    """
    if loop.D.shape[0] != loop.D.shape[1]:
        raise ValueError(f"a loop has as many outputs as inputs, got D of shape {loop.D.shape}")
    if not all(np.isfinite(each).all() for each in (loop.A, loop.B, loop.C, loop.D)):
        return _none(Outcome.NOT_FINITE)
    return _delayed(loop) if loop.delay else _rational(loop)


def _rational(loop: Transfer) -> Multiloop:
    known = sensitivities(loop)
    if known is None:
        return _none(Outcome.ILL_POSED)
    if known.unstable or known.edge:
        return _unstable(known)
    return Multiloop(Outcome.DONE, True, (), peak(known.S), peak(known.T), disk(known.difference))


def _delayed(loop: Transfer) -> Multiloop:
    found = stand_in(loop)
    if isinstance(found, Outcome):
        return _none(found)
    if found.known.unstable or found.known.edge:
        return _unstable(found.known)
    return Multiloop(Outcome.DONE, True, (), *exact_peaks(found), _delayed_disk(found))


def _delayed_disk(found: StandIn) -> Bounded:
    near = disk(found.known.difference)
    if not near.low > 0.0:
        return Bounded(0.0, math.inf, near.frequency, done=False)
    # with any scaling |S'| and |T'| are at most 1 / low + 1/2, and S differs by |S'| |T'| times the stand-in's error
    size = 1.0 / near.low + 0.5
    share = found.off * size
    if share >= 0.5:
        return Bounded(0.0, math.inf, near.frequency, done=False)
    shift = size * share / (1.0 - share)
    low = 1.0 / max(1.0 / near.low + shift, beyond(found))
    if near.frequency > found.omega:  # what was found there is of the stand-in only
        return Bounded(low, 2.0, math.inf, done=near.done)
    below = 1.0 / near.high - shift
    return Bounded(low, 1.0 / below if below > 0 else math.inf, near.frequency, near.factors, near.done)


def both_sides(plant: Transfer, controller: Transfer) -> Bounded:
    """The disk margin with the loop broken at the plant's inputs and at its outputs at once, all channels independent.

    controller: from set point minus measurement to the plant's inputs. Raises ValueError where the two do not fit.
    Factors at `high`: of the plant's inputs, then of its outputs. Zero for an unstable loop.
    """
    return multiloop(around(plant, controller)).disk


def around(plant: Transfer, controller: Transfer) -> Transfer:
    """The loop of both, broken at the plant's inputs and outputs: from (u, y) into plant and controller to -(u, y).

    y is scaled so that neither half has more feedthrough than need be, which changes neither stability nor disk margin.
    """
    (k, m), (r, q) = plant.D.shape, controller.D.shape
    if (r, q) != (m, k) or plant.step != controller.step:
        raise ValueError(f"plant of shape {plant.D.shape} and controller of shape {controller.D.shape} do not fit")
    n, p = len(plant.A), len(controller.A)
    share = _share(float(np.linalg.norm(plant.D)), float(np.linalg.norm(controller.D)))
    A = np.block([[plant.A, np.zeros((n, p))], [np.zeros((p, n)), controller.A]])
    B = np.block([[plant.B, np.zeros((n, k))], [np.zeros((p, m)), share * controller.B]])
    C = np.block([[np.zeros((m, n)), controller.C], [-plant.C / share, np.zeros((k, p))]])
    D = np.block([[np.zeros((m, m)), share * controller.D], [-plant.D / share, np.zeros((k, k))]])
    # a dead time of the whole loop may be shared out between its two halves
    return Transfer(A, B, C, D, 0.5 * (plant.delay + controller.delay), plant.step)


def _share(plant: float, controller: float) -> float:
    if controller == 0.0:
        return plant / FED if plant > FED else 1.0
    return math.sqrt(plant / controller) if plant else min(1.0, FED / controller)


def disk(difference: Transfer) -> Bounded:
    """The disk margin of all channels at once from (S - T) / 2 of a stable loop without dead time."""
    system = mapped(difference)
    found = structured_peak(system)
    low = 1.0 / found.high if found.high > 0 else math.inf
    high = 1.0 / found.low if found.low > 0 else math.inf
    factors = tuple(_factor(complex(delta)) for delta in found.deltas)
    return Bounded(low, high, system.told(found.omega), factors, found.done)


def _factor(delta: complex) -> complex:
    """(1 + delta / 2) / (1 - delta / 2), infinite at delta = 2."""
    below = 1.0 - 0.5 * delta
    return (1.0 + 0.5 * delta) / below if abs(below) > 1e-12 else complex(math.inf)


def _unstable(known: Sensitivities) -> Multiloop:
    outcome = Outcome.DONE if known.unstable else Outcome.ON_THE_EDGE
    return replace(_none(outcome), unstable=known.unstable)


def _none(outcome: Outcome) -> Multiloop:
    return Multiloop(outcome, False, (), _UNSTABLE, _UNSTABLE, _NO_DISK)
