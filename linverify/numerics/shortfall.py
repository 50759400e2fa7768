"""Why there is no trim: which rate cannot vanish and by how much, what stands at its limit, where a trim would exist.

The rate is found by letting one equation go: with every other equation met and its own residual made as small as the
bounds allow, what remains is what cannot vanish. The nearest held values are found by making them unknowns that stay
as near as they can to what was asked.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from ..core.case import NOTHING, Interval, TrimAsk
from ..core.errors import PlantError
from ..core.model import Array, OperatingPoint
from .equations import Equations, Slack, equations, outputs_outside, with_output_limits
from .nearest import feasible_ends, nearest
from .newton import Ends, bounded_step, jacobian, solve
from .roots import roots_among, roughness
from .starts import start_points

GAIN = 1e-3  # share of |F|^2 that a move must gain to show that the search had not ended
BESIDE = 1e-2  # nominal sizes: starts around a fold, where the equations give no direction
HIDDEN = 10.0  # a residual below so many times the plant's own scatter says nothing


@dataclass(frozen=True, slots=True, eq=False)
class Shortfall:
    """How near a search came. closest: a point whose equations are met but for `worst_equation`, where that could be
    found (`alone`), else the point of least residual; conclusive: the residual there cannot be made smaller;
    noisy: it hides in the plant's own scatter."""

    closest: OperatingPoint | None = None
    worst_equation: str = ""
    worst_residual: float = float("nan")
    alone: bool = False
    conclusive: bool = False
    noisy: bool = False


def shortfall(system: Equations, ends: Ends, accuracy: float, base: Equations) -> Shortfall:
    """How near `ends` came, and what stood in the way.

    base: the equations of the trim itself, of which `system` may be a form with limits on outputs. Raises PlantError
    where the plant fails at the nearest point.
    """
    if not ends.worst.size or not np.isfinite(ends.worst).any():
        return Shortfall()
    best = int(np.argmin(ends.worst))
    z = ends.z[:, best]
    rough = HIDDEN * roughness(system, z).coarse
    noisy = bool(np.all(np.abs(ends.residual[:, best]) <= np.maximum(rough, accuracy)))
    row = int(np.argmax(np.abs(ends.residual[:, best])))
    # with every other equation met to the accuracy, or to the noise where that is larger
    only = None if noisy else _let_go(system, row, ends, max(accuracy, float(rough.max(initial=0.0))))
    left = float(ends.residual[row, best] if only is None else only[-1])
    closest = base.point((z if only is None else only)[: len(base.unknowns)])
    return Shortfall(closest, system.names[row], left, only is not None, _stuck(system, z), noisy)


def _stuck(system: Equations, z: Array) -> bool:
    """Whether no move that the bounds allow makes |F| at z (q,) smaller."""
    at = system.residual(z[:, np.newaxis])
    slopes = jacobian(system, z[:, np.newaxis], at)
    if not np.isfinite(slopes).all():
        return False
    low, high = (side[:, np.newaxis] for side in system.box)
    tried = system.residual(np.clip(z[:, np.newaxis] + _moves(slopes, at, z, low, high), low, high))
    reached = np.sum(tried**2, axis=0)
    reached = reached[np.isfinite(reached)]
    # a system without unknowns cannot move at all
    return not z.size or bool(reached.size and reached.min() >= (1.0 - GAIN) * np.sum(at**2))


def _moves(slopes: Array, at: Array, z: Array, low: Array, high: Array) -> Array:
    """Moves (q, N) to try: along single unknowns, and long and short along the step that would solve the equations."""
    single = np.concatenate([share * np.eye(z.size) for share in (1e-2, -1e-2, 1e-3, -1e-3)], axis=1)
    solving = bounded_step(slopes, at, z[:, np.newaxis], low, high)
    downhill = -slopes[0].T @ at
    steepest = downhill / max(float(np.abs(downhill).max(initial=0.0)), 1e-300)
    shares = 0.25 ** np.arange(10)
    return np.concatenate([single, solving * shares, steepest * shares], axis=1)


