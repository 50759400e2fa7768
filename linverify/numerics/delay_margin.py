"""The dead time that a sampled loop bears: extra delay between controller and hold, exact to a fraction of a sample.

It is not phase over frequency, since a delay within a sample changes what the hold makes of the input. With the delay
(l + m) step, 0 <= m <= 1, the plant behind the hold answers at the instants by (Astrom, Wittenmark,
"Computer-Controlled Systems", on sampling systems with dead time; from memory)

    G_m(z) = C (z I - Ad)^-1 (P((1 - m) step) (1 - 1/z) + P(step) / z) + D / z,  P(t) = integral of exp(A s) B to t

and the loop is L = K G_m z^-l. Stability is first lost where 1 + L is first zero on the unit circle. The search steps
from the declared delay by half of what the distance of the whole curve from -1 allows at its rates of change, so it
cannot step over the first crossing; close to one it is found by Newton's method in delay and frequency.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.linalg import expm

from ..core.model import Array
from .bilinear import change, held_change
from .crossings import walk
from .curve import Complex, balanced
from .margins import Found
from .transfer import Transfer

NEAR = 0.7  # |L| below this, or above twice this, is no danger at any fraction of a sample
FRACTIONS = 17  # of a sample, at which that is asked
FINER = 4  # points between two of the walk
TURN = 0.05  # rad that the delay may turn between two points
SAFE = 0.8  # of the distance to -1 that one step may use up
MISSED = 2e-4  # the same, from where a near miss counts as a loss: chords are no better
CLOSE = 1e-3  # of the delay's scale: nearer than this, Newton's method takes over
MOST_STEPS = 2000
MOST_SAMPLES = 100  # of delay, to which a jump of the loop (feedthrough of the plant) is followed
NEWTON = 30
LOWEST = 1e-9  # of half the sample rate: a crossing far below this is not looked for


@dataclass(frozen=True, slots=True, eq=False)
class _Held:
    """Plant x' = A x + b u, y = c x + d u behind a hold, controller with F = Ad - I in z, sample time step."""

    A: Array
    b: Array
    c: Array
    d: float
    F: Array
    whole: Array
    KF: Array
    Kb: Array
    Kc: Array
    Kd: float
    step: float

    def seen(self, w: Array) -> tuple[Complex, Complex]:
        """K (c (z I - Ad)^-1) as rows (W, n), and K (W,), at frequencies w in rad per time unit."""
        moved = np.expm1(1j * w * self.step)
        rows = np.linalg.solve(
            _shifted(moved, self.F.T), np.broadcast_to(self.c[:, np.newaxis], (len(w), len(self.c), 1))
        )
        K = np.full(len(w), self.Kd, dtype=np.complex128)
        if len(self.KF):
            inner = np.linalg.solve(
                _shifted(moved, self.KF), np.broadcast_to(self.Kb[:, np.newaxis], (len(w), len(self.Kb), 1))
            )
            K = K + (inner[:, :, 0] @ self.Kc)
        return K[:, np.newaxis] * rows[:, :, 0], K

    def loop(self, w: Array, seen: tuple[Complex, Complex], delay: float, samples: int) -> tuple[Complex, Complex]:
        """L and its slope over the delay, which lies in (samples, samples + 1] steps; (W,)."""
        left = (samples + 1) * self.step - delay
        kick, part = self._within(max(left, 0.0))
        back = np.exp(-1j * w * self.step)
        late = np.exp(-1j * w * self.step * samples)
        L = late * (seen[0] @ part * (1.0 - back) + seen[0] @ self.whole * back + seen[1] * self.d * back)
        return L, -late * (seen[0] @ kick) * (1.0 - back)

    def _within(self, time: float) -> tuple[Array, Array]:
        """exp(A time) b and P(time)."""
        n = len(self.A)
        whole = np.zeros((n + 1, n + 1))
        whole[:n, :n], whole[:n, n] = self.A * time, self.b * time
        reached = expm(whole)[:n, n]
        return self.A @ reached + self.b, reached

    def reaches(self, delay: float, samples: int) -> bool:
        """The formula for so many whole samples may be asked about the delay: about one of them, or all are alike."""
        return self.d == 0.0 or -self.step < delay - samples * self.step < 2.0 * self.step

    def stable(self, delay: float, samples: int) -> bool:
        """The closed loop with that delay is stable, by its poles with the delayed inputs as states."""
        n, q, held = len(self.A), len(self.KF), samples + 1
        _, part = self._within(max((samples + 1) * self.step - delay, 0.0))
        late = self.whole - part
        size = n + q + held
        M = np.zeros((size, size))
        # states: plant, controller, u of the last `held` instants, newest first; e = -y, y = c x + d u[k - held]
        e = np.zeros(size)
        e[:n], e[-1] = -self.c, -self.d
        u = self.Kd * e
        u[n : n + q] += self.Kc
        M[:n, :n] = np.eye(n) + self.F
        M[:n, -1] += late
        M[:n] += np.outer(part, u) if held == 1 else np.outer(part, np.eye(1, size, size - 2)[0])
        M[n : n + q, n : n + q] = np.eye(q) + self.KF
        M[n : n + q] += np.outer(self.Kb, e)
        M[n + q] = u
        for row in range(1, held):
            M[n + q + row, n + q + row - 1] = 1.0
        return bool(np.abs(np.linalg.eigvals(M)).max() < 1.0)


