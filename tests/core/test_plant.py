"""Describing a plant: what fits together, and what each misfit is told."""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np
import pytest

from linverify import Plant
from linverify.core.errors import DefinitionError


def swing(t: float, x: Any, u: Any, p: Any) -> Any:
    return np.stack([x[1], u[0] - p["stiffness"] * np.sin(x[0])])


GOOD: dict[str, Any] = {
    "states": {"angle": "rad", "spin": "rad/s"},
    "inputs": {"torque": "N*m"},
    "parameters": {"stiffness": (2.0, "N*m"), "count": 3},
    "dynamics": swing,
}


def test_outputs_default_to_the_states_and_parameters_to_their_values() -> None:
    plant = Plant(**GOOD)
    assert plant.output_signals.names == ("angle", "spin")
    assert plant.defaults == {"stiffness": 2.0, "count": 3.0}
    assert [plant.unit(name) for name in ("angle", "torque", "stiffness", "count")] == ["rad", "N*m", "N*m", ""]


def test_a_plant_is_a_frozen_value() -> None:
    plant = Plant(**GOOD)
    with pytest.raises(dataclasses.FrozenInstanceError):
        plant.step = 1.0  # type: ignore[misc]
    with pytest.raises(TypeError):
        plant.states["angle"] = "deg"  # type: ignore[index]


MISFITS: list[tuple[dict[str, Any], str]] = [
    ({"states": {}}, "a plant needs at least one state"),
    ({"states": ["angle"]}, "states must map names to units, for example {'speed': 'm/s'}; got ['angle']"),
    (
        {"states": {"pitch rate": "rad/s"}},
        "states: 'pitch rate' is no name; names are letters, digits, '_', '-', '+', '.', first a letter or '_'",
    ),
    ({"inputs": {"torque": 3}}, "inputs: the unit of 'torque' must be a string ('' for none), got 3"),
    ({"dynamics": None}, "dynamics must be a function of (t, x, u, p), got None"),
    ({"measurement": swing}, "a plant with a measurement needs outputs={name: unit}"),
    ({"outputs": {"height": "m"}}, "without a measurement every output must be a state; 'height' is none"),
    (
        {"outputs": {"angle": "deg"}, "measurement": swing},
        "output 'angle' is the state of that name, but its unit 'deg' differs",
    ),
    ({"inputs": {"angle": "rad"}}, "'angle' names an input and a state or output; all share one name space"),
    ({"parameters": {"spin": 1.0}}, "'spin' names a parameter and a signal; all share one name space"),
    (
        {"parameters": {"mass": (float("nan"), "kg")}},
        "parameters: 'mass' needs (finite number, 'unit'), got (nan, 'kg')",
    ),
    ({"parameters": {"mass": "heavy"}}, "parameters: 'mass' needs (finite number, 'unit'), got 'heavy'"),
    ({"parameters": {"mass": True}}, "parameters: 'mass' needs (finite number, 'unit'), got True"),
    ({"nominal": {"angel": 1.0}}, "nominal: the plant has no signal 'angel'"),
    ({"nominal": {"angle": 0.0}}, "nominal: 'angle' needs a positive number, got 0.0"),
    ({"domain": {"angle": (1.0, 1.0)}}, "domain: 'angle' is empty: 1.0 is not below 1.0"),
    ({"domain": {"angle": 3.0}}, "domain: 'angle' needs (low, high), None for an open side; got 3.0"),
    ({"step": 0.0}, "step must be a positive number of time units, got 0.0"),
    ({"time_unit": ""}, "time_unit must be a unit of time, got ''"),
]


@pytest.mark.parametrize(
    ("change", "text"), MISFITS, ids=[next(iter(change)) + str(i) for i, (change, _) in enumerate(MISFITS)]
)
def test_a_misfit_is_told(change: dict[str, Any], text: str) -> None:
    with pytest.raises(DefinitionError) as caught:
        Plant(**{**GOOD, **change})
    assert str(caught.value) == text
