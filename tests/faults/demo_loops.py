"""The loops of the demo specs, written down anew for `loop_algebra`: delivered models read and wired by hand."""

from __future__ import annotations

import csv
import importlib.util
import json
import math
from dataclasses import dataclass
from pathlib import Path as File
from types import ModuleType

import numpy as np
from scipy.optimize import fsolve

from .loop_algebra import (
    Loop,
    Path,
    Told,
    delay_margin,
    figures,
    held,
    outer_poles,
    pid,
    resolvent,
    right_poles,
    sampled_delay_margin,
    settled,
    step_of_late,
    step_of_sampled,
)

DEMO = File(__file__).parents[2] / "specs"
SIZES = {"deg": math.pi / 180.0, "deg/s": math.pi / 180.0, "kN": 1e3, "kn": 1852.0 / 3600.0}
LOOKS = 20  # of a step response in the time in which nothing much happens
SAME = ("m", "m/s", "A", "V", "1", "degC", "kg/s")


@dataclass(frozen=True)
class Delivered:
    """A delivered model in the plant's units."""

    states: list[str]
    inputs: list[str]
    outputs: list[str]
    A: np.ndarray
    B: np.ndarray
    C: np.ndarray
    D: np.ndarray

    def path(self, moved: str, *measured: str) -> Path:
        column, rows = self.inputs.index(moved), [self.outputs.index(name) for name in measured]
        return Path(self.A, self.B[:, column], self.C[rows], self.D[rows, column])


def from_json(file: File) -> Delivered:
    told = json.loads(file.read_text(encoding="utf-8"))
    names = {word: told[word] for word in ("states", "inputs", "outputs")}
    x, u, y = (np.array([_size(told["units"][name]) for name in names[word]]) for word in names)
    A, B, C, D = (np.array(told[word]) for word in "ABCD")
    return Delivered(
        *names.values(), (x[:, None] * A) / x, (x[:, None] * B) / u, (y[:, None] * C) / x, (y[:, None] * D) / u
    )


def from_table(file: File, point: str) -> Delivered:
    rows = [row for row in csv.DictReader(file.read_text(encoding="utf-8").splitlines()) if row["op"] == point]
    kinds = {kind: [row["row"] for row in rows if row["matrix"] == kind] for kind in ("x0", "u0", "y0")}
    if any(_size(row["value"]) != 1.0 for row in rows if row["matrix"] == "units"):
        raise ValueError("units other than the plant's")
    made = {}
    for word, (down, across) in {"A": ("x0", "x0"), "B": ("x0", "u0"), "C": ("y0", "x0"), "D": ("y0", "u0")}.items():
        made[word] = np.zeros((len(kinds[down]), len(kinds[across])))
        for row in rows:
            if row["matrix"] == word:
                made[word][kinds[down].index(row["row"]), kinds[across].index(row["col"])] = float(row["value"])
    return Delivered(*kinds.values(), **made)


def _size(unit: str) -> float:
    return 1.0 if unit in SAME else SIZES[unit]


def scheduled(speed: float) -> dict[str, float]:
    """Gains of the ferry's loop at a speed in knots, per rad."""
    rows = np.array(
        [[float(cell) for cell in line.split(",")]
         for line in (DEMO / "foil_ferry" / "gains.csv").read_text(encoding="utf-8").splitlines()[1:]]
    )  # fmt: skip
    return {
        name: math.radians(np.interp(speed, rows[:, 0], rows[:, 1 + k])) for k, name in enumerate(("kp", "ki", "kd"))
    }


