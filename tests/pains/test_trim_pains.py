"""What users of other trims ran into, through the whole road: the right answer, or the right refusal."""

from __future__ import annotations

from pathlib import Path

import pytest

from linverify.checks.judge import judge
from linverify.core.case import Options
from linverify.core.errors import SpecError
from linverify.core.verdict import Status, Verdict
from linverify.spec.bind import load

PLANT = """
import numpy as np
from linverify.core.plant import Plant

def plant(rates, inputs="", **more):
    states = {"x": "mol/l"}
    return Plant(states=states, inputs={name: "mol/l/s" for name in inputs.split()}, dynamics=rates, **more)

false_success = plant(lambda t, x, u, p: x**2 - 2 * x)
round_off = plant(lambda t, x, u, p: 1e3 * np.sin(x - 0.3))
none = plant(lambda t, x, u, p: x**2 + 1.0 - u, "feed")
discrete = plant(lambda k, x, u, p: 0.25 * x + u, "feed", step=0.5)
two_roots = plant(lambda t, x, u, p: (x - 2.0) * (x + 3.0))
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


def test_a_point_that_is_no_root_is_never_a_success(road):
    # from 1.0 a widely used root finder reports success at 1.01, where the rate is -1
    found = road("false_success", "{start: {x: 1.1 mol/l}}")
    assert found.status is Status.PASS
    assert found.details["states"]["x"]["value"] == pytest.approx(2.0, rel=1e-12)
    assert found.figures[0].what == "scaled residual"
    assert found.figures[0].worst <= found.figures[0].limit


def test_a_start_that_is_as_near_to_two_roots_is_undecided_not_a_lucky_pick(road):
    assert road("false_success", "{start: {x: 1 mol/l}}").status is Status.UNDECIDED


def test_a_residual_at_round_off_counts_whatever_a_solver_thinks_of_its_progress(road):
    found = road("round_off", "{start: {x: 0.4 mol/l}}", "envelope: {x: [-1 mol/l, 1 mol/l]}\ntrims: {accuracy: 1e-12}")
    assert found.status is Status.PASS
    assert found.details["states"]["x"]["value"] == pytest.approx(0.3, abs=1e-14)


def test_unknowns_that_do_not_match_the_equations_are_named_before_anything_is_computed(road):
    with pytest.raises(SpecError, match=r"2 unknowns \(x, feed\) for 1 equation \(rates of x\)"):
        road("none", "{}")


def test_no_equilibrium_is_an_answer_of_its_own(road):
    found = road("none", "{hold: {feed: 0.5 mol/l/s}}")
    assert found.status is Status.FAIL
    assert "the rate of x cannot vanish: with every other equation met it stays at 0.5 mol/l per s" in found.reason
    assert found.details["nearest_holds"] == {"feed": pytest.approx(1.0, abs=1e-6)}


def test_a_difference_equation_has_its_own_equilibrium(road):
    found = road("discrete", "{hold: {feed: 3 mol/l/s}}")
    assert found.status is Status.PASS
    assert found.details["states"]["x"]["value"] == pytest.approx(4.0, rel=1e-14)


def test_a_negative_concentration_is_outside_the_bounds_and_never_an_answer(road):
    found = road("two_roots", "{start: {x: 0 mol/l}}", "envelope: {x: [0 mol/l, 10 mol/l]}")
    assert found.details["states"]["x"]["value"] == pytest.approx(2.0, rel=1e-12)
    assert "other_equilibria" not in found.details
    unbounded = road("two_roots", "{start: {x: -1 mol/l}}")
    assert unbounded.details["states"]["x"]["value"] == pytest.approx(-3.0, rel=1e-12)
    assert unbounded.details["other_equilibria"] == [{"x": pytest.approx(2.0)}]
    assert unbounded.notes == ("other equilibria: (1) x = 2 mol/l",)
