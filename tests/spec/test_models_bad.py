"""Bad files of models: the whole text that their writer is told, by the names of `model_mistakes`.

`bad_models.txt` has each name on a line of its own and below it, indented, what is told.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from model_mistakes import CASES, LINES, MODEL, PLANT, SPEC, folder, js, mat, npz

from linverify.core.case import Case
from linverify.core.errors import SpecError
from linverify.spec import bind

TOLD: dict[str, str] = {}
for block in (Path(__file__).parent / "bad_models.txt").read_text(encoding="utf-8").strip().split("\n\n"):
    name, *lines = block.split("\n")
    TOLD[name] = "\n".join(line.removeprefix("    ") for line in lines)


def load(folder: Path, source: str, files: dict[str, Any]) -> tuple[Case, ...]:
    """Write plant, spec and files, and bind them."""
    (folder / "plant.py").write_text(PLANT, encoding="utf-8")
    (folder / "spec.yaml").write_text(SPEC.replace("SOURCE", source), encoding="utf-8")
    for name, content in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return bind.load(folder / "spec.yaml", folder)


@pytest.mark.parametrize("name", CASES)
def test_the_whole_text_is_told(tmp_path: Path, name: str) -> None:
    with pytest.raises(SpecError) as caught:
        load(tmp_path, *CASES[name])
    assert str(caught.value) == TOLD[name]


def test_every_text_belongs_to_a_mistake() -> None:
    assert sorted(TOLD) == sorted(CASES)
    assert len(CASES) >= 100


RIGHT = {
    "m.json": {"m.json": js()},
    "m": folder(),
    "m.csv": {"m.csv": LINES},
    "m.npz": {"m.npz": npz()},
    "m.mat": {"m.mat": mat()},
}


@pytest.mark.parametrize("source", RIGHT)
def test_without_the_mistake_all_are_read_alike(tmp_path: Path, source: str) -> None:
    (case,) = load(tmp_path, source, RIGHT[source])
    model = case.local.delivered
    assert model is not None
    for word in "ABCD":
        np.testing.assert_array_equal(getattr(model, word), np.array(MODEL[word]))


@pytest.mark.parametrize("source", RIGHT)
@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_whatever_the_bytes_are_a_mistake_is_told_or_a_model_read(
    tmp_path: Path, source: str, data: st.DataObject
) -> None:
    files = {name: text if isinstance(text, bytes) else text.encode() for name, text in RIGHT[source].items()}
    name = data.draw(st.sampled_from(sorted(files)))
    whole = files[name]
    at = data.draw(st.integers(0, len(whole)))
    cut = data.draw(st.integers(0, min(len(whole) - at, 40)))
    files[name] = whole[:at] + data.draw(st.binary(max_size=8)) + whole[at + cut :]
    try:
        (case,) = load(tmp_path, source, files)
    except SpecError as error:
        assert error.problems
    else:
        model = case.local.delivered
        assert model is not None
        assert all(np.isfinite(getattr(model, word)).all() for word in "ABCD")
