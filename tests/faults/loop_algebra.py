"""Loops by pencil and paper: transfer functions as functions of s, their figures from a refined dense grid.

Written from textbooks and without any of the library's numerics, for loops with one channel. A sampled loop is a
function of z = exp(s step); dead time is exact in both. Stability is counted along the axis (argument principle), and
poles right of it are found by Newton's method, as many as were counted.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from scipy.linalg import expm
from scipy.optimize import brentq, fsolve, minimize_scalar

Array = np.ndarray
Response = Callable[[Array], Array]  # (N,) complex s -> (N,) complex

POINTS = 4000
BESIDE = 1e-9  # of the fastest rate: the axis is passed on the right of integrators by this much
TURN = 0.3  # rad of 1 + L from one point to the next, at most


@dataclass(frozen=True)
class Path:
    """From one input to several outputs: x' = A x + b u, y = C x + d u."""

    A: Array
    b: Array
    C: Array
    d: Array

    def at(self, s: Array) -> Array:
        """(N, k) complex."""
        return resolvent(self.A, s, self.b) @ self.C.T + self.d

    def behind_lag(self, lag: float) -> Path:
        """With an actuator 1 / (lag s + 1) in front."""
        n = len(self.A)
        A = np.zeros((n + 1, n + 1))
        A[:n, :n], A[:n, n], A[n, n] = self.A, self.b, -1.0 / lag
        b = np.zeros(n + 1)
        b[n] = 1.0 / lag
        return Path(A, b, np.column_stack([self.C, self.d]), np.zeros(len(self.d)))


def resolvent(A: Array, s: Array, b: Array) -> Array:
    """(s I - A)^-1 b for each s, (N, n)."""
    system = s[:, np.newaxis, np.newaxis] * np.eye(len(A)) - A
    return np.linalg.solve(system, np.broadcast_to(b[:, np.newaxis], (len(s), len(b), 1)))[..., 0]


def pid(kp: float, ki: float, kd: float = 0.0, filter_: float = 1.0, step: float | None = None) -> Response:
    """kp + ki/s + kd s/(filter s + 1), with s = 2 (z - 1) / (step (z + 1)) where it is sampled."""

    def at(s: Array) -> Array:
        if step is not None:
            z = np.exp(s * step)
            s = 2.0 * (z - 1.0) / (step * (z + 1.0))
        return kp + ki / s + kd * s / (filter_ * s + 1.0)

    return at


def flow(A: Array, b: Array, span: float) -> tuple[Array, Array]:
    """What a held input makes of x in `span`."""
    n = len(A)
    whole = np.zeros((n + 1, n + 1))
    whole[:n, :n], whole[:n, n] = A, b
    found = expm(whole * span)
    return found[:n, :n], found[:n, n]


@dataclass(frozen=True)
class Stairs:
    """A path behind a hold, its input late by `whole` steps and a fraction, read just before the hold changes."""

    F: Array
    now: Array  # what the newest input that arrives in the step adds to x
    before: Array  # and the one before it
    whole: int
    C: Array
    d: Array
    step: float

    def at(self, s: Array) -> Array:
        """(N, k) complex, by the samples."""
        z = np.exp(s * self.step)
        late = z ** -float(self.whole)
        old = late / z
        x = (
            resolvent(self.F, z, self.now) * late[:, np.newaxis]
            + resolvent(self.F, z, self.before) * old[:, np.newaxis]
        )
        return x @ self.C.T + self.d * old[:, np.newaxis]


def held(path: Path, step: float, delay: float = 0.0) -> Stairs:
    whole = math.floor(delay / step + 1e-9)
    part = max(delay - whole * step, 0.0)
    F_rest, now = flow(path.A, path.b, step - part)
    _, early = flow(path.A, path.b, part)
    F, _ = flow(path.A, path.b, step)
    return Stairs(F, now, F_rest @ early, whole, path.C, path.d, step)


@dataclass(frozen=True)
class Loop:
    """One loop broken open. unstable: open-loop poles right of the axis; step: None of a continuous loop."""

    at: Response
    unstable: int
    fastest: float  # rate beyond which nothing of interest happens, rad per time unit
    slowest: float
    step: float | None = None

    def delayed(self, delay: float) -> Loop:
        """A continuous loop with more dead time."""
        return Loop(lambda s: self.at(s) * np.exp(-s * delay), self.unstable, self.fastest, self.slowest)

    @property
    def highest(self) -> float:
        return math.pi / self.step if self.step is not None else self.fastest

    def __call__(self, frequency: float) -> complex:
        return complex(self.at(np.array([1j * frequency]))[0])


@dataclass(frozen=True)
class Told:
    """Figures of a stable loop, ratios and rad; infinite where there is no limit."""

    gain_up: float
    gain_down: float  # how many times smaller
    phase: float
    crossovers: tuple[float, ...]
    disk: float
    sensitivity: float


