"""Models that were delivered with loops closed inside: exact ones pass, wrong ones fail, the rest is told."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from cart import CART, PLACE, case, controller, drives, loop, pd, sampled_pd
from delivering import delivered
from scipy.linalg import expm

from linverify.checks.comparison import comparison
from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Amplitude, Band, Case, CheckAsk, DriveSet, Interval, Options, TrimAsk
from linverify.core.delivered import AgreeAsk, Delays, DeliveredModel, Keep, LocalAsk, ResponseAsk
from linverify.core.loop import Actuator, Limit, Loop, Moved
from linverify.core.mode import ModeAsk
from linverify.core.model import LocalModel
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict

ENTRIES = AgreeAsk(entries=0.01, place=PLACE)
RESPONSE = AgreeAsk(response=ResponseAsk(0.02, 0.05, 20.0, 0.01, PLACE), place=PLACE)
NONE = (np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)))
OWN = drives(loop="")  # they add to what the loop inside the model moves
LAG = {"f": Actuator(lag=0.05)}
STATES = controller(np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((1, 0)), [[20.0, 4.0]])
LOOPS: Mapping[str, tuple[Loop, dict[str, Any]]] = {
    "continuous": (loop(pd(20.0, 4.0, 0.05)), {}),
    "behind an actuator": (loop(pd(20.0, 4.0, 0.05)), {"actuators": LAG}),
    "of states": (loop(STATES, measures=("q", "v")), {}),
    "sampled": (loop(sampled_pd(12.0, 5.0, 0.05)), {}),
    "sampled as the drives": (loop(sampled_pd(8.0, 4.0, 0.1)), {}),
    "sampled, behind an actuator": (loop(sampled_pd(12.0, 5.0, 0.05)), {"actuators": LAG}),
    "sampled, late by a sample": (loop(sampled_pd(8.0, 4.0, 0.05), delay=0.05), {}),
    "sampled, measured late": (loop(sampled_pd(8.0, 4.0, 0.05)), {"delays": Delays(outputs={"y": 0.05})}),
}  # fmt: skip


def closed(*loops: Loop, given: DeliveredModel | None = None, agree: AgreeAsk = ENTRIES, **changes: Any) -> Case:
    keep = changes.pop("keep", None)
    return case(*loops, local=LocalAsk(given, keep, agree, changes.pop("inside", ("hold",))), **changes)


def exact(one: Case) -> LocalModel:
    """What `derive` would write."""
    study = Study(one, Options())
    assert study.unmet("reference") == ""
    return study.reference()


def judged(one: Case, kind: str = "agrees") -> Verdict:
    return judge_study(Study(one, Options()), CheckAsk(kind, PLACE))


def exactly(found: Verdict) -> None:
    assert found.status is Status.PASS, found.reason
    for figure in found.figures:
        assert figure.worst <= 1e-3 * figure.limit


def at_set_point(one: Loop) -> DriveSet:
    return drives(at="set_point", amplitude={one.measures[0]: Amplitude(-0.1, 0.1)})


@pytest.mark.parametrize("name", LOOPS)
def test_the_exact_model_leaves_nothing_to_differ(name: str) -> None:
    """The plant is linear."""
    one, changes = LOOPS[name]
    given = delivered(exact(closed(one, **changes)))
    # at the input where it is sampled, else at the set point, and once at both
    sets = [at_set_point(one)] if one.sample is None else [OWN]
    for driven in [OWN, at_set_point(one)] if name == "sampled" else sets:
        there = closed(one, given=given, driven=driven, **changes)
        assert judged(there).status is Status.PASS
        exactly(judged(there, "follows"))


def test_names_and_numbers_in_closed_form() -> None:
    """q'' = 4 q + w, w' = (f + u - w) / lag, f = 20 (r - q) + 8 x, x' = r - q."""
    one = loop(controller([[0.0]], [[1.0]], [[8.0]], [[20.0]]))
    model = exact(closed(one, actuators=LAG))
    assert model.states.names == ("q", "v", "f.lag", "hold.1")
    assert model.states.units == ("m", "m/s", "N", "")
    assert model.inputs.names == ("f", "hold.set_point.y")
    assert model.outputs.names == ("y", "f")
    assert model.inputs.units == ("N", "m")
    A = [[0, 1, 0, 0], [4, 0, 1, 0], [-400, 0, -20, 160], [-1, 0, 0, 0]]
    np.testing.assert_allclose(model.A, A, atol=1e-6)
    np.testing.assert_allclose(model.B, [[0, 0], [0, 0], [20, 400], [0, 1]], atol=1e-6)
    np.testing.assert_allclose(model.C, [[1, 0, 0, 0], [0, 0, 1, 0]], atol=1e-6)
    assert not model.D.any()
    assert np.all(np.abs(model.A - A) <= model.errors["A"] + 1e-12)


def test_a_sampled_loop_is_a_difference_equation_in_closed_form() -> None:
    """x+ = P x + G (12 e + 100 (e - e before) + u), the difference e - e before kept by the controller's state."""
    model = exact(closed(loop(sampled_pd(12.0, 5.0, 0.05))))
    whole = expm(0.05 * np.array([[0.0, 1, 0], [4, 0, 1], [0, 0, 0]]))
    P, G = whole[:2, :2], whole[:2, 2:]
    assert (model.step, model.states.names) == (0.05, ("q", "v", "hold.1"))
    np.testing.assert_allclose(model.A[:2, :2], P - G @ [[112.0, 0.0]], atol=1e-6)
    np.testing.assert_allclose(model.A[:2, 2:], -100.0 * G, atol=1e-6)
    np.testing.assert_allclose(model.A[2], [-1.0, 0.0, 0.0], atol=1e-6)
    np.testing.assert_allclose(model.B, np.vstack([np.hstack([G, 112.0 * G]), [[0.0, 1.0]]]), atol=1e-6)
    np.testing.assert_allclose(model.C[1], [-112.0, 0.0, -100.0], atol=1e-6)
    np.testing.assert_allclose(model.D[1], [1.0, 112.0], atol=1e-6)