@dataclass(frozen=True)
class Stepped:
    """A sampled pid around a continuous path. within: band of settling, where that is of interest."""

    path: Path
    kp: float
    ki: float
    kd: float
    filter: float
    sample: float
    delay: float
    slowest: float
    shortest: float  # time in which nothing much happens
    horizon: float
    within: float = math.nan

    def later(self, more: float) -> Loop:
        stairs = held(self.path, self.sample, self.delay + more)
        control = pid(self.kp, self.ki, self.kd, self.filter, self.sample)
        poles = outer_poles(np.linalg.eigvals(stairs.F))
        return Loop(lambda s: control(s) * stairs.at(s)[:, 0], poles, math.inf, self.slowest, self.sample)

    def loop(self) -> Loop:
        return self.later(0.0)

    def told(self) -> dict[str, float]:
        gains = (self.kp, self.ki, self.kd, self.filter)
        ratio, least = self.delay / self.sample, max(20, round(LOOKS * self.sample / self.shortest))
        parts = next(count for count in range(least, 100 * least) if abs(ratio * count - round(ratio * count)) < 1e-9)
        times, y = step_of_sampled(self.path, gains, self.sample, self.delay, round(self.horizon / self.sample), parts)
        told = common(figures(self.loop())) | {"delay margin": sampled_delay_margin(self.later)}
        told["overshoot"] = float(y.max()) - 1.0
        if not math.isnan(self.within):
            told[f"settling to {100.0 * self.within:g} %"] = settled(times, y, self.within)
        return told


def ride(
    model: Delivered, kp: float, ki: float, kd: float, *, filter_: float = 0.05, lag: float = 0.06,
    sample: float = 0.02, delay: float = 0.02,
) -> Stepped:  # fmt: skip
    """The ferry's ride height on the fore flap."""
    path = model.path("fore_flap", "ride_height").behind_lag(lag)
    return Stepped(path, kp, ki, kd, filter_, sample, delay, 1e-3, 0.02, 12.0)


@dataclass(frozen=True)
class Water:
    """The pasteurizer's water loop on the steam valve, continuous."""

    model: Delivered
    gain: float = 0.1
    lag: float = 0.0  # of the steam valve

    def loop(self) -> Loop:
        path = self.model.path("steam_valve", "water_loop")
        path = path.behind_lag(self.lag) if self.lag else path
        return Loop(lambda s: self.gain * path.at(s)[:, 0], right_poles(np.linalg.eigvals(path.A)), 1e4, 1e-4)

    def told(self) -> dict[str, float]:
        return common(figures(self.loop()))


@dataclass(frozen=True)
class Product:
    """The exit of the holding tube on the set point of the water loop, behind a dead time."""

    model: Delivered
    gain: float = 0.1  # of the water loop
    lag: float = 0.0  # of the steam valve
    kp: float = 0.6
    ki: float = 0.03  # 1.8 a minute
    delay: float = 5.0
    within: float = 0.05

    @property
    def path(self) -> Path:
        path = self.model.path("steam_valve", "water_loop", "holding_exit")
        path = path.behind_lag(self.lag) if self.lag else path
        if path.d.any():
            raise ValueError("the valve moves a measurement at once")
        A = path.A - self.gain * np.outer(path.b, path.C[0])
        return Path(A, self.gain * path.b, path.C[1:], path.d[1:])

    def loop(self) -> Loop:
        path, control = self.path, pid(self.kp, self.ki)
        poles = right_poles(np.linalg.eigvals(path.A))
        return Loop(lambda s: control(s) * path.at(s)[:, 0] * np.exp(-s * self.delay), poles, 1e2, 1e-4)

    def sampled(self, step: float) -> Stepped:
        """The same with its controller sampled."""
        return Stepped(self.path, self.kp, self.ki, 0.0, 1.0, step, self.delay, 1e-4, 1.0, 1200.0, self.within)

    def told(self) -> dict[str, float]:
        loop = self.loop()
        times, y = step_of_late(self.path, self.kp, self.ki, self.delay, 2500.0, round(5 * self.delay))
        return {
            **common(figures(loop)),
            "delay margin": delay_margin(loop),
            f"settling to {100.0 * self.within:g} %": settled(times, y, self.within),
        }


