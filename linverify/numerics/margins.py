"""Stability margins of one channel of a loop: the public entry.

Stability comes first: an unstable loop has no margins. Every figure is met at a frequency, where the response is
evaluated anew, and carries an estimate of its error.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from ..core.model import Array
from ..core.outcome import Outcome
from . import crossings as cross
from . import dead_time
from .bilinear import at_nyquist, change
from .crossings import Met
from .curve import HUGE, Complex, Curve, curve
from .encirclements import surely_stable
from .level_sets import Kind, Peak, peak
from .loop_stability import Poles, closed, ill_posed, of_matrix
from .transfer import Transfer

KINDS: tuple[Kind, ...] = ("S", "T", "disk")
ROUNDS = 6  # of walking further with a dead time
NOTHING = 1e-12  # |L| that is smaller, and not known to a quarter of itself, has no phase
MOST = 1e4  # gain factor that a disk margin below 2 promises at most: it is known to 1e-8
NEGATIVE = 1e-7  # |Im L| of |L| where L counts as real; nearer than this a crossing is polished


@dataclass(frozen=True, slots=True)
class Found:
    """frequency: where the figure is met, rad per time unit, 0 and infinity allowed, NaN for none; error: absolute."""

    value: float
    frequency: float = math.nan
    error: float = 0.0


@dataclass(frozen=True, slots=True)
class Crossing:
    """Where |L| = 1 or L is real and negative.

    frequency: rad per time unit; at: L there; margin: rad in (-pi, pi] that phase may still lag (negative: lead) where
    |L| = 1, else the factor that makes L = -1; error: of margin, absolute; shift: of frequency, absolute.
    """

    frequency: float
    at: complex
    margin: float
    error: float
    shift: float


NOT_FOUND = Found(math.nan, math.nan, math.nan)


@dataclass(frozen=True, slots=True, eq=False)
class Margins:
    """What a loop can bear. Figures of a loop that is not surely stable are NaN.

    stable: all closed-loop poles are; poles: those, in s per time unit, of sampled loops in z; unstable: the ones right
    of the axis (outside the circle); opposite_stable: the loop closed with the opposite sign would be stable.
    gain_up >= 1 (infinite for none), gain_down <= 1 (0 for none): the nearest factors that make the loop unstable, at
    frequencies 0 and infinity (half the sample rate) too; phase: smallest |angle| in rad at any gain crossing, infinite
    for none; delay: dead time beyond what is declared, infinite for none; disk: alpha of skew 0; sensitivity,
    complementary: the largest |S| and |T|. A gain that touches one without crossing it counts as a gain crossing. Of a
    sampled loop `delay` is left NaN: see `delay_margin.sampled_delay_margin`.
    """

    outcome: Outcome
    why: str = ""
    stable: bool = False
    poles: Complex = field(default_factory=lambda: np.zeros(0, dtype=np.complex128))
    unstable: tuple[complex, ...] = ()
    opposite_stable: bool = False
    gain_up: Found = NOT_FOUND
    gain_down: Found = NOT_FOUND
    phase: Found = NOT_FOUND
    delay: Found = NOT_FOUND
    disk: Found = NOT_FOUND
    sensitivity: Found = NOT_FOUND
    complementary: Found = NOT_FOUND
    crossovers: tuple[Crossing, ...] = ()
    phase_crossings: tuple[Crossing, ...] = ()


def guarantee(alpha: float) -> tuple[float, float]:
    """What a disk margin of skew 0 promises: gain factor up (down: its inverse), and phase in rad, both at once.

    Of a margin just below 2, as every loop has that behaves like an integrator, no more is promised than is known.
    """
    up = math.inf if alpha >= 2.0 else min((2.0 + alpha) / (2.0 - alpha), MOST)
    return up, 2.0 * math.atan(0.5 * alpha)


def margins(loop: Transfer) -> Margins:
    """Margins of a loop with one channel, closed by u = -y. Raises ValueError for several channels or NaN.

    With a dead time `poles` are those of the infinitely many that a rational stand-in of the dead time leads to.
    """
    if loop.step is not None and at_nyquist(change(loop)):
        return Margins(Outcome.UNVERIFIED, "a pole of the loop lies at half the sample rate")
    L = curve(loop)
    if ill_posed(L.dF):
        return Margins(Outcome.ILL_POSED)
    if L.delay:
        return _delayed(L)
    poles = closed(L)
    opposite = not ill_posed(-L.dF) and closed(L, -1.0).stable
    if len(poles.unstable) or (len(poles.undecided) and not surely_stable(L)):
        return _unstable(poles, opposite)
    opened = of_matrix(L.A, None).values
    gains, phases = cross.gain_candidates(L), cross.phase_candidates(L)
    nodes = cross.walk(np.concatenate([opened, _in_v(L, poles)]), np.concatenate([gains, phases]))
    peaks = {kind: peak(L, kind, nodes) for kind in KINDS}
    return _told(L, poles.values, opposite, _gain_crossings(L, nodes), _phase_crossings(L, nodes), peaks)


def _unstable(poles: Poles, opposite: bool) -> Margins:
    named = tuple(complex(each) for each in poles.values[poles.unstable])
    outcome = Outcome.DONE if named else Outcome.ON_THE_EDGE
    edge = ", ".join(f"{each:.6g}" for each in poles.values[poles.undecided])
    return Margins(outcome, "" if named else f"at {edge}", False, poles.values, named, opposite)


def _delayed(L: Curve) -> Margins:
    if abs(L.d) >= 1.0 - dead_time.NEUTRAL:
        return Margins(Outcome.DELAY_NOT_DECIDED)
    opened, free = of_matrix(L.A, None).values, closed(L)
    nodes = cross.walk(np.concatenate([opened, free.values]), cross.gain_candidates(L))
    met = _gain_crossings(L, nodes)
    if len(free.undecided) and (len(free.unstable) or not surely_stable(replace(L, delay=0.0))):
        return Margins(Outcome.ON_THE_EDGE, "already without its dead time")
    unstable, on_edge = dead_time.count(L, met, free)
    further = dead_time.near_axis(L, opened, met, nodes) if unstable > 0 else np.zeros(0, complex)
    poles = dead_time.roots(L, further)
    against = closed(L, -1.0)
    opposite = not len(against.undecided) and dead_time.count(L, met, against, -1.0) == (0, False)
    if on_edge:
        return Margins(Outcome.ON_THE_EDGE, "at a gain crossing whose phase is just used up", False, poles)
    if unstable < 0:
        return Margins(Outcome.UNVERIFIED, "roots could not be counted", False, poles)
    if unstable:
        right = _right(poles, unstable)
        why = "" if len(right) == unstable else f"{unstable} roots lie right of the axis, not all of which were found"
        return Margins(Outcome.DONE, why, False, poles, right, opposite)
    return _followed(L, nodes, poles, opposite, met)


def _right(poles: Complex, number: int) -> tuple[complex, ...]:
    right = sorted((complex(each) for each in poles if each.real > 0.0), key=lambda each: (-each.real, -each.imag))
    return tuple(right[:number]) or (complex(math.nan, math.nan),)


def _followed(L: Curve, nodes: Array, poles: Complex, opposite: bool, met: list[Met]) -> Margins:
    """Margins of a stable loop with a dead time: walked as far as its gain can matter."""
    last = max([each.v for each in met], default=0.0)
    beside = np.abs(poles.imag[poles.imag > 0.0])
    nodes = np.unique(np.concatenate([nodes, beside, beside * (1.0 + cross.BESIDE), beside * (1.0 - cross.BESIDE)]))
    end, limit = last + 2.0 * math.pi / L.delay, dead_time.reach(L)
    for _ in range(ROUNDS):
        walked = dead_time.dense(nodes, L.delay, min(end, limit))
        phased = _phase_crossings(L, walked)
        peaks = {kind: peak(L, kind, walked) for kind in KINDS}
        needed = max(last, _needed(L, phased, peaks))
        if needed <= end:
            return _told(L, poles, opposite, met, phased, peaks)
        end = 1.01 * needed
        if end > limit:
            break
    return Margins(
        Outcome.UNVERIFIED, f"the gain falls too slowly beyond {L.told(last):.6g}", True, poles, (), opposite
    )


def _needed(L: Curve, phased: Sequence[Crossing], peaks: dict[Kind, Peak]) -> float:
    """The frequency beyond which |L| is too small to change a figure."""
    sizes = [1.0 / each.margin for each in phased if each.margin >= 1.0]
    S, T, disk = (peaks[kind].value for kind in KINDS)
    levels = [max(sizes, default=0.0), 1.0 - 1.0 / S, T / (1.0 + T), (2.0 * disk - 1.0) / (2.0 * disk + 1.0)]
    level = max(min(levels), abs(L.d)) * (1.0 + 1e-6)
    return float(cross.gain_candidates(L, level).max(initial=0.0)) if level > 0.0 else math.inf


def _told(
    L: Curve, poles: Complex, opposite: bool, met: list[Met], phased: tuple[Crossing, ...], peaks: dict[Kind, Peak]
) -> Margins:
    crossovers = tuple(_crossover(L, each) for each in met)
    up, down = _gains(phased)
    S, T, disk = (Found(peaks[kind].value, L.told(peaks[kind].v), peaks[kind].error) for kind in KINDS)
    alpha = Found(1.0 / disk.value, disk.frequency, disk.error / disk.value**2)
    phase, delay = _phase(crossovers), _delay(L, crossovers)
    return Margins(Outcome.DONE, "", True, poles, (), opposite, up, down, phase, delay, alpha, S, T, crossovers, phased)


def _in_v(L: Curve, poles: Poles) -> Complex:
    """Closed-loop poles in the realization's s."""
    if L.step is None:
        return poles.values
    z = poles.values[np.abs(poles.values + 1.0) > 0.0]
    return np.asarray(2.0 / L.step * (z - 1.0) / (z + 1.0))


