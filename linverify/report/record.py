"""The run record: what one run found, from which every other report is rendered.

It holds a body, which is the same byte for byte for the same inputs, and apart from it the provenance, which holds
what changes from run to run (time, commit, machine). Arrival order of the verdicts does not matter.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

from ..core.case import Case
from ..core.errors import Place, RecordError
from ..core.verdict import Status, Verdict
from .tables import human
from .wire import FORMAT, dumps, expect_format, expect_keys, from_data, loads, parsed, plain, text_of, to_data

__all__ = [
    "FORMAT",
    "build",
    "canonical",
    "describe",
    "dumps",
    "from_data",
    "human",
    "loads",
    "parse",
    "read",
    "to_data",
    "verdicts_of",
]

_NOT_RUN = "no verdict arrived: the item was not run, or the process that ran it ended early"
_SEVERITY = (Status.PASS, Status.SKIPPED, Status.NOT_RUN, Status.UNDECIDED, Status.FAIL)


def describe(case: Case) -> dict[str, Any]:
    """What the record says of an operating point beside its verdicts, as plain data that may travel as JSON."""
    plant = case.plant
    kinds = {"states": plant.states, "inputs": plant.inputs, "outputs": plant.outputs or {}}
    return {
        "spec": case.spec,
        "point": case.point,
        "title": case.title,
        "signals": {kind: [[name, unit] for name, unit in units.items()] for kind, units in kinds.items()},
        "time_unit": plant.time_unit,
        "step": plain(plant.step),
        "checks": [ask.name for ask in case.checks],
        "places": {ask.name: str(ask.place) for ask in case.checks},
        "requirements": [
            {"name": item.name, "text": item.text, "source": item.source, "checks": list(item.checks)}
            for item in case.requirements
        ],
        "settings": [{"word": item.word, "text": item.text, "origin": item.origin} for item in case.settings],
        "skipped": case.skipped,
    }


def build(
    verdicts: Iterable[Verdict],
    *,
    planned: Sequence[str] = (),
    points: Iterable[Mapping[str, Any]] = (),
    provenance: Mapping[str, Any] | None = None,
    partial: bool = False,
    profile: str = "full",
    root: Path | None = None,
    why: Mapping[str, str] | None = None,
) -> dict[str, Any]:
    """The record of one run, as plain data {format, body, provenance}.

    planned: ids of all items that were started; one without a verdict becomes a "not run" item. points: `describe` of
    each operating point. partial: some check has no verdict. root: folder whose absolute path is cut out of
    every text of the body. why: reasons, by id, for verdicts that are missing. Raises RecordError.
    """
    described = {(point["spec"], point["point"]): dict(point) for point in points}
    found = _one_each(verdicts)
    for item in (*_missing(planned, found, described, why or {}), *_skips(described, partial)):
        found.setdefault(item.id, item)
    items = [to_data(found[name]) for name in sorted(found, key=human)]
    seen = {(item["spec"], item["point"]) for item in items}
    body = {
        "partial": bool(partial),
        "profile": profile,
        "counts": {status.value: sum(item["status"] == status.value for item in items) for status in Status},
        "items": items,
        "points": [
            plain(described[key]) for key in sorted(described, key=lambda key: human("::".join(key))) if key in seen
        ],
    }
    record = {
        "format": FORMAT,
        "body": _without(body, root),
        "provenance": plain(_told(provenance or {}, found.values())),
    }
    return parse(canonical(record))  # what is rendered at once and what is rendered from the file are the same


def _told(provenance: Mapping[str, Any], verdicts: Iterable[Verdict]) -> dict[str, Any]:
    """The provenance with the tolerances that the checks say they worked with."""
    used: dict[str, set[float]] = {}
    for verdict in verdicts:
        integration = verdict.details.get("integration", {})
        tolerance = integration.get("tolerance") if isinstance(integration, Mapping) else None
        if isinstance(tolerance, float):
            used.setdefault("integration, share of the state errors that bands allow", set()).add(tolerance)
        accuracy = verdict.details.get("accuracy")
        if isinstance(accuracy, Mapping) and isinstance(accuracy.get("value"), float):
            used.setdefault(f"scaled residual of a trim, {accuracy.get('unit')}", set()).add(accuracy["value"])
    known = {name: sorted(values) for name, values in used.items()}
    if not known:
        return dict(provenance)
    return {**provenance, "tolerances": {**known, **provenance.get("tolerances", {})}}


def _one_each(verdicts: Iterable[Verdict]) -> dict[str, Verdict]:
    """One verdict an id. Of two that differ the more severe one stays, so that no finding can be overwritten."""
    found: dict[str, Verdict] = {}
    for verdict in verdicts:
        other = found.setdefault(verdict.id, verdict)
        found[verdict.id] = max(other, verdict, key=lambda one: (_SEVERITY.index(one.status), dumps(one)))
    return found


def _missing(
    planned: Iterable[str],
    found: Mapping[str, Verdict],
    points: Mapping[tuple[str, str], Mapping[str, Any]],
    why: Mapping[str, str],
) -> list[Verdict]:
    missing = [name for name in planned if name not in found]
    return [_blank(name, points, Status.NOT_RUN, why.get(name, _NOT_RUN)) for name in missing]


def _skips(points: Mapping[tuple[str, str], Mapping[str, Any]], partial: bool) -> list[Verdict]:
    """Checks of cells that the spec skips on purpose: told, never silently left out."""
    names = [
        f"{spec}::{point}::{check}"
        for (spec, point), data in points.items()
        if data["skipped"]
        for check in data["checks"]
    ]
    return [] if partial else [_blank(name, points, Status.SKIPPED, "") for name in names]


def _blank(name: str, points: Mapping[tuple[str, str], Mapping[str, Any]], status: Status, reason: str) -> Verdict:
    parts = name.split("::")
    if len(parts) != 3:
        raise RecordError(f"an item id has the form SPEC::POINT::CHECK, got {name!r}")
    spec, point, check = parts
    data = points.get((spec, point), {})
    if data.get("skipped"):
        status, reason = Status.SKIPPED, str(data["skipped"])
    asked = [item["name"] for item in data.get("requirements", []) if check in item["checks"]]
    return Verdict(spec, point, check, status, _place(data, spec, check), reason, requirements=tuple(asked))


def _place(data: Mapping[str, Any], spec: str, check: str) -> Place:
    match = re.fullmatch(r"(.*):(\d+):(\d+)", data.get("places", {}).get(check, ""))
    return Place(match[1], int(match[2]), int(match[3])) if match else Place(spec)


def _without(value: Any, root: Path | None) -> Any:
    """`value` with the absolute path of `root` cut out of its texts: no path of one machine enters the body."""
    if root is None:
        return value
    if isinstance(value, str):
        return value.replace(f"{root.as_posix().rstrip('/')}/", "")
    if isinstance(value, list):
        return [_without(item, root) for item in value]
    if isinstance(value, dict):
        return {key: _without(item, root) for key, item in value.items()}
    return value


def canonical(data: Any) -> str:
    """The one text of a record or of its body: sorted keys, one value a line, ASCII, no NaN. Raises RecordError."""
    return text_of(data, indent=1) + "\n"


def verdicts_of(record: Mapping[str, Any]) -> tuple[Verdict, ...]:
    """The verdicts of a record, in its order."""
    return tuple(from_data(item) for item in record["body"]["items"])


def parse(text: str, name: str = "the record") -> dict[str, Any]:
    """A record from its JSON text. Raises RecordError for other data, formats or versions, naming `name`."""
    data = parsed(text, name)
    if not isinstance(data, dict):
        raise RecordError(f"{name} is not a run record")
    expect_format(data, name)
    expect_keys(data, {"format", "body", "provenance"}, name)
    expect_keys(data["body"], {"partial", "profile", "counts", "items", "points"}, f"the body of {name}")
    if not isinstance(data["body"]["items"], list) or not isinstance(data["body"]["points"], list):
        raise RecordError(f"{name} is damaged: items and points are lists")
    for item in data["body"]["items"]:
        try:
            from_data(item)
        except RecordError as error:
            raise RecordError(f"{name} is damaged: {error}") from error
    return data


def read(path: Path) -> dict[str, Any]:
    """The record in a file. Raises RecordError for a file that is missing, unreadable or of another format."""
    try:
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        raise RecordError(f"the record {path} cannot be read: {error}") from error
    return parse(text, str(path))
