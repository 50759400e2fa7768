"""Is the worst error found? Linear plants with wrong models, where it is known without any search.

The error of a linear model of a linear plant is linear in the drive. Its largest value over the whole declared set is
found here by code of its own: step and ramp responses from one exponential, shifted in time, and a linear programme for
each instant. A band 2 % above that value must pass, and one 2 % below must fail.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from itertools import product
from typing import Any

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.optimize import linprog

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Amplitude, Band, Case, CheckAsk, DriveSet, Interval, Options, TrimAsk
from linverify.core.delivered import Delays, DeliveredModel, LocalAsk
from linverify.core.errors import Place
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict

PLACE = Place("specs/sharp.yaml")
FINE = 24  # places inside an interval at which a peak is looked for
NEAR = 1e-9
Array = Any


@dataclass(frozen=True)
class Linear:
    """Matrices, and the step where they give the next state."""

    A: Array
    B: Array
    C: Array
    D: Array
    step: float | None = None

    def answers(self, times: Array, order: int) -> Array:
        """Outputs (T, k, m) after a unit step (order 1) or a unit ramp (order 2) that began at zero; 0 before it."""
        found = np.zeros((len(times), len(self.C), self.B.shape[1]))
        for at, time in enumerate(times):
            if time >= -NEAR:
                found[at] = self._answer(max(time, 0.0), order)
        return found

    def _answer(self, time: float, order: int) -> Array:
        n, m = self.B.shape
        if self.step is not None:
            x = np.zeros((n, m))
            for _ in range(round(time / self.step)):
                x = self.A @ x + self.B
            return self.C @ x + self.D
        chain = np.zeros((n + 2 * m, n + 2 * m))
        chain[:n, :n], chain[:n, n : n + m], chain[n : n + m, n + m :] = self.A, self.B, np.eye(m)
        whole = expm(chain * time)
        columns = slice(n, n + m) if order == 1 else slice(n + m, n + 2 * m)
        return self.C @ whole[:n, columns] + self.D * (1.0 if order == 1 else time)

    def free(self, times: Array) -> Array:
        """Outputs (T, k, n) after each state started one unit off."""
        if self.step is not None:
            return np.array([self.C @ np.linalg.matrix_power(self.A, round(time / self.step)) for time in times])
        return np.array([self.C @ expm(self.A * time) if time >= 0 else 0.0 * self.C for time in times])


@dataclass(frozen=True)
class System:
    """A plant, a wrong model of it, and what they are driven with."""

    plant: Linear
    model: Linear
    every: float
    intervals: int
    high: tuple[float, ...]
    course: Any = "held"
    rate: Mapping[int, float] = field(default_factory=dict)
    late_in: tuple[float, ...] = ()
    late_out: float = 0.0
    offsets: Mapping[int, float] = field(default_factory=dict)
    nominal: tuple[float, ...] = ()
    anonymous: bool = False

    def worst(self) -> float:
        """Largest |error| of the first output over every drive of the set."""
        horizon, best = self.every * self.intervals, 0.0
        for time, right in self._instants():
            if not self.offsets and time < horizon - self.every - NEAR:
                continue  # the same drive begun later does as much at the end
            rows = self._rows(self.plant, time, right) - self._rows(self.model, time, right)
            reached = sum(_largest(rows[:, j], self.high[j], self._change(j)) for j in range(len(self.high)))
            for state, size in self.offsets.items():
                gone = [one.free(np.array([time - self.late_out]))[0, 0, state] for one in (self.plant, self.model)]
                reached += abs(gone[0] - gone[1]) * size
            best = max(best, reached)
        return best

    def _change(self, j: int) -> float:
        return self.rate.get(j, np.inf) * self.every

    def _instants(self) -> list[tuple[float, bool]]:
        """Instants at which plant and model are compared; True: just after a change of the inputs."""
        step = self.model.step or self.plant.step
        places = FINE if step is None else round(self.every / step)
        times = [self.every * k / places for k in range(self.intervals * places)]
        end = self.every * self.intervals
        both = [(time, True) for time in times] + [(end, False)]
        return both if step is not None else both + [(time, False) for time in times]

    def _rows(self, one: Linear, time: float, right: bool) -> Array:
        """What each row of the drive adds to the first output at `time`, (K, m)."""
        late = np.array(self.late_in or [0.0] * len(self.high)) + self.late_out
        rows = np.zeros((self.intervals, len(self.high)))
        for j, delay in enumerate(late):
            ages = time - delay - self.every * np.arange(self.intervals + 2)
            if not right:
                ages = np.where(np.abs(ages) < NEAR, -1.0, ages)
            answers = one.answers(ages, 1 if self.course == "held" else 2)[:, 0, j]
            if self.course == "held":
                rows[:, j] = answers[:-2] - answers[1:-1]
            else:
                rows[:, j] = (answers[:-2] - 2.0 * answers[1:-1] + answers[2:]) / self.every
        return rows


def _largest(gains: Array, high: float, change: float) -> float:
    """max gains . u within |u| <= high and |u_k - u_(k-1)| <= change, u before the first being zero."""
    if change >= 2.0 * high:
        return float(high * np.abs(gains).sum())
    step = np.eye(len(gains)) - np.eye(len(gains), k=-1)
    found = linprog(-gains, A_ub=np.vstack([step, -step]), b_ub=np.full(2 * len(gains), change), bounds=(-high, high))
    assert found.success
    return float(-found.fun)


def linear(A: Any, B: Any, C: Any, D: Any = None, step: float | None = None) -> Linear:
    """Matrices from lists."""
    A, B, C = (np.atleast_2d(np.array(block, dtype=float)) for block in (A, B, C))
    D = np.zeros((len(C), B.shape[1])) if D is None else np.atleast_2d(np.array(D, dtype=float))
    return Linear(A, B, C, D, step)


def sampled(one: Linear, step: float) -> Linear:
    """Held inputs."""
    n, m = one.B.shape
    whole = expm(np.block([[one.A, one.B], [np.zeros((m, n + m))]]) * step)
    return Linear(whole[:n, :n], whole[:n, n:], one.C, one.D, step)


def turned(one: Linear, by: Any) -> Linear:
    """In other coordinates."""
    T = np.array(by, dtype=float)
    back = np.linalg.inv(T)
    return Linear(T @ one.A @ back, T @ one.B, one.C @ back, one.D, one.step)


def oscillator(w: float, z: float, gain: float = 1.0) -> Linear:
    return linear([[0, 1], [-w * w, -2 * z * w]], [[0], [gain]], [[1, 0]])


TWO = linear([[-1, 0.4], [0.2, -0.5]], [[1, 0.3], [-0.2, 0.8]], [[1, 0.5], [0, 1]])
CROSSED = replace(TWO, B=np.array([[1, -0.3], [-0.2, 0.8]]))
TURNING = linear([[0.95, 0.3], [-0.3, 0.9]], [[0.0], [0.1]], [[1, 0]], step=0.1)
BAD = np.diag([1e-6, 1e4, 1.0])
CHAIN = linear([[-1, 2, 0], [0, -2, 1], [0, 0, -4]], [[0], [0], [4]], [[1, 0, 0]])
WRONG_CHAIN = replace(CHAIN, A=np.array([[-1, 2, 0], [0, -2.1, 1], [0, 0, -4]]))

SYSTEMS: dict[str, System] = {
    "lightly damped": System(oscillator(3, 0.02), oscillator(3.03, 0.02), 0.1, 80, (1.0,)),
    "non-minimum phase": System(
        linear([[0, 1], [-2, -1.5]], [[0], [1]], [[2, -1]]), linear([[0, 1], [-2, -1.5]], [[0], [1]], [[2, -1.2]]),
        0.2, 40, (1.0,),
    ),
    "feedthrough against its own answer": System(
        linear([[-1]], [[2]], [[1]], [[-1]]), linear([[-1]], [[2.2]], [[1]], [[-1.15]]), 0.25, 30, (0.8,)
    ),
    "multivariable": System(TWO, CROSSED, 0.2, 30, (1.0, 0.5)),
    "rate-limited": System(oscillator(3, 0.05), oscillator(3.2, 0.05), 0.1, 60, (1.0,), rate={0: 2.0}),
    "rate-limited, straight": System(
        oscillator(2, 0.1), oscillator(2, 0.1, 1.1), 0.2, 40, (1.0,), course="straight", rate={0: 1.5}
    ),
    "difference equation": System(TURNING, replace(TURNING, A=TURNING.A + 0.01 * np.eye(2, k=1)), 0.3, 20, (1.0,)),
    "sampled for another time": System(
        oscillator(2, 0.2), replace(sampled(oscillator(2, 0.2), 0.11), step=0.1), 0.2, 30, (1.0,)
    ),
    "sampled, with feedthrough": System(
        linear([[-1]], [[1]], [[1]], [[0.5]]), sampled(linear([[-1.2]], [[1]], [[1]], [[0.6]]), 0.1), 0.2, 30, (1.0,)
    ),
    "delayed": System(
        TWO, CROSSED, 0.2, 40, (1.0, 1.0), late_in=(0.33, 0.4), late_out=0.27,
    ),
    "delayed, straight": System(
        TWO, CROSSED, 0.2, 30, (1.0, 1.0), course="straight", rate={0: 2.0}, late_in=(0.05, 0.4), late_out=0.1
    ),
    "sampled and delayed": System(
        oscillator(2, 0.2), sampled(oscillator(2.1, 0.2), 0.1), 0.2, 30, (1.0,), late_in=(0.3,), late_out=0.4
    ),
    "unstable, short horizon": System(
        linear([[0.6, 1], [0, -2]], [[0], [1]], [[1, 0]]), linear([[0.65, 1], [0, -2]], [[0], [1]], [[1, 0]]),
        0.1, 30, (1.0,),
    ),
    "badly scaled": System(
        turned(CHAIN, BAD), turned(WRONG_CHAIN, BAD), 0.2, 40, (1.0,), nominal=(1e-6, 1e4, 1.0)
    ),
    "offsets": System(oscillator(2, 0.1), oscillator(2, 0.13), 0.1, 60, (0.05,), offsets={0: 1.0, 1: 0.5}),
    "anonymous": System(
        CHAIN, turned(WRONG_CHAIN, [[1, 2, 0], [0, 1, -1], [3, 0, 1]]), 0.2, 40, (1.0,), anonymous=True
    ),
}  # fmt: skip


def plant_of(system: System) -> Plant:
    one = system.plant
    return Plant(
        states={f"x{i + 1}": "" for i in range(len(one.A))},
        inputs={f"u{j + 1}": "" for j in range(one.B.shape[1])},
        outputs={f"y{i + 1}": "" for i in range(len(one.C))},
        dynamics=lambda t, x, u, p: np.tensordot(one.A, x, 1) + np.tensordot(one.B, u, 1),
        measurement=lambda t, x, u, p: np.tensordot(one.C, x, 1) + np.tensordot(one.D, u, 1),
        step=one.step,
    )


def verdict(system: System, band: Band) -> Verdict:
    plant, model = plant_of(system), system.model
    states, inputs, outputs = tuple(plant.states), tuple(plant.inputs), tuple(plant.outputs or {})
    late = system.late_in or (0.0,) * len(inputs)
    delivered = DeliveredModel(
        "model.json", PLACE, model.A, model.B, model.C, model.D, None if system.anonymous else states, inputs, outputs,
        step=model.step,
    )  # fmt: skip
    drives = DriveSet(
        "",
        system.every,
        system.intervals,
        {name: Amplitude(-high, high) for name, high in zip(inputs, system.high, strict=True)},
        system.course,
        rate={inputs[j]: rate for j, rate in system.rate.items()},
        offsets={states[j]: size for j, size in system.offsets.items()},
        count=40,
        search=10,
    )
    far = {name: Interval(-1e9, 1e9) for name in (*states, *inputs)}
    sizes = dict(zip(states, system.nominal or (1.0,) * len(states), strict=True))
    one = Case(
        spec=PLACE.file,
        point="rest",
        title="Sharp",
        plant=plant,
        place=PLACE,
        trim=TrimAsk(dict.fromkeys(inputs, 0.0), states, dict.fromkeys(states, 0.0)),
        parameters={},
        envelope=far,
        nominal={**sizes, **dict.fromkeys((*inputs, *outputs), 1.0)},
        checks=(CheckAsk("follows", PLACE),),
        drives=(drives,),
        bands=(band,),
        local=LocalAsk(delivered=delivered),
        delays=Delays(
            {name: by for name, by in zip(inputs, late, strict=True) if by},
            {outputs[0]: system.late_out} if system.late_out else {},
        ),
    )
    return judge_study(Study(one, Options()), one.checks[0])


@pytest.mark.parametrize("name", SYSTEMS)
def test_a_band_beside_the_worst_error_is_told_from_it(name: str) -> None:
    system = SYSTEMS[name]
    worst = system.worst()
    above = verdict(system, Band("y1", "peak", 1.02 * worst))
    assert above.status is Status.PASS, above.reason
    (figure,) = above.figures
    assert figure.worst == pytest.approx(worst, rel=0.01)
    below = verdict(system, Band("y1", "peak", 0.98 * worst))
    assert below.status is Status.FAIL, below.reason
    (figure,) = below.figures
    assert figure.worst <= worst * (1.0 + 1e-6) + figure.error


def corners(system: System) -> Array:
    """Root mean square of the error for every course that stays at its ends, one input; the largest is among them."""
    times = system.every * np.arange(system.intervals * FINE + 1) / FINE
    rows = np.array(
        [(system._rows(system.plant, t, False) - system._rows(system.model, t, False))[:, 0] for t in times]
    )
    signs = np.array(list(product([-1.0, 1.0], repeat=system.intervals)))
    squares = (signs * system.high[0] @ rows.T) ** 2
    mean = (squares.sum(axis=1) - 0.5 * (squares[:, 0] + squares[:, -1])) / (len(times) - 1)
    return np.sqrt(mean)


@pytest.mark.parametrize(
    "system",
    [
        System(oscillator(2, 0.1), oscillator(2.1, 0.1), 0.4, 11, (1.0,)),
        System(linear([[-1]], [[1]], [[1]]), linear([[-1.2]], [[1.3]], [[1]]), 0.3, 11, (1.0,)),
        System(oscillator(3, 0.05), oscillator(3, 0.05, 1.2), 0.3, 11, (1.0,), late_in=(0.45,)),
    ],
    ids=["wrong frequency", "errors that cancel in the end", "wrong gain behind a dead time"],
)
def test_a_band_on_the_mean_square_is_told_from_the_worst_of_all_corners(system: System) -> None:
    worst = float(corners(system).max())
    above = verdict(system, Band("y1", "rms", 1.02 * worst))
    assert above.status is Status.PASS, above.reason
    below = verdict(system, Band("y1", "rms", 0.98 * worst))
    assert below.status is Status.FAIL, below.reason


def test_the_truth_itself_against_a_closed_form() -> None:
    """A lag of gain 1 against one of gain 1.5 under |u| <= 1: half of 1 - exp(-T)."""
    gain: Callable[[float], Linear] = lambda g: linear([[-1]], [[g]], [[1]])  # noqa: E731
    system = System(gain(1.0), gain(1.5), 0.25, 8, (1.0,))
    assert system.worst() == pytest.approx(0.5 * (1 - np.exp(-2.0)), rel=1e-9)
    assert replace(system, late_out=0.3).worst() == pytest.approx(0.5 * (1 - np.exp(-1.7)), rel=1e-9)
    slow = replace(system, course="straight", rate={0: 0.5})  # u = t / 2 up to 1 at the end
    assert slow.worst() == pytest.approx(0.5 * 0.5 * (2.0 - (1 - np.exp(-2.0))), rel=1e-9)


@pytest.mark.parametrize(
    "name", ["lightly damped", "multivariable", "delayed", "sampled, with feedthrough", "anonymous"]
)
def test_a_right_model_passes_a_thousandth_of_that_band(name: str) -> None:
    system = SYSTEMS[name]
    right = system.plant if system.model.step is None else sampled(system.plant, system.model.step)
    if system.anonymous:
        right = turned(right, [[1, 2, 0], [0, 1, -1], [3, 0, 1]])
    found = verdict(replace(system, model=right), Band("y1", "peak", 1e-3 * system.worst()))
    assert found.status is Status.PASS, found.reason
