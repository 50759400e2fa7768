"""Margins of a single loop by brute force, to hold the library against; nothing here is shared with it.

Every quantity is scanned on a dense grid of frequencies that is refined about each pole and zero of L, 1 + L and
1 - L; every local extremum and sign change is then refined, and what is quoted is evaluated in extended precision by
direct solves of the given matrices. A loop is L(s) = (C (s I - A)^-1 B + D) exp(-s delay), or in z where `step` is
given, and is closed by u = -y. Stability is read off refined eigenvalues, with a dead time off a count of turns.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from .response import Loop, closed_roots, extended, grid, landmarks

PHASE_STEP = 0.1  # rad of the dead time's phase between grid points
MOST_POINTS = 1_500_000
GOLDEN = (math.sqrt(5.0) - 1.0) / 2.0


class TooFineError(ValueError):
    """The dead time turns the phase too often for a scan."""


# -- roots and extrema of what is scanned ----------------------------------------------------------------------------

Scalar = Callable[[np.ndarray], np.ndarray]  # of L, elementwise


def loudness(L: np.ndarray) -> np.ndarray:
    return np.log(np.abs(L))


def offset(L: np.ndarray) -> np.ndarray:
    """Zero where L is real, without regard to its size."""
    return L.imag / np.abs(L)


def sensitivity(L: np.ndarray) -> np.ndarray:
    return 1.0 / np.abs(1.0 + L)


def complementary(L: np.ndarray) -> np.ndarray:
    return np.abs(L / (1.0 + L))


def symmetric(L: np.ndarray) -> np.ndarray:
    """|S - T| / 2: one over its peak is the disk margin."""
    return np.abs((1.0 - L) / (1.0 + L)) / 2.0


def peaks(loop: Loop, w: np.ndarray, value: np.ndarray, of: Scalar, most: int = 120) -> np.ndarray:
    """Frequencies of the local maxima of of(L) between the grid's neighbours, by golden sections."""
    inner = np.flatnonzero((value[1:-1] >= value[:-2]) & (value[1:-1] >= value[2:])) + 1
    inner = inner[np.argsort(value[inner])[::-1][:most]]
    low, high = w[inner - 1].copy(), w[inner + 1].copy()
    for _ in range(40 if inner.size else 0):
        left, right = high - GOLDEN * (high - low), low + GOLDEN * (high - low)
        up = of(loop.response(left)) < of(loop.response(right))
        low, high = np.where(up, left, low), np.where(up, high, right)
    return (low + high) / 2.0


def signs(value: np.ndarray) -> np.ndarray:
    """1 or -1; a grid point that hits zero belongs to one side."""
    return np.where(value < 0.0, -1, 1)


def crossings(loop: Loop, w: np.ndarray, of: Scalar, *, negative: bool) -> np.ndarray:
    """Frequencies where of(L) is zero, polished in extended precision; `negative`: only where L is left of zero."""
    side = signs(of(loop.response(w)))
    near = peaks(loop, w, -np.abs(of(loop.response(w))), lambda L: -np.abs(of(L)))
    index = np.clip(np.searchsorted(w, near), 1, w.size - 1)
    hidden = (signs(of(loop.response(near))) != side[index]) & (side[index - 1] == side[index])  # twice between two
    w = np.unique(np.concatenate([w, near[hidden]]))
    L = loop.response(w)
    side = signs(of(L))
    place = np.flatnonzero(side[:-1] != side[1:])
    if negative:
        place = place[(L.real[place] < 0) | (L.real[place + 1] < 0)]
    low, high, before = w[place].copy(), w[place + 1].copy(), side[place]
    for _ in range(50 if place.size else 0):
        middle = (low + high) / 2.0
        same = signs(of(loop.response(middle))) == before
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    return polished(loop, (low + high) / 2.0, gain=of is loudness, negative=negative)


