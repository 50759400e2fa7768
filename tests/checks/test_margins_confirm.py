"""confirm: what was tried on the nonlinear plant becomes part of the verdict on the loop."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest
from looping import case, companion, least, linear_plant, loop, pid

from linverify.checks.closed import ClosedStudy
from linverify.checks.judge import judge
from linverify.core.case import CheckAsk, Interval, Options
from linverify.core.loop import Loop
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict

THIRD = linear_plant(*companion([3.0], [1.0, 3.0, 3.0, 1.0]))


def judged(plant: Plant, one: Loop) -> Verdict:
    names = (*plant.states, *plant.inputs)
    made = case(plant, one, envelope={name: Interval(-50.0, 50.0) for name in names})
    return judge(made, CheckAsk("margins", one.place, loop=one.name), Options())


def bent(bend: float) -> Plant:
    """3 / (s + 1)^3 whose gain falls with size: the same local model, an unlike plant a little further out."""
    A, B, C, _ = companion([3.0], [1.0, 3.0, 3.0, 1.0])

    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        return A @ x + B @ (u + bend * u**3)

    return replace(THIRD, dynamics=dynamics, measurement=lambda t, x, u, p: C @ x)


def test_a_linear_plant_agrees_with_its_margins() -> None:
    verdict = judged(THIRD, loop(pid(1.0), least("gain_margin", 2.0), confirm=True))
    assert verdict.status is Status.PASS, verdict.reason
    tried = verdict.details["confirmed"]
    assert len(tried) == 4
    assert {one["must"] for one in tried} == {"rest", "grow"}
    assert any(figure.what.startswith("growth of a small motion") for figure in verdict.figures)
    assert not judged(THIRD, loop(pid(1.0), least("gain_margin", 2.0))).details.get("confirmed")


@pytest.mark.slow
def test_a_small_motion_of_a_plant_that_bends_agrees_too() -> None:
    verdict = judged(bent(-0.01), loop(pid(1.0), least("gain_margin", 2.0), confirm=True))
    assert verdict.status is Status.PASS, verdict.reason


def test_what_cannot_be_tried_is_undecided(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(ClosedStudy, "reasons", ("the clocks do not fit",))
    verdict = judged(THIRD, loop(pid(1.0), least("gain_margin", 2.0), confirm=True))
    assert verdict.status is Status.UNDECIDED
    assert "not tried with gain times" in verdict.reason
    assert "the clocks do not fit" in verdict.reason


def test_nothing_is_tried_of_a_loop_that_is_unstable() -> None:
    verdict = judged(THIRD, loop(pid(4.0), least("gain_margin", 2.0), confirm=True))
    assert verdict.status is Status.FAIL
    assert "confirmed" not in verdict.details
    assert not verdict.figures
