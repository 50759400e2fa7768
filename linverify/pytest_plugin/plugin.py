"""Hooks for pytest; importing it costs pytest and the standard library only.

This module is imported in every test run of every project that has linverify installed. Whatever needs numpy, yaml or
scipy is therefore imported inside the hooks, and only where `--linverify` was given.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from .options import MARKERS, SETTINGS, Settings, add_options

if TYPE_CHECKING:
    from .nodes import SpecFile
    from .scheduler import PointScheduling

THREADS_SET = pytest.StashKey[str]()


def pytest_addoption(parser: pytest.Parser) -> None:
    """The option group "linverify"."""
    add_options(parser)


@pytest.hookimpl(tryfirst=True)
def pytest_load_initial_conftests(early_config: pytest.Config) -> None:
    """One thread for linear algebra, before any conftest can load numpy; workers inherit the environment."""
    if early_config.known_args_namespace.linverify:
        from ..core.threads import one_thread

        early_config.stash[THREADS_SET] = one_thread()


def pytest_configure(config: pytest.Config) -> None:
    """Settings and, where the flag was given, what keeps the books."""
    for line in MARKERS:
        config.addinivalue_line("markers", line)
    if not config.getoption("linverify"):
        return
    from .gather import LEDGER, Gather, Ledger

    config.stash[SETTINGS] = settings = Settings.of(config)
    if settings.reports.is_file():
        raise pytest.UsageError(f"--linverify-reports: {settings.reports.name} is a file, not a folder")
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

        config.pluginmanager.register(Progress.on(config), "linverify-progress")


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
    if str(file_path) not in found:
        found.append(str(file_path))
    return SpecFile.from_parent(parent, path=file_path)


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
