"""`minimize`: among the equilibria, the one with the least weighted squared distance from `start`."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from ..core.model import Array
from ..core.outcome import Outcome
from .choose import Candidate, accepted, candidate_at
from .equations import Equations, bounds, first_guess, with_output_limits
from .nearest import Nearest, feasible_ends, nearest
from .newton import jacobian, joined, pseudo_inverse, solve
from .no_trim import none
from .roots import Root, noise
from .starts import start_points
from .stragglers import stragglers
from .trim_result import Task, TrimResult
from .trim_words import numbered, told_unknowns

DESCENTS = 6  # local minima are sought from so many different equilibria
EQUAL = 1e-6  # relative difference of two least distances that cannot be told apart
LOCATED = 1e-8  # nominal sizes to which a least distance is found along the solutions
APART = 1e-3  # nominal sizes: nearer minima are one


def least(task: Task) -> TrimResult:
    """The equilibrium of least distance; NOT_UNIQUE where a direction is left free or two are equally near."""
    system = task.system
    wide = with_output_limits(system, task.ask, task.envelope, task.nominal, unknowns=system.unknowns, loose=False)
    weights, target = _weights(task, wide)
    starts = np.concatenate([start_points(wide), target[:, np.newaxis]], axis=1)
    feasible = feasible_ends(wide, starts, weights, target, task.ask.accuracy, most=DESCENTS)
    if not feasible.shape[1]:
        ends = solve(wide, starts)
        result = none(task, joined(ends, stragglers(wide, ends)), (), False, wide)
        return replace(result, starts=starts.shape[1])
    found = nearest(wide, weights, target, feasible, task.ask.accuracy)
    return replace(_judged(task, wide, found), starts=starts.shape[1])


def _judged(task: Task, wide: Equations, ends: tuple[Nearest, ...]) -> TrimResult:
    v, best = len(task.system.unknowns), ends[0]
    polished = solve(wide, best.z[:, np.newaxis])
    root = _root(task.system, polished.z[:v, 0])
    candidate = candidate_at(task, root)
    if best.flat.size:
        return _flat(task, best, candidate)
    rivals = _rivals(ends, v)
    if rivals:
        return _tie(task, [candidate, *(candidate_at(task, _root(task.system, end.z[:v])) for end in rivals)])
    if not best.settled:
        return TrimResult(Outcome.NOT_UNIQUE, message="the search for the least distance from `start` did not settle")
    return accepted(task, candidate, ())


def _rivals(ends: tuple[Nearest, ...], v: int) -> list[Nearest]:
    """Other places, apart in their `v` unknowns, that are as near as the first."""
    different = [ends[0]]
    for end in ends[1:]:
        equal = end.distance - ends[0].distance <= EQUAL * (ends[0].distance + EQUAL)
        if equal and all(np.abs(end.z - other.z)[:v].max() > APART for other in different):
            different.append(end)
    return different[1:]


def _flat(task: Task, best: Nearest, candidate: Candidate) -> TrimResult:
    names = task.system.unknowns
    share = np.abs(best.flat[: len(names)]).max(axis=1, initial=0.0)
    moving = tuple(name for name, part in zip(names, share, strict=True) if part > 1e-3 * share.max(initial=0.0))
    at = f", for example at {told_unknowns(task, candidate.point)}" if candidate.point else ""
    return TrimResult(
        Outcome.NOT_UNIQUE,
        others=(candidate.point,) if candidate.point else (),
        free_names=moving,
        message=f"the weights of `minimize` leave {', '.join(moving)} free to change{at}; weigh one of them too",
    )


def _tie(task: Task, candidates: list[Candidate]) -> TrimResult:
    points = tuple(candidate.point for candidate in candidates if candidate.point is not None)
    each = numbered(task, points)
    return TrimResult(Outcome.NOT_UNIQUE, others=points, message=f"equally near to `start` in these weights: {each}")


def _root(system: Equations, z: Array) -> Root:
    at = system.residual(z[:, np.newaxis])
    slopes = np.nan_to_num(jacobian(system, z[:, np.newaxis], at))
    spread = np.abs(at) + noise(system, z[:, np.newaxis], at, slopes)
    error = np.einsum("kqr,rk->qk", np.abs(pseudo_inverse(slopes)), spread)[:, 0]
    # along the solutions the least distance is located by differences of slopes, not by the residual
    error += LOCATED * (z.size > at.shape[0])
    return Root(z, float(np.abs(at).max(initial=0.0)), error, np.zeros((z.size, 0)))


def _weights(task: Task, wide: Equations) -> tuple[Array, Array]:
    """Weights (q,) and target (q,) of the distance, both for scaled unknowns."""
    plant, ask, names = task.system.plant, task.ask, wide.all_unknowns
    weights = np.array([ask.minimize.get(name, 0.0) for name in names])
    sizes = np.array([task.nominal.get(name, 1.0) for name in names])
    guesses = [first_guess(ask, bounds(plant, task.envelope, name), name) for name in names]
    return weights, np.array(guesses) / sizes
