"""What the parts of one check add up to."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from ..core.verdict import Evidence, Figure, Status, merged


@dataclass(slots=True)
class Findings:
    """Parts of a verdict. Mutable: each part adds its own; without a figure or a reason it is a pass."""

    figures: list[Figure] = field(default_factory=list)
    reasons: list[tuple[Status, str]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    evidence: list[Evidence] = field(default_factory=list)
    details: dict[str, Any] = field(default_factory=dict)

    @property
    def status(self) -> Status:
        """The worst of all that was found."""
        found = [figure.status for figure in self.figures] + [status for status, _ in self.reasons]
        return merged(found) if found else Status.PASS

    @property
    def reason(self) -> str:
        """The sentences that stand behind `status`; empty for a pass."""
        status = self.status
        return "" if status is Status.PASS else "; ".join(text for its, text in self.reasons if its is status)
