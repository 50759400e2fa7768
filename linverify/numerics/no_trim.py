"""No equilibrium: the result that says how near the search came, or that the plant could not be asked."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from ..core.case import NOTHING
from ..core.errors import PlantError
from ..core.model import OperatingPoint
from ..core.outcome import Outcome
from .choose import Candidate, outputs_beyond
from .equations import Equations
from .newton import Ends
from .shortfall import Shortfall, nearest_holds, shortfall
from .trim_result import Task, TrimResult, outcome_of
from .trim_words import active_bounds, shown_as, told, told_limit, told_rate, told_unknowns


def none(
    task: Task, ends: Ends, beyond: Sequence[Candidate], fading: bool, limited: Equations | None = None
) -> TrimResult:
    """No equilibrium among `ends`.

    beyond: solutions whose outputs leave the envelope; fading: some residuals pass the accuracy without a solution
    near; limited: the form of the equations, with limits on outputs, that `ends` belong to.
    """
    plant = task.system.plant
    if not np.isfinite(ends.worst).any() and plant.last_error is not None:
        message = f"the plant could be called at none of {ends.worst.size} starts; the first: {plant.last_error}"
        return TrimResult(outcome_of(plant.last_error), message=message)
    try:
        short = shortfall(limited or task.system, ends, task.ask.accuracy, task.system)
    except PlantError as error:
        return TrimResult(outcome_of(error), message=f"where the search came nearest, {error}")
    # where the residual itself cannot be trusted, other held values would not be told apart from these
    doubtful = fading or (short.noisy and not beyond)
    holds = NOTHING if doubtful else nearest_holds(task.system, task.ask, task.envelope, task.nominal, ends)
    return _told(task, short, holds, beyond, fading)


def _told(
    task: Task, short: Shortfall, holds: Mapping[str, float], beyond: Sequence[Candidate], fading: bool
) -> TrimResult:
    point, conclusive, outcome = short.closest, short.conclusive, Outcome.NO_TRIM
    message = _why(task, short)
    if outside := [candidate for candidate in beyond if candidate.point is not None]:
        point, conclusive = outside[0].point, True
        message = _outputs_out(task, outside[0])
    elif fading:
        conclusive = False
        message = (
            f"the residuals fall below the accuracy {task.ask.accuracy:.3g} where the equations are still far from "
            f"solved; ask for a smaller `accuracy` or narrow the envelope"
        )
    elif short.noisy:
        outcome, conclusive = Outcome.NOISY, False
        message = (
            f"the scaled residual {abs(short.worst_residual):.3g} that is left in {short.worst_equation} is the "
            f"plant's own noise; it cannot be trimmed to the accuracy {task.ask.accuracy:.3g}, ask for a larger one"
        )
    if point is None:
        return TrimResult(outcome, conclusive=False, nearest_holds=holds, message=message)
    return TrimResult(
        outcome,
        residuals=point.residuals,
        worst_equation=short.worst_equation,
        worst_residual=abs(short.worst_residual),
        active_bounds=active_bounds(task, point),
        nearest_holds=holds,
        closest=point,
        conclusive=conclusive,
        message=message,
        notes=_notes(task, point, holds, conclusive),
    )


def _why(task: Task, short: Shortfall) -> str:
    """`no equilibrium was found inside the envelope: the rate of speed cannot vanish, ...`."""
    if short.closest is None:
        return Outcome.NO_TRIM.value
    plant, name = task.system.plant, short.worst_equation
    rest = "with every other equation met" if short.alone else "where the search came nearest"
    limits = active_bounds(task, short.closest)
    because = f", with {' and '.join(limits)}" if limits else ""
    size = task.nominal.get(name, 1.0) * short.worst_residual
    if name in plant.states:
        wanted = task.ask.rates.get(name, 0.0)
        must = "cannot vanish" if wanted == 0 else f"cannot be {told_rate(task, name, wanted)}"
        left = f"{rest} it stays at {told_rate(task, name, wanted + size, 4)}"
        return f"{Outcome.NO_TRIM.value}: the rate of {name} {must}: {left}{because}"
    if name not in task.ask.hold:
        reached = told(task, name, short.closest.value(name))
        return f"{Outcome.NO_TRIM.value}: {name} cannot keep its limits: {rest} the nearest is {reached}{because}"
    asked = told(task, name, task.ask.hold[name])
    left = f"{rest} it misses by {shown_as(task, name).told_size(abs(size), 4)}"
    return f"{Outcome.NO_TRIM.value}: {asked} cannot be reached: {left}{because}"


def _outputs_out(task: Task, candidate: Candidate) -> str:
    point = candidate.point
    words = [
        f"{told(task, name, point.value(name))} is beyond its limit {told_limit(task, name, limit)}"
        for name, limit in outputs_beyond(task, candidate).items()
        if point is not None
    ]
    return f"{Outcome.NO_TRIM.value}: the equilibrium that was found lies outside, since {' and '.join(words)}"


def _notes(task: Task, point: OperatingPoint, holds: Mapping[str, float], searched: bool) -> tuple[str, ...]:
    notes = [f"nearest the search came: {told_unknowns(task, point)}"]
    if holds:
        changed = [told(task, name, value) for name, value in holds.items()]
        notes.append(f"a trim exists at the held values {', '.join(changed)}, the nearest that were found")
    elif task.ask.hold and searched:
        notes.append("no other values of the held quantities were found at which a trim exists")
    return tuple(notes)
