"""A root finder reports success on a point that is no root, or gives up on one that is: only the residual counts."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import root

from linverify.core.verdict import Status

TWO_ROOTS = """
plant = Plant(states={"level": "m"}, inputs={}, dynamics=lambda t, x, u, p: x**2 - 2.0 * x + p["shift"],
              parameters={"shift": 0.0})
"""
POINT = """
envelope: {level: [0.5 m, 3 m]}
operating_points: {full: {start: {level: 1 m}}}
"""


def test_success_that_is_none(judged, record_property: pytest.RecordProperty) -> None:
    """scipy 1.17: hybr from 1 says success at 1.01, where the rate is -0.9999. Its Jacobian is zero at the start."""
    theirs = root(lambda x: x**2 - 2.0 * x, 1.0)
    record_property("scipy root", f"success {theirs.success}, x {theirs.x}, rate {theirs.fun}")
    found = judged(TWO_ROOTS, POINT)["full.trims"]
    assert found.status is Status.PASS
    level = found.details["states"]["level"]["value"]
    assert level == pytest.approx(2.0, rel=1e-12)
    residual = found.figures[0]
    assert (residual.what, residual.signal) == ("scaled residual", "level")
    assert abs(level**2 - 2.0 * level) <= residual.limit


def test_no_root_is_no_success(judged) -> None:
    """The same curve lifted off the axis: the least that the rate can be is told, and no number is handed on."""
    found = judged(TWO_ROOTS, "parameters: {shift: 1.5}\n" + POINT)
    assert found["full.trims"].status is Status.FAIL
    least = "the rate of level cannot vanish: with every other equation met it stays at 0.5 m per s"
    assert least in found["full.trims"].reason
    assert found["full.trims"].details["closest"]["level"]["value"] == pytest.approx(1.0, abs=1e-3)
    assert found["full.differentiable"].status is Status.UNDECIDED


def test_no_success_that_is_one(judged, record_property: pytest.RecordProperty) -> None:
    """scipy 1.17: "not making good progress" at a residual of 1e-16. A root of higher order is one all the same."""
    theirs = root(lambda x: np.exp(x) - 1.0 - x, 1.0)
    record_property("scipy root", f"success {theirs.success}, residual {theirs.fun}: {theirs.message}")
    plant = """
    plant = Plant(states={"x": "1"}, inputs={}, dynamics=lambda t, x, u, p: np.exp(x) - 1.0 - x)
    """
    point = """
    envelope: {x: [-2, 2]}
    operating_points: {rest: {start: {x: 1}}}
    """
    found = judged(plant, point)["rest.trims"]
    assert found.status is Status.PASS, found.reason
    x = found.details["states"]["x"]["value"]
    assert abs(x) <= found.details["errors"]["x"]["value"]  # and how badly a flat root is known is told
    assert found.details["errors"]["x"]["value"] > 1e-9