def _shifted(moved: Complex, F: Array) -> Complex:
    return np.asarray(moved[:, np.newaxis, np.newaxis] * np.eye(len(F)) - F)


def sampled_delay_margin(plant: Transfer, controller: Transfer, delay: float = 0.0) -> Found:
    """Smallest delay beyond the declared one, between controller and hold, that makes a stable sampled loop unstable.

    plant: continuous, from the held input to the measured signal, no dead time of its own; controller: in z with its
    `step`, from set point minus measurement to the command; delay: the declared one, in time units. One channel. The
    measurement at an instant sees the input that was held before it (of importance only where the plant has
    feedthrough; there stability may be lost at a whole sample at once, at no one frequency: NaN). Infinite where |L|
    stays below one at every fraction of a sample. Where the search had to end without a loss, the margin is at least
    the value, and the error is infinite.
    Raises ValueError where the parts are not of these kinds.
    """
    held = _held(plant, controller)
    low, high, fastest = _dangerous(held)
    if not len(low):
        return Found(math.inf)
    if held.d and not held.stable(delay, _samples(held, delay)):
        return Found(0.0)
    return _searched(held, low, high, delay, delay + 3.0 * (2.0 * math.pi / fastest + held.step))


def _searched(held: _Held, low: Array, high: Array, start: float, end: float) -> Found:
    delay, until, small = start, 0.0, _small_elsewhere(held, low)
    for _ in range(MOST_STEPS):
        if delay >= end:
            break
        if delay >= until:
            until = max(2.0 * delay, delay + held.step, 1.0 / float(high.max()))
            net = _net(held, low, high, until, small)
        samples = _samples(held, delay)
        edge = (samples + 1) * held.step
        distance = _distance(held, net, delay, samples)
        within = (delay - samples * held.step) / held.step
        place, ahead = net.nearest(distance, within)
        w = 0.5 * float(net.low[place] + net.high[place])
        if ahead < CLOSE / w:
            met = _newton(held, delay, w, samples)
            last = edge * (1.0 + 1e-12) if held.d else math.inf
            most = delay + (8.0 * ahead if ahead >= MISSED / w else 10.0 * CLOSE / w)
            if met is not None and delay - 4.0 * ahead <= met[0] <= min(most, last):
                return Found(max(met[0] - start, 0.0), met[1], met[2])
            if ahead < MISSED / w:
                return Found(max(delay - start, 0.0), w, 2.0 * ahead)
        step = net.safe(distance, within, held.d == 0.0) * held.step
        delay = _instant(held, min(delay + max(step, 1e-2 * CLOSE / w), edge if held.d else until))
        if held.d and delay >= edge and not _bears_jump(held, net, edge, samples):
            if samples >= MOST_SAMPLES:
                return Found(edge - start, math.nan, math.inf)
            if not held.stable(edge, samples + 1):
                return Found(edge - start)
    return Found(delay - start, math.nan, math.inf)


def _bears_jump(held: _Held, net: _Net, edge: float, samples: int) -> bool:
    """True where the jump of L with the next sample of delay is surely too small to reach -1 (theorem of Rouche)."""
    if not net.small_elsewhere:
        return False
    jumps = [np.abs(seen[1] * held.d * (1.0 - np.exp(-1j * w * held.step))) for w, seen in net.ends]
    return bool((np.maximum(*jumps) < SAFE * _distance(held, net, edge, samples)).all())


def _instant(held: _Held, delay: float) -> float:
    """The delay, or the whole number of samples that it all but is."""
    whole = round(delay / held.step) * held.step
    return whole if abs(delay - whole) <= 1e-12 * whole else delay


