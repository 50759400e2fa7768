"""Mistakes in loops: the whole text that their writer is told, by the names of `loop_mistakes`.

`bad_loops.txt` has each name on a line of its own and below it, indented, what is told.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from loop_mistakes import CASES, PLANT, RIGHT

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