def right_poles(values: Array, edge: float = 1e-9) -> int:
    return int((values.real > edge * np.abs(values).max()).sum())


def outer_poles(values: Array, edge: float = 1e-9) -> int:
    return int((np.abs(values) > 1.0 + edge).sum())


def closed_right(loop: Loop) -> int:
    """How many poles of the closed loop lie right of the axis."""
    edge = BESIDE * loop.slowest
    top = loop.highest
    half = np.concatenate([[0.0], np.geomspace(1e-6 * loop.slowest, top, 200)])
    frequency = np.concatenate([-half[::-1], half[1:]])
    for _ in range(40):
        values = 1.0 + loop.at(edge + 1j * frequency)
        turns = np.angle(values[1:] / values[:-1])
        rough = np.abs(turns) > TURN
        if not rough.any():
            break
        middle = 0.5 * (frequency[1:] + frequency[:-1])[rough]
        frequency = np.sort(np.concatenate([frequency, middle]))
    else:
        raise ArithmeticError("1 + L turns too fast to be counted")
    count = -turns.sum() / (2.0 * math.pi) + loop.unstable
    if abs(count - round(count)) > 0.05:
        raise ArithmeticError(f"{count} poles were counted")
    return round(count)


def unstable_poles(loop: Loop) -> list[complex]:
    """Poles of the closed loop right of the axis, in s, those of a pair with positive imaginary part only."""
    count = closed_right(loop)
    found: list[complex] = []
    top = math.pi / loop.step if loop.step is not None else loop.fastest
    for size in np.geomspace(loop.slowest, top, 60):
        for angle in (0.0, 0.3, 0.8, 1.2, 1.5):
            root = _newton(loop, cmath.rect(size, angle))
            if root is None or root.real <= BESIDE * loop.slowest or root.imag > top * (1.0 + 1e-9):
                continue
            if all(abs(root - other) > 1e-6 * abs(root) for other in found):
                found.append(root)
    single = [root.imag == 0.0 or (loop.step is not None and abs(root.imag - top) < 1e-6 * top) for root in found]
    if sum(1 if alone else 2 for alone in single) != count:
        raise ArithmeticError(f"{count} poles right of the axis were counted, {found} were found")
    return sorted(found, key=abs)


def _newton(loop: Loop, s: complex) -> complex | None:
    for _ in range(80):
        h = 1e-5 * abs(s)
        with np.errstate(all="ignore"):  # far from any root anything may overflow
            low, value, high = (complex(each) for each in 1.0 + loop.at(np.array([s - h, s, s + h])))
        slope = (high - low) / (2.0 * h)
        if not (cmath.isfinite(value) and cmath.isfinite(slope)) or slope == 0:
            return None
        change = value / slope
        change *= min(1.0, 0.3 * abs(s) / abs(change)) if change else 1.0
        s -= complex(change)
        if abs(change) < 1e-12 * abs(s):
            real = abs(s.imag) < 1e-9 * abs(s)
            return complex(s.real, 0.0 if real else abs(s.imag))
    return None


def figures(loop: Loop) -> Told:
    """Figures of a loop that `closed_right` finds stable."""
    frequency = np.geomspace(0.1 * loop.slowest, loop.highest, POINTS)
    values = loop.at(1j * frequency)
    changes = [
        1.0 / -loop(w).real for w in _zeros(lambda w: loop(w).imag, frequency, values.imag) if loop(w).real < 0.0
    ]
    if loop.step is not None and (last := loop(loop.highest).real) < 0.0:  # real at half the sample rate
        changes.append(-1.0 / last)
    if abs(loop(0.01 * frequency[0])) < 1.01 * abs(values[0]) and (first := values[0].real) < -1e-9:
        changes.append(-1.0 / first)
    crossovers = _zeros(lambda w: abs(loop(w)) - 1.0, frequency, np.abs(values) - 1.0)
    phases = [abs(cmath.phase(-loop(w))) for w in crossovers]
    return Told(
        min((factor for factor in changes if factor > 1.0), default=math.inf),
        min((1.0 / factor for factor in changes if factor < 1.0), default=math.inf),
        min(phases, default=math.inf),
        tuple(crossovers),
        1.0 / _peak(lambda L: abs(0.5 * (1.0 - L) / (1.0 + L)), loop, frequency, values),
        _peak(lambda L: abs(1.0 / (1.0 + L)), loop, frequency, values),
    )


def _zeros(f: Callable[[float], float], frequency: Array, values: Array) -> list[float]:
    """Where f changes its sign."""
    signs = np.sign(values)
    return [
        float(brentq(f, frequency[k], frequency[k + 1], xtol=1e-14 * frequency[k + 1], rtol=1e-13))
        for k in np.flatnonzero(signs[1:] * signs[:-1] < 0)
    ]