@dataclass(frozen=True)
class Current:
    """The converter's coil current on the duty, sampled, half a sample late."""

    model: Delivered
    gain: float = 0.02
    sample: float = 20e-6
    delay: float = 10e-6

    def loop(self) -> Loop:
        stairs = held(self.model.path("duty", "coil_current"), self.sample, self.delay)
        poles = outer_poles(np.linalg.eigvals(stairs.F))
        return Loop(lambda s: self.gain * stairs.at(s)[:, 0], poles, 1e6, 1.0, self.sample)

    def told(self) -> dict[str, float]:
        return common(figures(self.loop()))


@dataclass(frozen=True)
class Rail:
    """The converter's rail on the set point of the current loop, every `times` samples of that."""

    model: Delivered
    current: Current
    kp: float = 0.3
    ki: float = 300.0
    times: int = 1

    def loop(self) -> Loop:
        inner = self.current
        stairs = held(self.model.path("duty", "coil_current", "rail"), inner.sample, inner.delay)
        n, kept = len(stairs.F), stairs.whole + 1
        # x, then the duties of the last samples, the newest first
        A, b = np.zeros((n + kept, n + kept)), np.zeros(n + kept)
        duty = np.zeros(n + kept)
        duty[:n] = -inner.gain * stairs.C[0]
        duty[-1] -= inner.gain * stairs.d[0]
        A[:n, :n] = stairs.F
        A[:n, -1] += stairs.before
        if stairs.whole:
            A[:n, n + stairs.whole - 1] += stairs.now
        else:
            A[:n] += np.outer(stairs.now, duty)
            b[:n] = inner.gain * stairs.now
        A[n], b[n] = duty, inner.gain
        A[n + 1 :, n:-1] += np.eye(kept - 1)
        C = np.zeros(n + kept)
        C[:n], C[-1] = stairs.C[1], stairs.d[1]
        F, g = np.linalg.matrix_power(A, self.times), sum(np.linalg.matrix_power(A, k) @ b for k in range(self.times))
        step = self.times * inner.sample
        control = pid(self.kp, self.ki, step=step)
        poles = outer_poles(np.linalg.eigvals(F))
        return Loop(lambda s: control(s) * (resolvent(F, np.exp(s * step), g) @ C), poles, 1e6, 1.0, step)

    def told(self) -> dict[str, float]:
        return common(figures(self.loop()))


def common(found: Told) -> dict[str, float]:
    """By the names that verdicts use; ratios, rad, rad per time unit."""
    return {
        "gain margin (upwards)": found.gain_up,
        "gain margin (downwards)": found.gain_down,
        "phase margin": found.phase,
        "crossover": max(found.crossovers, default=math.nan),
        "disk margin": found.disk,
        "sensitivity peak": found.sensitivity,
    }


def converter(parameters: dict[str, float], rail: float, battery: float, load: float) -> Delivered:
    """The converter's slopes by differences of its own equations, which are of second degree, at its own trim."""
    plant = _module("buoy_converter")
    p = {name: value for name, (value, _) in plant.converter.parameters.items()} | parameters

    def both(z: np.ndarray) -> np.ndarray:
        x, u = z[:2], z[2:]
        return np.concatenate([plant.dynamics(0.0, x, u, p), plant.measurement(0.0, x, u, p)])

    def off(free: np.ndarray) -> np.ndarray:
        rates = both(np.array([*free, battery, load]))
        return np.array([1e-3 * rates[0], 1e-3 * rates[1], rates[2] - rail])

    free = fsolve(off, [3.5, rail, 0.5], xtol=1e-13)
    z = np.array([*free, battery, load])
    size = np.array([1.0, 1.0, 0.01, 1.0, 1.0])
    slopes = np.column_stack([(both(z + h) - both(z - h)) / (2.0 * h.sum()) for h in np.diag(1e-3 * size)])
    names = ["coil_current", "charge_voltage"], ["duty", "battery", "load"], ["rail", "coil_current"]
    return Delivered(*names, slopes[:2, :2], slopes[:2, 2:], slopes[2:, :2], slopes[2:, 2:])


def _module(demo: str) -> ModuleType:
    spec = importlib.util.spec_from_file_location(f"{demo}_by_hand", DEMO / demo / "plant.py")
    if spec is None or spec.loader is None:
        raise ImportError(demo)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module
