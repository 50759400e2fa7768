"""Random plants with random loops around them, as specs, and their margins by algebra frequency by frequency.

Loop transfer functions are made from responses (no states are joined), stability from the matrix that the equations of
the closed loop give column by column; a sampled loop goes from instant to instant. Nothing is shared with the library.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np
from scipy.linalg import block_diag, expm

SHAPES = ("single", "cascade", "beside", "square", "sampled", "sampled cascade")
PLANT = """import numpy as np
from linverify import Plant

A, B, C = (np.array(each) for each in {matrices})
plant = Plant(
    states={{f"x{{i}}": "" for i in range(len(A))}},
    inputs={{f"u{{i}}": "" for i in range(2)}},
    outputs={{f"y{{i}}": "" for i in range(2)}},
    dynamics=lambda t, x, u, p: A @ x + B @ u,
    measurement=lambda t, x, u, p: C @ x,
)
"""


@dataclass(frozen=True)
class Controller:
    """x' = A x + B e, v = C x + D e with e (k,), v (m,); of a sampled one in z. text: as a spec writes it."""

    A: np.ndarray
    B: np.ndarray
    C: np.ndarray
    D: np.ndarray
    text: str

    def at(self, s: np.ndarray) -> np.ndarray:
        """(W, m, k) at s (or z), (W,)."""
        n = self.A.shape[0]
        if not n:
            return np.broadcast_to(self.D + 0j, (s.size, *self.D.shape))
        return self.C @ np.linalg.solve(s[:, None, None] * np.eye(n) - self.A, self.B[None] + 0j) + self.D

    def times(self, gain: float) -> Controller:
        return Controller(self.A, self.B, gain * self.C, gain * self.D, self.text)


@dataclass(frozen=True)
class Wired:
    """A spec in parts. lags: of the inputs; inner, outer: controllers; delay, sample: of the outer loop; outside: dead
    times of the plant's input and output; in_model: the inner loop belongs to the local
    model; steps: whether figures of a step are asked for."""

    seed: int
    shape: str
    A: np.ndarray
    B: np.ndarray
    C: np.ndarray
    lags: tuple[float, float]
    inner: Controller | None
    outer: Controller
    delay: float = 0.0
    outside: tuple[float, float] = (0.0, 0.0)
    sample: float | None = None
    at_output: bool = False
    in_model: bool = False
    stable: bool = True
    steps: bool = False
    tags: tuple[str, ...] = field(default=())

    @property
    def told(self) -> str:
        return f"seed {self.seed}: {self.shape}, order {len(self.A)}, {', '.join(self.tags)}"

    @property
    def plant_file(self) -> str:
        return PLANT.format(matrices=[self.A.tolist(), self.B.tolist(), self.C.tolist()])

    @property
    def spec(self) -> str:
        lines = ["linverify: 1", "plant: plant.py:plant", "operating_points: {rest: {hold: {u0: 0, u1: 0}}}"]
        named = {f"u{i}": lag for i, lag in enumerate(self.lags) if lag}
        if named:
            lines.append(f"actuators: {{{', '.join(f'{name}: {{lag: {lag!r} s}}' for name, lag in named.items())}}}")
        if any(self.outside):
            read = "y1" if "cascade" in self.shape else "y0"
            late = f"inputs: {{u0: {self.outside[0]!r} s}}, outputs: {{{read}: {self.outside[1]!r} s}}"
            lines.append(f"delays: {{{late}}}")
        if self.in_model:
            lines.append("local_models: {source: derive, with: [inner]}")
        lines.append("loops:")
        if self.inner is not None:
            lines += _loop("inner", self.inner.text, "[y0]", "[u0]")
        measures, moves = {
            "single": ("[y0]", "[u0]"), "cascade": ("[y1]", "[inner.set_point.y0]"), "beside": ("[y1]", "[u1]"),
            "square": ("[y0, y1]", "[u0, u1]"), "sampled": ("[y0]", "[u0]"),
            "sampled cascade": ("[y1]", "[inner.set_point.y0]"),
        }[self.shape]  # fmt: skip
        lines += _loop("asked", self.outer.text, measures, moves)
        if self.inner is not None and not self.in_model:
            lines.append("    with: [inner]")
        if self.delay:
            lines.append(f"    delay: {self.delay!r} s")
        if self.sample:
            lines.append(f"    sample: {self.sample!r} s")
        if self.at_output:
            lines.append("    break: plant_output")
        if self.steps:
            lines.append("    require: {settling: 1e9 s}")
        return "\n".join(lines) + "\n"

    def flow(self) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Plant, actuators and the inner loop as x' = A x + B v, y = C x: v are the commands of the asked loop.

        Found by calling the equations with one thing at a time; lagless inputs pass straight.
        """
        n, m = len(self.A), 2
        k = 0 if self.inner is None else len(self.inner.A)

        def rates(x: np.ndarray, v: np.ndarray) -> np.ndarray:
            plant, lagged, inside = x[:n], x[n : n + m], x[n + m :]
            y = self.C @ plant
            command = np.zeros(m)
            dk = np.zeros(k)
            if self.inner is not None:
                e = np.array([(v[0] if "cascade" in self.shape else 0.0) - y[0]])
                command[0] += float((self.inner.C @ inside + self.inner.D @ e)[0])
                dk = self.inner.A @ inside + self.inner.B @ e
            if self.shape == "beside":
                command[1] += v[0]
            elif "cascade" not in self.shape:
                command[: v.size] += v
            u = np.array([lagged[i] if self.lags[i] else command[i] for i in range(m)])
            dl = np.array([(command[i] - lagged[i]) / self.lags[i] if self.lags[i] else -lagged[i] for i in range(m)])
            return np.concatenate([self.A @ plant + self.B @ u, dl, dk])

        size, width = n + m + k, self.outer.D.shape[0]
        A = np.column_stack([rates(each, np.zeros(width)) for each in np.eye(size)])
        B = np.column_stack([rates(np.zeros(size), each) for each in np.eye(width)])
        rows = {"cascade": [1], "sampled cascade": [1], "beside": [1], "square": [0, 1]}.get(self.shape, [0])
        return A, B, np.hstack([self.C[rows], np.zeros((len(rows), m + k))])


def _loop(name: str, controller: str, measures: str, moves: str) -> list[str]:
    return [f"  {name}:", f"    controller: {controller}", f"    measures: {measures}", f"    moves: {moves}"]


# -- transfer functions and stability --------------------------------------------------------------------------------


def transfer(wired: Wired) -> Callable[[np.ndarray], np.ndarray]:
    """L (W, m, m) of frequencies (W,): K G, or G K at the plant's output; sampled: of z = exp(j w h)."""
    return _sampled(wired) if wired.sample else _continuous(wired)


