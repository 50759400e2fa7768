"""From requirements to the checks that answer them."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from ..core.verdict import Status, Verdict
from . import tables
from .quantity import ABSENT

REQUIREMENTS = ("requirement", "text", "source", "verdict", "checks")
TRACE = ("requirement", "text", "source", *tables.COMPLIANCE[1:])
_SEVEREST_LAST = (Status.SKIPPED, Status.PASS, Status.NOT_RUN, Status.UNDECIDED, Status.FAIL)


@dataclass(frozen=True, slots=True)
class Traced:
    """One requirement of one spec and the verdicts that answer it, in the record's order."""

    spec: str
    name: str
    text: str
    source: str
    verdicts: tuple[Verdict, ...]

    @property
    def status(self) -> Status:
        """The most severe of its verdicts; not run where nothing answers it."""
        statuses = [verdict.status for verdict in self.verdicts]
        return max(statuses, key=_SEVEREST_LAST.index, default=Status.NOT_RUN)

    @property
    def tally(self) -> str:
        """How its checks ended: 3 pass, 1 fail."""
        return tally(self.verdicts) or "no check answers it in this run"


def tally(verdicts: Iterable[Verdict]) -> str:
    """How many ended how, the bad ones first: 1 fail, 3 pass; empty for none."""
    statuses = [verdict.status for verdict in verdicts]
    return ", ".join(f"{statuses.count(status)} {status}" for status in reversed(_SEVEREST_LAST) if status in statuses)


def requirements(points: Iterable[Mapping[str, Any]], verdicts: Sequence[Verdict]) -> tuple[Traced, ...]:
    """The requirements of all points, each once a spec, in order of spec and name as people read them."""
    texts: dict[tuple[str, str], tuple[str, str]] = {}
    for point in points:
        for item in point["requirements"]:
            texts.setdefault((point["spec"], item["name"]), (item["text"], item["source"]))
    for verdict in verdicts:  # a requirement that only a verdict names is still traced
        for name in verdict.requirements:
            texts.setdefault((verdict.spec, name), ("", ""))
    return tuple(
        Traced(
            spec,
            name,
            *texts[spec, name],
            tuple(one for one in verdicts if one.spec == spec and name in one.requirements),
        )
        for spec, name in sorted(texts, key=lambda key: tables.human("::".join(key)))
    )


def summary_rows(traced: Iterable[Traced]) -> list[tuple[str, ...]]:
    """One row a requirement, in the order of REQUIREMENTS."""
    return [(one.name, one.text or ABSENT, one.source or ABSENT, one.status.value, one.tally) for one in traced]


def trace_rows(traced: Iterable[Traced]) -> list[tuple[str, ...]]:
    """One row a requirement and limit, in the order of TRACE; a requirement without a check gets a row that says so."""
    rows: list[tuple[str, ...]] = []
    for one in traced:
        start = (one.name, one.text or ABSENT, one.source or ABSENT)
        rows += [(*start, *row.cells[1:]) for row in tables.compliance(one.verdicts)]
        if not one.verdicts:
            rows.append((*start, ABSENT, ABSENT, ABSENT, ABSENT, ABSENT, Status.NOT_RUN.value, ABSENT))
    return rows
