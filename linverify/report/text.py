"""What a terminal shows: the text of one verdict and the table of many, as strings; printing is the caller's."""

from __future__ import annotations

import shlex
import textwrap
from collections.abc import Iterable, Sequence
from pathlib import PurePath

from ..core.verdict import Figure, Sense, Status, Verdict
from . import quantity, tables
from .trace import tally

WIDTH = 118
_LABEL = 14
_SUMMARY = ("verdict", "headroom", "worst", "limit", "check")
CAUTION = (
    "A pass is a statement about the declared model, drives and envelope. It does not replace hazard analysis, "
    "local codes or the judgement of licensed engineers."
)
QUICK = "Quick profile: not for acceptance."
PARTIAL = "Partial run: not every check of these specs has a verdict; this is not a full report."


def failure(verdict: Verdict, *, evidence: str = "reports/evidence") -> str:
    """What one check found, for the terminal: id, place, requirement, figures, drive, notes, next step.

    evidence: folder of the saved drives as the reader would type it.
    """
    lines = [f"{verdict.id}: {verdict.status.value}"]
    lines += _line("asked at", str(verdict.place))
    if verdict.requirements:
        lines += _line("answers", ", ".join(verdict.requirements))
    if verdict.reason:
        lines += _line("reason", verdict.reason)
    figures = _worst_first(verdict)
    if figures and _decides(verdict, figures[0]):
        lines += _figure_lines(figures.pop(0))
    for item in verdict.evidence:
        lines += _line(f"{item.role} drive", f"{item.text} [{item.drive}]" if item.text else f"[{item.drive}]")
    for figure in figures:
        lines += _line("also", figure_line(figure, judged=_decides(verdict, figure)))
    for note in verdict.notes:
        lines += _line("note", note)
    return "\n".join([*lines, *next_steps(verdict, evidence)])


def _decides(verdict: Verdict, figure: Figure) -> bool:
    """False for a figure inside its limit of a check that is open for another reason: its headroom shows nothing."""
    return verdict.status is not Status.UNDECIDED or figure.status is not Status.PASS


def _line(label: str, text: str) -> list[str]:
    """A label and its text, wrapped and set off; line breaks of the text are kept."""
    indent = " " * (_LABEL + 4)
    wrapped: list[str] = []
    for part in tables.printable(text).split("\n"):
        wrapped += textwrap.wrap(part, WIDTH - len(indent), break_long_words=False, break_on_hyphens=False) or [""]
    return [f"  {label:<{_LABEL}}  {wrapped[0]}".rstrip(), *(f"{indent}{part}".rstrip() for part in wrapped[1:])]


def _worst_first(verdict: Verdict) -> list[Figure]:
    """The judged figures, failing ones first, then by headroom; then those that are only told."""
    rows = sorted(tables.limits(verdict), key=tables.badness, reverse=True)
    return [*rows, *(figure for figure in verdict.figures if figure.sense is Sense.NONE)]


def _figure_lines(figure: Figure) -> list[str]:
    required = quantity.limit(figure)
    lines = []
    if required != quantity.ABSENT:
        origin = f" (from {figure.origin})" if figure.origin else ""
        lines += _line("required", f"{quantity.subject(figure)} {required}{origin}")
    return lines + _line("found", found(figure))


def found(figure: Figure) -> str:
    """The measured figure in words: 0.0512 m (known to 1e-5 m) of ride_height at t = 3.25 s, headroom -28 %."""
    parts = [quantity.worst(figure)]
    if figure.error:
        parts.append(f"(known to {quantity.quantity(figure.error, figure.unit, 2)})")
    if figure.signal:
        parts.append(f"on {figure.signal}")
    if where := quantity.met_at(figure):
        parts.append(f"at {where}")
    headroom = quantity.headroom_told(figure)
    return " ".join(parts) + (f"; {headroom}" if headroom else "")


