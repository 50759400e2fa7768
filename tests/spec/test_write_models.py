"""What is written reads back equal, to the last bit, in every format, alone and in one file with others."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from types import MappingProxyType

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from linverify.core.delivered import DeliveredModel, Keep
from linverify.core.errors import Place
from linverify.core.model import Array, frozen_array
from linverify.core.plant import Plant
from linverify.spec.delivered import bind_delivered
from linverify.spec.ground import Ground
from linverify.spec.layout import FileWord
from linverify.spec.models import read_models
from linverify.spec.write_models import ModelFileError, Sheet, write_models

FORMATS = (
    "{point}.json",
    "{point}.csv",
    "{point}.npz",
    "{point}.mat",
    "{point}",
    "all.json",
    "all.csv",
    "all.npz",
    "all.mat",
)
UNITS = ("", "m", "degC", "rad", "kg/m^3", "m/s")
NUMBERS = st.floats(allow_nan=False, allow_infinity=False, width=64)
PLACE = Place("spec.yaml")


@st.composite
def plants(draw: st.DrawFn) -> Plant:
    def signals(stem: str, least: int) -> dict[str, str]:
        count = draw(st.integers(least, 3))
        return {
            f"{stem}{index}{draw(st.sampled_from(['', '-x', '.y', '+z']))}": draw(st.sampled_from(UNITS))
            for index in range(count)
        }

    def nothing(t: float, x: Array, u: Array, p: Mapping[str, float]) -> Array:
        return x

    return Plant(
        states=signals("s", 1),
        inputs=signals("i", 0),
        outputs=signals("o", 0),
        dynamics=nothing,
        measurement=nothing,
        time_unit=draw(st.sampled_from(["s", "min"])),
        step=None,
    )


@st.composite
def models(draw: st.DrawFn, plant: Plant, *, shape: DeliveredModel | None = None) -> DeliveredModel:
    def shuffled(names: Mapping[str, str]) -> tuple[str, ...]:
        return tuple(draw(st.permutations(list(names))))

    def table(rows: int, columns: int) -> Array:
        values = draw(st.lists(NUMBERS, min_size=rows * columns, max_size=rows * columns))
        return frozen_array(np.array(values, dtype=float).reshape(rows, columns))

    def some(names: Mapping[str, str], like: Mapping[str, float] | None) -> Mapping[str, float]:
        kept = draw(st.sets(st.sampled_from(sorted(names)))) if like is None and names else set(like or ())
        return MappingProxyType({name: draw(NUMBERS) for name in names if name in kept})

    states, inputs, outputs = shuffled(plant.states), shuffled(plant.inputs), shuffled(plant.outputs or {})
    named: tuple[str, ...] | None = states if draw(st.booleans()) else None
    step = draw(st.one_of(st.none(), st.floats(1e-3, 1e3)))
    if shape is not None:
        states, inputs, outputs, named = shape.states or states, shape.inputs, shape.outputs, shape.states
        step = None if shape.step is None else draw(st.floats(1e-3, 1e3))
    n, m, k = len(states), len(inputs), len(outputs)
    return DeliveredModel(
        file="", place=PLACE, A=table(n, n), B=table(n, m), C=table(k, n), D=table(k, m),
        states=named, inputs=inputs, outputs=outputs, step=step,
        course=shape.course if shape else draw(st.sampled_from(["held", "straight"])) if step else "held",
        x0=some(plant.states, shape.x0 if shape else None),
        u0=some(plant.inputs, shape.u0 if shape else None),
        y0=some(plant.outputs or {}, shape.y0 if shape else None),
    )  # fmt: skip


def bits(values: Array) -> bytes:
    return np.ascontiguousarray(values).tobytes()


def assert_equal(read: DeliveredModel, written: DeliveredModel) -> None:
    for name in "ABCD":
        assert getattr(read, name).shape == getattr(written, name).shape
        assert bits(getattr(read, name)) == bits(getattr(written, name)), name
    for name in ("states", "inputs", "outputs", "step", "course"):
        assert getattr(read, name) == getattr(written, name)
    for name in ("x0", "u0", "y0"):
        values, due = dict(getattr(read, name)), dict(getattr(written, name))
        assert {key: value.hex() for key, value in values.items()} == {key: value.hex() for key, value in due.items()}


def read_back(plant: Plant, folder: Path, to: str, point: str, keep: Keep | None = None) -> DeliveredModel:
    source = FileWord(to, folder, PLACE)
    found = read_models(source, folder / to.replace("{point}", point), to)
    assert found.problems == ()
    claim = found.claims[point if found.several else ""]
    ground = Ground(plant)
    model = bind_delivered(ground, claim, keep)
    assert ground.problems == []
    assert model is not None
    assert not model.rounding  # what we write ourselves is no rounded number
    return model


@pytest.mark.parametrize("to", FORMATS)
@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_it_reads_back_to_the_last_bit(tmp_path: Path, to: str, data: st.DataObject) -> None:
    plant = data.draw(plants())
    first = data.draw(models(plant))
    second = data.draw(models(plant, shape=first))
    units = {**plant.states, **plant.inputs, **(plant.outputs or {})}
    written = {"kn30": first, "kn-4.5": second}
    sheets = {point: Sheet(model, units, plant.time_unit) for point, model in written.items()}
    write_models(sheets, str(tmp_path / to), force=True)
    for point, model in written.items():
        assert_equal(read_back(plant, tmp_path, to, point), model)


def model(**changes: object) -> Sheet:
    given = {"A": [[1.0]], "B": [[2.0]], "C": [[3.0]], "D": [[4.0]]}
    values = {name: frozen_array(value) for name, value in given.items()}
    made = DeliveredModel("", PLACE, **values, states=("x",), inputs=("u",), outputs=("y",), **changes)  # type: ignore[arg-type]
    return Sheet(made, {"x": "m", "u": "", "y": "m"}, "s")


def test_nothing_is_replaced_unasked(tmp_path: Path) -> None:
    to = str(tmp_path / "{point}.json")
    (tmp_path / "b.json").write_text("kept", encoding="utf-8")
    with pytest.raises(ModelFileError, match=r"b\.json: is there already; --force replaces it"):
        write_models({"a": model(), "b": model()}, to)
    assert sorted(path.name for path in tmp_path.iterdir()) == ["b.json"]
    assert (tmp_path / "b.json").read_text(encoding="utf-8") == "kept"
    assert write_models({"a": model(), "b": model()}, to, force=True) == (tmp_path / "a.json", tmp_path / "b.json")
    assert (tmp_path / "b.json").read_text(encoding="utf-8") != "kept"


def test_json_has_a_line_a_row(tmp_path: Path) -> None:
    write_models({"a": model(point="a", step=0.1, x0={"x": 0.1})}, str(tmp_path / "{point}.json"))
    assert (
        (tmp_path / "a.json").read_text(encoding="utf-8")
        == """\
{
  "point": "a",
  "states": ["x"],
  "inputs": ["u"],
  "outputs": ["y"],
  "units": {"x": "m", "y": "m"},
  "time_unit": "s",
  "dt": 0.1,
  "hold": "held",
  "x0": {"x": 0.1},
  "A": [
    [1.0]],
  "B": [
    [2.0]],
  "C": [
    [3.0]],
  "D": [
    [4.0]]
}
"""
    )


@pytest.mark.parametrize(
    "to, message",
    [
        ("m.yaml", "m.yaml: models are written to .json, .csv, .npz, .mat or, without a suffix, to a folder"),
        ("models", "models: a folder holds one model; put {point} into its name, as in models/{point}"),
    ],
)
def test_what_cannot_be_written(to: str, message: str) -> None:
    with pytest.raises(ModelFileError) as caught:
        write_models({"a": model(), "b": model()}, to)
    assert str(caught.value) == message


def test_a_stack_is_of_one_kind(tmp_path: Path) -> None:
    with pytest.raises(ModelFileError, match=r"models of one stack differ in hold; put \{point\} into the name"):
        write_models({"a": model(step=1.0), "b": model(step=1.0, course="straight")}, str(tmp_path / "all.npz"))
    assert list(tmp_path.iterdir()) == []
