"""Margins tried on the nonlinear plant: agreement, disagreement that is confirmed, limit cycles, limits and exits."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from cart import CART, PLACE, case, controller, derived, loop, pd, sampled_pd

from linverify.checks.confirm_margin import Confirmation, confirm
from linverify.checks.judge import judge_study
from linverify.checks.margins import setup
from linverify.checks.replay import replayed_study
from linverify.checks.study import Study
from linverify.core.case import Case, CheckAsk, Options, TrimAsk
from linverify.core.loop import Actuator, Loop, Moved
from linverify.core.model import LocalModel
from linverify.core.verdict import Status
from linverify.drives import pinned
from linverify.numerics.closing import opened
from linverify.numerics.loop_margins import measured

LAG = Actuator(lag=0.05)


def tried(one: Case, local: LocalModel | None = None, options: Options | None = None) -> Confirmation:
    study = Study(one, options or Options(), model_override=local)
    loop = one.loops["hold"]
    return confirm(study, loop, measured(opened(setup(study, loop.name), loop.name), loop.break_at == "plant_input"))


def lagging(**changes: Any) -> Case:
    """A loop with both gain margins and a delay margin."""
    return case(loop(pd(20.0, 4.0)), **{"actuators": {"f": LAG}, "envelope": {}, **changes})


@pytest.fixture(scope="module")
def agreed() -> Confirmation:
    return tried(lagging())


def test_a_linear_plant_agrees_with_its_margins(agreed: Confirmation) -> None:
    assert agreed.status is Status.PASS
    assert agreed.reasons == ()
    assert [one["must"] for one in agreed.details] == ["rest", "grow"] * 3
    for figure in agreed.figures:
        assert figure.status is Status.PASS
        assert figure.error < 0.01 * abs(figure.worst)


def test_the_growth_of_a_linear_plant_is_that_of_its_closed_loop_pole(agreed: Confirmation) -> None:
    """Of (s^2 - 4)(0.05 s + 1)(0.02 s + 1) + k (20 (0.02 s + 1) + 4 s) the root that the lower margin is about."""
    figure, k = agreed.figures[2], 0.2**0.9
    plant = np.polymul([1.0, 0.0, -4.0], np.polymul([0.05, 1.0], [0.02, 1.0]))
    roots = np.roots(np.polyadd(plant, k * np.array([4.4, 20.0])))
    slowest = min(roots, key=abs).real
    assert f"gain times {k:.4g} (0.9 of the margin downwards)" in figure.what
    assert figure.worst == pytest.approx(slowest, rel=0.05)


def test_a_sampled_loop_agrees() -> None:
    found = tried(case(loop(sampled_pd(12.0, 5.0, 0.05)), envelope={}))
    assert found.status is Status.PASS
    assert len(found.details) >= 4


@pytest.mark.parametrize("gain, way", [(0.7, "rest"), (1.4, "grow")])
def test_a_local_model_with_a_wrong_gain_is_found_out(gain: float, way: str) -> None:
    """The model's margin upwards is 1 / gain times the plant's: the trial on one side of it must come out wrong."""
    one = lagging()
    right = derived(one)
    found = tried(one, replace(right, B=gain * right.B))
    assert found.status is Status.FAIL
    upwards = [each for each in found.details if "upwards" in each["change"] and each["status"] == "fail"]
    assert [each["must"] for each in upwards] == [way]
    assert any("a small motion must" in text for _, text in found.reasons)


def test_a_limit_cycle_of_a_saturating_actuator_is_told_and_kept(tmp_path: Path) -> None:
    """Beyond the upper margin the actuator's range bounds the motion: unstable all the same, and a finding to see."""
    one = lagging(actuators={"f": replace(LAG, low=-4.0, high=4.0)})
    found = tried(one, options=Options(reports=tmp_path))
    assert found.status is Status.PASS
    (note,) = [line for line in found.notes if "limit cycle" in line]
    assert "(1.1 of the margin upwards) the plant goes on in a limit cycle of y" in note
    (kept,) = found.evidence
    drive, about = pinned.read(tmp_path / "evidence" / f"{kept.drive}.json")
    assert about["item"] == "specs/cart.yaml::rest::margins.hold"
    assert about["signals"][0] == "f"
    size = np.abs(np.array(about["plant"]["y"], dtype=float)[-24:]).max()
    assert 0.001 < size < 0.02
    assert 0.0 < abs(drive.offsets["q"]) < size


