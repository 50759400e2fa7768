"""What was offered, what was selected, what came back: the books of a run, and what they mean for the build.

A `Ledger` is kept by every process that collects. `Gather` is kept by the one process that reports: it picks the
verdicts off the test reports, which is the same with workers and without, and compares them with what was selected. A
check that was selected and has no verdict fails the build: with workers, a result can be lost without a trace in the
exit status (a value that cannot be sent, a process that died), and a gate that can lose a failure is none.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from .options import SETTINGS, Settings

if TYPE_CHECKING:
    from ..run import Books

PROPERTY = "linverify"  # the one user property of an item: its verdict as one JSON string


@dataclass
class Ledger:
    """Not frozen: it is written while specs are collected. Paths and ids are texts, so that all of it can travel.

    found: specs met; read: specs read without mistake; points: what the record says of every operating point that is
    on offer; files: what the specs were read from; selected: ids of the checks that are to be run. how: how this
    process came to one thread of linear algebra; theirs: what other processes say of their threads.
    """

    how: str = ""
    theirs: list[str] = field(default_factory=list)
    found: list[str] = field(default_factory=list)
    read: list[str] = field(default_factory=list)
    points: list[Mapping[str, Any]] = field(default_factory=list)
    files: list[str] = field(default_factory=list)
    selected: list[str] = field(default_factory=list)

    def offer(self, spec: Path, points: Sequence[Mapping[str, Any]], files: Sequence[Path]) -> None:
        """A spec was read, and these are its points."""
        if str(spec) not in self.read:
            self.read.append(str(spec))
            self.points.extend(points)
            self.files.extend(str(path) for path in files if str(path) not in self.files)

    @property
    def offered(self) -> list[str]:
        """Ids of all checks of all specs read."""
        return [f"{point['spec']}::{point['point']}::{check}" for point in self.points for check in point["checks"]]

    @property
    def skipped(self) -> list[str]:
        """Ids of the checks of cells that a spec skips on purpose."""
        points = [point for point in self.points if point["skipped"]]
        return [f"{point['spec']}::{point['point']}::{check}" for point in points for check in point["checks"]]

    @property
    def nothing(self) -> bool:
        """True where nothing is to be judged: no check was selected, or only such as are skipped."""
        return not set(self.selected) - set(self.skipped)

    def absorb(self, text: str) -> None:
        """Take over what another process wrote (`dumps`); the same specs read there count once."""
        other = json.loads(text)
        known = {(point["spec"], point["point"]) for point in self.points}
        self.points.extend(point for point in other["points"] if (point["spec"], point["point"]) not in known)
        for name in ("theirs", "found", "read", "files", "selected"):
            mine: list[str] = getattr(self, name)
            seen = set(mine)
            mine.extend(entry for entry in other[name] if entry not in seen)

    def dumps(self) -> str:
        """All of it as one JSON string: built-in types are what a channel between processes is sure to carry."""
        names = ("found", "read", "points", "files", "selected")
        return json.dumps({**{name: getattr(self, name) for name in names}, "theirs": [self.threads]})

    @property
    def threads(self) -> str:
        """Threads of linear algebra where the checks ran: in the workers, or here."""
        from ..core.threads import told

        return "; ".join(sorted(self.theirs)) or told(self.how)

    def pytest_collection_finish(self, session: pytest.Session) -> None:
        """What is to be run, after every deselection."""
        self.selected = [item.nodeid for item in session.items if item.get_closest_marker("linverify")]

    def pytest_sessionfinish(self, session: pytest.Session) -> None:
        """A worker hands its books over; one that dies cannot, and the others' must do."""
        output = getattr(session.config, "workeroutput", None)
        if output is not None:
            output[PROPERTY] = self.dumps()


LEDGER = pytest.StashKey[Ledger]()


