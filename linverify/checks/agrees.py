"""Does the delivered model equal the derived one, and is it for this operating point?

What is compared is what `agree` asks for: the claimed point always, entries, frequency response and static gains where
words ask for them. Where the two differ in another way than that, poles, zeros and gains that moved are told.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from ..core.case import CheckAsk
from ..core.delivered import DeliveredModel
from ..core.verdict import Status, Verdict
from ..numerics.coordinates import aligned
from ..numerics.pair import Pair, paired
from . import banded, claims, entries, moved, static
from .findings import Findings
from .guesses import guessed
from .study import Study


def check(study: Study, ask: CheckAsk) -> Verdict:
    """The verdict on a delivered model against the plant. Raises ValueError where none was delivered."""
    delivered = study.case.local.delivered
    if delivered is None:
        raise ValueError(f"no model was delivered for {study.case.point}")
    findings = Findings()
    _point(study, delivered, findings)
    inside = study.inside
    pair = paired(delivered, study.reference(), study.case.nominal if inside is None else inside.nominal)
    if inside is not None:
        pair = _in_our_coordinates(replace(pair, unitless=inside.unitless), findings)
    _model(study, pair, findings)
    _cause(study, pair, findings)
    return Verdict(
        spec=study.case.spec,
        point=study.case.point,
        check=ask.name,
        status=findings.status,
        place=ask.place,
        reason=findings.reason,
        figures=tuple(findings.figures),
        notes=tuple(findings.notes),
        details={"file": delivered.file, **findings.details},
    )


def _in_our_coordinates(pair: Pair, findings: Findings) -> Pair:
    """States of controllers mean nothing by themselves: the same controller in other states is the same."""
    if pair.anonymous or pair.time_clash or not entries.differ(pair):
        return pair
    other = aligned(pair, pair.unitless)
    if other is None:
        return pair
    findings.notes.append("states of controllers were brought from the coordinates of the file to those of the spec")
    return other


def _point(study: Study, delivered: DeliveredModel, findings: Findings) -> None:
    agree = study.case.local.agree
    found = claims.claims(study.case, delivered, study.trim(), study.inside)
    if not found:
        findings.notes.append("the delivered model claims no operating point")
        return
    figures = claims.judged(found, agree.point, str(agree.point_place or agree.place))
    findings.figures += figures
    for status in (Status.FAIL, Status.UNDECIDED):
        off = [claim for claim, figure in zip(found, figures, strict=True) if figure.status is status]
        if off:
            findings.reasons.append((status, claims.reason(off)))
    findings.details["claimed_point"] = [
        {
            "signal": claim.signal,
            "claimed": claim.claimed,
            "trimmed": claim.ours,
            "unit": claim.unit,
            "nominal_sizes": claim.away,
        }
        for claim in found
    ]


def _model(study: Study, pair: Pair, findings: Findings) -> None:
    agree, time_unit = study.case.local.agree, study.case.plant.time_unit
    asked = (agree.entries, agree.response, agree.gains) != (None, None, None)
    if not asked:
        findings.notes.append(
            "`agree` asks for no comparison of the model itself: names, units and the claimed point were looked at"
        )
    elif pair.time_clash:
        findings.reasons.append((Status.FAIL, f"{pair.time_clash} {time_unit}"))
        return
    if agree.entries is not None:
        _entries(study, pair, agree.entries, findings)
    if agree.response is not None:
        banded.compare(pair, agree.response, time_unit, findings)
    if agree.gains is not None:
        static.compare(pair, agree.gains, findings)
    moved.tell(pair, findings, entries_differ=not pair.anonymous and entries.differ(pair))


def _cause(study: Study, pair: Pair, findings: Findings) -> None:
    if findings.status is not Status.FAIL:
        return
    cause = guessed(study, pair)
    if cause is not None:
        findings.notes.insert(0, cause.told)
        findings.details["cause"] = {"kind": cause.kind, "text": cause.text}


def _entries(study: Study, pair: Pair, limit: float, findings: Findings) -> None:
    agree = study.case.local.agree
    if pair.anonymous:
        findings.reasons.append(
            (Status.UNDECIDED, "the delivered states have no names, so entries cannot be compared; ask for `response`")
        )
        return
    found = entries.entries(pair, study.case.plant.time_unit)
    figures = entries.judged(found, limit, str(agree.entries_place or agree.place))
    findings.figures += figures
    broken = entries.broken(found, limit)
    for figure in figures:
        if figure.status is not Status.PASS:
            findings.reasons.append((figure.status, entries.reason(broken)))
    findings.details["entries"] = [_plain(entry) for entry in broken]


def _plain(entry: entries.Entry) -> dict[str, Any]:
    return {
        "entry": entry.name,
        "delivered": entry.delivered,
        "plant": entry.ours,
        "error": entry.known,
        "unit": entry.unit,
        "share": entry.away,
    }
