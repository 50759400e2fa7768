"""A loop of several channels with one dead time: stability and margins from a rational stand-in, with its error.

A chain of all-passes stands for the dead time. Up to a stated frequency it is right to a known share `off`; beyond, the
loop's largest singular value stays below `rest` < 1, with the dead time and with the chain alike. Then both loops have
the same number of unstable poles: on the way from one to the other, L + t (L' - L), no pole meets the axis, because
|L' - L| |S'| = off |T'| < 1 below that frequency and |L| < 1 beyond. Likewise S differs by off |S'| |T'| below, and
beyond |S| <= 1 / (1 - rest), |T| <= rest / (1 - rest), |S - T| / 2 <= (1 + rest) / (2 (1 - rest)). What these bounds
leave open is told as error; the limit at infinite frequency counts.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from ..core.model import Array
from ..core.outcome import Outcome
from .allpass import delayed_by, sections, share_off
from .mapped import Complex, Mapped, mapped
from .peak_gain import Peak, crossings, gains, peak
from .sensitivities import Sensitivities, sensitivities
from .transfer import Transfer

RESTS = (0.5, 0.2, 0.05, 0.01)  # of the way from |D| to one, tried in turn until the bounds beyond leave nothing open
STATES = 160  # most of a stand-in
OUTSIDE = 1e-6  # relative: frequencies beyond the last crossing of `rest`
NEUTRAL = 1e-6  # |D| nearer to one than this: poles come from infinity
ANGLES = 721  # of the dead time's phase at infinite frequency


@dataclass(frozen=True, slots=True, eq=False)
class StandIn:
    """A rational loop in place of one with a dead time.

    loop: rational; exact: with its dead time; omega: up to where the first stands for the second, rad per time unit;
    off, rest: as above; known: the sensitivities of `loop`.
    """

    loop: Transfer
    exact: Transfer
    omega: float
    off: float
    rest: float
    known: Sensitivities

    @property
    def turn(self) -> float:
        """Bound of |S - S'| over |S'| below `omega`: infinite where stability is not carried over."""
        share = self.off * (size(self.known.T) + 1.0)
        return share / (1.0 - share) if share < 0.5 else math.inf


def size(transfer: Transfer) -> float:
    """The peak gain and its error, together."""
    found = peak(transfer)
    return found.value + found.error


def stand_in(loop: Transfer) -> StandIn | Outcome:
    """The stand-in for a square loop with a dead time, or why there is none."""
    system = mapped(replace(loop, delay=0.0))
    D = float(np.linalg.norm(loop.D, 2))
    if D >= 1.0 - NEUTRAL:
        return Outcome.DELAY_NOT_DECIDED
    best: StandIn | Outcome = Outcome.UNVERIFIED
    for share in RESTS:
        found = _with_rest(loop, system, D + share * (1.0 - D))
        if isinstance(found, Outcome):
            return found if isinstance(best, Outcome) else best
        if math.isinf(found.turn):
            continue
        best = found
        if found.known.unstable or found.known.edge or found.rest <= _wanted(found):
            break
    return best


def _with_rest(loop: Transfer, system: Mapped, rest: float) -> StandIn | Outcome:
    last = crossings(system, rest)
    omega = (1.0 + OUTSIDE) * float(last.max(initial=0.0))
    # a loop that is small everywhere still needs a stand-in where its own poles are
    omega = omega if omega > 0 else float(np.abs(system.poles()).max(initial=1.0 / loop.delay))
    number = sections(loop.delay, omega)
    rational = delayed_by(loop, number)
    if len(rational.A) > STATES or gains(system, omega * np.geomspace(1.0, 1e6, 49)).max() > rest * (1.0 + OUTSIDE):
        return Outcome.UNVERIFIED
    known = sensitivities(rational)
    if known is None:
        return Outcome.ILL_POSED
    return StandIn(rational, loop, omega, share_off(loop.delay, number, omega), rest, known)


def _wanted(found: StandIn) -> float:
    """The rest at which the bounds beyond `omega` fall below the peaks."""
    S, T, half = (peak(each).value for each in (found.known.S, found.known.T, found.known.difference))
    return min(1.0 - 1.0 / max(S, 1.0), T / (1.0 + T), max(0.0, (2.0 * half - 1.0) / (2.0 * half + 1.0)))


def exact_peaks(found: StandIn) -> tuple[Peak, Peak]:
    """Peaks of |S| and |T| of a stable loop with its dead time."""
    rest, most = found.rest, size(found.known.S) * found.turn
    S = _exact(found, found.known.S, False, most, 1.0 / (1.0 - rest))
    return S, _exact(found, found.known.T, True, most, rest / (1.0 - rest))


def beyond(found: StandIn) -> float:
    """Bound of the largest singular value of (S - T) / 2 beyond the stand-in's frequency."""
    return 0.5 * (1.0 + found.rest) / (1.0 - found.rest)


def _exact(found: StandIn, rational: Transfer, complementary: bool, most: float, outside: float) -> Peak:
    """A peak on the exact dead time: near that of the stand-in, or at infinity; `most`: the stand-in's error."""
    near = peak(rational)
    value, omega = near.value, near.frequency
    if math.isfinite(omega) and omega <= found.omega:
        value, omega = _polished(found.exact, omega, complementary, 1e-2 * max(omega, 1.0 / found.exact.delay))
    far = at_infinity(found.exact.D, complementary)
    if far >= value or omega > found.omega:
        value, omega = max(far, value if omega <= found.omega else 0.0), math.inf if far >= value else omega
    high = max(near.value + near.error + most, outside)
    return Peak(value, omega, near.error + max(0.0, high - value), near.outcome)


def _polished(loop: Transfer, omega: float, complementary: bool, width: float) -> tuple[float, float]:
    system = mapped(replace(loop, delay=0.0))
    best = (-math.inf, omega)
    for _ in range(14):
        grid = np.abs(omega + width * np.linspace(-1.0, 1.0, 9))
        values = closed_gains(system.respond(grid) * np.exp(-1j * grid * loop.delay)[:, None, None], complementary)
        top = int(np.argmax(values))
        omega, width = float(grid[top]), width / 3.0
        best = max(best, (float(values[top]), omega))
    return best


def closed_gains(L: Complex, complementary: bool) -> Array:
    """Largest singular value of S or T from responses L (F, m, m); (F,)."""
    eye = np.broadcast_to(np.eye(L.shape[1]), L.shape)
    return np.asarray(np.linalg.svd(np.linalg.solve(eye + L, L if complementary else eye), compute_uv=False)[:, 0])


def at_infinity(D: Array, complementary: bool) -> float:
    """What |S| or |T| comes near to again and again as the frequency grows: L turns as D exp(-j phase)."""
    phase = np.exp(1j * np.linspace(0.0, 2.0 * math.pi, ANGLES))[:, np.newaxis, np.newaxis]
    return float(closed_gains(D * phase, complementary).max())
