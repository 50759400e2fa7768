"""The check `differentiable`: every verdict, its figure, its words and its details."""

from __future__ import annotations

import json
from typing import Any

import numpy as np
import pytest

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Case, CheckAsk, Interval, Options, SlopeAsk, TrimAsk
from linverify.core.errors import Place
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict

PLACE = Place("specs/flap.yaml", 9, 3)


def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
    """A speed that a flap slows; the flap bites from `edge` on, by `bite` of what it does before."""
    drag = u[0] + p["bite"] * np.maximum(u[0] - p["edge"], 0.0)
    return np.stack([1.0 - 0.5 * x[0] - drag])


FLAP = Plant(
    states={"speed": "m/s"},
    inputs={"fore_flap": "rad"},
    parameters={"bite": 0.5, "edge": 0.2},
    dynamics=dynamics,
)


def checked(
    plant: Plant = FLAP,
    *,
    flap: float = 0.2,
    slopes: SlopeAsk | None = None,
    nominal: dict[str, float] | None = None,
    **parameters: float,
) -> Verdict:
    ask = CheckAsk("differentiable", PLACE)
    case = Case(
        spec="specs/flap.yaml",
        point="slow",
        title="A flap",
        plant=plant,
        place=PLACE,
        trim=TrimAsk(hold={"fore_flap": flap}, find=tuple(plant.states), start=dict.fromkeys(plant.states, 1.0)),
        parameters={**plant.defaults, **parameters},
        envelope={**{name: Interval(-50, 50) for name in plant.states}, "fore_flap": Interval(-1, 1)},
        nominal={**dict.fromkeys([*plant.states, "fore_flap"], 1.0), **(nominal or {})},
        checks=(ask,),
        slopes=slopes or SlopeAsk(),
    )
    verdict = judge_study(Study(case, Options()), ask)
    json.dumps(dict(verdict.details), allow_nan=False)  # plain data, whatever the verdict
    assert verdict.place == PLACE
    assert verdict.id == "specs/flap.yaml::slow::differentiable"
    return verdict


def test_a_kink_on_the_point_fails() -> None:
    found = checked()
    assert found.status is Status.FAIL
    assert found.reason == (
        "the plant has a kink or a jump on the operating point: d speed_rate / d fore_flap: slopes -1 below and -1.5 "
        "m/(s^2 rad) above differ by 33.3 % at the point, at fore_flap = 0.2 rad"
    )
    (figure,) = found.figures
    assert (figure.what, figure.signal, figure.unit) == ("slope gap", "d speed_rate / d fore_flap", "%")
    assert (figure.worst, figure.limit) == pytest.approx((100 / 3, 5.0), rel=1e-3)
    assert figure.status is Status.FAIL
    (corner,) = found.details["corners"]
    assert (corner["kind"], corner["on_point"]) == ("kink", True)
    assert corner["at"] == {"value": pytest.approx(0.2), "unit": "rad"}
    assert corner["below"] == {"value": pytest.approx(-1.0), "unit": "m/(s^2 rad)"}


def test_a_kink_that_is_allowed_passes_and_is_told() -> None:
    found = checked(slopes=SlopeAsk(slope_gap=0.4))
    assert found.status is Status.PASS
    assert found.reason == ""
    assert found.figures[0].headroom == pytest.approx(1 - (1 / 3) / 0.4, rel=1e-3)
    assert found.notes == (
        "corner: d speed_rate / d fore_flap: slopes -1 below and -1.5 m/(s^2 rad) above differ by 33.3 % at the "
        "point, at fore_flap = 0.2 rad",
    )
    assert found.details["B"][0][0] == pytest.approx(-1.25, rel=1e-6)
    assert found.details["error_of_B"][0][0] >= 0.25


def test_a_kink_nearby_passes_and_is_told_with_its_distance() -> None:
    found = checked(flap=0.195)
    assert found.status is Status.PASS
    assert found.notes == (
        "corner: d speed_rate / d fore_flap: slopes -1 below and -1.5 m/(s^2 rad) above differ by 33.3 %, 0.005 "
        "nominal sizes above the point, at fore_flap = 0.2 rad",
    )
    assert found.details["B"][0][0] == pytest.approx(-1.0, rel=1e-9)
    assert found.figures[0].worst == 0.0


def test_a_small_kink_nearby_is_counted() -> None:
    found = checked(flap=0.195, bite=0.03)
    assert found.status is Status.PASS
    assert found.notes == ("1 smaller corner lies within 0.01 nominal sizes, below `slope_gap`",)


