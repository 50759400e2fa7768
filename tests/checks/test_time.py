"""A plant that depends on t is trimmed at a time that somebody said; one that does not needs none."""

from __future__ import annotations

from collections.abc import Callable
from types import MappingProxyType
from typing import Any

import numpy as np
import pytest

from linverify.checks.judge import judge
from linverify.core.case import Amplitude, Band, Case, CheckAsk, DriveSet, Interval, Options, TrimAsk
from linverify.core.errors import Place
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict

PLACE = Place("tank.yaml", 5, 3)
KINDS = ("trims", "differentiable", "follows")


def _verdicts(dynamics: Callable[..., Any], time: float | None, **more: Any) -> list[Verdict]:
    plant = Plant(states={"level": "m"}, inputs={"inflow": "m/s"}, dynamics=dynamics, **more)
    step = plant.step
    drives = DriveSet("", step or 0.5, 8, MappingProxyType({"inflow": Amplitude(-0.1, 0.1)}), count=20, search=5)
    hold = {"level": 1.0}
    case = Case(
        spec="tank.yaml", point="full", title="", plant=plant, place=PLACE, trim=TrimAsk(hold, ("inflow",)),
        parameters=plant.defaults, envelope={"level": Interval(0.0, 4.0), "inflow": Interval(-9.0, 9.0)},
        nominal={"level": 1.0, "inflow": 1.0}, checks=(), time=time, drives=(drives,),
        bands=(Band("level", "peak", 1e-3, place=PLACE),),
    )  # fmt: skip
    return [judge(case, CheckAsk(kind, PLACE), Options()) for kind in KINDS]


def _drains(t: float, x: Any, u: Any, p: Any) -> Any:
    return u - (1.0 + 0.1 * t) * x


@pytest.mark.parametrize(
    "dynamics",
    [
        _drains,
        lambda t, x, u, p: u - x - (0.1 if t > 3.5 else 0.0),  # a step within the horizon
        lambda t, x, u, p: u - x - 1e-6 * np.sin(2 * np.pi * 50.0 * t),
    ],
    ids=["ramp", "step", "hum"],
)
def test_without_a_time_nothing_is_judged(dynamics: Callable[..., Any]) -> None:
    said = "the plant depends on t (rate of level changes with it); say at which `time` it is trimmed"
    for verdict in _verdicts(dynamics, None):
        assert (verdict.status, verdict.reason) == (Status.UNDECIDED, said)


def test_an_output_may_be_what_depends_on_t() -> None:
    outputs = {"outputs": {"read": "m"}, "measurement": lambda t, x, u, p: x + 0.01 * t}
    found = _verdicts(lambda t, x, u, p: u - x, None, **outputs)
    assert {verdict.status for verdict in found} == {Status.UNDECIDED}
    assert "(read changes with it)" in found[0].reason


def test_a_difference_equation_is_asked_at_whole_steps() -> None:
    def odd(t: float, x: Any, u: Any, p: Any) -> Any:
        assert t == round(t)
        return 0.5 * x + u + (0.01 if t % 2 else 0.0)

    assert _verdicts(odd, None, step=0.5)[0].status is Status.UNDECIDED
    assert _verdicts(odd, 2.0, step=0.5)[0].notes == (
        "the plant depends on t (rate of level): its local model is that of 1 s, frozen",
    )


def test_with_a_time_it_is_trimmed_there_and_its_model_frozen() -> None:
    trims, differentiable, follows = _verdicts(_drains, 5.0)
    assert trims.status is Status.PASS
    assert trims.details["inputs"]["inflow"]["value"] == pytest.approx(1.5)
    assert trims.notes == ("the plant depends on t (rate of level): its local model is that of 5 s, frozen",)
    assert differentiable.details["A"] == [[pytest.approx(-1.5)]]
    assert follows.status is Status.FAIL  # the plant drains ever faster, the frozen model does not


@pytest.mark.parametrize("time", [None, 5.0])
def test_a_plant_that_does_not_depend_on_t_needs_no_time(time: float | None) -> None:
    found = _verdicts(lambda t, x, u, p: u - x + 0.0 * t, time)
    assert {verdict.status for verdict in found} == {Status.PASS}
    assert not any("depends on t" in note for verdict in found for note in verdict.notes)