def polished(loop: Loop, w: np.ndarray, *, gain: bool, negative: bool) -> np.ndarray:
    """Newton's method in extended precision on log |L| or on the sine of its angle; sine jumps are left out."""
    w = w.astype(np.longdouble)
    if not w.size:
        return w
    for _ in range(4):
        L, slope = loop.exact(w)
        relative = slope / L
        change = np.log(np.abs(L)) / relative.real if gain else (L.imag / L.real) / relative.imag
        near = np.isfinite(change) & (np.abs(change) < 1e-6 * w)
        w = np.where(near, w - change, w)
    L = loop.exact(w)[0]
    good = np.abs(np.abs(L) - 1.0) < 1e-9 if gain else np.abs(L.imag) < 1e-9 * np.abs(L)
    if negative:
        good &= L.real < 0
    return w[good] if gain else w[good & turns(loop, w)]


def turns(loop: Loop, w: np.ndarray) -> np.ndarray:
    """Whether Im L changes its sign at w: near the ends of the axis it fades, and rounding errors cross for nothing."""
    before, after = (loop.exact(w * np.longdouble(1.0 + shift))[0].imag for shift in (-1e-7, 1e-7))
    return (before * after < 0) & (w < loop.top * (1.0 - 1e-6))


# -- stability -------------------------------------------------------------------------------------------------------


def refined_roots(loop: Loop) -> np.ndarray:
    """Poles of the closed loop without dead time; those near the axis polished in extended precision."""
    roots = closed_roots(loop).astype(np.clongdouble)
    for _ in range(3):
        L, slope = extended(loop, roots) if roots.size else (roots, roots)
        with np.errstate(all="ignore"):
            change = (1.0 + L) / slope
        near = np.isfinite(change) & (np.abs(change) < 1e-6 * np.abs(roots))
        roots = np.where(near, roots - change, roots)
    return roots


def growth(loop: Loop, roots: np.ndarray) -> np.ndarray:
    """Real parts, or log |z| of z - 1."""
    if loop.step is None:
        return roots.real
    return np.log1p(roots.real * 2.0 + np.abs(roots) ** 2) / 2.0


def encirclements(loop: Loop) -> int:
    """Roots of 1 + L right of the axis: turns of (1 + L) prod (s - p) / (s + c)^n, which has no poles there.

    Steps of phase above half a radian are halved until none is left. With a dead time (|D| < 1 then) the turning L is
    left out from where |L| stays below one: 1 + L cannot turn about zero there.
    """
    poles = np.diag(loop.triangular[0])
    corner = float(np.exp(np.log(np.abs(poles[poles != 0])).mean())) if np.any(poles != 0) else 1.0
    w, last = turns_grid(loop)

    def turned(w: np.ndarray) -> np.ndarray:
        s = loop.variable(w)
        value = np.ones(w.shape, complex)
        value[w <= last] += loop.response(w[w <= last])
        value /= np.abs(value)
        for pole in poles:
            value = value * (s - pole) / np.abs(s - pole) * np.exp(-1j * np.angle(s + corner))
        return value

    value = turned(w)
    for _ in range(60):
        wide = np.flatnonzero(np.abs(np.angle(value[1:] / value[:-1])) > 0.5)
        wide = wide[w[wide + 1] - w[wide] > 1e-14 * w[wide + 1]]
        if not wide.size:
            break
        middle = (w[wide] + w[wide + 1]) / 2.0
        w, value = np.insert(w, wide + 1, middle), np.insert(value, wide + 1, turned(middle))
    turn = float(np.angle(value[1:] / value[:-1]).sum())
    return -round((turn - float(np.angle(value[-1])) + from_real(value[0])) / math.pi)


def turns_grid(loop: Loop) -> tuple[np.ndarray, float]:
    """Frequencies dense enough to count turns, and up to which one L counts."""
    w = grid(loop)
    if not loop.delay:
        return w, math.inf
    ahead = np.maximum.accumulate(np.abs(loop.bare(w))[::-1])[::-1]
    quiet = np.flatnonzero(ahead <= max(0.99, (1.0 + abs(loop.D)) / 2.0))
    last = float(w[quiet[0]] if quiet.size else w[-1])
    if last * loop.delay / PHASE_STEP > MOST_POINTS:
        raise TooFineError(f"{last * loop.delay / PHASE_STEP:.0f} points are too many to scan")
    return np.unique(np.concatenate([w, np.arange(0.0, last, PHASE_STEP / loop.delay)[1:]])), last