def test_what_bounds_or_ends_a_growing_motion_is_told_apart() -> None:
    one = lagging(actuators={"f": replace(LAG, low=-4.0, high=4.0)})
    became = {each["change"]: each["became"] for each in tried(one).details}
    down = next(text for change, text in became.items() if "1.1 of the margin downwards" in change)
    assert down.startswith("grows beyond 30 nominal sizes of ")
    assert down.endswith(", with f at the limit of its actuator")
    free = case(loop(pd(20.0, 4.0)), actuators={"f": LAG})
    ends = [each["became"] for each in tried(free).details if each["must"] == "grow"]
    assert all(text.startswith("leaves the envelope through ") for text in ends)


def test_a_plant_that_saturates_below_the_kick_is_asked_with_a_smaller_one() -> None:
    """The kick itself is brought back, yet the equilibrium is unstable: small motions grow into a limit cycle."""
    found = tried(lagging(actuators={"f": replace(LAG, low=-1e-3, high=1e-3)}))
    (up,) = [each for each in found.details if "1.1 of the margin upwards" in each["change"]]
    assert up["status"] == "pass"
    assert up["became"].startswith("goes on in a limit cycle of y")
    assert up["growth"] > 0.0
    (note,) = [
        line for line in found.notes if "brings back a motion of 0.001 nominal sizes and not one of 1e-6" in line
    ]
    assert "(1.1 of the margin upwards)" in note


def dead_zone(t: float, x: Any, u: Any, p: Any) -> Any:
    force = u[0] - np.clip(u[0], -0.2, 0.2)
    return np.stack([x[1], p["a"] * x[0] + force])


def test_a_limit_cycle_short_of_the_margin_is_a_finding() -> None:
    """Within the dead zone nothing holds the cart: it is caught outside of it, and never comes to rest."""
    one = lagging(plant=replace(CART, dynamics=dead_zone))
    local = derived(lagging())
    found = tried(one, replace(local, at=Study(one, Options()).point()))
    assert found.status is Status.FAIL
    bad = [each for each in found.details if each["must"] == "rest" and each["status"] == "fail"]
    assert bad
    assert found.evidence


def test_a_loop_without_finite_margins_has_nothing_to_try() -> None:
    """q' = f under a proportional controller: no gain is too large, and the dead time is all there is to try."""
    gain = controller(np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)), [[3.0]])
    held = TrimAsk(hold={"q": 0.0, "v": 0.0}, find=("f",), start={"f": 0.0})
    one = case(loop(gain, measures=("v",)), parameters={"a": 0.0}, envelope={}, trim=held)
    found = tried(one)
    assert all("dead time" in each["change"] for each in found.details)
    assert found.status is Status.PASS


def test_at_the_plants_output_the_measured_channel_is_scaled() -> None:
    states = controller(np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((1, 0)), [[20.0, 4.0]])
    hold = Loop("hold", states, ("q", "v"), (Moved("f"),), break_at="plant_output")
    found = tried(case(hold, actuators={"f": LAG}, envelope={}))
    assert found.status is Status.PASS
    assert {each["signal"] for each in found.details} == {"q", "v"}


def test_a_kept_trajectory_is_replayed_as_the_whole_check(tmp_path: Path) -> None:
    hold = replace(loop(sampled_pd(12.0, 5.0, 0.05)), confirm=True)
    ask = CheckAsk("margins", PLACE, loop="hold")
    one = case(hold, envelope={}, checks=(ask,), actuators={"f": Actuator(low=-4.0, high=4.0)})
    study = Study(one, Options(reports=tmp_path))
    found = judge_study(study, ask)
    assert found.status is Status.PASS
    assert found.evidence
    drive, _ = pinned.read(tmp_path / "evidence" / f"{found.evidence[0].drive}.json")
    again = replayed_study(Study(one, Options(reports=tmp_path)), ask, drive)
    assert (again.status, again.figures, again.evidence) == (found.status, found.figures, found.evidence)