WRONG = {
    "a gain 20 % off": (pd(24.0, 4.8, 0.05), "what loop hold gives, times 1.2, explains all of it"),
    "the wrong sign": (pd(-20.0, -4.0, 0.05), "loop hold is closed with the wrong sign"),
    "an open loop": (controller([[-20.0]], [[1.0]], [[0.0]], [[0.0]]), "loop hold is open in it"),
}  # fmt: skip


@pytest.mark.parametrize("fault", WRONG)
def test_wrong_loops_are_caught_and_named(fault: str) -> None:
    wrong, cause = WRONG[fault]
    given = delivered(exact(closed(loop(wrong))))
    one = loop(pd(20.0, 4.0, 0.05))
    told = judged(closed(one, given=given))
    assert told.status is Status.FAIL
    assert told.notes[0].endswith(cause)
    unnamed = judged(closed(one, given=replace(given, states=None), agree=RESPONSE))
    assert unnamed.status is Status.FAIL
    driven = OWN if "sign" in fault else at_set_point(one)
    assert judged(closed(one, given=given, driven=driven), "follows").status is Status.FAIL


@pytest.mark.parametrize("fault", ["gain", "sample"])
def test_wrong_sampled_loops_are_caught(fault: str) -> None:
    one = loop(sampled_pd(12.0, 5.0, 0.05))
    wrong = loop(sampled_pd(14.4, 6.0, 0.05)) if fault == "gain" else loop(sampled_pd(12.0, 5.0, 0.1))
    given = replace(delivered(exact(closed(wrong))), step=0.05)
    assert judged(closed(one, given=given)).status is Status.FAIL
    assert judged(closed(one, given=given, driven=OWN), "follows").status is Status.FAIL


def test_without_names_outputs_are_compared() -> None:
    one = loop(pd(20.0, 4.0, 0.05))
    model = exact(closed(one))
    turn = np.array([[2.0, 1.0, 0.0], [0.0, 1.0, -1.0], [1.0, 0.0, 3.0]])
    back = np.linalg.inv(turn)
    turned = replace(model, A=turn @ model.A @ back, B=turn @ model.B, C=model.C @ back)
    given = delivered(turned, states=None)
    assert judged(closed(one, given=given)).status is Status.UNDECIDED  # entries of what?
    assert judged(closed(one, given=given, agree=RESPONSE)).status is Status.PASS
    exactly(judged(closed(one, given=given, driven=OWN), "follows"))


def test_what_is_moved_need_be_neither_input_nor_output() -> None:
    one = loop(pd(20.0, 4.0, 0.05))
    model = delivered(exact(closed(one)))
    lean = replace(
        model, inputs=model.inputs[1:], outputs=("y",), B=model.B[:, 1:], C=model.C[:1], D=model.D[:1, 1:]
    )  # fmt: skip
    driven = at_set_point(one)
    there = closed(one, given=lean, driven=driven, bands=(Band("y", "peak", 0.01),))
    assert judged(there).status is Status.PASS
    exactly(judged(there, "follows"))
    told = judged(closed(one, given=lean, driven=OWN), "follows")
    assert told.status is Status.UNDECIDED
    assert "no state or output f" in told.reason