class Gather:
    """Verdicts of the whole run, on the process that reports. `lines`: what the terminal summary prints."""

    def __init__(self, config: pytest.Config, ledger: Ledger) -> None:
        self.config = config
        self.settings: Settings = config.stash[SETTINGS]
        self.ledger = ledger
        self.verdicts: dict[str, list[str]] = {}  # id -> JSON; of several the record takes the most severe
        self.unread: list[str] = []  # specs with mistakes
        self.why: dict[str, str] = {}  # id -> why there is no verdict
        self.announced: list[str] = []  # ids that look like ours, as workers told them before they ran
        self.stopped = ""  # why the run ended early, where pytest says so
        self.lines: list[str] = []

    def pytest_runtest_logreport(self, report: pytest.TestReport) -> None:
        """Pick the verdict off a report; remember what ended without one."""
        for name, value in report.user_properties:
            if name == PROPERTY and value not in (known := self.verdicts.setdefault(report.nodeid, [])):
                known.append(str(value))
        if report.when not in ("setup", "call", "teardown"):
            self.why[report.nodeid] = "the process that ran this check died while it ran"
        elif report.outcome != "passed" and report.nodeid not in self.verdicts:
            self.why[report.nodeid] = f"its {report.when} phase {report.outcome} before there was a verdict"

    def pytest_collectreport(self, report: pytest.CollectReport) -> None:
        """Remember specs that could not be read."""
        if report.failed and str(report.nodeid).endswith(".yaml"):
            self.unread.append(str(report.nodeid))

    @pytest.hookimpl(optionalhook=True)
    def pytest_xdist_node_collection_finished(self, node: Any, ids: Sequence[str]) -> None:
        """What a worker is going to run: known here even if no worker lives to hand its books over."""
        self.announced = self.announced or [name for name in ids if is_check(name)]

    @pytest.hookimpl(optionalhook=True)
    def pytest_testnodedown(self, node: Any, error: object) -> None:
        """A worker has ended; one that died left no books."""
        output = getattr(node, "workeroutput", None) or {}
        if PROPERTY in output:
            self.ledger.absorb(output[PROPERTY])

    @pytest.hookimpl(trylast=True)
    def pytest_sessionfinish(self, session: pytest.Session) -> None:
        """Audit, write, and set the exit status."""
        if self.config.getoption("collectonly"):
            return
        self.stopped = str(session.shouldfail or session.shouldstop or "")
        self.ledger.selected = self.ledger.selected or self.announced
        passed = self._conclude()
        if not passed and session.exitstatus in (pytest.ExitCode.OK, pytest.ExitCode.NO_TESTS_COLLECTED):
            nothing = self.ledger.nothing
            session.exitstatus = pytest.ExitCode.NO_TESTS_COLLECTED if nothing else pytest.ExitCode.TESTS_FAILED

    def pytest_terminal_summary(self, terminalreporter: Any) -> None:
        """Print what `pytest_sessionfinish` has made."""
        if self.lines:
            terminalreporter.section("linverify", sep="=")
        for line in self.lines:
            terminalreporter.write_line(line)

    def _conclude(self) -> bool:
        """Whether the build may go on; writes the reports and the lines."""
        if not self.ledger.selected:
            self.lines = [*self._misspelt(), self._nothing()]
            return False
        if not self.verdicts and self.unread:
            self.lines = ["nothing was judged, because of the mistakes above; earlier reports are kept"]
            return False
        from ..core.case import Options
        from ..core.errors import LinverifyError
        from ..run import conclude

        options = Options(self.settings.seed, self.settings.profile, self.settings.reports)
        try:
            result = conclude(self.books(), options, self.config.rootpath)
        except (LinverifyError, OSError) as error:
            self.lines = [f"the reports could not be written: {error}"]
            return False
        self.lines = [*(f"{name} was not judged: it could not be read" for name in self.unread), *result.lines]
        if self.ledger.nothing:
            self.lines.append("every check that was selected is skipped, so nothing was judged")
        return result.passed and not self.unread and not self.ledger.nothing

    def books(self) -> Books:
        """What `run.conclude` needs: verdicts, the plan, the points, the sources, and whether something is left out."""
        from ..core.errors import RecordError
        from ..report import record
        from ..run import Books

        ledger, verdicts, arrived = self.ledger, [], set()
        for name, text in ((name, text) for name, texts in self.verdicts.items() for text in texts):
            try:
                verdicts.append(record.loads(text))
                arrived.add(name)
            except RecordError as error:
                self.why[name] = f"its verdict arrived broken: {error}"
        missing = [name for name in ledger.selected if name not in arrived]
        ended = "the run ended before this check began" + (f": {self.stopped}" if self.stopped else "")
        partial = bool(
            self.unread
            or set(ledger.found) - set(ledger.read)
            or set(ledger.offered) - set(ledger.selected)
            or set(missing) - set(ledger.skipped)
        )
        return Books(
            verdicts=tuple(verdicts),
            planned=tuple(ledger.selected),
            points=tuple(ledger.points),
            sources=tuple(Path(name) for name in ledger.files),
            partial=partial,
            threads=ledger.threads,
            why={name: self.why.get(name, ended) for name in missing},
        )

    def _misspelt(self) -> list[str]:
        """The nearest right word for each check or operating point on the command line that is not there."""
        from ..core.signals import nearest

        points = [f"{point['spec']}::{point['point']}" for point in self.ledger.points]
        lines = []
        for given in self.config.args:
            name = given.partition("[")[0]
            offered = self.ledger.offered if name.count("::") > 1 else points
            # as pytest names them: from its root folder, wherever it was started
            ends = [one for one in offered if one.split("::")[0].endswith(Path(name.split("::")[0]).name)]
            typed = "::".join([ends[0].split("::")[0], *name.split("::")[1:]]) if ends else name
            if "::" in name and typed not in offered and (near := nearest(typed, ends)):
                lines.append(f"there is no {given}; did you mean {near!r}?")
        return lines

    def _nothing(self) -> str:
        if self.unread:
            return "no spec could be read; earlier reports are kept"
        if self.ledger.found:
            return "no check of a spec was selected, so nothing was judged"
        return "--linverify was given, but no spec (*.yaml) was found, so nothing was judged"


def is_check(nodeid: str) -> bool:
    """True for the id of a check, `SPEC.yaml::POINT::CHECK`."""
    parts = nodeid.split("::")
    return len(parts) == 3 and parts[0].endswith(".yaml")
