"""A search whose verdict depends on the day: on a seed, a profile, a database of examples, or on how fast it ran."""

from __future__ import annotations

import pytest
from basin_project import BREAKS, HOLDS, PLANT, Project


def _one_point(spec: str) -> str:
    return spec.partition("  high:")[0] + spec[spec.index("drives:") :]


def _body(project: Project, *arguments: str) -> tuple[int, str]:
    """Exit status, and the record up to where it tells of time and machine."""
    result = project.spawn(*arguments, "specs")
    text = (project.path / "reports" / "linverify.json").read_text(encoding="utf-8")
    return int(result.ret), text[: text.index('"provenance"')]


def test_only_our_own_seed_enters_and_it_is_recorded(project: Project, monkeypatch: pytest.MonkeyPatch) -> None:
    """Hypothesis 6.170 on its own: another seed, CI or an example of an earlier run finds or misses a violation."""
    monkeypatch.delenv("CI", raising=False)
    project.write("specs/breaks.yaml", _one_point(BREAKS))
    first = _body(project)
    assert first[0] == 1
    assert '"seed": 0' in first[1]
    assert not (project.path / ".hypothesis" / "examples").exists()
    monkeypatch.setenv("CI", "1")
    project.write(".hypothesis/examples/none", "")
    assert _body(project, "--hypothesis-seed=2", "--hypothesis-profile=ci") == first
    status, other = _body(project, "--linverify-seed=7")
    assert status == 1
    assert '"seed": 7' in other
    assert other != first[1]


def test_a_slow_plant_meets_no_deadline(project: Project) -> None:
    """Hypothesis fails an example that takes longer than 200 ms, and calls it flaky when the next try is faster."""
    project.write("specs/holds.yaml", _one_point(HOLDS))
    quick = _body(project)
    wait = """
    CALLS.append(0)
    if len(CALLS) % 300 == 0:
        time.sleep(0.25)
        open("waited", "a").write("x")
"""
    slow = PLANT.replace("import os\n", "import os, time\nCALLS = []\n").replace(
        "\n    return u -", f"{wait}    return u -"
    )
    project.write("specs/plant.py", slow)
    assert _body(project) == quick
    assert quick[0] == 0
    assert (project.path / "waited").read_text(encoding="utf-8").startswith("xx")