def test_a_claimed_point_is_that_of_the_plant_with_its_loops() -> None:
    one = loop(pd(20.0, 4.0, 0.05))
    given = replace(
        delivered(exact(closed(one))), x0={"q": 0.0, "hold.1": 3.0}, u0={"hold.set_point.y": 0.0}, y0={"f": 0.0}
    )
    found = judged(closed(one, given=given))
    assert found.status is Status.PASS
    claimed = [row["signal"] for row in found.details["claimed_point"]]
    assert claimed == ["q", "hold.set_point.y", "f"]  # what a controller holds at trim is its own affair
    off = judged(closed(one, given=replace(given, u0={"hold.set_point.y": 0.2})))
    assert off.status is Status.FAIL
    assert "hold.set_point.y: claimed 0.2 m, trimmed" in off.reason


def test_states_that_the_closed_loop_does_not_have() -> None:
    one = loop(sampled_pd(12.0, 5.0, 0.05))
    model = delivered(exact(closed(one)))
    foreign = replace(model, states=("q", "v", "hold.held.1"))
    found = judged(closed(one, given=foreign))
    assert found.status is Status.UNDECIDED
    assert "lacks the states hold.1 and has the states hold.held.1" in found.reason
    misspelt = judged(closed(one, given=replace(model, inputs=("f", "hold.set_point.yy"))), "follows")
    assert misspelt.status is Status.UNDECIDED
    assert "no input hold.set_point.yy; did you mean hold.set_point.y" in misspelt.reason


def test_a_multiple_of_the_sample_time_agrees_and_the_gap_is_told() -> None:
    one = loop(sampled_pd(8.0, 4.0, 0.05))
    fine = exact(closed(one))
    whole = np.block([[fine.A, fine.B], [np.zeros((2, 3)), np.eye(2)]])
    twice = (whole @ whole)[:3]
    given = delivered(replace(fine, A=twice[:, :3], B=twice[:, 3:], step=0.1))
    assert judged(closed(one, given=given)).status is Status.PASS
    found = judged(closed(one, given=given, driven=OWN), "follows")
    assert found.status is Status.UNDECIDED
    assert "sampled loops act at multiples of 0.05 s, between the instants of the local model" in found.reason


UNDECIDED = {
    "continuous": (loop(sampled_pd(12.0, 5.0, 0.05)), {"step": None}, {}, "the delivered model is continuous"),
    "no multiple": (loop(sampled_pd(12.0, 5.0, 0.05)), {"step": 0.07}, {}, "no whole multiple"),
    "straight": (loop(sampled_pd(12.0, 5.0, 0.05)), {"course": "straight"}, {}, "cannot have it inside"),
    "dead time": (loop(pd(20.0, 4.0, 0.05), delay=0.02), {}, {}, "the dead time of the loop lies inside loop hold"),
    "late input": (loop(pd(20.0, 4.0, 0.05)), {}, {"delays": Delays(inputs={"f": 0.1})}, "the dead time of f"),
}  # fmt: skip


@pytest.mark.parametrize("name", UNDECIDED)
def test_what_no_model_can_have_inside_exactly_is_undecided(name: str) -> None:
    one, changed, changes, reason = UNDECIDED[name]
    given = replace(delivered(exact(closed(replace(one, delay=0.0)))), **changed)
    found = judged(closed(one, given=given, **changes))
    assert found.status is Status.UNDECIDED
    assert reason in found.reason


@pytest.mark.parametrize("course", ["held", "straight"])
def test_a_continuous_loop_may_be_delivered_sampled(course: Any) -> None:
    one = loop(pd(20.0, 4.0, 0.05))
    asked = delivered(exact(closed(one)), step=0.05, course=course)
    given = delivered(exact(closed(one, given=asked)), course=course)
    driven = replace(OWN, course=course)
    there = closed(one, given=given, driven=driven)
    assert judged(there).status is Status.PASS
    exactly(judged(there, "follows"))


