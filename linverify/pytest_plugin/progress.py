"""Signs of life from checks that take long: one line in the terminal, and another from time to time.

Works on the process that has the terminal, from the start and finish messages of items, so it is the same with
workers and without. The lines come from a thread of its own, because the check has the main one.
"""

from __future__ import annotations

import threading
import time
from dataclasses import dataclass, field
from typing import Protocol

import pytest

from .gather import is_check

FIRST = 10.0  # seconds until the first line
AGAIN = 30.0  # seconds between further lines


class Lines(Protocol):
    """What the terminal must offer."""

    def write_line(self, line: str) -> None:
        """Write one line, on a line of its own."""


@dataclass(frozen=True, slots=True)
class Terminal:
    """pytest's terminal. Its own `write_line` takes a row of dots for an empty line when it is quiet or has workers."""

    config: pytest.Config

    def write_line(self, line: str) -> None:
        """Write one line, on a line of its own."""
        reporter, writer = self.config.pluginmanager.getplugin("terminalreporter"), self.config.get_terminal_writer()
        reporter.ensure_newline()
        if writer.width_of_current_line:
            writer.line()
        writer.line(line)
        writer.flush()


@dataclass
class Progress:
    """Not frozen: knows what is running. `lines` is where to write; `first` and `again` are in seconds."""

    lines: Lines
    first: float = FIRST
    again: float = AGAIN
    _running: dict[str, tuple[float, float]] = field(default_factory=dict)  # id -> started, next line due
    _lock: threading.Lock = field(default_factory=threading.Lock)
    _stop: threading.Event = field(default_factory=threading.Event)
    _thread: threading.Thread | None = None

    @classmethod
    def on(cls, config: pytest.Config) -> Progress:
        """For the terminal of this run."""
        return cls(Terminal(config), FIRST, AGAIN)

    def pytest_runtest_logstart(self, nodeid: str) -> None:
        """An item has begun, here or on a worker."""
        if not is_check(nodeid):
            return
        now = time.monotonic()
        with self._lock:
            self._running[nodeid] = (now, now + self.first)
        if self._thread is None:
            self._thread = threading.Thread(target=self._watch, name="linverify-progress", daemon=True)
            self._thread.start()

    def pytest_runtest_logfinish(self, nodeid: str) -> None:
        """It has ended."""
        with self._lock:
            self._running.pop(nodeid, None)

    def pytest_runtest_logreport(self, report: pytest.TestReport) -> None:
        """An item whose worker died sends no finish message, but a report that belongs to no phase."""
        if report.when not in ("setup", "call", "teardown"):
            self.pytest_runtest_logfinish(report.nodeid)

    @pytest.hookimpl(tryfirst=True)
    def pytest_sessionfinish(self) -> None:
        """No line after this."""
        self._stop.set()
        if self._thread is not None:
            self._thread.join(timeout=5.0)

    def due(self, now: float) -> list[str]:
        """The lines that are due at `now`."""
        with self._lock:
            late = {name: times for name, times in self._running.items() if now >= times[1]}
            for name, (started, _) in late.items():
                self._running[name] = (started, now + self.again)
        return [f"still running after {now - started:.0f} s: {name}" for name, (started, _) in sorted(late.items())]

    def _watch(self) -> None:
        while not self._stop.wait(min(1.0, self.first / 2)):
            for line in self.due(time.monotonic()):
                try:
                    self.lines.write_line(line)
                except Exception:  # a terminal that is gone must not fail the run
                    return