def _continuous(wired: Wired) -> Callable[[np.ndarray], np.ndarray]:
    def L(w: np.ndarray) -> np.ndarray:
        s = 1j * w
        P = wired.C @ np.linalg.solve(s[:, None, None] * np.eye(len(wired.A)) - wired.A, wired.B[None] + 0j)
        P = P / np.stack([1.0 + lag * s for lag in wired.lags], axis=-1)[:, None, :]
        K = wired.outer.at(s) * np.exp(-s * (wired.delay + sum(wired.outside)))[:, None, None]
        if wired.inner is not None:
            k = wired.inner.at(s)[:, 0, 0]
            closed = k / (1.0 + k * P[:, 0, 0])  # from the inner set point to the command of u0
            if "cascade" in wired.shape:
                G = (P[:, 1, 0] * closed)[:, None, None]
            else:  # u1 acts on y1 itself, and through y0 and the inner loop
                G = (P[:, 1, 1] - P[:, 1, 0] * closed * P[:, 0, 1])[:, None, None]
        else:
            G = P if wired.shape == "square" else P[:, :1, :1]
        return G @ K if wired.at_output else K @ G

    return L


def _sampled(wired: Wired) -> Callable[[np.ndarray], np.ndarray]:
    A, B, C = wired.flow()
    h = float(wired.sample or 1.0)
    whole = int(wired.delay / h + 1e-12)
    rest = max(wired.delay - whole * h, 0.0)
    Ad = held(A, B, h)[0]
    carried, now = held(A, B, h - rest)
    late = carried @ held(A, B, rest)[1]

    def L(w: np.ndarray) -> np.ndarray:
        z = np.exp(1j * w * h)
        reached = now[None] + late[None] / z[:, None, None]
        G = C @ np.linalg.solve(z[:, None, None] * np.eye(len(A)) - Ad, reached) / (z**whole)[:, None, None]
        return wired.outer.at(z) @ G

    return L


def held(A: np.ndarray, B: np.ndarray, time: float) -> tuple[np.ndarray, np.ndarray]:
    """exp(A time) and what inputs that are held for that time add."""
    n, m = B.shape
    both = expm(np.block([[A, B], [np.zeros((m, n + m))]]) * time)
    return both[:n, :n], both[:n, n:]


def closed(wired: Wired) -> np.ndarray:
    """Growth of the closed loop's modes without the asked loop's dead time: real parts, or log |z|."""
    A, B, C = wired.flow()
    K = wired.outer
    if wired.sample:
        A, B = held(A, B, wired.sample)
    whole = np.block([[A - B @ K.D @ C, B @ K.C], [-K.B @ C, K.A]])
    values = np.linalg.eigvals(whole)
    return np.log(np.maximum(np.abs(values), 1e-300)) if wired.sample else values.real


