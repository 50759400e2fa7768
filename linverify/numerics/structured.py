"""The supremum over all frequencies of the structured singular value, for diagonal complex perturbations.

From above, certified for every frequency and not for those of a grid: with one constant scaling D the largest singular
value of D M D^-1 stays below a level on whole stretches of frequency, whose ends are eigenvalues of the gain pencil at
that level. Stretch by stretch, each with the scaling that is best somewhere inside, the axis is covered; where the best
scaling does not reach below the level, the level rises. From below by perturbations that make the loop singular, raised
over frequency and phase.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np
from scipy.linalg import matrix_balance

from ..core.model import Array
from .mapped import Complex, Mapped
from .peak_gain import climb, crossings, gains, looked_at, rounding
from .scalings import from_above, from_below, turned

WITHIN = 1e-6  # relative: how far the level stands above the highest bound of a single frequency
COVERS = 150  # most stretches, each of which costs the eigenvalues of one pencil
THIN = 1e-5  # of the distance to the nearest pole: a stretch thinner than this is judged by three points, to about
# the square of this share
FOLLOW, POLISH, POINTS, SHRINK = 8, 12, 9, 3.0  # rounds from above and from below, as in `peak_gain`
INWARD = (1e-9, 1e-6, 1e-4, 1e-2, 0.1, 0.3)  # of a stretch: its ends move in by so much until they are below the level


@dataclass(frozen=True, slots=True)
class Bounded:
    """A disk margin between bounds: surely at least low, surely at most high.

    frequency: rad per time unit, of the perturbation at `high`; factors: by which the channels of the loop are to be
    multiplied so that the closed loop has a pole on the axis at that frequency; empty where no perturbation was found.
    done: False where the bounds hold but might have been brought closer.
    """

    low: float
    high: float
    frequency: float
    factors: tuple[complex, ...] = ()
    done: bool = True


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """Bounds of the supremum of the structured singular value; where the lower one is met, with the perturbation.

    omega: mapped frequency; deltas (m,): diagonal of modulus 1 / low that makes 1 - M Delta singular there.
    """

    low: float
    high: float
    omega: float
    deltas: Complex
    done: bool


@dataclass(slots=True)
class _Cover:
    """The state of the covering: mutable, since it is one loop's scratch sheet.

    open: stretches of mapped frequency that are not yet shown to lie below `level`; scalings: those tried; tops: mapped
    frequencies at which the level had to rise.
    """

    level: float
    open: list[tuple[float, float]]
    scalings: list[Array]
    tops: list[float]


def structured_peak(system: Mapped) -> Found:
    """Bounds of the supremum over frequency of the structured singular value of a square stable `system`."""
    system = _evened(system)
    m = system.D.shape[0]
    if m == 1:
        return _single(system)
    omega, above = _survey(system)
    best = _raised(system, omega[np.argsort(-above, kind="stable")[:2]])
    cover = _Cover(max(best[0], float(above.max())) * (1.0 + WITHIN), [(0.0, math.inf)], [np.ones(m)], [])
    done = _covered(system, cover)
    low, where, phases = max(best, _raised(system, np.array(cover.tops)), key=lambda one: one[0])
    high = cover.level if done else min(climb(_rescaled(system, D))[0] for D in cover.scalings) * (1.0 + WITHIN)
    high = max(high, cover.level) + rounding(system, where)
    return Found(low, high, where, _deltas(system, where, phases), done)


def _single(system: Mapped) -> Found:
    value, where, done = climb(system)
    response = system.respond(np.array([where]))[0, 0, 0]
    deltas = np.array([1.0 / response if response else 0.0])
    return Found(value, value * (1.0 + WITHIN) + rounding(system, where), where, deltas, done)


def _rescaled(system: Mapped, D: Array) -> Mapped:
    return replace(system, B=system.B / D, C=D[:, np.newaxis] * system.C, D=D[:, np.newaxis] * system.D / D)


def _evened(system: Mapped) -> Mapped:
    """Channels scaled by powers of two to like sizes, which changes no structured singular value."""
    sizes = np.abs(system.respond(looked_at(system, climb(system)[0] * 0.5))).max(axis=0)
    _, (scale, _) = matrix_balance(sizes, permute=False, separate=True)
    return _rescaled(system, 1.0 / np.asarray(scale, dtype=np.float64))


def _survey(system: Mapped) -> tuple[Array, Array]:
    """Mapped frequencies where the bounds may be large, and the bounds from above."""
    value, where, _ = climb(system)
    sizes = np.abs(system.poles())
    omega = np.concatenate([[where], sizes, np.abs(system.poles().imag)])
    for share in (0.9, 0.6, 0.3):
        omega = np.concatenate([omega, looked_at(system, share * value)])
    omega = np.unique(omega)
    above, _ = from_above(system.respond(omega))
    fine = _followed(system, omega[np.argsort(-above, kind="stable")[:3]])
    finer, _ = from_above(system.respond(fine))
    return np.concatenate([omega, fine]), np.concatenate([above, finer])


def _followed(system: Mapped, places: Array) -> Array:
    """`places` moved to where the bound from above is largest nearby."""
    places = places[np.isfinite(places)]
    poles = system.poles()
    if len(places) == 0 or len(poles) == 0:
        return places
    width = np.min(np.abs(1j * places[:, np.newaxis] - poles[np.newaxis, :]), axis=1)
    steps = np.linspace(-1.0, 1.0, POINTS)
    for _ in range(FOLLOW):
        grid = np.abs(places[:, np.newaxis] + width[:, np.newaxis] * steps)
        above = from_above(system.respond(grid.ravel()))[0].reshape(grid.shape)
        top = np.argmax(above, axis=1)
        places = grid[np.arange(len(places)), top]
        width = np.where((top > 0) & (top < POINTS - 1), width / SHRINK, width)
    return places


_Raised = tuple[float, float, Array]


def _raised(system: Mapped, places: Array) -> _Raised:
    """The highest bound from below near `places`, its mapped frequency, its phases (m,)."""
    best: _Raised = (-math.inf, 0.0, np.zeros(system.D.shape[0]))
    poles = system.poles()
    for place in places:
        M = system.respond(np.array([place]))
        value, phases = from_below(M, from_above(M)[1])
        found = (float(value[0]), float(place), phases[0])
        best = max(best, found, _climbed(system, poles, found), key=lambda one: one[0])
    return best


def _climbed(system: Mapped, poles: Complex, start: _Raised) -> _Raised:
    """`start` followed over frequency."""
    best, (_, where, phases) = start, start
    if not math.isfinite(where) or len(poles) == 0:
        return best
    width = float(np.abs(1j * where - poles).min())
    for _ in range(POLISH):
        grid = np.abs(where + width * np.linspace(-1.0, 1.0, POINTS))
        value, turns = turned(system.respond(grid), np.broadcast_to(phases, (POINTS, len(phases))))
        top = int(np.argmax(value))
        where, phases = float(grid[top]), turns[top]
        best = max(best, (float(value[top]), where, phases), key=lambda one: one[0])
        width = width / SHRINK if 0 < top < POINTS - 1 else width
    return best


def _deltas(system: Mapped, omega: float, phases: Array) -> Complex:
    Q = np.exp(1j * phases)
    values = np.linalg.eigvals(system.respond(np.array([omega]))[0] * Q)
    largest = values[int(np.argmax(np.abs(values)))]
    return np.asarray(Q / largest if largest else 0.0 * Q, dtype=np.complex128)


def _covered(system: Mapped, cover: _Cover) -> bool:
    """Cover the axis stretch by stretch; False when the budget ends before it is covered."""
    poles = system.poles()
    _cover_by(system, cover, cover.scalings[0])
    for _ in range(COVERS):
        if not cover.open:
            return True
        stretch = cover.open.pop(0)
        probes = _probes(stretch, poles)
        above, D = from_above(system.respond(probes))
        worst = int(np.argmax(above))
        if above[worst] * (1.0 + WITHIN) > cover.level:
            _rise(system, cover, float(probes[worst]), float(above[worst]))
        if _thin(probes, poles) and gains(_rescaled(system, D[1]), probes).max() < cover.level:
            continue
        cover.open.insert(0, stretch)
        cover.scalings.append(D[worst])
        _cover_by(system, cover, D[worst])
        if cover.open and cover.open[0] == stretch:
            # its worst end was decisive and is not yet behind: the halves have other ends
            cover.open[:1] = [(stretch[0], float(probes[1])), (float(probes[1]), stretch[1])]
    return not cover.open


def _rise(system: Mapped, cover: _Cover, omega: float, above: float) -> None:
    """Lift the level over the bound from above near a frequency."""
    top = _followed(system, np.array([omega]))
    if len(top):
        higher = float(from_above(system.respond(top))[0][0])
        omega, above = (float(top[0]), higher) if higher > above else (omega, above)
    cover.level = above * (1.0 + WITHIN)
    cover.tops.append(omega)


def _probes(stretch: tuple[float, float], poles: Complex) -> Array:
    """Both ends of a stretch and a point between them."""
    low, high = stretch
    if math.isinf(high):
        return np.array([low, 2.0 * low if low > 0 else float(np.abs(poles).max(initial=1.0)), math.inf])
    return np.array([low, 0.5 * (low + high), high])


def _thin(probes: Array, poles: Complex) -> bool:
    """True for a stretch so thin, against the distance to the nearest pole, that its ends and middle decide."""
    nearest = float(np.abs(1j * probes[1] - poles).min(initial=math.inf))
    return bool(probes[2] - probes[0] <= max(THIN * nearest, 4.0 * np.spacing(probes[2])))


def _cover_by(system: Mapped, cover: _Cover, D: Array) -> None:
    """Take from the open stretches what the scaling D shows to lie below the level."""
    scaled = _rescaled(system, D)
    ends = np.concatenate([[0.0], crossings(scaled, cover.level), [math.inf]])
    ends = np.unique(ends)
    for low, high in pairwise(ends):
        shown = _below(scaled, cover.level, float(low), float(high))
        if shown is not None:
            cover.open = [piece for stretch in cover.open for piece in _without(stretch, shown)]


def _below(scaled: Mapped, level: float, low: float, high: float) -> tuple[float, float] | None:
    """The stretch between two crossings with its ends moved in until they are below the level; None if above it."""
    beyond = 2.0 * low if low > 0 else 1.0
    inner = np.array([beyond if math.isinf(high) else 0.5 * (low + high)])
    if gains(scaled, inner)[0] >= level:
        return None
    ends = []
    for end, toward in ((low, float(inner[0])), (high, float(inner[0]))):
        if end == 0.0 or math.isinf(end):
            tried = np.array([end, toward])
        else:
            tried = np.array([end + share * (toward - end) for share in INWARD] + [toward])
        ends.append(float(tried[int(np.argmax(gains(scaled, tried) < level))]))
    return ends[0], ends[1]


def _without(stretch: tuple[float, float], shown: tuple[float, float]) -> list[tuple[float, float]]:
    """What is left of an open stretch."""
    low, high = stretch
    if shown[1] <= low or shown[0] >= high:
        return [stretch] if low < high or not shown[0] <= low <= shown[1] else []
    left = [(low, shown[0])] if low < shown[0] else []
    return left + ([(shown[1], high)] if shown[1] < high else [])
