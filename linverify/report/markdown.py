"""The compliance report as Markdown, rendered from the run record and from nothing else."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from ..core.verdict import Sense, Status, Verdict
from . import details, forms, quantity, tables, text, trace
from .record import verdicts_of
from .tables import escaped, grid

_READING = (
    "Headroom is 1 minus the used share of a limit; a dash stands where a share has no meaning. undecided: the check "
    "could not be tested, and fails the build. Every figure of a run in time was computed again on a finer grid; the "
    "difference is evidence of its accuracy, not proof. Errors of poles and margins follow from those of the local "
    "model's entries.",
    "Bounds from random drives are one-sided Clopper-Pearson bounds. They concern the declared sampler, not operation, "
    "and are void if the model was tuned on the drives of this seed. Searched, pinned and regular drives never enter "
    "them.",
    "Figures stand in the units that the spec writes. A nominal size is the typical size of a deviation of a signal "
    "(`nominal` under Effective specs). A scaled residual is what is left of an equation at the trim: of a rate in "
    "nominal sizes of its state per time unit of the plant (per step of a difference equation), of a held output in "
    "nominal sizes of that output.",
)


def page(run: Mapping[str, Any]) -> str:
    """The whole report. run: a record as `record.build` or `record.read` returns it."""
    body, verdicts = run["body"], verdicts_of(run)
    points = {(point["spec"], point["point"]): point for point in body["points"]}
    parts = [
        *_head(body, verdicts),
        *_findings(verdicts),
        *_requirements(body["points"], verdicts),
        "## Compliance",
        grid(tables.COMPLIANCE, [row.cells for row in tables.compliance(verdicts)], right=("worst", "headroom")),
        *_operating_points(points, verdicts),
        *_effective_specs(body["points"]),
        *_provenance(run["provenance"]),
    ]
    return "\n\n".join(parts) + "\n"


def _head(body: Mapping[str, Any], verdicts: Sequence[Verdict]) -> Iterator[str]:
    yield "# Compliance report"
    if body["profile"] != "full":
        yield f"**{text.QUICK}**"
    if body["partial"]:
        yield f"**{text.PARTIAL}**"
    yield text.CAUTION
    yield "## Summary"
    titles = {point["spec"]: point["title"] for point in body["points"]}
    rows = []
    for spec in dict.fromkeys(verdict.spec for verdict in verdicts):
        of_spec = [verdict for verdict in verdicts if verdict.spec == spec]
        count = len({verdict.point for verdict in of_spec})
        rows.append((spec, titles.get(spec, "") or quantity.ABSENT, str(count), trace.tally(of_spec)))
    yield grid(("spec", "title", "operating points", "checks"), rows, right=("operating points",))
    yield f"{len(verdicts)} checks: {trace.tally(verdicts)}." if verdicts else "No check was run."
    yield from _READING


def _findings(verdicts: Sequence[Verdict]) -> Iterator[str]:
    yield "## What does not hold"
    bad = sorted(
        (verdict for verdict in verdicts if verdict.status.breaks_build),
        key=lambda verdict: (tables.severity(verdict), tables.human(verdict.id)),
    )
    if not bad:
        yield "Nothing."
    for verdict in bad:
        yield f"### {escaped(verdict.id)}: {verdict.status.value}"
        yield tables.bullets(_finding(verdict))


def _finding(verdict: Verdict) -> Iterator[str]:
    yield f"asked at {verdict.place}"
    if verdict.reason:
        yield verdict.reason
    for row in tables.rows_of(verdict):
        if row.figure and row.status is not Status.PASS:
            yield f"{quantity.subject(row.figure)} {quantity.limit(row.figure)}: found {text.found(row.figure)}"
    for item in verdict.evidence:
        yield f"{item.role} drive {item.drive}: {item.text}"


def _requirements(points: Sequence[Mapping[str, Any]], verdicts: Sequence[Verdict]) -> Iterator[str]:
    traced = trace.requirements(points, verdicts)
    yield "## Requirements"
    if not traced:
        yield "The specs name none."
        return
    yield grid(trace.REQUIREMENTS, trace.summary_rows(traced))
    yield "## Requirement trace"
    yield grid(trace.TRACE, trace.trace_rows(traced), right=("worst", "headroom"))


def _operating_points(
    points: Mapping[tuple[str, str], Mapping[str, Any]], verdicts: Sequence[Verdict]
) -> Iterator[str]:
    yield "## Operating points"
    for key in dict.fromkeys((verdict.spec, verdict.point) for verdict in verdicts):
        yield f"### {escaped('::'.join(key))}"
        point = points.get(key, {})
        order = {name: index for index, name in enumerate(point.get("checks", ()))}
        own = [verdict for verdict in verdicts if (verdict.spec, verdict.point) == key]
        for verdict in sorted(own, key=lambda verdict: order.get(verdict.check, len(order))):
            yield from _check(verdict, point)


def _check(verdict: Verdict, point: Mapping[str, Any]) -> Iterator[str]:
    yield f"#### {escaped(verdict.check)}: {verdict.status.value}"
    if verdict.reason:
        yield escaped(verdict.reason)
    told = [text.figure_line(figure) for figure in verdict.figures if figure.sense is Sense.NONE]
    tabled = _rules(verdict.details)
    notes = [note for note in verdict.notes if not any(all(part in note for part in rule) for rule in tabled)]
    if lines := [*notes, *told]:
        yield tables.bullets(lines)
    told_once = {word: value for word, value in verdict.details.items() if not _repeats(value, verdict.notes)}
    discrete = point.get("step") is not None
    yield from details.blocks(told_once, point.get("signals", {}), str(point.get("time_unit", "")), discrete=discrete)


def _rules(found: Mapping[str, Any]) -> list[tuple[str, ...]]:
    """Name, source and caution of each ready-made limit that stands in a table of its own."""
    margins = found.get("margins")
    rows = [found.get("rules"), margins.get("limits") if isinstance(margins, Mapping) else None]
    given = [row for each in rows if isinstance(each, list) for row in each if isinstance(row, Mapping)]
    told = [tuple(str(row.get(word, "")) for word in ("rule", "source", "caution")) for row in given]
    return [rule for rule in told if all(rule)]


def _repeats(value: Any, notes: Sequence[str]) -> bool:
    """True for a list of lines that all stand among the notes already."""
    return isinstance(value, list) and all(isinstance(line, str) and line in notes for line in value)


def _effective_specs(points: Sequence[Mapping[str, Any]]) -> Iterator[str]:
    yield "## Effective specs"
    for spec in dict.fromkeys(point["spec"] for point in points):
        yield f"### {escaped(spec)}"
        of_spec = [point for point in points if point["spec"] == spec]
        settings = {point["point"]: [_setting(item) for item in point["settings"]] for point in of_spec}
        shared = [row for row in next(iter(settings.values())) if all(row in rows for rows in settings.values())]
        rows = [("all", *row) for row in shared]
        rows += [(name, *row) for name, own in settings.items() for row in own if row not in shared]
        yield grid(("operating point", "word", "value", "from"), rows)


def _setting(item: Mapping[str, str]) -> tuple[str, str, str]:
    return item["word"], item["text"], item["origin"]


def _provenance(provenance: Mapping[str, Any]) -> Iterator[str]:
    yield "## Provenance"
    yield grid(("what", "value"), _flat(provenance))


def _flat(data: Mapping[str, Any], prefix: str = "") -> list[tuple[str, str]]:
    rows: list[tuple[str, str]] = []
    for word, value in sorted(data.items(), key=lambda item: tables.human(item[0])):
        name = f"{prefix}{word}" if prefix else forms.label(word)
        if isinstance(value, Mapping):
            rows += _flat(value, f"{name}: ")
        else:
            rows.append((name, forms.cell(value)))
    return rows