def test_an_outer_loop_around_a_delivered_inner_one() -> None:
    inner = loop(controller(*NONE, [[10.0]]), name="speed", measures=("v",))
    outer = loop(controller(*NONE, [[3.0]]), name="hold", measures=("y",), moves=(Moved("v", "speed"),))
    given = delivered(exact(closed(outer, inner, inside=("speed",))))
    driven = at_set_point(outer)
    there = closed(outer, inner, given=given, inside=("speed",), driven=driven)
    assert judged(there).status is Status.PASS
    exactly(judged(there, "follows"))
    wrong = delivered(
        exact(closed(outer, replace(inner, controller=controller(*NONE, [[8.0]])), inside=("speed",)))
    )  # fmt: skip
    assert judged(replace(there, local=replace(there.local, delivered=wrong)), "follows").status is Status.FAIL


@pytest.mark.parametrize("outer_sample", [0.05, 0.1])
def test_a_sampled_outer_loop_around_a_delivered_sampled_inner_one(outer_sample: float) -> None:
    inner = loop(controller(*NONE, [[10.0]], 0.05), name="speed", measures=("v",))
    outer = loop(
        controller([[1.0]], [[outer_sample]], [[0.5]], [[2.0]], outer_sample), name="hold", measures=("y",),
        moves=(Moved("v", "speed"),),
    )  # fmt: skip
    given = delivered(exact(closed(outer, inner, inside=("speed",))))
    there = closed(outer, inner, given=given, inside=("speed",), driven=at_set_point(outer))
    assert judged(there).status is Status.PASS
    exactly(judged(there, "follows"))


def test_a_difference_equation_with_its_loop_inside() -> None:
    tank = Plant(
        states={"level": "m"}, inputs={"f": "m/s", "leak": "m/s"}, parameters={}, step=0.1,
        dynamics=lambda t, x, u, p: np.stack([x[0] + 0.1 * (u[0] - u[1])]),
    )  # fmt: skip
    one = loop(controller([[1.0]], [[0.1]], [[4.0]], [[4.0]], 0.1), measures=("level",))
    changes: dict[str, Any] = {
        "plant": tank,
        "trim": TrimAsk(hold={"level": 0.0, "leak": 0.0}, find=("f",), start={"f": 0.0}),
        "envelope": {"level": Interval(-5, 5)},
        "nominal": {"level": 1.0, "f": 1.0, "leak": 1.0},
        "bands": (Band("level", "peak", 0.01), Band("f", "peak", 0.1)),
        "driven": drives(loop="", amplitude={"leak": Amplitude(-1.0, 1.0)}),
    }
    model = exact(closed(one, **changes))
    assert model.states.names == ("level", "hold.1")
    np.testing.assert_allclose(model.A, [[0.6, 0.4], [-0.1, 1.0]], atol=1e-9)
    there = closed(one, given=delivered(model), **changes)
    assert judged(there).status is Status.PASS
    exactly(judged(there, "follows"))
    rare = replace(one, controller=replace(one.controller, step=0.2))
    assert judged(closed(rare, given=delivered(model), **changes)).status is Status.UNDECIDED


PUSHED = Plant(
    states={"q": "m", "v": "m/s", "w": "N"},
    inputs={"f": "N", "gust": "N"},
    outputs={"y": "m"},
    parameters={"a": 4.0, "lag": 0.002},
    dynamics=lambda t, x, u, p: np.stack([x[1], p["a"] * x[0] + x[2] + u[1], (u[0] - x[2]) / p["lag"]]),
    measurement=lambda t, x, u, p: np.stack([1.0 * x[0]]),
)


@pytest.mark.parametrize("others", ["settle", "freeze"])
def test_what_is_left_out_is_of_the_plant_and_loops_stay_whole(others: Any) -> None:
    """Of a fast third state the rest knows only its steady value; where it is frozen the loop moves nothing."""
    keep = Keep(("q", "v"), ("gust",), ("y",), others, PLACE)
    changes: dict[str, Any] = {
        "plant": PUSHED,
        "trim": TrimAsk(hold={"f": 0.0, "gust": 0.0}, find=("q", "v", "w"), start={"q": 0.0, "v": 0.0, "w": 0.0}),
        "nominal": {"q": 1.0, "v": 2.0, "w": 5.0, "f": 5.0, "gust": 1.0, "y": 1.0},
        "parameters": {"a": -4.0},
        "keep": keep,
        "driven": drives(loop="", amplitude={"gust": Amplitude(-1.0, 1.0)}),
    }
    one = loop(pd(20.0, 4.0, 0.05))
    model = exact(closed(one, **changes))
    assert model.states.names == ("q", "v", "hold.1")
    assert model.inputs.names == ("gust", "hold.set_point.y")
    A = np.array([[0.0, 1.0], [-4.0 - (20.0 + 4.0 / 0.05), 0.0]]) if others == "settle" else [[0.0, 1.0], [-4.0, 0.0]]
    np.testing.assert_allclose(model.A[:2, :2], A, atol=1e-5)
    there = closed(one, given=delivered(model), **changes)
    assert judged(there).status is Status.PASS
    assert judged(there, "follows").status is (Status.PASS if others == "settle" else Status.FAIL)