def _gain_crossings(L: Curve, nodes: Array) -> list[Met]:
    found, touches = cross.crossings(L, cross.size_of, nodes)
    met = [cross.polished(L, v, cross.size_of, cross.size_slope) for v in found]
    return sorted(met + [cross.taken(L, v) for v in touches], key=lambda each: each.v)


def _crossover(L: Curve, met: Met) -> Crossing:
    margin = math.atan2(-met.at.imag, -met.at.real)
    turn = abs((met.slope / met.at).imag)
    error = met.error / abs(met.at) + turn * met.shift
    return Crossing(L.told(met.v), met.at, margin, error, L.pace(met.v) * met.shift)


def _phase_crossings(L: Curve, nodes: Array) -> tuple[Crossing, ...]:
    found, touches = cross.crossings(L, cross.turn_of, nodes)
    met = [cross.polished(L, v, cross.turn_of, cross.turn_slope) for v in found] + [cross.taken(L, v) for v in touches]
    met = [each for each in met if each.at.real < 0.0 and abs(each.at.imag) <= NEGATIVE * abs(each.at) + each.error]
    crossings = [_phase_crossing(L, each) for each in sorted(met, key=lambda each: each.v)]
    crossings = [each for each in crossings if abs(each.at) >= NOTHING or each.error < 0.25 * each.margin]
    ends = L.exact(np.array([0.0, np.inf]))
    for place, frequency in enumerate((0.0, L.told(math.inf))):
        at = complex(ends.at[place])
        if L.delay and frequency > 0.0:
            at = complex(-abs(at))  # at infinite frequency the dead time turns L through every phase
        if at.real < -ends.error[place] and abs(at) < HUGE:
            error = ends.error[place] / abs(at) ** 2
            crossings.append(Crossing(frequency, at, -1.0 / at.real, float(error), 0.0))
    return tuple(sorted(crossings, key=lambda each: each.frequency))


