"""Being installed costs a run that does not use it nothing worth telling: each case in a process of its own."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

HEAVY = ("numpy", "scipy", "hypothesis.strategies", "yaml", "pint", "tabulate", "linverify.core.case", "linverify.run")
REPORT = """
import json, os, sys
from pathlib import Path
def pytest_sessionfinish(session):
    ours = sorted(name for name in sys.modules if name.split('.')[0] == 'linverify')
    heavy = [name for name in {heavy!r} if name in sys.modules]
    process = os.environ.get('PYTEST_XDIST_WORKER', 'main')
    Path(f'loaded-{{process}}.json').write_text(json.dumps([heavy, ours]))
"""
OURS = ["linverify", "linverify.pytest_plugin", "linverify.pytest_plugin.options", "linverify.pytest_plugin.plugin"]
# loads the module with pytest already there, as pytest does, and tells the seconds that it took
TIMED = """
import sys, time
import pytest
started = time.process_time()
import linverify.pytest_plugin.plugin
print(time.process_time() - started)
"""


def _python(*arguments: str, folder: Path) -> str:
    command = [sys.executable, *arguments]
    # a worker of the run that this test belongs to must not be taken for one of the run inside it
    environment = {name: value for name, value in os.environ.items() if not name.startswith("PYTEST_")}
    done = subprocess.run(
        command, cwd=folder, env=environment, capture_output=True, text=True, check=False, timeout=120
    )
    assert done.returncode == 0, done.stdout + done.stderr
    return done.stdout


def _project(folder: Path) -> None:
    (folder / "pytest.ini").write_text("[pytest]\n")
    (folder / "conftest.py").write_text(REPORT.format(heavy=HEAVY))
    (folder / "test_one.py").write_text("def test_one():\n    pass\n")
    (folder / "notes.yaml").write_text("no: spec\n")


@pytest.mark.parametrize("workers, processes", [(("-p", "no:xdist"), ["main"]), (("-n", "1"), ["gw0", "main"])])
def test_a_run_without_the_flag_loads_two_small_modules(
    tmp_path: Path, workers: tuple[str, ...], processes: list[str]
) -> None:
    _project(tmp_path)
    # other plugins that are installed beside us load what they like; they are left out
    _python("-m", "pytest", *workers, "-p", "no:hypothesispytest", "-p", "no:benchmark", folder=tmp_path)
    files = sorted(tmp_path.glob("loaded-*.json"))
    assert [path.stem.removeprefix("loaded-") for path in files] == processes
    for path in files:
        assert json.loads(path.read_text()) == [[], OURS]


def test_loading_the_plugin_takes_less_than_ten_milliseconds(tmp_path: Path) -> None:
    """Of processor time, the least of five: other work on the machine must not decide it."""
    seconds = [float(_python("-c", TIMED, folder=tmp_path)) for _ in range(5)]
    assert min(seconds) < 0.010


@pytest.mark.parametrize("words", [("--version",), ("--help",)])
def test_simple_questions_are_answered_without_heavy_imports(tmp_path: Path, words: tuple[str, ...]) -> None:
    code = (
        f"import sys, runpy\nsys.argv = ['linverify', *{words!r}]\n"
        "try:\n    runpy.run_module('linverify', run_name='__main__')\n"
        "except SystemExit as end:\n    assert not end.code\n"
        f"print([name for name in {HEAVY!r} if name in sys.modules])\n"
    )
    assert _python("-c", code, folder=tmp_path).splitlines()[-1] == "[]"
