"""Drives that are drawn, seeded, searched and climbed from: all inside the declared set, all repeatable."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from declared_sets import limits

from linverify.core.case import Course
from linverify.core.drive import Drive
from linverify.drives import seeds
from linverify.drives.climb import neighbours
from linverify.drives.sample import SHAPES, sample, seed_of
from linverify.drives.search import searched

MENU = tuple(SHAPES)
SETS = [limits(), limits("straight"), limits(rate=0.3), limits("straight", rate=0.3), limits(intervals=1)]


def drawn(course_set: int) -> dict[str, tuple[Drive, ...]]:
    allowed = SETS[course_set]
    rng = np.random.default_rng(5)
    start = sample(allowed, MENU, 200, rng)
    return {
        "sampled": start,
        "plain": seeds.plain(allowed),
        "searched": searched(allowed, 30, 11),
        "climbed": tuple(other for drive in start[:5] for other in neighbours(drive, allowed, 20, rng)),
    }


@pytest.mark.parametrize("number", range(len(SETS)))
def test_every_drive_belongs_to_the_declared_set(number: int) -> None:
    for how, drives in drawn(number).items():
        assert drives, how
        for drive in drives:
            assert SETS[number].problems(drive) == (), how


def test_both_signs_one_sided_ranges_and_offsets_are_used_up() -> None:
    for how, drives in drawn(0).items():
        if how == "climbed":
            continue
        values = np.concatenate([drive.values for drive in drives])
        assert values.min(axis=0) == pytest.approx([-1.5, 0.0]), how
        assert values.max(axis=0) == pytest.approx([1.0, 0.5]), how
        assert min(drive.offsets.get("pitch", 0.0) for drive in drives) < -0.15, how
        assert max(drive.offsets.get("pitch", 0.0) for drive in drives) > 0.25, how
        moved = {tuple(np.any(drive.values, axis=0)) for drive in drives}
        assert {(True, False), (False, True), (True, True)} <= moved, how


@pytest.mark.parametrize("shape", MENU)
def test_each_shape_of_the_menu_is_drawn(shape: str) -> None:
    drives = sample(limits(intervals=60), (shape,), 20, np.random.default_rng(1))
    assert sum(bool(np.any(drive.values)) for drive in drives) >= 18


def test_draws_are_independent_of_how_many_follow() -> None:
    few = sample(limits(), MENU, 5, np.random.default_rng(3))
    many = sample(limits(), MENU, 50, np.random.default_rng(3))
    assert [drive.digest for drive in few] == [drive.digest for drive in many[:5]]


def test_seeds_depend_on_every_word() -> None:
    known = {seed_of(0, "a", "b"), seed_of(1, "a", "b"), seed_of(0, "ab"), seed_of(0, "a", "c")}
    assert len(known) == 4
    # a fixed value: the same on every machine and in every version, or pinned reports change
    assert seed_of(0, "specs/a.yaml::p::follows", "random") == 12275570090210847477


def test_the_search_repeats_itself_and_heeds_its_seed() -> None:
    first, again, other = (searched(limits(), 20, number) for number in (7, 7, 8))
    assert [drive.digest for drive in first] == [drive.digest for drive in again]
    assert [drive.digest for drive in first] != [drive.digest for drive in other]
    assert searched(limits(), 0, 7) == ()


def test_the_search_hits_the_boundary_often() -> None:
    drives = searched(limits(), 50, 1)
    full = [drive for drive in drives if np.any(np.isin(drive.values[:, 0], (-1.5, 1.0)))]
    assert len(full) >= len(drives) // 5


@pytest.mark.parametrize("course", ["held", "straight"])
def test_steps_reach_the_larger_side(course: Course) -> None:
    first, second = seeds.steps(limits(course))
    assert first.values[0].tolist() == [-1.5, 0.0]
    assert second.values[-1].tolist() == [0.0, 0.5]


SEARCH = """
import sys
sys.path[:0] = sys.argv[1:3]
if len(sys.argv) > 3:
    import foreign
from declared_sets import limits
from linverify.drives.search import searched
print([drive.digest for drive in searched(limits(), 40, 99)])
"""


def test_a_foreign_module_with_odd_constants_changes_nothing(tmp_path: Path) -> None:
    """Hypothesis collects constants of loaded modules; within +-99 none of them may enter."""
    odd = ", ".join(str(number) for number in (*range(-99, 100, 7), 113, 65537, 1234567, -271828))
    (tmp_path / "foreign.py").write_text(f"ODD = [{odd}]\nFLOATS = [0.123, 17.25, 1e300]\nWORDS = ['walk', 'odd']\n")
    said = [_run(tmp_path), _run(tmp_path, "with the module"), _run(tmp_path)]
    assert said[0] == said[1] == said[2]
    assert len(said[0]) > 500


def _run(folder: Path, *words: str) -> str:
    command = [sys.executable, "-c", SEARCH, str(folder), str(Path(__file__).parent), *words]
    environment = {**os.environ, "CI": "1" if words else ""}
    done = subprocess.run(command, cwd=folder, env=environment, capture_output=True, text=True, check=True)
    return done.stdout


def test_switched_drives_stand_at_corners_of_the_declared_set() -> None:
    free = limits()
    drives = seeds.switched(free, 60, np.random.default_rng(4))
    assert len(drives) > 50
    for drive in drives:
        for column, ends in enumerate(((-1.5, 1.0), (0.0, 0.5))):
            course = drive.values[:, column]
            assert set(course.tolist()) <= set(ends)
            assert np.count_nonzero(np.diff(course)) <= seeds.SWITCHES
        assert drive.offsets["pitch"] in (-0.2, 0.0, 0.3)
    assert {int(np.count_nonzero(np.diff(drive.values[:, 0]))) for drive in drives} == {0, 1, 2, 3}


def test_switched_drives_keep_the_rate() -> None:
    slow = limits(rate=0.4)
    for drive in seeds.switched(slow, 20, np.random.default_rng(4)):
        assert np.abs(np.diff(drive.values[:, 0], prepend=0.0)).max() <= 0.4 + 1e-12