def from_real(value: complex) -> float:
    """The angle between a value and the nearer half of the real axis, where it is at frequency zero."""
    angle = float(np.angle(value))
    return angle - (0.0 if abs(angle) < math.pi / 2.0 else math.copysign(math.pi, angle))


# -- the margins -----------------------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Truth:
    """What brute force finds. Ratios, radians, time units; infinite where there is none (gain_down: zero).

    growth: of the fastest root, relative to its size, nan with a dead time; where: frequencies of the figures.
    crossovers: |L| = 1; phase_crossings: L real and negative, at finite frequencies above zero.
    """

    stable: bool
    unstable: int
    growth: float
    gain_up: float
    gain_down: float
    phase: float
    delay: float
    disk: float
    sensitivity: float
    complementary: float
    crossovers: np.ndarray = field(repr=False)
    phase_crossings: np.ndarray = field(repr=False)
    where: dict[str, float] = field(repr=False)
    points: int = 0


def truth(loop: Loop) -> Truth:
    """All of it, for a loop that is well posed (1 + D not zero; |D| < 1 with a dead time).

    With a dead time the phase turns for ever, so the scan goes on until nothing beyond it can be worse than what it
    found, by |L| alone; or until |L| does nothing but tend to |D|, which then counts itself.
    """
    w = grid(loop)
    crossovers = crossings(loop, w, loudness, negative=False)
    if not loop.delay:
        return measured(loop, w, crossovers, last=True)
    size = np.abs(loop.bare(w))
    ahead = np.maximum(np.maximum.accumulate(size[::-1])[::-1], abs(loop.D))  # the largest |L| from here on
    calm = 30.0 * np.abs(landmarks(loop)).max(initial=0.0)
    start = max(2.0 * float(crossovers.max(initial=0.0)), 2.0 / loop.delay)
    end = int(np.searchsorted(w, start))
    while True:
        end = min(end, w.size - 1)
        last = bool(w[end] >= calm)
        scanned = np.unique(np.concatenate([w[: end + 1], np.arange(0.0, w[end], PHASE_STEP / loop.delay)[1:]]))
        if scanned.size > MOST_POINTS:
            raise TooFineError(f"{scanned.size} points are too many to scan")
        result = measured(loop, scanned, crossovers, last=last)
        if last or settled(result, float(ahead[end])):
            return result
        end = max(int(np.searchsorted(w, 3.0 * w[end])), end + 1)


def settled(result: Truth, loudest: float) -> bool:
    """Whether no frequency where |L| stays below `loudest` can hold anything worse."""
    return (
        loudest < 1.0
        and result.gain_up <= 1.0 / loudest
        and result.sensitivity >= 1.0 / (1.0 - loudest)
        and result.complementary >= loudest / (1.0 - loudest)
        and 1.0 / result.disk >= (1.0 + loudest) / (2.0 * (1.0 - loudest))
    )


def ends(loop: Loop) -> list[tuple[float, complex]]:
    """L at frequency zero (infinite at a pole there) and, without a dead time, at the highest one."""
    found = []
    poles = np.abs(np.diag(loop.triangular[0]))
    if not loop.n or poles.min() > 1e-12 * poles.max():
        found.append((0.0, complex(loop.exact(np.zeros(1))[0][0])))
    else:
        found.append((0.0, complex(math.inf)))
    if loop.step is not None:
        found.append((loop.top, complex(loop.exact(np.array([loop.top]))[0][0].real)))
    elif not loop.delay:
        found.append((math.inf, complex(loop.D)))
    return found