def _phase_crossing(L: Curve, met: Met) -> Crossing:
    size = abs(met.at)
    error = (met.error + abs((met.slope / met.at).real) * size * met.shift) / size**2
    return Crossing(L.told(met.v), met.at, 1.0 / size, error, L.pace(met.v) * met.shift)


def _gains(crossings: Sequence[Crossing]) -> tuple[Found, Found]:
    ups = [each for each in crossings if each.margin >= 1.0]
    downs = [each for each in crossings if each.margin < 1.0]
    up = min(ups, key=lambda each: each.margin, default=None)
    down = max(downs, key=lambda each: each.margin, default=None)
    return (
        Found(math.inf) if up is None else Found(up.margin, up.frequency, up.error),
        Found(0.0) if down is None else Found(down.margin, down.frequency, down.error),
    )


def _phase(crossings: Sequence[Crossing]) -> Found:
    least = min(crossings, key=lambda each: abs(each.margin), default=None)
    return Found(math.inf) if least is None else Found(abs(least.margin), least.frequency, least.error)


def _delay(L: Curve, crossings: Sequence[Crossing]) -> Found:
    if L.step is not None:
        return NOT_FOUND
    if abs(L.d) >= 1.0:
        return Found(0.0, math.inf)  # at high enough frequency any dead time turns L through -1
    delays = []
    for each in crossings:
        lag = each.margin % (2.0 * math.pi)
        value = lag / each.frequency
        delays.append(Found(value, each.frequency, (each.error + value * each.shift) / each.frequency))
    return min(delays, key=lambda each: each.value, default=Found(math.inf))