def _distance(held: _Held, net: _Net, delay: float, samples: int) -> Array:
    """Distance of -1 from the chord of L over every interval of frequency."""
    at_low = held.loop(net.low, net.seen_low, delay, samples)[0]
    at_high = held.loop(net.high, net.seen_high, delay, samples)[0]
    chord, off = at_high - at_low, -1.0 - at_low
    share = np.clip((off * np.conj(chord)).real / np.maximum(np.abs(chord) ** 2, 1e-300), 0.0, 1.0)
    return np.asarray(np.abs(off - share * chord))


def _newton(held: _Held, delay: float, w: float, samples: int) -> tuple[float, float, float] | None:
    """Delay and frequency near the given ones at which L = -1, and the error of the delay; None for none."""
    nyquist = math.pi / held.step
    for turn in range(NEWTON):
        tilt = 1e-6 * w
        points = np.array([w, min(w + tilt, nyquist), min(w + tilt, nyquist) - 2.0 * tilt])
        at, rate = held.loop(points, held.seen(points), delay, samples)
        over = (at[1] - at[2]) / (2.0 * tilt)
        if nyquist - w <= tilt:  # L is real there
            move, turned = -(1.0 + at[0].real) / rate[0].real, 0.0
        else:
            matrix = np.array([[rate[0].real, over.real], [rate[0].imag, over.imag]])
            if abs(np.linalg.det(matrix)) <= 1e-12 * float(np.prod(np.linalg.norm(matrix, axis=0))):
                return None
            move, turned = np.linalg.solve(matrix, -np.array([1.0 + at[0].real, at[0].imag]))
        delay, w = delay + float(move), min(w + float(turned), nyquist)
        if w <= 0.0 or delay < -held.step or not held.reaches(delay, samples):
            return None
        if held.d == 0.0:  # the response is continuous from one sample to the next
            samples = max(_samples(held, delay), 0)
        if turn and abs(move) <= 1e-12 * (abs(delay) + 1.0 / w) and abs(turned) <= 1e-8 * w:
            return delay, w, 10.0 * abs(move) + 1e-11 * (delay + 1.0 / w)
    return None


@dataclass(frozen=True, slots=True, eq=False)
class _Net:
    """Intervals of frequency, what the loop is made of at both their ends, and how it changes within a sample of delay.

    shares (J,): ascending fractions of a sample; speeds (W, J): |dL / d delay| in each interval at each; so much L can
    have changed from the start of a sample, sums (W, J). Whole samples change phases only, so they are the same in all.
    """

    low: Array
    high: Array
    seen_low: tuple[Complex, Complex]
    seen_high: tuple[Complex, Complex]
    shares: Array
    speeds: Array
    sums: Array
    step: float
    small_elsewhere: bool

    @property
    def ends(self) -> tuple[tuple[Array, tuple[Complex, Complex]], tuple[Array, tuple[Complex, Complex]]]:
        """Both ends of the intervals and what the loop is made of there."""
        return (self.low, self.seen_low), (self.high, self.seen_high)

    def nearest(self, distance: Array, within: float) -> tuple[int, float]:
        """The interval that could reach -1 first, and the delay it needs at the speeds about this fraction."""
        ratios = distance / self._about(within)
        place = int(np.argmin(ratios))
        return place, float(ratios[place])

    def safe(self, distance: Array, within: float, onward: bool) -> float:
        """Samples of delay after which no interval has reached -1; beyond the next instant where `onward`."""
        distance = SAFE * distance
        whole = float((distance / self.sums[:, -1]).min())
        if onward and whole >= 2.0:
            return whole - 1.0  # so long a stretch lies within so many whole samples
        place, cell = self._place(within), self._about(within) * self.step
        used = self.sums[:, place] - cell * (self.shares[place] - within)
        allowed = (self.sums[:, place:] - used[:, np.newaxis] <= distance[:, np.newaxis]).all(axis=0)
        count = len(allowed) if allowed.all() else int(np.argmin(allowed))
        if count:
            return float(self.shares[place + count - 1]) - within
        return float((distance / cell).min())

    def _place(self, within: float) -> int:
        """The first of `shares` beyond this fraction."""
        return min(max(int(np.searchsorted(self.shares, within + 1e-12, side="right")), 1), len(self.shares) - 1)

    def _about(self, within: float) -> Array:
        place = self._place(within)
        return np.asarray(np.maximum(self.speeds[:, place - 1], self.speeds[:, place]) + 1e-300)


def _small_elsewhere(held: _Held, low: Array) -> bool:
    """Outside the intervals that begin at `low`, jumps of L are smaller than |L| is away from one."""
    nodes = _nodes(held)
    inside = np.isin(nodes, low)
    beside = ~(inside | np.roll(inside, 1))
    seen = held.seen(nodes)
    jump = np.abs(seen[1] * held.d * (1.0 - np.exp(-1j * nodes * held.step)))
    away = np.abs(np.abs(held.loop(nodes, seen, held.step, 0)[0]) - 1.0)
    return bool((jump < SAFE * away)[beside].all())


