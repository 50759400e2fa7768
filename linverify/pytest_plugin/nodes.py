"""Spec files as pytest nodes: file -> operating point -> check.

The tree gives ids that read as a sentence, `specs/foil_ferry/ride.yaml::kn30::follows.fast`, and lets schedulers keep
a point together. A check is a `pytest.Function`, so that fixtures and markers work as in any test.
"""

from __future__ import annotations

import os
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from ..checks.judge import judge
from ..core.case import Case, CheckAsk, Options
from ..core.errors import SpecError
from ..core.verdict import Status, Verdict
from ..report import record, tables, text
from ..run import evidence_folder
from ..spec.bind import load
from .gather import LEDGER, PROPERTY
from .options import SETTINGS


class NotShownError(Exception):
    """Carries the verdict of a check that did not pass; its text is the report, never a traceback."""

    def __init__(self, verdict: Verdict) -> None:
        self.verdict = verdict
        super().__init__(f"{verdict.status}: {verdict.reason}")


class SpecFile(pytest.File):
    """One spec. Read and bound as a whole: any mistake in it is one collection error that lists all of them."""

    def collect(self) -> Iterator[PointNode]:
        """A node for each operating point, in the order of the spec."""
        ledger = self.config.stash[LEDGER]
        try:
            cases = load(self.path, self.config.rootpath)
        except SpecError as error:
            raise self.CollectError(str(error)) from None
        if not cases:
            raise self.CollectError(f"{self.nodeid}: the spec has no operating point")
        # the id of a file outside the root folder is pytest's to choose; verdicts go by the same name
        cases = tuple(case if case.spec == self.nodeid else replace(case, spec=self.nodeid) for case in cases)
        files = [path for case in cases for path in case.files]
        ledger.offer(self.path, [record.describe(case) for case in cases], files)
        for case in cases:
            yield PointNode.from_parent(self, name=case.point, case=case)


class PointNode(pytest.Collector):
    """One operating point."""

    def __init__(self, *, case: Case, **kw: Any) -> None:
        super().__init__(**kw)
        self.case = case

    def collect(self) -> Iterator[CheckItem]:
        """An item for each check that the spec asks of this point."""
        for ask in self.case.checks:
            yield CheckItem.from_parent(self, name=ask.name, case=self.case, ask=ask)

    def reportinfo(self) -> tuple[os.PathLike[str] | str, int | None, str]:
        """The point's own line."""
        return self.path, self.case.place.line - 1, self.name


class CheckItem(pytest.Function):
    """One check of one operating point. `case` and `ask` say what is to be shown."""

    def __init__(self, *, case: Case, ask: CheckAsk, **kw: Any) -> None:
        self.case = case
        self.ask = ask

        def check() -> None:
            self.judge()

        super().__init__(callobj=check, **kw)
        self.add_marker("linverify")
        self.add_marker(f"linverify_{ask.kind}")
        self.extra_keyword_matches.update(
            requirement.name for requirement in case.requirements if ask.name in requirement.checks
        )
        if case.skipped:
            self.add_marker(pytest.mark.skip(reason=case.skipped))

    def judge(self) -> None:
        """Judge, attach the verdict, and raise NotShownError unless it is a pass."""
        settings = self.config.stash[SETTINGS]
        verdict = judge(self.case, self.ask, Options(settings.seed, settings.profile, settings.reports))
        self.user_properties.append((PROPERTY, record.dumps(verdict)))
        if verdict.status is not Status.PASS:
            raise NotShownError(verdict)

    def repr_failure(self, excinfo: pytest.ExceptionInfo[BaseException]) -> Any:  # type: ignore[override]
        """The report's text for a verdict; a traceback for anything else, which is a defect or a broken fixture."""
        if isinstance(excinfo.value, NotShownError):
            return failure_text(excinfo.value.verdict, evidence_folder(self.config.stash[SETTINGS].reports))
        return super().repr_failure(excinfo)

    def reportinfo(self) -> tuple[os.PathLike[str] | str, int | None, str]:
        """The spec and the operating point's line in it, so that editors and annotations point there."""
        place = self.case.place
        line = place.line - 1 if Path(place.file).name == self.path.name else 0
        return self.path, line, f"{self.case.point}: {self.ask.name}"


def failure_text(verdict: Verdict, evidence: str) -> str:
    """The report's text; its first line says what was found, since pytest's own summary shows that line alone.

    The id that the report's text begins with stands above it anyway. evidence: folder of the saved drives.
    """
    worst = max(tables.limits(verdict), key=tables.badness, default=None)
    found = worst is not None and worst.status is verdict.status
    head = text.figure_line(worst) if worst is not None and found else f"{verdict.status}: {verdict.reason}"
    return "\n".join([head.split("\n")[0], *text.failure(verdict, evidence=evidence).splitlines()[1:]])
