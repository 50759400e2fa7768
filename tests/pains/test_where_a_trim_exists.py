"""What users of other trims ran into, through the whole road: the right answer, or the right refusal."""

from __future__ import annotations

from pathlib import Path

import pytest

from linverify.checks.judge import judge
from linverify.core.case import Options
from linverify.core.verdict import Status, Verdict
from linverify.spec.bind import load

PLANT = """
import numpy as np
from linverify.core.plant import Plant

def plant(rates, inputs="", **more):
    states = {"x": "mol/l"}
    return Plant(states=states, inputs={name: "mol/l/s" for name in inputs.split()}, dynamics=rates, **more)

false_success = plant(lambda t, x, u, p: x**2 - 2 * x)
none = plant(lambda t, x, u, p: x**2 + 1.0 - u, "feed")
"""


@pytest.fixture
def road(tmp_path: Path):
    (tmp_path / "plant.py").write_text(PLANT, encoding="utf-8")

    def verdict(name: str, point: str, rest: str = "") -> Verdict:
        text = f"linverify: 1\nplant: plant.py:{name}\n{rest}\noperating_points:\n  here: {point}\n"
        (tmp_path / "spec.yaml").write_text(text, encoding="utf-8")
        (case,) = load(tmp_path / "spec.yaml", tmp_path)
        return judge(case, case.checks[0], Options())

    return verdict


def test_a_start_that_is_as_near_to_two_roots_is_undecided_not_a_lucky_pick(road):
    assert road("false_success", "{start: {x: 1 mol/l}}").status is Status.UNDECIDED


def test_no_equilibrium_is_an_answer_of_its_own(road):
    found = road("none", "{hold: {feed: 0.5 mol/l/s}}")
    assert found.status is Status.FAIL
    assert "the rate of x cannot vanish: with every other equation met it stays at 0.5 mol/l per s" in found.reason
    assert found.details["nearest_holds"] == {"feed": {"value": pytest.approx(1.0, abs=1e-6), "unit": "mol/l/s"}}