def measured(loop: Loop, w: np.ndarray, crossovers: np.ndarray, *, last: bool) -> Truth:
    """What the frequencies w hold; `last`: the limit at infinite frequency counts too."""
    where: dict[str, float] = {}
    through = crossings(loop, w, offset, negative=True)
    real = [(float(x), abs(L)) for x, L in zip(through, loop.exact(through)[0], strict=True)]
    real += [(x, abs(L)) for x, L in ends(loop) if np.isfinite(L) and L.real < 0.0 and abs(L.imag) < 1e-9 * abs(L)]
    if last and loop.delay and loop.D:
        real.append((math.inf, abs(loop.D)))
    up = min(((1.0 / size, x) for x, size in real if size < 1.0), default=(math.inf, math.nan))
    down = max(((1.0 / size, x) for x, size in real if size > 1.0), default=(0.0, math.nan))
    where["gain_up"], where["gain_down"] = up[1], down[1]
    turns = np.mod(np.angle(-loop.exact(crossovers)[0].astype(complex)), 2.0 * math.pi)
    least = np.minimum(turns, 2.0 * math.pi - turns)
    phase = float(least.min(initial=math.inf))
    lags = turns / crossovers.astype(float)
    where["phase"] = float(crossovers[np.argmin(least)]) if least.size else math.nan
    where["delay"] = float(crossovers[np.argmin(lags)]) if lags.size else math.nan
    tops = {}
    for word, of in (("sensitivity", sensitivity), ("complementary", complementary), ("disk", symmetric)):
        tops[word], where[word] = highest(loop, w, of, last=last)
    unstable, fastest = stability(loop)
    return Truth(
        stable=unstable == 0,
        unstable=unstable,
        growth=fastest,
        gain_up=float(up[0]),
        gain_down=float(down[0]),
        phase=phase,
        delay=delay_margin(loop, lags),
        disk=1.0 / tops["disk"] if tops["disk"] else math.inf,
        sensitivity=tops["sensitivity"],
        complementary=tops["complementary"],
        crossovers=crossovers.astype(float),
        phase_crossings=through.astype(float),
        where=where,
        points=int(w.size),
    )


def delay_margin(loop: Loop, lags: np.ndarray) -> float:
    """Additional dead time that is just lost. Where |D| is 1 or more any is; a sampled loop's is no such quotient."""
    if loop.step is not None:
        return math.nan
    return float(lags.min(initial=math.inf)) if abs(loop.D) < 1.0 else 0.0


def highest(loop: Loop, w: np.ndarray, of: Scalar, *, last: bool) -> tuple[float, float]:
    """The peak of of(L) and where it is, infinite frequency and the ends included."""
    tops = peaks(loop, w, of(loop.response(w)), of)
    found = [(float(of(np.array([L if np.isfinite(L) else 1e300 + 0j]))[0]), x) for x, L in ends(loop)]
    if loop.delay and last:
        found.append((float(of(np.array([-abs(loop.D) + 0j]))[0]), math.inf))
    places = np.concatenate([tops, w[[0, -1]]])
    values = of(loop.exact(places)[0]).astype(float)
    value, place = max([*found, *zip(values.tolist(), places.tolist(), strict=True)])
    near = [i for i in np.argsort(values)[::-1][:3] if values[i] > 0.999 * value and places[i] < loop.top]
    return max([(value, place), *(topped(loop, float(places[i]), of) for i in near)])


STEEPER: dict[Scalar, Callable[[np.ndarray, np.ndarray], np.ndarray]] = {  # of L and dL/dw: sign of the slope
    sensitivity: lambda L, slope: -(slope / (1.0 + L)).real,
    complementary: lambda L, slope: (slope / L / (1.0 + L)).real,
    symmetric: lambda L, slope: -(slope / (1.0 - L) / (1.0 + L)).real,
}


def topped(loop: Loop, w: float, of: Scalar) -> tuple[float, float]:
    """A peak found in double precision, moved to where the slope in extended precision changes its sign."""
    around = np.longdouble(w) * (1.0 + np.concatenate([-np.geomspace(1e-2, 1e-11, 28), np.geomspace(1e-11, 1e-2, 28)]))
    around = around[around < loop.top]
    for _ in range(6):
        L, slope = loop.exact(around)
        rising = STEEPER[of](L, slope) > 0.0
        falls = np.flatnonzero(rising[:-1] & ~rising[1:])
        if not falls.size:
            break
        best = falls[np.argmax(of(L)[falls])]
        around = np.linspace(around[best], around[best + 1], 24)
    values = of(loop.exact(around)[0])
    return float(values.max()), float(around[values.argmax()])


def stability(loop: Loop) -> tuple[int, float]:
    """Roots outside the stable region, and the growth of the fastest one relative to its size (nan with dead time)."""
    if loop.delay:
        return encirclements(loop), math.nan
    roots = refined_roots(loop)
    rates = growth(loop, roots) / np.abs(roots)
    return int(np.count_nonzero(rates >= 0.0)), float(rates.max(initial=-math.inf))
