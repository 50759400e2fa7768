"""What the bench once found, each reduced to its smallest case."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from faults.bench import drawn, judged
from truth import mechanics

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Amplitude, Band, Case, CheckAsk, DriveSet, Interval, Options, TrimAsk
from linverify.core.delivered import DeliveredModel, LocalAsk
from linverify.core.errors import Place
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict

PLACE = Place("tests/faults", 1, 1)
FOLLOWS = CheckAsk("follows", PLACE)


def hanging(C: np.ndarray, plant: Plant = mechanics.pendulum) -> Verdict:
    """The pendulum at rest, whose output `angle` is its state of that name, against a model with this C."""
    stiffness = mechanics.GRAVITY / mechanics.LENGTH
    inertia = mechanics.MASS * mechanics.LENGTH**2
    model = DeliveredModel(
        PLACE.file, PLACE, np.array([[0.0, 1.0], [-stiffness, -mechanics.DAMPING / inertia]]),
        np.array([[0.0], [1.0 / inertia]]), C, np.zeros((1, 1)), ("angle", "rate"), ("torque",), ("angle",),
    )  # fmt: skip
    case = Case(
        spec="faults/pendulum.yaml", point="hanging", title="A pendulum", plant=plant, place=PLACE,
        trim=TrimAsk(hold={"angle": 0.0}, find=("rate", "torque")), parameters=plant.defaults,
        envelope={"angle": Interval(-3, 3), "rate": Interval(-9, 9), "torque": Interval(-3, 3)},
        nominal={"angle": 0.1, "rate": 0.5, "torque": 0.1}, checks=(FOLLOWS,),
        drives=(DriveSet("", 0.1, 10, {"torque": Amplitude(-0.05, 0.05)}, count=20, search=0),),
        bands=(Band("angle", "peak", 0.01, place=PLACE),), local=LocalAsk(model),
    )  # fmt: skip
    return judge_study(Study(case, Options(profile="quick")), FOLLOWS)


@pytest.mark.parametrize(
    ("row", "status"),
    [((1.0, 0.0), Status.PASS), ((57.3, 0.0), Status.FAIL), ((0.0, 1.0), Status.FAIL), ((0.0, 0.0), Status.FAIL)],
)
def test_an_output_called_like_a_state_is_read_as_the_model_reads_it(row: tuple[float, float], status: Status) -> None:
    """In degrees, exchanged with another output, or left out: the state itself is right in all of them."""
    assert hanging(np.array([row])).status is status


def test_a_plant_whose_output_is_not_the_state_of_its_name_is_told() -> None:
    twice = replace(mechanics.pendulum, measurement=lambda t, x, u, p: 2.0 * x[:1])
    verdict = hanging(np.array([[1.0, 0.0]]), twice)
    assert verdict.status is Status.UNDECIDED
    assert "output angle is not the state of that name" in verdict.reason


def test_a_band_that_is_broken_in_one_corner_of_the_declared_set_alone_is_found() -> None:
    """The error goes with |current|: it has many local maxima. Brute force finds 1.027 of the limit.

    Not every seed gets there (6 of 10 did in a trial, before the corners of the set were looked at 1 of 5 did), since
    the band is broken by less than three per cent, and by few drives.
    """
    ask = drawn(263, faulty=True)
    assert ask.told.startswith("seed 263: buck, full, corner 0.1"), ask.told
    found = [judge_study(Study(ask.case, Options(seed=seed)), FOLLOWS).status for seed in range(4)]
    assert found.count(Status.FAIL) >= 2


def test_a_corner_that_the_drives_fall_short_of_is_stopped_all_the_same() -> None:
    """Brute force finds a drive 0.65 % over a band; `follows` stays within it, and `differentiable` sees the corner."""
    found = judged(drawn(252, faulty=True))
    assert found.ask.told.startswith("seed 252: reactor, full, corner 0.1"), found.ask.told
    assert found.outcome == "caught"