def _peak(f: Callable[[complex], float], loop: Loop, frequency: Array, values: Array) -> float:
    sizes = np.array([f(complex(value)) for value in values])
    best = float(sizes.max())
    inner = np.flatnonzero((sizes[1:-1] >= sizes[:-2]) & (sizes[1:-1] >= sizes[2:])) + 1
    for k in inner[np.argsort(-sizes[inner])[:3]]:  # the rest is lower by more than the grid misses, or rounding
        found = minimize_scalar(
            lambda w: -f(loop(w)), bounds=(frequency[k - 1], frequency[k + 1]), method="bounded",
            options={"xatol": 1e-10 * frequency[k]},
        )  # fmt: skip
        best = max(best, -float(found.fun))
    return best


def delay_margin(loop: Loop) -> float:
    """Of a continuous loop: the shortest dead time that turns a crossover onto -1."""
    return min((cmath.phase(-loop(w)) % (2.0 * math.pi) / w for w in figures(loop).crossovers), default=math.inf)


def sampled_delay_margin(made: Callable[[float], Loop]) -> float:
    """Of a sampled loop. made: the loop with a dead time in addition; it is stable up to what is returned."""
    loop = made(0.0)
    starts = [(w, cmath.phase(-loop(w)) % (2.0 * math.pi) / w) for w in figures(loop).crossovers]

    def off(at: Sequence[float]) -> list[float]:
        value = 1.0 + made(max(at[1], 0.0))(at[0])
        return [value.real, value.imag]

    found = []
    for start in starts:
        (frequency, delay), _, done, _ = fsolve(off, start, xtol=1e-13, full_output=True)
        if done == 1 and frequency > 0.0 and delay > 0.0:
            found.append(float(delay))
    margin = min(found)
    if closed_right(made(margin * (1.0 + 1e-6))) == 0:
        raise ArithmeticError("the loop is still stable beyond its delay margin")
    for share in (0.999999, *np.linspace(0.95, 0.0, 8)):
        if closed_right(made(margin * share)):
            raise ArithmeticError("the loop is unstable within its delay margin")
    return margin


def step_of_sampled(
    path: Path, gains: tuple[float, float, float, float], step: float, delay: float, samples: int, parts: int
) -> tuple[Array, Array]:
    """Times and what is measured after a unit step of the set point of a sampled pid, `parts` times a sample."""
    kp, ki, kd, filter_ = gains
    span = step / parts
    late = round(delay / span)
    if abs(late * span - delay) > 1e-9 * step:
        raise ValueError("the dead time is no whole number of parts of a sample")
    F, b = flow(path.A, path.b, span)
    x, sent, out = np.zeros(len(path.A)), np.zeros(samples), np.zeros(samples * parts + 1)
    integral = slope = last = 0.0
    for k in range(samples):
        error = 1.0 - out[k * parts]  # read before anything changes
        integral += ki * 0.5 * step * (error + last)
        slope = ((2.0 * filter_ - step) * slope + 2.0 * kd * (error - last)) / (2.0 * filter_ + step)
        last = error
        sent[k] = kp * error + integral + slope
        for j in range(k * parts, (k + 1) * parts):
            u = sent[(j - late) // parts] if j >= late else 0.0
            x = F @ x + b * u
            out[j + 1] = path.C[0] @ x + path.d[0] * u
    return np.arange(len(out)) * span, out


def step_of_late(path: Path, kp: float, ki: float, delay: float, horizon: float, parts: int) -> tuple[Array, Array]:
    """The same of a continuous pi with a dead time of `parts` short spans, its output taken straight within each."""
    span = delay / parts
    n = len(path.A)
    whole = np.zeros((n + 2, n + 2))
    whole[:n, :n], whole[:n, n], whole[n, n + 1] = path.A, path.b, 1.0 / span
    found = expm(whole * span)
    F, first, second = found[:n, :n], found[:n, n] - found[:n, n + 1], found[:n, n + 1]
    count = round(horizon / span)
    sent, y, x, integral, last = np.zeros(count + parts + 1), np.zeros(count + 1), np.zeros(n), 0.0, 1.0
    sent[parts] = kp  # at time zero; a jump, hence:
    for k in range(count):
        a = 0.0 if k < parts else sent[k]
        x = F @ x + first * a + second * (sent[k + 1] if k >= parts else 0.0)
        y[k + 1] = path.C[0] @ x
        error = 1.0 - y[k + 1]
        integral += ki * 0.5 * span * (error + last)
        last = error
        sent[k + 1 + parts] = kp * error + integral
    return np.arange(count + 1) * span, y


def settled(times: Array, values: Array, within: float) -> float:
    """When `values` come within a share of one to stay."""
    outside = np.abs(values - 1.0) - within
    k = int(np.flatnonzero(outside > 0.0)[-1])
    return float(times[k] + (times[k + 1] - times[k]) * outside[k] / (outside[k] - outside[k + 1]))
