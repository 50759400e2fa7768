"""Which of several equilibria is meant: the one nearest `start`; where `start` does not say, none is taken."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from ..core.errors import PlantError
from ..core.model import Array, OperatingPoint
from ..core.outcome import Outcome
from .edges import Edge
from .equations import outputs_outside
from .families import Family, family, joined_by
from .nearest import nearest
from .roots import Root, told_errors
from .trim_result import Task, TrimResult, outcome_of
from .trim_words import active_bounds, numbered, shown_as, told_rate, told_unknowns

TIE = 1e-6  # equilibria whose distances from `start` differ by less (in nominal sizes) are equally near


@dataclass(frozen=True, slots=True, eq=False)
class Candidate:
    """A root as an operating point, or the error that the plant gave there."""

    root: Root
    point: OperatingPoint | None
    error: PlantError | None = None


def candidate_at(task: Task, root: Root) -> Candidate:
    """The root as an operating point, evaluated by single calls of the plant."""
    try:
        return Candidate(root, task.system.point(root.z))
    except PlantError as error:
        return Candidate(root, None, error)


def outputs_beyond(task: Task, candidate: Candidate) -> dict[str, float]:
    """Outputs of a candidate that are outside the envelope, with the limits they cross."""
    if candidate.point is None:
        return {}
    return outputs_outside(task.system.plant, task.ask, task.envelope, task.nominal, candidate.point)


def chosen(task: Task, candidates: list[Candidate]) -> TrimResult:
    """The candidate that `start` means, if it says which one and no family is in the way."""
    away = [_from_start(task, candidate.root.z) for candidate in candidates]
    order = sorted(range(len(candidates)), key=lambda i: (round(away[i], 9), i))
    candidates, away = [candidates[i] for i in order], [away[i] for i in order]
    first = candidates[0]
    for candidate in candidates:
        if not candidate.root.open_directions.size:
            continue
        continues = family(task.system, candidate.root, task.ask.accuracy)
        if continues and (candidate is first or not _named(task) or _comes_nearer(task, candidate, away[0])):
            return _of_family(task, candidate, continues)
    for candidate in candidates[1:]:
        continues = joined_by(task.system, first.root, candidate.root, task.ask.accuracy)
        if continues:  # the ends of a dead zone are regular roots, seen from outside
            return _of_family(task, first, continues)
    if len(candidates) > 1 and away[1] - away[0] <= TIE:
        return _several(task, candidates)
    others = tuple(candidate.point for candidate in candidates[1:] if candidate.point is not None)
    return accepted(task, first, others)


def accepted(task: Task, candidate: Candidate, others: tuple[OperatingPoint, ...]) -> TrimResult:
    """The result with `candidate` as its point, if the plant answers there and the residuals keep the accuracy."""
    point = candidate.point
    if candidate.error is not None or point is None:
        message = f"at the equilibrium that the search found, {candidate.error}"
        return TrimResult(outcome_of(candidate.error or PlantError()), message=message)
    worst = max(point.residuals, key=lambda name: abs(point.residuals[name]), default="")
    size = abs(point.residuals[worst]) if worst else 0.0
    if size > task.ask.accuracy:
        # single calls answer otherwise than the batches that the search was made of
        message = f"called alone at the trim, the plant leaves a scaled residual of {size:.3g} in {worst}"
        return TrimResult(Outcome.NOISY, closest=point, residuals=point.residuals, message=message)
    system = task.system
    return TrimResult(
        Outcome.DONE,
        point,
        others,
        residuals=point.residuals,
        worst_equation=worst,
        worst_residual=size,
        errors=told_errors(system, candidate.root),
        active_bounds=active_bounds(task, point),
        notes=(f"other equilibria: {numbered(task, others)}",) if others else (),
    )


def on_edge(task: Task, candidates: list[Candidate], edges: Sequence[Edge | None]) -> TrimResult:
    """Every solution has a jump beside it, so none of them is an equilibrium that anything could rest at."""
    pairs = [(one, beside) for one, beside in zip(candidates, edges, strict=True) if one.point and beside]
    pairs.sort(key=lambda pair: round(_from_start(task, pair[0].root.z), 9))
    (candidate, beside), *_ = pairs
    system, name = task.system, beside.equation
    row = system.names.index(name)
    size = float(np.concatenate([system.rate_sizes, system.output_sizes])[row])
    what, words = (name, [shown_as(task, name).told_size(side * size) for side in (beside.below, beside.above)])
    if row < system.rate_rows.size:
        what = f"the rate of {name}"
        words = [told_rate(task, name, side * size) for side in (beside.below, beside.above)]
    across = "jumps across zero" if beside.below * beside.above < 0 else "jumps"
    at = told_unknowns(task, candidate.point) if candidate.point else ""
    message = (
        f"what solves the equations is no equilibrium: {what} {across} at {at}, "
        f"from {words[0]} below to {words[1]} above in {beside.unknown}; hold {beside.unknown}, or smooth the jump"
    )
    return TrimResult(Outcome.NOT_EQUILIBRIUM, closest=candidate.point, message=message)


def _named(task: Task) -> list[int]:
    """Positions of the unknowns for which `start` gives a value."""
    return [i for i, name in enumerate(task.system.unknowns) if name in task.ask.start]


def _start(task: Task) -> Array:
    """Scaled start values of the unknowns that it names."""
    named = _named(task)
    return np.array([task.ask.start[task.system.unknowns[i]] for i in named]) / task.system.sizes[named]


def _from_start(task: Task, z: Array) -> float:
    """Distance from `start` in nominal sizes, over the unknowns that it names; zero where it names none."""
    return float(np.linalg.norm(z[_named(task)] - _start(task)))


def _comes_nearer(task: Task, candidate: Candidate, distance: float) -> bool:
    """Whether the family of `candidate` passes `start` nearer than `distance`."""
    weights, target = np.zeros(task.system.count), np.zeros(task.system.count)
    weights[_named(task)] = 1.0
    target[_named(task)] = _start(task)
    ends = nearest(task.system, weights, target, candidate.root.z[:, np.newaxis], task.ask.accuracy)
    return float(np.sqrt(ends[0].distance)) <= distance + TIE


def _several(task: Task, candidates: list[Candidate]) -> TrimResult:
    points = tuple(candidate.point for candidate in candidates if candidate.point is not None)
    why = "`start` is as near to one as to another" if _named(task) else "no `start` says which one is meant"
    message = f"{len(candidates)} equilibria lie inside the envelope and {why}: {numbered(task, points)}"
    return TrimResult(Outcome.SEVERAL_TRIMS, others=points, message=message)


def _of_family(task: Task, candidate: Candidate, found: Family) -> TrimResult:
    system = task.system
    at = f", for example at {told_unknowns(task, candidate.point)}" if candidate.point else ""
    names = ", ".join(found.names)
    count = f"{len(system.unknowns)} unknowns, {len(system.names)} equations"
    return TrimResult(
        Outcome.FAMILY,
        others=(candidate.point,) if candidate.point else (),
        free_names=found.names,
        message=f"the equilibria form a family in which {names} may change ({count}){at}; add a hold or `minimize`",
    )
