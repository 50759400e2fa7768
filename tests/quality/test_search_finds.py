"""Does the search find faults that were planted where random drives seldom go? Every seed has to find each of them.

The local model is the linear oscillator throughout; the plant differs from it only in a corner of the declared set. A
fault that the search misses is a wrong pass, so the tests run the whole check, as a build would.

    pytest tests/quality -m slow
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Amplitude, Band, Case, CheckAsk, DriveSet, Interval, Options, TrimAsk
from linverify.core.errors import Place
from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict

PLACE = Place("specs/planted.yaml")
SEEDS = range(6)


def planted(fault: Callable[[Any, Any], Any]) -> Plant:
    """A lightly damped oscillator moved by f, a slow lag moved by g, a clock of how long f has been at its low end."""

    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        place, speed, lag, clock = x
        held = 1.0 / (1.0 + np.exp(np.clip(200.0 * (u[0] + 0.95), -60.0, 60.0)))
        return np.stack(
            [
                speed,
                -9.0 * place - 0.3 * speed + u[0] + 0.0 * u[1] + fault(x, u),
                -0.5 * lag + u[1],
                held - 20.0 * (1.0 - held) * clock,
            ]
        )

    return Plant(
        states={"place": "m", "speed": "m/s", "lag": "", "clock": "s"},
        inputs={"f": "N", "g": ""},
        outputs={"place": "m", "lag": ""},
        dynamics=dynamics,
    )


def over(value: Any, edge: float) -> Any:
    """How far over the edge, else zero."""
    return np.maximum(value - edge, 0.0)


# Largest |place| in the set: 0.648; largest |lag|: 1.73 after the whole horizon at one end.
FAULTS: dict[str, Callable[[Any, Any], Any]] = {
    "none": lambda x, u: 0.0 * x[0],
    "only near the largest resonance": lambda x, u: -400.0 * over(x[0], 0.55),
    "only near the largest resonance, downwards": lambda x, u: 400.0 * over(-x[0], 0.55),
    "only when f stays at its lower end": lambda x, u: 4.0 * over(x[3], 1.5),
    "only when both are up for long": lambda x, u: 60.0 * over(x[2], 1.2) * over(u[0], 0.9),
    "only when they are opposed": lambda x, u: 60.0 * over(x[2], 1.2) * over(-u[0], 0.9),
}


def verdict(fault: str, seed: int) -> Verdict:
    plant = planted(FAULTS[fault])
    signals = (plant.state_signals, plant.input_signals, plant.output_signals)
    point = OperatingPoint(np.zeros(4), np.zeros(2), np.zeros(2), np.zeros(4), 0.0, *signals)
    A = np.zeros((4, 4))
    A[0, 1], A[1, 0], A[1, 1], A[2, 2], A[3, 3] = 1.0, -9.0, -0.3, -0.5, -20.0
    B = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0], [0.0, 0.0]])
    local = LocalModel(A, B, np.eye(4)[[0, 2]], np.zeros((2, 2)), *signals, point)
    drives = DriveSet("", 0.1, 40, {"f": Amplitude(-1, 1), "g": Amplitude(-1, 1)}, count=200, search=100)
    one = Case(
        spec=PLACE.file,
        point="rest",
        title="Planted faults",
        plant=plant,
        place=PLACE,
        trim=TrimAsk(hold={"f": 0.0, "g": 0.0}, find=("place", "speed", "lag", "clock"), start={"place": 0.0}),
        parameters={},
        envelope={"place": Interval(-9, 9), "speed": Interval(-9, 9), "lag": Interval(-9, 9)},
        nominal={},
        checks=(CheckAsk("follows", PLACE),),
        drives=(drives,),
        bands=(Band("place", "peak", 0.05),),
    )
    return judge_study(Study(one, Options(seed=seed), model_override=local), one.checks[0])


@pytest.mark.slow
@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("fault", [name for name in FAULTS if name != "none"])
def test_every_seed_finds_the_planted_fault(fault: str, seed: int) -> None:
    assert verdict(fault, seed).status is Status.FAIL


@pytest.mark.slow
@pytest.mark.parametrize("seed", SEEDS)
def test_without_a_fault_every_seed_passes(seed: int) -> None:
    found = verdict("none", seed)
    assert found.status is Status.PASS, found.reason


@pytest.mark.parametrize("fault", list(FAULTS)[:2])
def test_one_fault_with_one_seed(fault: str) -> None:
    """A quick look at the same, in every run of the tests."""
    assert verdict(fault, 0).status is (Status.PASS if fault == "none" else Status.FAIL)
