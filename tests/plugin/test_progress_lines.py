"""Signs of life from a check that takes long."""

from __future__ import annotations

import threading
import time
from types import SimpleNamespace

import pytest
from basin_project import SPEC, WRONG, Project

import linverify.pytest_plugin.nodes
import linverify.pytest_plugin.progress
from linverify.pytest_plugin.progress import Progress

ID = "specs/basin.yaml::low::trims"


class Page:
    """A terminal that keeps its lines."""

    def __init__(self) -> None:
        self.lines: list[str] = []

    def write_line(self, line: str) -> None:
        self.lines.append(line)


def test_a_line_when_it_is_due_and_then_from_time_to_time() -> None:
    progress = Progress(Page(), first=10.0, again=30.0)
    progress.pytest_runtest_logstart(ID)
    started = progress._running[ID][0]
    assert progress.due(started + 9.9) == []
    assert progress.due(started + 10.1) == [f"still running after 10 s: {ID}"]
    assert progress.due(started + 40.0) == []
    assert progress.due(started + 40.2) == [f"still running after 40 s: {ID}"]
    progress.pytest_runtest_logfinish(ID)
    assert progress.due(started + 1000.0) == []
    progress.pytest_sessionfinish()


def test_other_tests_are_left_alone() -> None:
    progress = Progress(Page(), first=0.0, again=0.0)
    progress.pytest_runtest_logstart("tests/test_other.py::TestClass::test_one")
    assert progress.due(time.monotonic() + 60.0) == []
    assert progress._thread is None


def test_a_check_whose_worker_died_is_not_running_any_more() -> None:
    progress = Progress(Page(), first=0.0, again=0.0)
    progress.pytest_runtest_logstart(ID)
    progress.pytest_runtest_logreport(SimpleNamespace(when="???", nodeid=ID))  # type: ignore[arg-type]
    assert progress.due(time.monotonic() + 60.0) == []
    progress.pytest_sessionfinish()


def test_a_terminal_that_is_gone_ends_the_lines_and_nothing_else() -> None:
    tried = threading.Event()

    def gone(line: str) -> None:
        tried.set()
        raise ValueError("I/O operation on closed file")

    progress = Progress(SimpleNamespace(write_line=gone), first=0.01, again=0.01)
    progress.pytest_runtest_logstart(ID)
    assert tried.wait(5.0)
    assert progress._thread is not None
    progress._thread.join(5.0)
    assert not progress._thread.is_alive()


@pytest.mark.parametrize("arguments", [(), ("-q",), ("-v",), ("-s",)])
def test_lines_appear_between_the_others(
    project: Project, monkeypatch: pytest.MonkeyPatch, arguments: tuple[str, ...]
) -> None:
    judge = linverify.pytest_plugin.nodes.judge

    def slow(*asked: object) -> object:
        time.sleep(0.25)
        return judge(*asked)  # type: ignore[arg-type]

    monkeypatch.setattr(linverify.pytest_plugin.nodes, "judge", slow)
    monkeypatch.setattr(linverify.pytest_plugin.progress, "FIRST", 0.05)
    monkeypatch.setattr(linverify.pytest_plugin.progress, "AGAIN", 60.0)
    project.write("specs/basin.yaml", SPEC)
    result = project.run(*arguments, "specs")
    assert result.ret == 0
    lines = [line for line in result.outlines if line.startswith("still running after 0 s: specs/basin.yaml::")]
    assert len(lines) == 4
    result.assert_outcomes(passed=4)


@pytest.mark.parametrize("arguments", [("-n", "2"), (), ("-v",), ("-q",), ("-s",)])
def test_lines_reach_the_terminal_once_and_repeat_nothing(project: Project, arguments: tuple[str, ...]) -> None:
    """Whatever is captured: the lines come from the process that has the terminal, past what captures its output."""
    project.write("specs/basin.yaml", WRONG)
    project.write(
        "conftest.py",
        "import time\nimport pytest\nimport linverify.pytest_plugin.progress as progress\nprogress.FIRST = 0.05\n"
        "@pytest.fixture(autouse=True)\ndef slow():\n    time.sleep(0.5)\n",
    )
    result = project.spawn(*arguments, "specs")
    assert result.ret == 1
    lines = [line for line in result.outlines if "still running" in line]
    assert len(lines) == 4
    assert sum(line.startswith("specs/basin.yaml ") for line in result.outlines) <= 1
    assert {line.removeprefix("still running after 0 s: specs/basin.yaml::") for line in lines} == {
        "low::trims",
        "low::differentiable",
        "high::trims",
        "high::differentiable",
    }
    result.stdout.no_fnmatch_line("*Captured*")
