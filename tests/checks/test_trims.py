"""The check `trims`: passes, fails and stays undecided for the reasons it states, and tells them readably."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from linverify.checks.judge import judge
from linverify.core.case import Case, CheckAsk, Expected, Interval, Options, TrimAsk
from linverify.core.errors import Place
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict
from linverify.report import record

PLACE = Place("specs/tug/pull.yaml", 12, 3)
EXPECTED_AT = Place("specs/tug/pull.yaml", 15, 22)
LIMITS = {"speed": Interval(0.0, 8.0), "thrust": Interval(0.0, 80e3)}
SIZES = {"speed": 1.0, "thrust": 10e3, "power": 100e3}


def _dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
    return np.stack([(u[0] - p["drag"] * x[0] ** 2) / p["mass"]])


TUG = Plant(
    states={"speed": "m/s"},
    inputs={"thrust": "N"},
    outputs={"power": "W"},
    parameters={"mass": (200e3, "kg"), "drag": (2e3, "kg/m")},
    dynamics=_dynamics,
    measurement=lambda t, x, u, p: np.stack([x[0] * u[0]]),
)


def _verdict(plant: Plant = TUG, **changes: Any) -> Verdict:
    ask = {"hold": {"speed": 5.0}, "find": ("thrust",)} | changes.pop("trim", {})
    known = {
        "spec": "specs/tug/pull.yaml",
        "point": "kn10",
        "title": "A tug",
        "plant": plant,
        "place": PLACE,
        "trim": TrimAsk(**ask),
        "parameters": plant.defaults,
        "envelope": LIMITS,
        "nominal": SIZES,
        "checks": (CheckAsk("trims", PLACE),),
    }
    return judge(Case(**{**known, **changes}), CheckAsk("trims", PLACE), Options())


def _expecting(value: float, tolerance: float, name: str = "thrust") -> dict[str, Any]:
    return {"trim": {"expect": {name: Expected(value, tolerance, EXPECTED_AT)}}}


def test_an_equilibrium_inside_the_envelope_passes_with_its_values():
    verdict = _verdict()
    assert (verdict.status, verdict.reason, verdict.id) == (Status.PASS, "", "specs/tug/pull.yaml::kn10::trims")
    figure = verdict.tightest
    assert (figure.what, figure.signal, figure.limit) == ("scaled residual", "speed", 1e-8)
    details = verdict.details
    assert details["states"] == {"speed": {"value": 5.0, "unit": "m/s"}}
    assert details["inputs"]["thrust"]["value"] == pytest.approx(50e3)
    assert details["outputs"]["power"] == {"value": pytest.approx(250e3), "unit": "W"}
    assert details["starts"] > 1
    assert details["evaluations"] > details["starts"]
    assert "drift" not in details
    assert "other_equilibria" not in details


def test_a_verdict_survives_the_record():
    for verdict in (_verdict(), _verdict(envelope={"thrust": Interval(0.0, 20e3)})):
        written = record.dumps(verdict)
        assert record.dumps(record.loads(written)) == written
        assert record.loads(written).details.keys() == verdict.details.keys()


def test_no_equilibrium_fails_and_says_what_a_tired_engineer_needs():
    verdict = _verdict(envelope={"speed": Interval(0.0, 8.0), "thrust": Interval(0.0, 20e3)})
    assert verdict.status is Status.FAIL
    assert verdict.reason == (
        "no equilibrium was found inside the envelope: the rate of speed cannot vanish: with every other equation met "
        "it stays at -0.15 m/s per s, with thrust at its upper limit 20000 N"
    )
    assert verdict.notes == (
        "nearest the search came: thrust = 20000 N",
        "a trim exists at the held values speed = 3.16228 m/s, the nearest that were found",
    )
    assert (verdict.figures[0].worst, verdict.figures[0].status) == (pytest.approx(0.15), Status.FAIL)
    assert verdict.details["active_bounds"] == ["thrust at its upper limit 20000 N"]
    assert verdict.details["nearest_holds"]["speed"]["value"] == pytest.approx(np.sqrt(10.0))
    assert verdict.details["closest"]["thrust"]["value"] == pytest.approx(20e3)


@pytest.mark.parametrize(
    "value, tolerance, status, share",
    [
        (50e3, 100.0, Status.PASS, 0.0),
        (50.05e3, 100.0, Status.PASS, 0.5),
        (51e3, 100.0, Status.FAIL, 10.0),
        (49e3, 100.0, Status.FAIL, 10.0),
    ],
)
def test_an_expected_value_that_wanders_fails_with_its_used_share(value, tolerance, status, share):
    verdict = _verdict(**_expecting(value, tolerance))
    figure = verdict.figures[1]
    assert (verdict.status, figure.status, figure.signal, figure.unit) == (status, status, "thrust", "N")
    assert figure.used_share == pytest.approx(share, abs=1e-6)
    assert figure.origin == "specs/tug/pull.yaml:15:22"


def test_a_plant_that_changed_is_caught_by_an_expected_output():
    expecting = _expecting(250e3, 1e3, "power")
    assert _verdict(**expecting).status is Status.PASS
    verdict = _verdict(parameters={"mass": 200e3, "drag": 2.1e3}, **expecting)
    assert verdict.status is Status.FAIL
    assert verdict.reason == ("power trims at 262500 W, 12500 W from the expected 250000 W; 1000 W are allowed")


def test_an_expected_value_closer_than_the_trim_itself_is_known_is_undecided():
    flat = Plant(states={"x": "m"}, inputs={}, dynamics=lambda t, x, u, p: -((x - 1.0) ** 3))
    verdict = _verdict(
        plant=flat, envelope={}, nominal={},
        trim={"hold": {}, "find": ("x",), "expect": {"x": Expected(1.0, 1e-7, EXPECTED_AT)}},
    )  # fmt: skip
    assert verdict.status is Status.UNDECIDED
    assert "the trimmed value is known only to within" in verdict.reason


def test_of_a_failed_and_a_kept_expectation_only_the_failed_is_told():
    expect = {
        "thrust": Expected(40e3, 1.0, EXPECTED_AT),
        "power": Expected(250e3, 1e3, EXPECTED_AT),
    }
    verdict = _verdict(trim={"expect": expect})
    assert verdict.status is Status.FAIL
    assert verdict.reason == "thrust trims at 50000 N, 10000 N from the expected 40000 N; 1 N are allowed"


def test_a_drift_is_listed():
    verdict = _verdict(trim={"rates": {"speed": 0.1}})
    assert verdict.details["drift"] == {"speed": {"value": 0.1, "unit": "m/s^2"}}
    assert verdict.details["inputs"]["thrust"]["value"] == pytest.approx(70e3)


def test_other_equilibria_are_listed():
    verdict = _verdict(
        trim={"hold": {"thrust": 50e3}, "find": ("speed",), "start": {"speed": 4.0}},
        envelope={"speed": Interval(-8.0, 8.0)},
    )
    assert verdict.status is Status.PASS
    assert verdict.notes == ("other equilibria: (1) speed = -5 m/s",)
    assert verdict.details["other_equilibria"] == [{"speed": {"value": pytest.approx(-5.0), "unit": "m/s"}}]


@pytest.mark.parametrize(
    "changes, reason",
    [
        (
            {
                "trim": {"hold": {"thrust": 50e3}, "find": ("speed",)},
                "envelope": {"speed": Interval(-8.0, 9.0)},
            },
            "2 equilibria lie inside the envelope and no `start` says which one is meant",
        ),
        ({"trim": {"hold": {}, "find": ("speed", "thrust")}}, "the equilibria form a family in which speed, thrust"),
        (
            {"trim": {"hold": {}, "find": ("speed", "thrust"), "minimize": {"speed": 0.0}}},
            "the weights of `minimize` leave speed, thrust free",
        ),
    ],
    ids=["several", "family", "not unique"],
)
def test_what_does_not_single_out_one_equilibrium_is_undecided(changes, reason):
    verdict = _verdict(**changes)
    assert verdict.status is Status.UNDECIDED
    assert verdict.reason.startswith(reason)
    assert "states" not in verdict.details
    assert verdict.details["other_equilibria"]


def _broken(answer: Any) -> Plant:
    return Plant(states={"speed": "m/s"}, inputs={"thrust": "N"}, dynamics=lambda t, x, u, p: answer(x, u))


@pytest.mark.parametrize(
    "answer, told",
    [
        (lambda x, u: x / 0 if np.any(x == x) else x, "returned inf"),
        (lambda x, u: np.zeros(3) + 0 * x[0], "shape (3,)"),
        (lambda x, u: {}["chart"], "raised KeyError: 'chart'"),
    ],
    ids=["not finite", "shape", "raises"],
)
def test_a_plant_that_cannot_be_called_is_undecided_with_the_call_named(answer, told):
    verdict = _verdict(plant=_broken(answer))
    assert verdict.status is Status.UNDECIDED
    assert told in verdict.reason
    assert "called with t = 0 s, speed = 5 m/s, thrust = 40000 N" in verdict.reason
    assert not any("called with" in note for note in verdict.notes)  # once is enough


def test_failed_calls_on_the_way_are_told_beside_a_pass():
    def answer(x: Any, u: Any) -> Any:
        return np.where(u > 60e3, np.nan, u - 2e3 * x**2)

    verdict = _verdict(plant=_broken(answer), nominal={"speed": 1.0, "thrust": 1e4})
    assert verdict.status is Status.PASS
    assert verdict.details["failed_calls"] > 0
    assert verdict.notes[-1].startswith(f"{verdict.details['failed_calls']} of {verdict.details['evaluations']} calls")
    assert "the first: dynamics returned nan for speed when called with" in verdict.notes[-1]


def test_a_plant_that_is_not_deterministic_is_undecided():
    counter = iter(range(10**6))
    verdict = _verdict(plant=_broken(lambda x, u: u - 2e3 * x**2 + 1e-3 * next(counter)))
    assert verdict.status is Status.UNDECIDED
    assert "is not deterministic" in verdict.reason


def test_rates_that_fade_without_an_equilibrium_are_undecided_not_failed():
    fading = _broken(lambda x, u: np.exp(-u / 1e3) + 0 * x)
    verdict = _verdict(plant=fading, nominal={"thrust": 1e3, "speed": 1.0})
    assert verdict.status is Status.UNDECIDED
    assert "far from solved" in verdict.reason


def test_the_same_verdict_twice_to_the_last_bit():
    assert record.dumps(_verdict()) == record.dumps(_verdict())
