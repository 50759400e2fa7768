"""Mistakes in loops: the whole text that their writer is told, by the names of `loop_mistakes`.

`bad_loops.txt` has each name on a line of its own and below it, indented, what is told.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from loop_mistakes import CASES, PLANT, RIGHT, js, npz, one

from linverify import Plant
from linverify.core.case import TrimAsk
from linverify.core.errors import Place, Problem
from linverify.spec.bound_loops import BoundLoops, LoopBinder
from linverify.spec.ground import Ground
from linverify.spec.layout import Cell
from linverify.spec.loops import read_loops
from linverify.spec.reader import Reader
from linverify.spec.source import Block, parse

TOLD: dict[str, str] = {}
for block in (Path(__file__).parent / "bad_loops.txt").read_text(encoding="utf-8").strip().split("\n\n"):
    name, *lines = block.split("\n")
    TOLD[name] = "\n".join(line.removeprefix("    ") for line in lines)

TRIM = TrimAsk({"speed": 15.0}, ("pitch", "thrust"), {"pitch": 0.1, "heat": 20.0})


def bound(folder: Path, plant: Plant, loops: str, files: dict[str, Any]) -> tuple[list[Problem], BoundLoops]:
    """Write the files, read the loops and bind them at a speed of 15 m/s: mistakes sorted by place, and loops."""
    for name, content in files.items():
        (folder / name).write_bytes(content if isinstance(content, bytes) else content.encode())
    tree, problems = parse(f"loops:\n  {loops}\n".encode(), "spec.yaml")
    assert isinstance(tree, Block)
    ((key, node),) = tree.entries
    reader = Reader({"spec.yaml": folder})
    asks = read_loops(reader, key, node, whole=True)
    told = [*problems, *reader.problems]
    ground = Ground(plant, complete=not told)
    cell = Cell("kn30", (), None, Place("spec.yaml"))
    found = LoopBinder(ground, folder).of(asks, cell, TRIM, {"mass": 38_000.0})
    return sorted({*told, *ground.problems}), found


@pytest.mark.parametrize("name", CASES)
def test_the_whole_text_is_told(tmp_path: Path, name: str) -> None:
    told, _ = bound(tmp_path, *CASES[name])
    assert "\n".join(map(str, told)) == TOLD[name]
    assert told


def test_every_text_belongs_to_a_mistake() -> None:
    assert sorted(TOLD) == sorted(CASES)
    assert len(CASES) >= 140


def test_without_a_mistake_nothing_is_told(tmp_path: Path) -> None:
    told, found = bound(tmp_path, PLANT, RIGHT, {})
    assert told == []
    assert list(found.loops) == ["a"]


@settings(max_examples=400, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_whatever_is_written_a_mistake_is_told_or_loops_are_bound(tmp_path: Path, data: st.DataObject) -> None:
    plant, loops, files = CASES[data.draw(st.sampled_from(sorted(CASES)))]
    at = data.draw(st.integers(0, len(loops)))
    cut = data.draw(st.integers(0, min(len(loops) - at, 30)))
    pieces = st.sampled_from(
        ["", "{", "}", "[", "]", ", ", ": ", "0", "-1", "1e400", "a", "null", "inner", " deg", "[[]]"]
    )
    written = loops[:at] + data.draw(pieces) + loops[at + cut :]
    tree, problems = parse(f"loops:\n  {written}\n".encode(), "spec.yaml")
    if not isinstance(tree, Block) or tree.words != ("loops",):
        return
    told, found = bound(tmp_path, plant, written, files)
    assert told or problems or found.loops
    for loop in found.loops.values():
        assert all(np.isfinite(getattr(loop.controller, word)).all() for word in "ABCD")
        assert loop.controller.D.shape == (len(loop.moves), len(loop.measures))


@pytest.mark.parametrize("name", ["c.json", "c.npz"])
@settings(max_examples=200, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_whatever_a_file_holds_a_mistake_is_told_or_a_controller_read(
    tmp_path: Path, name: str, data: st.DataObject
) -> None:
    content = (js(dt=0.01) | npz())[name]
    whole = content if isinstance(content, bytes) else content.encode()
    at = data.draw(st.integers(0, len(whole)))
    cut = data.draw(st.integers(0, min(len(whole) - at, 40)))
    changed = whole[:at] + data.draw(st.binary(max_size=8)) + whole[at + cut :]
    told, found = bound(tmp_path, PLANT, one(f"{{file: {name}}}"), {name: changed})
    assert bool(told) != bool(found.loops)
