"""Does the delivered model equal the derived one, and is it for this operating point?

What is compared is what `agree` asks for: the claimed point always, entries, frequency response and static gains where
words ask for them. Where the two differ in another way than that, poles, zeros and gains that moved are told.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from ..core.case import CheckAsk
from ..core.delivered import AgreeAsk, DeliveredModel
from ..core.verdict import Figure, Status, Verdict, merged
from ..numerics.pair import Pair, paired
from . import claims, entries
from .study import Study


@dataclass(slots=True)
class Findings:
    """What one comparison adds to the verdict. Mutable: each comparison adds its part."""

    figures: list[Figure] = field(default_factory=list)
    reasons: list[tuple[Status, str]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    details: dict[str, Any] = field(default_factory=dict)

    @property
    def status(self) -> Status:
        """The worst of all that was found."""
        found = [figure.status for figure in self.figures] + [status for status, _ in self.reasons]
        return merged(found) if found else Status.PASS


def check(study: Study, ask: CheckAsk) -> Verdict:
    """The verdict on a delivered model against the plant. Raises ValueError where none was delivered."""
    delivered = study.case.local.delivered
    if delivered is None:
        raise ValueError(f"no model was delivered for {study.case.point}")
    findings = Findings()
    _point(study, delivered, findings)
    pair = paired(delivered, study.reference(), study.case.nominal)
    _entries(study, pair, findings)
    _nothing_asked(study.case.local.agree, findings)
    worst = findings.status
    return Verdict(
        spec=study.case.spec,
        point=study.case.point,
        check=ask.name,
        status=worst,
        place=ask.place,
        reason="; ".join(text for status, text in findings.reasons if status is worst),
        figures=tuple(findings.figures),
        notes=tuple(findings.notes),
        details={"file": delivered.file, **findings.details},
    )


def _point(study: Study, delivered: DeliveredModel, findings: Findings) -> None:
    agree = study.case.local.agree
    found = claims.claims(study.case, delivered, study.trim())
    if not found:
        findings.notes.append("the delivered model claims no operating point")
        return
    figures = claims.judged(found, agree.point, str(agree.point_place or agree.place))
    findings.figures += figures
    for claim, figure in zip(found, figures, strict=True):
        if figure.status is not Status.PASS:
            findings.reasons.append((figure.status, claim.told()))
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


def _entries(study: Study, pair: Pair, findings: Findings) -> None:
    agree = study.case.local.agree
    if agree.entries is None:
        return
    if pair.time_clash:
        findings.reasons.append((Status.FAIL, f"{pair.time_clash} {study.case.plant.time_unit}"))
        return
    if pair.anonymous:
        findings.reasons.append(
            (Status.UNDECIDED, "the delivered states have no names, so entries cannot be compared; ask for `response`")
        )
        return
    found = entries.entries(pair, study.case.plant.time_unit)
    figures = entries.judged(found, agree.entries, str(agree.entries_place or agree.place))
    findings.figures += figures
    broken = entries.broken(found, agree.entries)
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


def _nothing_asked(agree: AgreeAsk, findings: Findings) -> None:
    if agree.entries is None and agree.response is None and agree.gains is None:
        findings.notes.append(
            "`agree` asks for no comparison of the model itself: names, units and the claimed point were looked at"
        )