# -- drawing ---------------------------------------------------------------------------------------------------------


def drawn(seed: int) -> Wired:
    """The case of a seed, with a gain that leaves it stable where one is found, three times out of four."""
    rng = np.random.default_rng([161803, seed])
    shape = SHAPES[seed % len(SHAPES)]
    A, B, C = _plant(rng)
    lags = (0.0, 0.0)
    tags: list[str] = []
    if rng.random() < 0.5:
        lags = (float(rng.uniform(0.02, 0.3)), float(rng.uniform(0.02, 0.3)))
        tags.append("lags")
    sample = float(10.0 ** rng.uniform(-1.7, -0.3)) if "sampled" in shape else None
    inner = None
    if "cascade" in shape or shape == "beside":
        inner = _controller(rng, 1, None).times(1.0)
        inner = _fitting(Wired(seed, "single", A, B, C, lags, None, inner), rng).outer
    width = 2 if shape == "square" else 1
    wired = Wired(seed, shape, A, B, C, lags, inner, _controller(rng, width, sample), sample=sample)
    if shape == "square" and rng.random() < 0.5:
        wired = changed(wired, at_output=True)
        tags.append("at output")
    if shape == "beside" and seed % 12 > 5:
        wired = changed(wired, in_model=True)
        tags.append("inner loop in the model")
    wired = _fitting(wired, rng)
    if seed % 7 in (2, 5):
        tags.append("hidden mode")
        wired = hiding(wired, np.random.default_rng([577, seed]))
    stable = bool(closed(wired).max() < 0.0)
    if sample and rng.random() < 0.5:
        tags.append("dead time")
        wired = changed(wired, delay=float(rng.uniform(0.1, 2.5)) * sample)
        stable = late_is_stable(wired)
    return changed(wired, stable=stable, tags=tuple(tags))


def hiding(wired: Wired, rng: np.random.Generator) -> Wired:
    """With a mode that no input moves or no output shows, or but weakly, mixed with the others; some are unstable."""
    rate, growing = 10.0 ** rng.uniform(-0.5, 0.5), rng.random() < 1.0 / 3.0
    if rng.random() < 0.5:
        mode = np.array([[rate if growing else -rate]])
    else:
        damping = -0.1 if growing else 0.1
        mode = rate * np.array([[-damping, 1.0], [-1.0, -damping]])
    n, k = len(wired.A), len(mode)
    seen = rng.random() < 0.5
    weak = 0.0 if growing or rng.random() < 0.5 else 10.0 ** rng.uniform(-14.0, -8.0)
    turn = np.linalg.qr(rng.normal(size=(n + k, n + k)))[0]
    A = block_diag(wired.A, mode)
    A[n:, :n], A[:n, n:] = (weak * rng.normal(size=(k, n)), 0.0) if seen else (0.0, weak * rng.normal(size=(n, k)))
    B = np.vstack([wired.B, (weak if seen else 1.0) * rng.normal(size=(k, 2))])
    C = np.hstack([wired.C, (1.0 if seen else weak) * rng.normal(size=(2, k))])
    return changed(wired, A=turn @ A @ turn.T, B=turn @ B, C=C @ turn.T)


def late_is_stable(wired: Wired) -> bool:
    """The sampled loop with its dead time, from instant to instant, with the commands under way as states."""
    A, B, C = wired.flow()
    h, K = float(wired.sample or 1.0), wired.outer
    whole = int(wired.delay / h + 1e-12)
    rest = max(wired.delay - whole * h, 0.0)
    carried, now = held(A, B, h - rest)
    late = carried @ held(A, B, rest)[1]
    n, k, past = len(A), len(K.A), whole + 1
    M = np.zeros((n + k + past, n + k + past))
    unit = np.eye(n + k + past)
    command = np.concatenate([-(K.D @ C)[0], K.C[0] if k else np.zeros(0), np.zeros(past)])
    M[:n, :n] = held(A, B, h)[0]
    M[:n] += np.outer(now[:, 0], command if whole == 0 else unit[n + k + whole - 1])
    M[:n] += np.outer(late[:, 0], unit[n + k + whole])
    M[n : n + k, :n], M[n : n + k, n : n + k] = -K.B @ C, K.A
    M[n + k] = command
    M[n + k + 1 :, n + k : -1] += np.eye(past - 1)
    return bool(np.abs(np.linalg.eigvals(M)).max() < 1.0)


def changed(wired: Wired, **changes: object) -> Wired:
    return Wired(**{**{name: getattr(wired, name) for name in Wired.__dataclass_fields__}, **changes})  # type: ignore[arg-type]


