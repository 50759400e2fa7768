"""Four plants of unlike kind with invented data, on which the engine is measured: see `KINDS`.

pend: smooth and small; tank: square roots; body: twelve states with tables; reactor: stiff. Each comes with a trimmed
operating point and its local model, found here by scipy and central differences, apart from the package's own trim.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from scipy.optimize import fsolve

from linverify.core.bound import BoundPlant
from linverify.core.drive import Drive
from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.plant import Plant

Parameters = Mapping[str, float]


@dataclass(frozen=True)
class Kind:
    """A plant at an operating point: every is the time between instants, amplitude (m,) and excursion (n,) sizes."""

    plant: BoundPlant
    point: OperatingPoint
    model: LocalModel
    every: float
    amplitude: np.ndarray
    excursion: np.ndarray

    def drives(self, count: int, intervals: int, course: str = "held", seed: int = 5) -> list[Drive]:
        """Uniform random courses of all inputs."""
        generator = np.random.default_rng(seed)
        shape = (count, intervals, len(self.amplitude))
        values = self.amplitude * generator.uniform(-1, 1, size=shape)
        return [Drive(self.every, self.plant.inputs.names, row, course) for row in values]


def settled(
    plant: Plant, x: np.ndarray, u: np.ndarray, every: float, amplitude: object, excursion: object, drift: object = None
) -> Kind:
    """`Kind` at (x, u), which must be an equilibrium but for `drift`."""
    bound = BoundPlant(plant)
    generator = np.random.default_rng(1)
    size, reach = np.asarray(excursion, dtype=float), np.asarray(amplitude, dtype=float)
    bound.detect(
        0.0,
        x[:, None] + 0.3 * size[:, None] * generator.uniform(-1, 1, (len(x), 5)),
        u[:, None] + reach[:, None] * generator.uniform(-1, 1, (len(u), 5)),
    )
    rates = np.zeros(len(x)) if drift is None else np.asarray(drift, dtype=float)
    y = bound.measure(0.0, x, u)
    point = OperatingPoint(x, u, y, rates, 0.0, bound.states, bound.inputs, bound.outputs)
    A, B = (
        _slopes(lambda z: bound.rates(0.0, z, u), x, 1e-5 * size),
        _slopes(lambda z: bound.rates(0.0, x, z), u, 1e-5 * reach),
    )
    C, D = (
        _slopes(lambda z: bound.measure(0.0, z, u), x, 1e-5 * size),
        _slopes(lambda z: bound.measure(0.0, x, z), u, 1e-5 * reach),
    )
    model = LocalModel(A, B, C, D, bound.states, bound.inputs, bound.outputs, point, plant.step)
    return Kind(bound, point, model, every, reach, size)


def _slopes(f: Callable[[np.ndarray], np.ndarray], z: np.ndarray, steps: np.ndarray) -> np.ndarray:
    columns = []
    for i, step in enumerate(steps):
        move = np.zeros(len(z))
        move[i] = step
        columns.append((f(z + move) - f(z - move)) / (2 * step))
    return np.stack(columns, axis=-1)


def pend() -> Kind:
    """A damped pendulum held at 0.5 rad by its torque."""

    def dynamics(t: float, x: Any, u: Any, p: Parameters) -> Any:
        return np.stack([x[1], -p["stiff"] * np.sin(x[0]) - p["damping"] * x[1] + u[0]])

    plant = Plant(
        states={"angle": "rad", "speed": "rad/s"},
        inputs={"torque": "1"},
        parameters={"stiff": 16.0, "damping": 0.5},
        dynamics=dynamics,
    )
    return settled(plant, np.array([0.5, 0.0]), np.array([16.0 * np.sin(0.5)]), 0.1, [1.0], [0.3, 1.0])


def tank() -> Kind:
    """Four coupled tanks with square-root outflows and two pumps."""

    def dynamics(t: float, x: Any, u: Any, p: Parameters) -> Any:
        out = p["hole"] * np.sqrt(x)
        return np.stack(
            [
                out[2] - out[0] + 0.6 * p["gain"] * u[0],
                out[3] - out[1] + 0.5 * p["gain"] * u[1],
                -out[2] + 0.5 * p["gain"] * u[1],
                -out[3] + 0.4 * p["gain"] * u[0],
            ]
        )

    plant = Plant(
        states={f"level{i}": "cm" for i in range(1, 5)},
        inputs={"pump1": "V", "pump2": "V"},
        parameters={"hole": 0.11, "gain": 0.11},
        dynamics=dynamics,
        domain={f"level{i}": (0.0, None) for i in range(1, 5)},
    )
    u = np.array([3.2, 2.9])
    third, fourth = 0.5 * u[1], 0.4 * u[0]
    x = np.array([third + 0.6 * u[0], fourth + 0.5 * u[1], third, fourth]) ** 2
    return settled(plant, x, u, 5.0, [0.4, 0.4], [1.5, 1.5, 0.4, 0.4])


ALPHA = np.linspace(-0.3, 0.5, 17)
LIFT = 5.1 * ALPHA - 2.6 * np.maximum(ALPHA - 0.22, 0.0) ** 1.5 * 5.0 + 0.31
FLAP = np.linspace(-0.5, 0.5, 11)
MOMENT = -0.9 * ALPHA[:, None] - 1.3 * FLAP[None, :] + 0.4 * ALPHA[:, None] ** 2 - 0.5 * FLAP[None, :] ** 3 + 0.04


def _bilinear(table: np.ndarray, rows: np.ndarray, columns: np.ndarray, a: Any, b: Any) -> Any:
    i, a = _place(rows, a)
    j, b = _place(columns, b)
    low = table[i, j] * (1 - b) + table[i, j + 1] * b
    high = table[i + 1, j] * (1 - b) + table[i + 1, j + 1] * b
    return low * (1 - a) + high * a


def _place(knots: np.ndarray, value: Any) -> tuple[Any, Any]:
    share = (np.clip(value, knots[0], knots[-1]) - knots[0]) / (knots[1] - knots[0])
    index = np.minimum(share.astype(int), len(knots) - 2)
    return index, share - index


def _body(t: float, x: Any, u: Any, p: Parameters) -> Any:
    forward, side, down, roll, pitch, yaw, bank, climb, heading = x[:9]
    elevator, aileron, rudder, thrust = u
    speed = np.sqrt(forward**2 + side**2 + down**2)
    alpha, beta = np.arctan2(down, forward), np.arcsin(side / speed)
    pressure = 0.5 * 1.2 * speed**2 * p["area"] / p["mass"]
    lift = np.interp(alpha, ALPHA, LIFT)
    drag = 0.03 + 0.055 * lift**2
    moment = _bilinear(MOMENT, ALPHA, FLAP, alpha, elevator) - 9.0 * pitch * p["chord"] / speed
    ahead = pressure * (lift * np.sin(alpha) - drag * np.cos(alpha)) + thrust / p["mass"]
    below = -pressure * (lift * np.cos(alpha) + drag * np.sin(alpha))
    sine, cosine = np.sin(climb), np.cos(climb)
    sb, cb, sh, ch = np.sin(bank), np.cos(bank), np.sin(heading), np.cos(heading)
    turn = 0.6 * pressure
    return np.stack(
        [
            yaw * side - pitch * down - 9.81 * sine + ahead,
            roll * down - yaw * forward + 9.81 * sb * cosine - 0.6 * pressure * beta,
            pitch * forward - roll * side + 9.81 * cb * cosine + below,
            turn * (-0.08 * beta + 0.15 * aileron - 4.0 * roll / speed + 0.9 * yaw / speed),
            0.7 * pressure * moment + 0.1 * roll * yaw,
            turn * (0.09 * beta - 0.08 * rudder - 1.4 * yaw / speed),
            roll + (sb * pitch + cb * yaw) * sine / cosine,
            cb * pitch - sb * yaw,
            (sb * pitch + cb * yaw) / cosine,
            cosine * ch * forward + (sb * sine * ch - cb * sh) * side + (cb * sine * ch + sb * sh) * down,
            cosine * sh * forward + (sb * sine * sh + cb * ch) * side + (cb * sine * sh - sb * ch) * down,
            sine * forward - sb * cosine * side - cb * cosine * down,
        ]
    )


def body() -> Kind:
    """A rigid body in level flight at 55 m/s: tables of lift and of pitching moment; its place drifts ahead."""
    names = ["u", "v", "w", "p", "q", "r", "bank", "climb", "heading", "north", "east", "height"]
    units = ["m/s"] * 3 + ["rad/s"] * 3 + ["rad"] * 3 + ["m"] * 3
    plant = Plant(
        states=dict(zip(names, units, strict=True)),
        inputs={"elevator": "rad", "aileron": "rad", "rudder": "rad", "thrust": "N"},
        parameters={"mass": (1050.0, "kg"), "area": (15.0, "m^2"), "chord": (1.4, "m")},
        dynamics=_body,
    )
    values = {"mass": 1050.0, "area": 15.0, "chord": 1.4}

    def level(z: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        alpha, elevator, thrust = z
        x = np.zeros(12)
        x[[0, 2, 7, 11]] = 55 * np.cos(alpha), 55 * np.sin(alpha), alpha, 500.0
        return x, np.array([elevator, 0.0, 0.0, 1000 * thrust])

    def left(z: np.ndarray) -> np.ndarray:
        return np.asarray(_body(0.0, *level(z), values))[[0, 2, 4]]

    x, u = level(fsolve(left, [0.05, -0.01, 1.0], xtol=1e-11))
    drift = np.zeros(12)
    drift[9] = 55.0
    sizes = [2, 2, 3, 0.2, 0.15, 0.15, 0.2, 0.1, 0.2, 20, 20, 10]
    return settled(plant, x, u, 0.1, [0.02, 0.03, 0.03, 150.0], sizes, drift)


def reactor() -> Kind:
    """A cooled stirred tank whose intermediate reacts ten thousand times faster than the tank empties."""

    def dynamics(t: float, x: Any, u: Any, p: Parameters) -> Any:
        feed, jacket = u
        amount, between, heat = x
        slow = p["slow"] * np.exp(-p["energy"] / heat) * amount
        fast = p["fast"] * between
        return np.stack(
            [
                feed * (1.0 - amount) - slow,
                slow - fast - 40.0 * between * amount,
                feed * (300.0 - heat) + 95.0 * fast + 0.8 * (jacket - heat),
            ]
        )

    plant = Plant(
        states={"amount": "1", "between": "1", "heat": "K"},
        inputs={"feed": "1/s", "jacket": "K"},
        parameters={"slow": 4.0e6, "energy": 5200.0, "fast": 1.0e4},
        dynamics=dynamics,
        domain={"heat": (100.0, None)},
    )
    u = np.array([1.0, 310.0])
    values = {"slow": 4.0e6, "energy": 5200.0, "fast": 1.0e4}

    def scaled(z: np.ndarray) -> np.ndarray:
        rates = np.asarray(dynamics(0.0, np.array([z[0], 1e-5 * z[1], 100 * z[2]]), u, values))
        return rates * np.array([1.0, 1.0, 0.01])

    z = fsolve(scaled, [0.5, 5.0, 3.3], xtol=1e-11)
    x = np.array([z[0], 1e-5 * z[1], 100 * z[2]])
    return settled(plant, x, u, 0.1, [0.1, 4.0], [0.05, 1e-5, 3.0])


KINDS: Mapping[str, Callable[[], Kind]] = {"pend": pend, "tank": tank, "body": body, "reactor": reactor}