def _let_go(system: Equations, row: int, ends: Ends, accuracy: float) -> Array | None:
    """z (q,) and F[row], least in size among the points that meet all other equations; None where none is found."""
    order = np.argsort(ends.worst, kind="stable")[:8]
    order = order[np.isfinite(ends.worst[order])]
    relaxed = system.relaxed(Slack(row))
    starts = np.concatenate([ends.z[:, order], ends.residual[row, order][np.newaxis]])
    weights, target = np.zeros(relaxed.count), np.zeros(relaxed.count)
    weights[-1] = 1.0
    feasible = feasible_ends(relaxed, starts, weights, target, accuracy, most=2)
    found = [end for end in nearest(relaxed, weights, target, feasible, accuracy) if end.settled]
    return found[0].z if found else None


def nearest_holds(
    system: Equations,
    ask: TrimAsk,
    envelope: Mapping[str, Interval],
    nominal: Mapping[str, float],
    ends: Ends,
) -> Mapping[str, float]:
    """Held values nearest to those asked (nominal sizes) at which a solution exists; empty if none is found."""
    if not ask.hold:
        return NOTHING
    plant = system.plant
    signals = tuple(name for name in ask.hold if name in plant.states or name in plant.inputs)
    wide = with_output_limits(system, ask, envelope, nominal, unknowns=(*ask.find, *signals), loose=True)
    names = wide.all_unknowns
    weights = np.array([float(name in ask.hold) for name in names])
    target = np.zeros(len(names))
    for i, name in enumerate(wide.unknowns):
        if name in signals:  # the slack of a held output is its distance already
            target[i] = ask.hold[name] / wide.sizes[i]
    feasible = feasible_ends(wide, _with_ends(wide, system, ends), weights, target, ask.accuracy, most=3)
    for end in nearest(wide, weights, target, feasible, ask.accuracy):
        if values := _verified(wide, ask, envelope, nominal, end.z):
            return values
    return NOTHING


def _with_ends(wide: Equations, system: Equations, ends: Ends) -> Array:
    """Starts for the wider equations: the best ends of the failed search first, then the usual set."""
    usual = start_points(wide)
    first = usual[:, 0].copy()
    best = ends.z[: len(system.unknowns), int(np.argmin(ends.worst))]
    known = dict(zip(system.unknowns, best, strict=True))
    for i, name in enumerate(wide.unknowns):
        first[i] = known.get(name, first[i])
    return np.concatenate([first[:, np.newaxis], usual], axis=1)


def _verified(
    wide: Equations, ask: TrimAsk, envelope: Mapping[str, Interval], nominal: Mapping[str, float], z: Array
) -> dict[str, float]:
    """The held values at z, if with them the original equations have a solution there; empty if not.

    At the last value that can be held (a fold) the solution hangs on round-off, so a little further is tried as well.
    """
    try:
        point = wide.point(z)
    except PlantError:
        return {}
    for further in (1.0, 1.0 + 1e-6, 1.0 + 1e-3):
        held = {name: value + further * (point.value(name) - value) for name, value in ask.hold.items()}
        moved = replace(equations(wide.plant, replace(ask, hold=held), envelope, nominal, wide.time), tally=wide.tally)
        there = moved.scaled(point)[:, np.newaxis]
        beside = BESIDE * np.eye(there.size)
        around = np.concatenate([there, there + beside, there - beside], axis=1)
        found = roots_among(moved, solve(moved, around), ask.accuracy)
        if found.roots and not _outside(moved, ask, envelope, nominal, found.roots[0].z):
            return held
    return {}


def _outside(
    moved: Equations, ask: TrimAsk, envelope: Mapping[str, Interval], nominal: Mapping[str, float], z: Array
) -> bool:
    try:
        return bool(outputs_outside(moved.plant, ask, envelope, nominal, moved.point(z)))
    except PlantError:
        return True