def figure_line(figure: Figure, *, judged: bool = True) -> str:
    """One figure in one line: peak error of pitch 0.002 rad, at most 0.005 rad, headroom 60 %: pass.

    judged: False leaves out headroom and verdict.
    """
    required = quantity.limit(figure)
    parts = [f"{quantity.subject(figure)} {quantity.worst(figure)}"]
    if where := quantity.met_at(figure):
        parts[0] += f" at {where}"
    if required != quantity.ABSENT:
        parts.append(required)
    if required != quantity.ABSENT and judged:
        parts.append(quantity.headroom_told(figure))
        return f"{', '.join(part for part in parts if part)}: {figure.status.value}"
    return ", ".join(parts)


def next_steps(verdict: Verdict, evidence: str = "reports/evidence") -> list[str]:
    """The commands that replay the drive of a verdict and pin it (of `follows`); empty where none is or it passes."""
    if not verdict.evidence or not verdict.status.breaks_build:
        return []
    # where nothing failed, a drive that could not be followed tells more than the worst of those that could
    roles = ("simplest",) if verdict.status is Status.FAIL else ("simplest", "stopped")
    telling = next((item for item in verdict.evidence if item.role in roles), verdict.evidence[0])
    saved = (PurePath(evidence) / f"{telling.drive}.json").as_posix()
    item, file = shlex.quote(verdict.id), shlex.quote(saved)
    # commands stand on one line each, unwrapped, so that they can be copied
    steps = [f"  {'replay':<{_LABEL}}  python -m linverify replay {item} {file}"]
    if verdict.check.partition(".")[0] == "follows":  # no other check has drives that can be pinned
        steps.append(f"  {'pin':<{_LABEL}}  python -m linverify pin {item} {file}")
    return steps


def summary(
    verdicts: Iterable[Verdict], *, cap: int = 20, profile: str = "full", partial: bool = False, report: str = ""
) -> list[str]:
    """Lines for the end of a run: what does not pass first, then least headroom first, at most `cap` rows; counts.

    report: where the full report was written, as the reader would type it.
    """
    ranked = sorted(verdicts, key=lambda verdict: (tables.severity(verdict), tables.human(verdict.id)))
    lines = _plain_table([_summary_row(verdict) for verdict in ranked[:cap]]) if ranked else []
    if hidden := ranked[cap:]:
        lines.append(f"... and {len(hidden)} more: {tally(hidden)}" + (f"; all of them in {report}" if report else ""))
    lines.append(
        f"{len(ranked)} {'check' if len(ranked) == 1 else 'checks'}: {tally(ranked)}" if ranked else "no check was run"
    )
    if profile != "full":
        lines.append(QUICK)
    if partial:
        lines.append(PARTIAL)
    if report:
        lines.append(f"report: {report}")
    return lines


def _summary_row(verdict: Verdict) -> tuple[str, ...]:
    rows = sorted(tables.rows_of(verdict), key=lambda row: row.badness, reverse=True)
    figure = next((row.figure for row in rows if row.figure), None)
    untested = verdict.status in (Status.UNDECIDED, Status.NOT_RUN) or rows[0].figure is None
    if figure is None or (verdict.status.breaks_build and untested and verdict.reason):
        reason = textwrap.shorten(verdict.reason, 60, placeholder=" ...") or quantity.ABSENT
        return verdict.status.value, quantity.ABSENT, quantity.ABSENT, reason, verdict.id
    limit = f"{quantity.subject(figure)} {quantity.limit(figure)}"
    return verdict.status.value, quantity.headroom(figure), quantity.worst(figure), limit, verdict.id


def _plain_table(rows: Sequence[Sequence[str]]) -> list[str]:
    from tabulate import tabulate

    cells = [[" ".join(tables.printable(cell).split()) for cell in row] for row in rows]
    align = ("left", "right", "right", "left", "left")
    return tabulate(cells, _SUMMARY, tablefmt="simple", disable_numparse=True, colalign=align).splitlines()
