"""One operating point, 200 drives of 100 intervals, twice: as an engineer's script would do it, and by this package.

The script restarts scipy's `solve_ivp` at every breakpoint, one trajectory after another, linearizes with
python-control and lets it simulate the linear model: correct, and what a careful engineer writes. Both sides trim,
linearize, simulate plant and local model and find the largest difference, at the same accuracy (`TOLERANCES`).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import control
import numpy as np
from scipy.integrate import solve_ivp
from scipy.optimize import root

from linverify.checks.bands import judged
from linverify.core.case import Band, Interval, SlopeAsk, TrimAsk
from linverify.core.drive import Drive
from linverify.core.model import LocalModel, OperatingPoint
from linverify.numerics.linearize import linearize
from linverify.numerics.simulate import Fidelity, Rig, run
from linverify.numerics.trim import trim
from tests.truth.engine_plants import Kind

DRIVES, INTERVALS = 200, 100
# what the trim is told to hold; everything else is found
HOLDS: Mapping[str, tuple[str, ...]] = {
    "pend": ("angle",),
    "tank": ("pump1", "pump2"),
    "body": ("u", "heading", "north", "east", "height"),
    "reactor": ("feed", "jacket"),
}
FREE: Mapping[str, tuple[str, ...]] = {"body": ("north",)}


@dataclass(frozen=True)
class Tolerance:
    """Loosest settings that keep the largest error over all states, in excursions, near 1e-6."""

    script: float
    ours: float
    method: str = "RK45"


TOLERANCES = {
    "pend": Tolerance(3e-7, 3e-6),
    "tank": Tolerance(1e-5, 1e-4),
    "body": Tolerance(3e-8, 1e-5),
    "reactor": Tolerance(3e-7, 1e-4, "LSODA"),
}
REACHED = 3e-6  # what both sides keep on the drives of `test_both_sides_reach_the_accuracy`


def ask_of(name: str, kind: Kind) -> TrimAsk:
    """The equilibrium that `kind` was set up at, asked for by its held values, from a rough first guess."""
    values = _values(kind)
    hold = {held: values[held] for held in HOLDS[name]}
    find = tuple(signal for signal in values if signal not in hold)
    sizes = _sizes(kind)
    start = {signal: values[signal] + 0.3 * sizes[signal] for signal in find}
    return TrimAsk(hold, find, start, free=FREE.get(name, ()))


def ours(name: str, kind: Kind, drives: Sequence[Drive]) -> float:
    """The largest difference of plant and local model over all drives, by this package."""
    point, model = _trimmed(name, kind)
    rig = Rig(kind.plant, point, model, kind.plant.states.names, {}, kind.excursion)
    runs = run(rig, drives, Fidelity(4, TOLERANCES[name].ours))
    bands = [Band(state, "peak", 1.0) for state in kind.plant.states.names]
    return float(np.max(judged(runs, bands).worst[:-1] / kind.excursion[:, np.newaxis]))


def _trimmed(name: str, kind: Kind) -> tuple[OperatingPoint, LocalModel]:
    envelope, nominal = _envelope(kind), _sizes(kind)
    found = trim(kind.plant, ask_of(name, kind), envelope, nominal, 0.0)
    if found.point is None:
        raise ValueError(f"{name} does not trim: {found.outcome}")
    linear = linearize(kind.plant, found.point, nominal, envelope, SlopeAsk(slope_gap=0.3))
    if linear.model is None:
        raise ValueError(f"{name} is not linearized: {linear.outcome}")
    return found.point, linear.model


def script(name: str, kind: Kind, drives: Sequence[Drive]) -> float:
    """The same, as a careful engineer would script it."""
    x0, u0 = _script_trim(name, kind)
    A, B = _script_jacobian(kind, x0, u0)
    linear = control.ss(A, B, np.eye(len(x0)), np.zeros(B.shape))
    times = np.arange(INTERVALS + 1) * kind.every
    course = x0[:, np.newaxis] + kind.point.drift[:, np.newaxis] * times
    worst = 0.0
    for drive in drives:
        plant = _script_plant(kind, x0, u0, drive, TOLERANCES[name])
        # forced_response joins samples by straight lines; a held input needs its discrete equivalent
        held = control.sample_system(linear, kind.every, "zoh")
        samples = np.vstack([drive.values, drive.values[-1:]]).T
        response = control.forced_response(held, times, samples, return_x=True).states
        error = np.abs(plant - course - response) / kind.excursion[:, np.newaxis]
        worst = max(worst, float(error.max()))
    return worst


def _script_plant(kind: Kind, x0: np.ndarray, u0: np.ndarray, drive: Drive, tolerance: Tolerance) -> np.ndarray:
    dynamics, p = kind.plant.plant.dynamics, kind.plant.parameters
    x, states = x0, [x0]
    for row in drive.values:
        u = u0 + row
        found = solve_ivp(
            lambda t, x, u=u: dynamics(t, x, u, p), (0.0, kind.every), x,
            method=tolerance.method, rtol=3e-14, atol=tolerance.script * kind.excursion,
        )  # fmt: skip
        x = found.y[:, -1]
        states.append(x)
    return np.stack(states, axis=-1)


def _script_trim(name: str, kind: Kind) -> tuple[np.ndarray, np.ndarray]:
    ask, values = ask_of(name, kind), _values(kind)
    rows = [i for i, state in enumerate(kind.plant.states.names) if state not in ask.free]
    sizes = _sizes(kind)

    def at(z: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        found = {**values, **ask.hold, **{s: sizes[s] * v for s, v in zip(ask.find, z, strict=True)}}
        every = np.array(list(found.values()))
        return every[: kind.plant.n], every[kind.plant.n :]

    def residual(z: np.ndarray) -> np.ndarray:
        x, u = at(z)
        return np.asarray(kind.plant.plant.dynamics(0.0, x, u, kind.plant.parameters))[rows] / kind.excursion[rows]

    guess = np.array([ask.start[signal] / sizes[signal] for signal in ask.find])
    return at(root(residual, guess, tol=1e-12).x)


def _script_jacobian(kind: Kind, x0: np.ndarray, u0: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    dynamics, p = kind.plant.plant.dynamics, kind.plant.parameters
    system = control.nlsys(
        lambda t, x, u, params: np.asarray(dynamics(t, x, u, p)), inputs=kind.plant.m, states=kind.plant.n
    )
    linear = control.linearize(system, x0, u0)
    return np.asarray(linear.A), np.asarray(linear.B)


def _values(kind: Kind) -> dict[str, float]:
    names = (*kind.plant.states.names, *kind.plant.inputs.names)
    return dict(zip(names, map(float, (*kind.point.x, *kind.point.u)), strict=True))


def _sizes(kind: Kind) -> dict[str, float]:
    names = (*kind.plant.states.names, *kind.plant.inputs.names)
    return dict(zip(names, map(float, (*kind.excursion, *kind.amplitude)), strict=True))


def _envelope(kind: Kind) -> dict[str, Interval]:
    values, sizes = _values(kind), _sizes(kind)
    return {name: Interval(value - 6 * sizes[name], value + 6 * sizes[name]) for name, value in values.items()}