def _plant(rng: np.random.Generator) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    blocks = []
    for _ in range(int(rng.integers(1, 4))):
        w = 10.0 ** rng.uniform(-0.5, 0.8)
        if rng.random() < 0.5:
            blocks.append(np.array([[w * rng.choice([-1.0, -1.0, -1.0, 0.3])]]))
        else:
            damping = 10.0 ** rng.uniform(-2.0, 0.0)
            blocks.append(np.array([[-damping * w, w], [-w, -damping * w]]))
    A = block_diag(*blocks)
    n = len(A)
    turn = np.linalg.qr(rng.normal(size=(n, n)))[0]
    return turn @ A @ turn.T, turn @ rng.normal(size=(n, 2)), rng.normal(size=(2, n)) @ turn.T


def _controller(rng: np.random.Generator, width: int, sample: float | None) -> Controller:
    if width == 2:
        return _matrix(rng)
    kind = rng.choice(["gain", "pid", "fraction"])
    if kind == "gain":
        return _gain(1.0)
    if kind == "pid":
        return _pid(
            1.0, float(rng.uniform(0.05, 0.5)), float(rng.uniform(0.0, 0.3)), float(rng.uniform(0.1, 0.5)), sample
        )
    a, b = float(rng.uniform(0.2, 1.0)), float(rng.uniform(0.5, 5.0))
    if sample is not None:  # (z - a) / (z - exp(-b h))
        return _fraction([1.0, -a * 0.5], [1.0, -math.exp(-b * sample)])
    return _fraction([a, 1.0], [1.0 / b, 1.0])


def _gain(value: float) -> Controller:
    return Controller(np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)), np.array([[value]]), f"gain {value!r}")


def _pid(kp: float, ki: float, kd: float, filter_: float, sample: float | None) -> Controller:
    """In parallel; sampled by the trapezoidal rule."""
    A, B = np.diag([0.0, -1.0 / filter_]), np.array([[1.0], [1.0 / filter_]])
    C, D = np.array([[ki, -kd / filter_]]), np.array([[kp + kd / filter_]])
    if sample is not None:
        half = np.linalg.inv(np.eye(2) - A * sample / 2.0)
        A, B, C, D = half @ (np.eye(2) + A * sample / 2.0), half @ B * sample, C @ half, D + C @ half @ B * sample / 2.0
    return Controller(A, B, C, D, f"pid {kp!r} {ki!r} {kd!r} {filter_!r}")


def _fraction(num: list[float], den: list[float]) -> Controller:
    """(n1 s + n0) / (d1 s + d0)."""
    pole, through = -den[1] / den[0], num[0] / den[0]
    rest = (num[1] - through * den[1]) / den[0]
    text = f"fraction {num!r} {den!r}"
    return Controller(np.array([[pole]]), np.ones((1, 1)), np.array([[rest]]), np.array([[through]]), text)


def _matrix(rng: np.random.Generator) -> Controller:
    n = int(rng.integers(0, 3))
    A = -np.diag(rng.uniform(0.5, 5.0, n)) + 0.2 * rng.normal(size=(n, n))
    return Controller(A, rng.normal(size=(n, 2)), rng.normal(size=(2, n)), rng.normal(size=(2, 2)), "matrices")


def _fitting(wired: Wired, rng: np.random.Generator) -> Wired:
    gains = [float(sign * 10.0**power) for power in rng.permutation(np.linspace(-1.5, 1.5, 13)) for sign in (1.0, -1.0)]
    made = [changed(wired, outer=_written(wired.outer.times(gain), gain)) for gain in gains]
    if rng.random() < 0.25:
        return made[0]
    return next((each for each in made if closed(each).max() < 0.0), made[0])


def _written(controller: Controller, gain: float) -> Controller:
    """With the words of a spec for it."""
    kind, *rest = controller.text.split(" ", 1)
    if kind == "gain":
        text = f"{{gain: [[{gain!r}]]}}"
    elif kind == "pid":
        kp, ki, kd, filter_ = (float(each) for each in rest[0].split())
        text = f"{{pid: {{kp: {gain * kp!r}, ki: {gain * ki!r}, kd: {gain * kd!r}, filter: {filter_!r} s}}}}"
    elif kind == "fraction":
        num, den = rest[0].split("] [")
        scaled = [gain * float(each) for each in num.strip("[]").split(",")]
        text = f"{{num: {scaled!r}, den: [{den}}}"
    elif len(controller.A):
        parts = (f"{name}: {getattr(controller, name).tolist()!r}" for name in "ABCD")
        text = f"{{{', '.join(parts)}}}"
    else:
        text = f"{{gain: {controller.D.tolist()!r}}}"
    return Controller(controller.A, controller.B, controller.C, controller.D, text)