def test_far_from_the_kink_there_is_nothing_to_tell() -> None:
    found = checked(flap=0.1)
    assert (found.status, found.notes, found.reason) == (Status.PASS, (), "")
    assert found.details["corners"] == []
    assert found.details["A"] == [[pytest.approx(-0.5)]]
    assert found.details["C"] == [[pytest.approx(1.0)]]
    assert found.details["D"] == [[pytest.approx(0.0, abs=1e-12)]]
    assert found.details["jacobian_source"] == "central differences, extrapolated"
    assert set(found.details["noise"]) == {"speed_rate", "speed"}
    (pole,) = found.details["poles"]
    assert (pole["real"], pole["time_constant"]) == pytest.approx((-0.5, 2.0))


def test_the_flap_that_only_goes_up() -> None:
    found = checked(slopes=SlopeAsk(side={"fore_flap": "up"}))
    assert found.status is Status.PASS
    assert found.notes == ("slopes by fore_flap are taken from above only: as `side` says",)
    assert found.details["B"][0][0] == pytest.approx(-1.5, rel=1e-9)


def test_a_limit_of_zero_still_passes_a_smooth_plant_far_from_corners() -> None:
    found = checked(flap=0.1, slopes=SlopeAsk(slope_gap=1e-6))
    assert found.status is Status.PASS


def test_a_wrong_jacobian_fails_and_names_the_entry() -> None:
    def jacobian(t: float, x: Any, u: Any, p: Any) -> Any:
        return [[-0.5]], [[+1.0]], [[1.0]], [[0.0]]

    plant = Plant(
        states=FLAP.states, inputs=FLAP.inputs, parameters=FLAP.parameters, dynamics=dynamics, jacobian=jacobian
    )
    found = checked(plant, flap=0.1)
    assert found.status is Status.FAIL
    assert found.reason.startswith(
        "the plant's own Jacobian disagrees with differences: the plant's own Jacobian gives "
        "d speed_rate / d fore_flap = 1, differences give -1 +- "
    )
    assert len(found.details["wrong_entries"]) == 1
    assert found.details["B"][0][0] == pytest.approx(-1.0)
    assert found.details["jacobian_source"].endswith("disagrees")


def test_without_a_trim_it_is_undecided() -> None:
    plant = Plant(
        states={"speed": "m/s"}, inputs={"fore_flap": ""}, dynamics=lambda t, x, u, p: np.stack([1.0 + x[0] ** 2])
    )
    found = checked(plant)
    assert found.status is Status.UNDECIDED
    assert found.reason.startswith("no operating point to work from")


def test_a_plant_that_fails_beside_the_point_is_undecided_with_its_call() -> None:
    def edge(t: float, x: Any, u: Any, p: Any) -> Any:
        if np.any(u[0] > 0.2):
            raise RuntimeError("no data above 0.2")
        return np.stack([1.0 - x[0] - u[0]])

    found = checked(Plant(states={"speed": "m/s"}, inputs={"fore_flap": ""}, dynamics=edge))
    assert found.status is Status.UNDECIDED
    assert "the plant raised an exception" in found.reason
    assert "no data above 0.2" in found.reason
    assert "fore_flap = 0.2" in found.reason


def test_noise_that_may_hide_a_kink_is_undecided() -> None:
    def rounded(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([np.round(1.0 - x[0] - u[0], 2)])

    found = checked(Plant(states={"speed": "m/s"}, inputs={"fore_flap": ""}, dynamics=rounded), flap=0.1)
    assert found.status is Status.UNDECIDED


def test_a_jump_on_the_point_fails() -> None:
    def relay(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([1.0 - x[0] - u[0] - 0.01 * (u[0] > 0.1)])

    found = checked(Plant(states={"speed": "m/s"}, inputs={"fore_flap": ""}, dynamics=relay), flap=0.1)
    assert found.status is Status.FAIL
    assert "speed_rate jumps by 0.01" in found.reason


def test_minutes_as_time_unit_reach_the_poles_in_hertz() -> None:
    plant = Plant(
        states={"a": "", "b": ""},
        inputs={"fore_flap": ""},
        dynamics=lambda t, x, u, p: np.stack([2 * np.pi * x[1], -2 * np.pi * x[0] - 0.1 * x[1] + u[0]]),
        time_unit="min",
    )
    found = checked(plant)
    assert found.status is Status.PASS
    assert [pole["hertz"] for pole in found.details["poles"]] == pytest.approx([1 / 60] * 2, rel=1e-9)


def test_the_same_verdict_every_time() -> None:
    assert repr(checked(flap=0.195)) == repr(checked(flap=0.195))
