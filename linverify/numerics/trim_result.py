"""What a trim is asked and what it found, as values."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from ..core.case import NOTHING, Interval, TrimAsk
from ..core.errors import PlantError
from ..core.model import OperatingPoint
from ..core.outcome import Outcome
from ..core.shown import Shown
from .equations import Equations

NO_UNITS: Mapping[str, Shown] = MappingProxyType({})  # of the spec's own: everything is told in the plant's


@dataclass(frozen=True, slots=True, eq=False)
class TrimResult:
    """What a trim found.

    point: the chosen equilibrium, None unless `outcome` is DONE. others: the other equilibria that were found (all of
    them where the outcome is SEVERAL_TRIMS). residuals: scaled, by equation, at `point` or else at `closest`, the
    point that came nearest. errors: estimated error of trimmed states, inputs and outputs, in the plant's units.
    conclusive: without a trim, whether the search says that there is none (else it could not tell).
    nearest_holds: values of the held quantities, nearest to those asked, at which a trim exists; empty if none found.
    free_names: the unknowns that a family (or `minimize`) leaves open. starts, evaluations (columns of states and
    inputs), failed_calls: what the search cost; first_failure: the first call that failed. message: one line for a
    reader, empty when DONE; notes: further lines.
    """

    outcome: Outcome
    point: OperatingPoint | None = None
    others: tuple[OperatingPoint, ...] = ()
    residuals: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    worst_equation: str = ""
    worst_residual: float = float("nan")
    errors: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    active_bounds: tuple[str, ...] = ()
    nearest_holds: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    closest: OperatingPoint | None = None
    conclusive: bool = False
    free_names: tuple[str, ...] = ()
    starts: int = 0
    evaluations: int = 0
    failed_calls: int = 0
    first_failure: str = ""
    message: str = ""
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Task:
    """What every step of a trim needs to see. shown, shown_limits: the units that values and limits are told in."""

    system: Equations
    ask: TrimAsk
    envelope: Mapping[str, Interval]
    nominal: Mapping[str, float]
    shown: Mapping[str, Shown] = field(default_factory=lambda: NO_UNITS)
    shown_limits: Mapping[str, Shown] = field(default_factory=lambda: NO_UNITS)


def outcome_of(error: PlantError) -> Outcome:
    """The outcome that stands for what the plant did."""
    if error.__cause__ is not None and " raised " in str(error):
        return Outcome.PLANT_RAISED
    return Outcome.NOT_FINITE if " returned nan " in str(error) or "inf " in str(error) else Outcome.PLANT_ANSWER
