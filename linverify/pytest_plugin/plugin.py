"""Hooks for pytest; importing it costs pytest and the standard library only.

This module is imported in every test run of every project that has linverify installed. Whatever needs numpy, yaml or
scipy is therefore imported inside the hooks, and only where `--linverify` was given.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Generator
from contextlib import suppress
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from .options import MARKERS, SETTINGS, Settings, add_options

if TYPE_CHECKING:
    from .nodes import SpecFile
    from .scheduler import PointScheduling

THREADS_SET = pytest.StashKey[str]()
TERMINAL = pytest.StashKey[int]()  # a descriptor of standard output as it was before anything captured it


def pytest_addoption(parser: pytest.Parser) -> None:
    """The option group "linverify"."""
    add_options(parser)


@pytest.hookimpl(wrapper=True, tryfirst=True)
def pytest_load_initial_conftests(early_config: pytest.Config) -> Generator[None, object, object]:
    """One thread for linear algebra, before any conftest can load numpy; workers inherit the environment.

    The terminal's output is kept here for signs of life: further in, standard output is captured.
    """
    if early_config.known_args_namespace.linverify:
        from ..core.threads import one_thread

        early_config.stash[THREADS_SET] = one_thread()
        with suppress(OSError, ValueError, AttributeError):  # not every standard output is a file
            early_config.stash[TERMINAL] = os.dup(sys.stdout.fileno())
    return (yield)


def pytest_configure(config: pytest.Config) -> None:
    """Settings and, where the flag was given, what keeps the books."""
    for line in MARKERS:
        config.addinivalue_line("markers", line)
    if not config.getoption("linverify"):
        return
    from .gather import LEDGER, Gather, Ledger

    config.stash[SETTINGS] = settings = Settings.of(config)
    from ..report.folder import refusal

    reports = not hasattr(config, "workerinput") and not config.getoption("collectonly")
    if reports and (refused := refusal(settings.reports)):
        raise pytest.UsageError(refused)
    ledger = config.stash[LEDGER] = Ledger(how=config.stash.get(THREADS_SET, "unknown"))
    config.pluginmanager.register(ledger, "linverify-ledger")
    if not hasattr(config, "workerinput"):
        config.pluginmanager.register(Gather(config, ledger), "linverify-gather")


def pytest_sessionstart(session: pytest.Session) -> None:
    """Signs of life, where there is a terminal to show them; it is not there yet while plugins are configured."""
    config = session.config
    # a worker has a terminal too, but nobody sees it
    seen = config.pluginmanager.hasplugin("terminalreporter") and not hasattr(config, "workerinput")
    if SETTINGS in config.stash and seen:
        from .progress import Progress

        config.pluginmanager.register(Progress.on(config, config.stash.get(TERMINAL, None)), "linverify-progress")


def pytest_unconfigure(config: pytest.Config) -> None:
    """Let the terminal go."""
    if TERMINAL in config.stash:
        os.close(config.stash[TERMINAL])
        del config.stash[TERMINAL]


def pytest_collect_file(file_path: Path, parent: pytest.Collector) -> SpecFile | None:
    """A spec becomes a node, in a run with the flag."""
    if file_path.suffix != ".yaml" or SETTINGS not in parent.config.stash:
        return None
    from ..spec.source import is_spec

    if not is_spec(file_path):
        return None
    from .gather import LEDGER
    from .nodes import SpecFile

    found = parent.config.stash[LEDGER].found
    if str(file_path) not in found and not _only_beside(parent.config, file_path):
        found.append(str(file_path))
    return SpecFile.from_parent(parent, path=file_path)


def _only_beside(config: pytest.Config, file_path: Path) -> bool:
    """True for a spec that nobody asked for: pytest looks at it because a file of its folder was named."""
    asked = [config.invocation_params.dir / name.partition("::")[0] for name in config.args]
    if any(path == file_path or path in file_path.parents for path in asked):
        return False
    return any(path.is_file() and path.parent == file_path.parent for path in asked)


@pytest.hookimpl(optionalhook=True)
def pytest_xdist_make_scheduler(config: pytest.Config, log: Any) -> PointScheduling | None:
    """Checks of one operating point stay on one worker; other modes of distribution are left to their owner."""
    if SETTINGS not in config.stash or config.getvalue("dist") not in ("load", "loadscope"):
        return None
    from .scheduler import PointScheduling

    return PointScheduling(config, log)


def pytest_report_header(config: pytest.Config) -> str | None:
    """One line on what decides the figures."""
    settings = config.stash.get(SETTINGS, None)
    if settings is None:
        return None
    from .. import __version__

    return f"linverify: version {__version__}, seed {settings.seed}, profile {settings.profile}"
