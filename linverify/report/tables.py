"""Rows of the compliance table, and grids of text cells as Markdown or CSV."""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from ..core.verdict import Figure, Sense, Status, Verdict
from . import quantity
from .quantity import ABSENT

COMPLIANCE = ("requirement", "operating point", "check", "limit", "worst", "headroom", "verdict", "evidence")
_RAW = ("worst number", "limit number", "unit")  # added to the CSV for those who calculate on
_ORDER = (Status.FAIL, Status.UNDECIDED, Status.NOT_RUN, Status.PASS, Status.SKIPPED)
_EXPONENT = re.compile(r"(?<=[0-9])e(?:\+|(-))0*([0-9]+)\b")  # 9.3e+04 is 9.3e4, 1e-08 is 1e-8
_HARMLESS = re.compile(r"-|-?[0-9.]+(e-?[0-9]+)?( [A-Za-z0-9%/*^. ]+)?|-infinite( [A-Za-z0-9%/*^. ]+)?")


@dataclass(frozen=True, slots=True)
class Row:
    """One limit of one check. `cells` in the order of COMPLIANCE; figure: None where the check has no figure."""

    verdict: Verdict
    figure: Figure | None
    status: Status

    @property
    def cells(self) -> tuple[str, ...]:
        """What the table shows."""
        verdict, figure = self.verdict, self.figure
        return (
            ", ".join(verdict.requirements) or ABSENT,
            f"{verdict.spec}::{verdict.point}",
            verdict.check,
            f"{quantity.subject(figure)} {quantity.limit(figure)}" if figure else ABSENT,
            quantity.worst_met(figure) if figure else ABSENT,
            quantity.headroom(figure) if figure and self.counts else ABSENT,
            self.status.value,
            evidence(verdict, figure),
        )

    @property
    def counts(self) -> bool:
        """False where the check is open for another reason: headroom of a figure would say that it was tested."""
        return self.figure is not None and (self.status is not Status.UNDECIDED or self.figure.status is self.status)

    @property
    def badness(self) -> tuple[int, float]:
        """Sorting key: the most severe row is the largest."""
        share = badness(self.figure)[1] if self.figure else -math.inf
        return -_ORDER.index(self.status), share

    @property
    def raw(self) -> tuple[str, ...]:
        """Numbers without their units, for spreadsheets."""
        figure = self.figure
        if figure is None:
            return "", "", ""
        limit = quantity.number(figure.limit)
        if figure.sense is Sense.RANGE:
            limit = f"{quantity.number(figure.low)} to {limit}"
        return quantity.number(figure.worst), limit, figure.unit


def human(text: str) -> tuple[tuple[str | int, ...], str]:
    """Sorting key that reads numbers as numbers: kn9 before kn10."""
    parts = re.split(r"([0-9]+)", text)
    return tuple(int(part) if index % 2 else part for index, part in enumerate(parts)), text


def evidence(verdict: Verdict, figure: Figure | None = None) -> str:
    """Digests of the drives that show it: that of the figure, else those of the verdict."""
    if figure is not None and figure.drive:
        return figure.drive
    return ", ".join(f"{item.role} {item.drive}" for item in verdict.evidence) or ABSENT


def severity(verdict: Verdict) -> tuple[int, float]:
    """Sorting key: what does not pass first, then least headroom first; shares to nine digits, as they are ranked."""
    tightest = verdict.tightest
    return _ORDER.index(verdict.status), -round(tightest.used_share, 9) if tightest else math.inf


def limits(verdict: Verdict) -> tuple[Figure, ...]:
    """The judged figures, one for each limit: of several signals under one limit of the spec, the worst."""
    kept: dict[tuple[object, ...], Figure] = {}
    for figure in verdict.figures:
        if figure.sense is Sense.NONE:
            continue
        key = (figure.what, figure.origin or figure.signal, figure.limit, figure.unit, figure.sense, f"{figure.low}")
        kept[key] = max(kept.get(key, figure), figure, key=badness)
    return tuple(kept.values())


def badness(figure: Figure) -> tuple[int, float]:
    """Sorting key of figures: how severe the status, then how much of the limit is used up."""
    share = figure.used_share
    return -_ORDER.index(figure.status), -math.inf if math.isnan(share) else round(share, 9)


def rows_of(verdict: Verdict) -> tuple[Row, ...]:
    """Rows of one check. A figure inside its limit shows as pass only where the check itself was decided."""
    rows = [Row(verdict, figure, _shown(verdict.status, figure)) for figure in limits(verdict)]
    if not any(row.status is verdict.status for row in rows):
        rows.append(Row(verdict, None, verdict.status))
    return tuple(rows)


def _shown(whole: Status, figure: Figure) -> Status:
    if figure.status is not Status.PASS:
        return figure.status
    if figure.used_share > 1.0 and whole is Status.PASS:  # a contradiction never reads as a pass
        return Status.FAIL
    return whole if figure.used_share > 1.0 or whole is not Status.FAIL else Status.PASS


def compliance(verdicts: Iterable[Verdict]) -> tuple[Row, ...]:
    """All rows, in the order of the verdicts."""
    return tuple(row for verdict in verdicts for row in rows_of(verdict))


def printable(text: str) -> str:
    """`text` without control characters but line breaks (names and messages may hold any), numbers in one form."""
    plain = "".join(sign if sign.isprintable() or sign == "\n" else " " for sign in text)
    return _EXPONENT.sub(r"e\1\2", plain)


def escaped(text: str) -> str:
    """`text` as one line of Markdown that shows as it is written, inside a table too."""
    line = " ".join(printable(text).split())
    line = re.sub(r"&(?=#?\w+;)", "&amp;", line).replace("<", "&lt;").replace(">", "&gt;")
    line = re.sub(r"([\\`*\[\]|~$]|^#)", r"\\\1", line)
    return re.sub(r"(?<![^\W_])_|_(?![^\W_])", r"\\_", line)


def bullets(lines: Iterable[str]) -> str:
    """A Markdown list; a line that begins like a list of its own is shown as it is written."""
    return "\n".join("- " + re.sub(r"^([0-9]*)([-+.)])(?= |$)", r"\1\\\2", escaped(line)) for line in lines)


def grid(headers: Sequence[str], rows: Iterable[Sequence[str]], *, right: Sequence[str] = ()) -> str:
    """A Markdown table of text cells; columns named in `right` are aligned to the right."""
    from tabulate import tabulate

    cells = [[escaped(cell) for cell in row] for row in rows]
    if not cells:
        return "None."
    align = ["right" if header in right else "left" for header in headers]
    # without disable_numparse a text such as 007 or 1e5 would be rewritten as a number
    return tabulate(cells, headers=list(headers), tablefmt="pipe", disable_numparse=True, colalign=align)


def guarded(cell: str) -> str:
    """`cell` such that no spreadsheet takes it for a formula."""
    risky = cell.startswith(("=", "+", "-", "@", "\t", "\r", "\n")) and not _HARMLESS.fullmatch(cell)
    return f"'{cell}" if risky else cell


def csv_text(headers: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """The rows as CSV with a line of headers."""
    stream = io.StringIO()
    writer = csv.writer(stream, lineterminator="\n")
    writer.writerow(headers)
    writer.writerows([guarded(cell) for cell in row] for row in rows)
    return stream.getvalue()


def compliance_csv(verdicts: Iterable[Verdict]) -> str:
    """The compliance rows as CSV."""
    return csv_text((*COMPLIANCE, *_RAW), [(*row.cells, *row.raw) for row in compliance(verdicts)])
