"""The operating point that a delivered model claims, against the trim: each value in nominal sizes of its signal."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from ..core.case import Case
from ..core.delivered import DeliveredModel
from ..core.units import told
from ..core.verdict import Figure, Status
from ..numerics.trim import TrimResult
from .inside import Inside

TOLD = 3  # claims that a message names; all of them are in the details


@dataclass(frozen=True, slots=True)
class Claim:
    """One claimed value beside ours, in the plant's unit; away and error in nominal sizes."""

    signal: str
    unit: str
    claimed: float
    ours: float
    away: float
    error: float

    def told(self) -> str:
        """`speed: claimed 15.5 m/s, trimmed 15.43 m/s`."""
        # as many digits as show a difference between the two
        digits = next((digits for digits in (6, 9, 12) if not self._alike(digits)), 17)
        claimed, ours = (_with(f"{value:.{digits}g}", self.unit) for value in (self.claimed, self.ours))
        return f"{self.signal}: claimed {claimed}, trimmed {ours}"

    def _alike(self, digits: int) -> bool:
        return f"{self.claimed:.{digits}g}" == f"{self.ours:.{digits}g}"


def claims(
    case: Case, delivered: DeliveredModel, result: TrimResult, inside: Inside | None = None
) -> tuple[Claim, ...]:
    """Every claimed value, in the plant's order, each signal once.

    inside: what loops inside the delivered model add. What a controller's states are at trim is passed over: what it
    does is counted from there.
    """
    point = result.point if inside is None else inside.point
    nominal = case.nominal if inside is None else inside.nominal
    passed = frozenset[str]() if inside is None else inside.unitless
    found = {}
    for name, value in _claimed(delivered):
        if point is None or name in found or name in passed:
            continue
        size = nominal.get(name, 1.0)
        ours = point.value(name)
        error = result.errors.get(name if inside is None else inside.measured(name), 0.0) / size
        found[name] = Claim(name, point.unit(name), value, ours, abs(value - ours) / size, error)
    return tuple(found.values())


def judged(found: tuple[Claim, ...], limit: float, origin: str) -> tuple[Figure, ...]:
    """One figure a claimed value, in per cent of its nominal size."""
    return tuple(
        Figure(
            what="claimed operating point",
            signal=claim.signal,
            worst=100 * claim.away,
            limit=100 * limit,
            unit="%",
            error=100 * claim.error,
            origin=origin,
            status=status_of(claim.away, claim.error, limit),
        )
        for claim in found
    )


def reason(off: Sequence[Claim]) -> str:
    """What a reader is told of claims that do not hold, the furthest off first."""
    order = sorted(off, key=lambda claim: -round(claim.away, 9))
    words = "; ".join(claim.told() for claim in order[:TOLD])
    more = len(order) - TOLD
    return f"{words}; and {more} more claimed values" if more > 0 else words


def status_of(worst: float, error: float, limit: float) -> Status:
    """pass where worst + error keeps the limit, fail where worst - error breaks it, else undecided."""
    if worst + error <= limit:
        return Status.PASS
    return Status.FAIL if worst - error > limit else Status.UNDECIDED


def _claimed(delivered: DeliveredModel) -> Iterator[tuple[str, float]]:
    for values in (delivered.x0, delivered.u0, delivered.y0):
        yield from values.items()


def _with(number: str, unit: str) -> str:
    return number if told(0.0, unit) == "0" else f"{number} {unit}"
