"""Signs of life from checks that take long: one line in the terminal, and another from time to time.

Works on the process that has the terminal, from the start and finish messages of items, so it is the same with
workers and without. The lines come from a thread of its own, because the check has the main one.
"""

from __future__ import annotations

import os
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


@dataclass(slots=True)
class Terminal:
    """The terminal, written to past pytest's own writer: while a test runs that one's output is captured with the rest.

    pytest's writer does not know of our lines and goes on where it believes to be. Mutable: remembers where that was.
    """

    config: pytest.Config
    descriptor: int
    width: int = 0

    def write_line(self, line: str) -> None:
        """Write one line, on a line of its own."""
        width = self.config.get_terminal_writer().width_of_current_line
        begun = "\n" if width and width != self.width else ""
        self.width = width
        os.write(self.descriptor, f"{begun}{line}\n".encode(errors="replace"))


@dataclass(frozen=True, slots=True)
class Writer:
    """pytest's own writer, where standard output is no file: nothing captures it then."""

    config: pytest.Config

    def write_line(self, line: str) -> None:
        """Write one line, on a line of its own."""
        writer = self.config.get_terminal_writer()
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
    def on(cls, config: pytest.Config, descriptor: int | None) -> Progress:
        """For the terminal of this run; descriptor: of its standard output, where that is a file."""
        return cls(Writer(config) if descriptor is None else Terminal(config, descriptor), FIRST, AGAIN)

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
