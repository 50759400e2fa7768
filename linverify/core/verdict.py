"""Verdicts: what a check found, in plain values that survive a trip between processes.

Precedence when several findings of one check meet (over drives, figures, equations):

    first \\ second   pass        undecided   fail
    pass             pass        undecided   fail
    undecided        undecided   undecided   fail
    fail             fail        fail        fail
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from enum import StrEnum
from types import MappingProxyType
from typing import Any

from .errors import Place


class Status(StrEnum):
    """pass, fail and undecided are verdicts; skipped and not run are told beside them."""

    PASS = "pass"
    FAIL = "fail"
    UNDECIDED = "undecided"
    SKIPPED = "skipped"
    NOT_RUN = "not run"

    @property
    def breaks_build(self) -> bool:
        """True for everything but pass and a declared skip."""
        return self not in (Status.PASS, Status.SKIPPED)


_RANK = {Status.PASS: 0, Status.UNDECIDED: 1, Status.FAIL: 2}


def merged(statuses: Iterable[Status]) -> Status:
    """The one status of several findings: fail, then undecided, then pass. Raises ValueError for none at all."""
    return max(statuses, key=_RANK.__getitem__)


class Sense(StrEnum):
    """Which side of a limit is good."""

    UPPER = "at most"
    LOWER = "at least"
    RANGE = "within"
    NONE = "told"  # no limit, or a yes/no property


@dataclass(frozen=True, slots=True)
class Figure:
    """One measured figure against its limit, in `unit`.

    what: "peak error", "scaled residual"; signal: what it was measured on; error: estimate of our own error in
    `worst`; when: time of the worst, NaN where time has no meaning; drive: digest of the drive it was met on.
    origin: place of the limit in the spec or a word on where it comes from; at_frequency, frequency_unit: where it was
    met, NaN where frequency has no meaning; low: the lower end of a range, whose upper end is `limit`. Figures in dB
    are ratios told in decibels: shares are those of the ratios.
    """

    what: str
    signal: str
    worst: float
    limit: float = math.nan
    unit: str = ""
    sense: Sense = Sense.UPPER
    error: float = 0.0
    when: float = math.nan
    time_unit: str = ""
    drive: str = ""
    origin: str = ""
    status: Status = Status.PASS
    at_frequency: float = math.nan
    frequency_unit: str = ""
    low: float = math.nan

    @property
    def used_share(self) -> float:
        """How much of the limit is used up; NaN where headroom has no meaning (a zero limit, a yes/no property)."""
        if self.sense is Sense.NONE or math.isnan(self.limit) or math.isnan(self.worst):
            return math.nan
        worst, limit = (_ratio(self.worst), _ratio(self.limit)) if self.unit == "dB" else (self.worst, self.limit)
        if self.sense is Sense.RANGE:
            half = (limit - self.low) / 2.0
            return abs(worst - (limit + self.low) / 2.0) / half if half > 0.0 else math.nan
        above, below = (worst, limit) if self.sense is Sense.UPPER else (limit, worst)
        if math.isinf(below):
            return 0.0
        return above / below if below > 0 else math.nan

    @property
    def headroom(self) -> float:
        """1 - used share."""
        return 1.0 - self.used_share


def _ratio(decibels: float) -> float:
    try:
        return float(10.0 ** (decibels / 20.0))
    except OverflowError:
        return math.inf


@dataclass(frozen=True, slots=True)
class Evidence:
    """A saved drive and its trajectories: role "worst" or "simplest", digest of the drive, one readable line."""

    role: str
    drive: str
    text: str


@dataclass(frozen=True, slots=True)
class Verdict:
    """What one check of one operating point found.

    details: plain JSON values only (str, int, float, list, dict with str keys).
    reason: one line, empty for a pass; notes: further lines that a reviewer must see.
    """

    spec: str
    point: str
    check: str
    status: Status
    place: Place
    reason: str = ""
    figures: tuple[Figure, ...] = ()
    notes: tuple[str, ...] = ()
    requirements: tuple[str, ...] = ()
    evidence: tuple[Evidence, ...] = ()
    details: Mapping[str, Any] = field(default_factory=lambda: MappingProxyType({}))

    @property
    def id(self) -> str:
        """`specs/ferry/ride.yaml::kn30::trims`."""
        return f"{self.spec}::{self.point}::{self.check}"

    @property
    def tightest(self) -> Figure | None:
        """The figure with the least headroom; None where no figure has any."""
        judged = [figure for figure in self.figures if not math.isnan(figure.used_share)]
        return max(judged, key=lambda figure: round(figure.used_share, 9), default=None)