def _net(held: _Held, low: Array, high: Array, delay: float, small: bool) -> _Net:
    """Intervals split so that a delay turns little within each."""
    parts = np.maximum(1, np.ceil((high - low) * delay / TURN)).astype(np.intp)
    which = np.repeat(np.arange(len(low)), parts)
    inside = np.arange(len(which)) - np.repeat(np.cumsum(parts) - parts, parts)
    width = ((high - low) / parts)[which]
    low = low[which] + inside * width
    high = low + width
    ends = [(w, held.seen(w)) for w in (low, high)]
    shares = _shares(held)
    speeds = np.maximum(
        *[
            np.stack([np.abs(held.loop(w, seen, share * held.step, 0)[1]) for share in shares], axis=1)
            for w, seen in ends
        ]
    )
    cells = np.maximum(speeds[:, 1:], speeds[:, :-1]) * np.diff(shares) * held.step
    sums = np.concatenate([np.zeros((len(low), 1)), np.cumsum(cells, axis=1)], axis=1) + 1e-300
    return _Net(low, high, ends[0][1], ends[1][1], shares, speeds, sums, held.step, small)


def _shares(held: _Held) -> Array:
    """Fractions of a sample, close enough for the fastest modes of the plant: they act just before an instant."""
    turns = held.step * float(np.abs(np.linalg.eigvals(held.A)).max(initial=0.0))
    even = np.linspace(0.0, 1.0, int(np.clip(4.0 * turns, 8, 120)))
    late = 1.0 - np.geomspace(1e-3 / (1.0 + turns), 1.0, 24)
    return np.unique(np.concatenate([even, np.clip(late, 0.0, 1.0)]))


def _dangerous(held: _Held) -> tuple[Array, Array, float]:
    """Intervals of frequency in which |L| may be one at some fraction of a sample, and the fastest where it is."""
    nodes = _nodes(held)
    seen = held.seen(nodes)
    sizes = np.array(
        [np.abs(held.loop(nodes, seen, share * held.step, 0)[0]) for share in np.linspace(0.0, 1.0, FRACTIONS)]
    )
    largest, least = sizes.max(axis=0), sizes.min(axis=0)
    if largest.max() < 1.0 - CLOSE:
        return nodes[:0], nodes[:0], math.inf
    near = (np.maximum(largest[:-1], largest[1:]) >= NEAR) & (np.minimum(least[:-1], least[1:]) <= 2.0 * NEAR)
    if not near.any():
        return nodes[:0], nodes[:0], math.inf
    through = np.flatnonzero((np.maximum(largest[:-1], largest[1:]) >= 1.0) & near)
    fastest = nodes[through[-1] + 1] if len(through) else nodes[1:][near].max()
    return nodes[:-1][near], nodes[1:][near], float(fastest)


def _nodes(held: _Held) -> Array:
    z = np.concatenate([np.linalg.eigvals(held.F), np.linalg.eigvals(held.KF)]).astype(np.complex128)
    z = z[np.abs(1.0 + z) > 0.0]
    nyquist = math.pi / held.step
    singular = np.asarray(np.log1p(z) / held.step, dtype=np.complex128)
    coarse = walk(singular, np.array([LOWEST * nyquist, nyquist]))
    coarse = np.append(coarse[coarse < nyquist * (1.0 - 1e-9)], nyquist)
    shares = np.linspace(0.0, 1.0, FINER, endpoint=False)
    fine = (coarse[:-1, np.newaxis] + np.diff(coarse)[:, np.newaxis] * shares).ravel()
    return np.append(fine, nyquist)


def _samples(held: _Held, delay: float) -> int:
    return math.floor(delay / held.step * (1.0 + 1e-12) + 1e-12)


def _held(plant: Transfer, controller: Transfer) -> _Held:
    step = controller.step
    if plant.step is not None or step is None or plant.delay or plant.D.shape != (1, 1) or controller.D.shape != (1, 1):
        raise ValueError("needed: a continuous plant without dead time, a controller in z, one channel each")
    A, b, c = balanced(plant.A, plant.B[:, 0], plant.C[0])
    F, G = held_change(A, b[:, np.newaxis], step)
    KF, Kb, Kc = balanced(change(controller), controller.B[:, 0], controller.C[0])
    return _Held(A, b, c, float(plant.D[0, 0]), F, G[:, 0], KF, Kb, Kc, float(controller.D[0, 0]), step)
