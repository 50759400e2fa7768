"""Delivered models: read by name into the plant's units."""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from linverify.core.case import Case, Setting
from linverify.core.delivered import DeliveredModel
from linverify.core.errors import Place, SpecError
from linverify.spec import bind

PLANT = """
from linverify import Plant

boiler = Plant(
    states={"level": "m", "temperature": "degC", "tilt": "rad"},
    inputs={"inflow": "m/min", "heat": "degC/min"},
    outputs={"level": "m", "outflow": "m/min"},
    dynamics=lambda t, x, u, p: [u[0] - x[0], u[1] - x[1], x[0] - x[2]],
    measurement=lambda t, x, u, p: [x[0], x[0]],
    time_unit="min",
)
"""
SPEC = """\
linverify: 1
plant: plant.py:boiler
operating_points:
  full: {hold: {level: 1 m, temperature: 20 degC}}
  half: {hold: {level: 0.5 m, temperature: 20 degC}}
local_models: {source: "models/{point}.json"}
"""
A = [[-1.0, 0.0, 0.25], [0.0, -1.0, 0.0], [1.0, 0.5, -1.0]]
B = [[1.0, 0.0], [0.0, 1.0], [0.0, 0.0]]
C = [[1.0, 0.0, 0.0], [1.0, 0.0, 0.125]]
D = [[0.0, 0.0], [0.5, 0.0]]
MODEL: dict[str, Any] = {
    "A": A, "B": B, "C": C, "D": D,
    "states": ["level", "temperature", "tilt"], "inputs": ["inflow", "heat"], "outputs": ["level", "outflow"],
}  # fmt: skip

Load = Callable[..., tuple[Case, ...]]


@pytest.fixture
def load(tmp_path: Path) -> Load:
    """Writes plant, spec and the model of both points, and binds them."""
    (tmp_path / "plant.py").write_text(PLANT, encoding="utf-8")
    (tmp_path / "models").mkdir()

    def loaded(model: dict[str, Any] | str = MODEL, spec: str = SPEC) -> tuple[Case, ...]:
        text = model if isinstance(model, str) else json.dumps(model)
        for name in ("full", "half"):
            (tmp_path / "models" / f"{name}.json").write_text(text, encoding="utf-8")
        (tmp_path / "spec.yaml").write_text(spec, encoding="utf-8")
        return bind.load(tmp_path / "spec.yaml", tmp_path)

    return loaded


def delivered(case: Case) -> DeliveredModel:
    assert case.local.delivered is not None
    return case.local.delivered


def test_a_model_is_read_as_it_is_written(load: Load) -> None:
    full, half = load()
    model = delivered(full)
    assert model.file == "models/full.json"
    assert delivered(half).file == "models/half.json"
    for name, values in (("A", A), ("B", B), ("C", C), ("D", D)):
        np.testing.assert_array_equal(getattr(model, name), np.array(values))
    assert (model.states, model.inputs, model.outputs) == (
        ("level", "temperature", "tilt"),
        ("inflow", "heat"),
        ("level", "outflow"),
    )
    assert (model.step, model.course, model.digits, model.point) == (None, "held", 17, "")
    assert full.files[-1].name == "full.json"
    assert [check.name for check in full.checks] == ["trims", "differentiable", "agrees"]


def test_units_are_converted_entry_by_entry(load: Load) -> None:
    units = {
        "level": "cm",
        "temperature": "degF",
        "tilt": "deg",
        "inflow": "cm/s",
        "outflow": "m/h",
        "heat": "degC/min",
    }
    x0 = {"level": 50.0, "temperature": 68.0}
    model = delivered(load({**MODEL, "units": units, "time_unit": "s", "x0": x0, "u0": [1.0, 0.0], "y0": [50, 3]})[0])
    x = np.array([0.01, 5 / 9, math.pi / 180])
    u = np.array([0.6, 1.0])
    y = np.array([0.01, 1 / 60])
    np.testing.assert_allclose(model.A, np.array(A) * x[:, None] / x * 60, rtol=1e-14)
    np.testing.assert_allclose(model.B, np.array(B) * x[:, None] / u * 60, rtol=1e-14)
    np.testing.assert_allclose(model.C, np.array(C) * y[:, None] / x, rtol=1e-14)
    np.testing.assert_allclose(model.D, np.array(D) * y[:, None] / u, rtol=1e-14)
    assert dict(model.x0) == pytest.approx({"level": 0.5, "temperature": 20.0})
    assert dict(model.u0) == pytest.approx({"inflow": 0.6, "heat": 0.0})
    assert dict(model.y0) == pytest.approx({"level": 0.5, "outflow": 0.05})


def test_several_points_share_words(load: Load, tmp_path: Path) -> None:
    shared = {key: MODEL[key] for key in ("states", "inputs", "outputs", "C", "D")}
    own = {"A": A, "B": B}
    text = json.dumps(
        {**shared, "points": {"half": own, "full": {**own, "C": np.multiply(C, 2).tolist()}, "more": own}}
    )
    (tmp_path / "all.json").write_text(text, encoding="utf-8")
    full, half = load(spec=SPEC.replace("models/{point}.json", "all.json"))
    np.testing.assert_array_equal(delivered(full).C, 2.0 * np.array(C))
    np.testing.assert_array_equal(delivered(half).C, np.array(C))
    assert Setting("local_models.not used", "more", "all.json") in full.settings


def test_a_discrete_model_keeps_its_entries(load: Load) -> None:
    model = delivered(load({**MODEL, "dt": 30, "time_unit": "s", "hold": "straight"})[0])
    assert (model.step, model.course) == (pytest.approx(0.5), "straight")
    np.testing.assert_array_equal(model.A, np.array(A))


def test_a_foreign_name_is_told_with_its_place(load: Load) -> None:
    text = json.dumps({**MODEL, "states": ["level", "temprature", "tilt"]}, indent=1)
    with pytest.raises(SpecError) as caught:
        load(text)
    (problem, _) = caught.value.problems
    line = text[: text.index("temprature")].count("\n") + 1
    assert problem.place == Place("models/full.json", line, 3)
    assert problem.hint == "temperature"