def test_modes_and_margins_of_a_delivered_closed_model() -> None:
    """Its modes are the file's; margins of the loop inside are those of the plant's own slopes."""
    asked = loop(pd(20.0, 4.0, 0.05), require=(Limit("phase_margin", low=0.1, place=PLACE),))
    right, wrong = (delivered(exact(closed(loop(pd(sign * 20.0, sign * 4.0, 0.05))))) for sign in (1.0, -1.0))
    stable = (ModeAsk(place=PLACE, stable=True),)
    assert judged(closed(asked, given=right, modes=stable), "modes").status is Status.PASS
    assert judged(closed(asked, given=wrong, modes=stable), "modes").status is Status.FAIL
    check = CheckAsk("margins", PLACE, loop="hold")
    for given in (right, wrong):
        found = judge_study(Study(closed(asked, given=given), Options()), check)
        assert found.status is Status.PASS, found.reason
    around = loop(controller(*NONE, [[0.5]]), name="around", moves=(Moved("y", "hold"),), within=("hold",))
    there = closed(replace(around, require=asked.require), asked, given=right)
    alone = case(replace(around, require=asked.require), asked)
    both = [judge_study(Study(each, Options()), replace(check, loop="around")) for each in (there, alone)]
    assert [found.status for found in both] == [Status.PASS, Status.PASS]
    assert both[0].figures[0].worst == pytest.approx(both[1].figures[0].worst, rel=1e-6)


def test_a_plant_without_slopes_is_driven_with_its_delivered_closed_model() -> None:
    """A corner on the point: nothing to compare entries with, but the model can still be held against the plant."""

    def bent(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([x[1], p["a"] * x[0] + p["b"] * np.abs(x[0]) + p["g"] * u[0]])

    one = loop(pd(20.0, 4.0, 0.05))
    given = delivered(exact(closed(one)))
    kinked = replace(CART, dynamics=bent)
    wide = (Band("y", "peak", 0.03), Band("f", "peak", 0.5))
    there = closed(one, given=given, plant=kinked, parameters={"b": 2.0}, driven=OWN, bands=wide)
    assert judged(there).status is Status.UNDECIDED
    assert judged(there, "follows").status is Status.PASS
    tight = (Band("y", "peak", 1e-4), Band("f", "peak", 10.0))
    assert judged(replace(there, bands=tight), "follows").status is Status.FAIL


def test_the_envelopes_rate_of_a_signal_is_no_limit_of_its_set_point() -> None:
    one = case(driven=drives(at="set_point", amplitude={"y": Amplitude(-0.1, 0.1), "f": Amplitude(-1.0, 1.0)}))
    study = Study(replace(one, rate_limits={"y": 0.1, "f": 3.0}), Options()).closed("")
    limits = comparison(study, "").limits
    assert dict(zip(limits.inputs, limits.change, strict=True)) == {"f": pytest.approx(0.3), "y": np.inf}


@pytest.mark.parametrize("fault", ["", "D", "hidden"])
def test_a_controller_in_other_coordinates_is_the_same_controller(fault: str) -> None:
    """Its states are mixed and scaled; an error of 2 % besides is an error, wherever it sits."""
    control = controller([[-20.0, 0.0], [0.0, 0.0]], [[1.0], [1.0]], [[-1600.0, 12.0]], [[100.0]])
    model = exact(closed(loop(control)))
    turn = np.eye(4)
    turn[2:, 2:] = [[0.0, 12.0], [-30.0, 4.0]]
    back = np.linalg.inv(turn)
    A, B, C = turn @ model.A @ back, turn @ model.B, model.C @ back
    if fault == "D":
        A = turn @ np.where(np.arange(16).reshape(4, 4) == 4, 1.02 * model.A, model.A) @ back
    elif fault == "hidden":
        C[1, 2:] *= 1.02
    found = judged(closed(loop(control), given=delivered(replace(model, A=A, B=B, C=C))))
    assert found.status is (Status.FAIL if fault else Status.PASS), found.reason
    assert any("were brought from the coordinates of the file" in note for note in found.notes) is not bool(fault)
    four = replace(delivered(replace(model, A=A, B=B, C=C), digits=4))
    assert judged(closed(loop(control), given=four)).status is (Status.FAIL if fault else Status.PASS)
