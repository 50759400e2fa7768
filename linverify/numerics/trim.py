"""Trim: find states and inputs, inside their bounds, where the rates vanish and held outputs have their values.

The search starts at the first guess and at a fixed low-discrepancy set over the bounds, because one start finds one
equilibrium and says nothing about others. What it finds is judged by the residual of every equation, re-evaluated by a
single call of the plant at the answer; no solver's own opinion counts. Where no start succeeds, scipy's bounded least
squares (another code) tries from the best ends before the answer is "none", and the answer then tells how near it came.

Calls of the plant that fail while searching are passed over and counted; at the answer they decide.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from ..core.bound import BoundPlant
from ..core.case import Interval, TrimAsk
from ..core.outcome import Outcome
from ..core.shown import Shown
from .choose import candidate_at, chosen, on_edge, outputs_beyond
from .edges import edge
from .equations import bounds, equations
from .least import least
from .newton import joined
from .no_trim import none
from .roots import roots_among, search
from .starts import start_points
from .stragglers import stragglers
from .trim_result import NO_UNITS, Task, TrimResult
from .trim_words import told, told_limit

__all__ = ["TrimResult", "trim"]


def trim(
    plant: BoundPlant,
    ask: TrimAsk,
    envelope: Mapping[str, Interval],
    nominal: Mapping[str, float],
    time: float,
    *,
    shown: Mapping[str, Shown] = NO_UNITS,
    shown_limits: Mapping[str, Shown] = NO_UNITS,
) -> TrimResult:
    """The equilibrium that `ask` states, within `envelope` and the plant's domain, at `time` (time units, or steps).

    Missing nominal sizes count as 1 of the signal's unit. shown, shown_limits: the units that words tell values of
    signals and their limits in; the plant's where missing. Raises KeyError for a name that the plant does not have;
    whatever the plant does when it is called ends in the result's `outcome`, not in an exception.
    """
    system = equations(plant, ask, envelope, nominal, time)
    task = Task(system, ask, envelope, nominal, shown, shown_limits)
    plant.last_error = None
    if outside := _outside(task):
        return TrimResult(Outcome.NO_TRIM, conclusive=True, message=outside)
    result = least(task) if ask.minimize else _searched(task)
    first = "" if plant.last_error is None else str(plant.last_error)
    return replace(result, evaluations=system.tally.calls, failed_calls=system.tally.failed, first_failure=first)


def _searched(task: Task) -> TrimResult:
    system, accuracy = task.system, task.ask.accuracy
    starts = start_points(system)
    ends, count = search(system, starts, accuracy), starts.shape[1]
    found = roots_among(system, ends, accuracy)
    if found.roots and not np.isfinite(system.box).all():
        # on open sides the first guess may be far from where the plant lives; look again around what was found
        more = start_points(system, found.roots[0].z)
        ends = joined(ends, search(system, more, accuracy))
        found, count = roots_among(system, ends, accuracy), count + more.shape[1]
    if not found.roots:
        ends = joined(ends, stragglers(system, ends))
        found = roots_among(system, ends, accuracy)
    candidates = [candidate_at(task, root) for root in found.roots]
    usable = [candidate for candidate in candidates if not outputs_beyond(task, candidate)]
    edges = [edge(system, candidate.root, accuracy) for candidate in usable]
    sound = [candidate for candidate, beside in zip(usable, edges, strict=True) if beside is None]
    if sound or not usable:
        result = chosen(task, sound) if sound else none(task, ends, candidates, bool(found.fading))
    else:
        result = on_edge(task, usable, edges)
    return replace(result, starts=count)


def _outside(task: Task) -> str:
    """Which fixed value lies outside its limits, in words; empty where none does."""
    plant = task.system.plant
    fixed = {
        name: value
        for signals, values in ((plant.states, task.system.base_x), (plant.inputs, task.system.base_u))
        for name, value in zip(signals.names, values, strict=True)
        if name not in task.system.unknowns
    }
    outputs = {name: value for name, value in task.ask.hold.items() if name in plant.outputs}
    for name, low, high in zip(task.system.unknowns, task.system.low, task.system.high, strict=True):
        if low > high:
            return f"{name} has no allowed value: its envelope and the plant's domain exclude each other"
    for name, value in {**fixed, **outputs}.items():
        limits = bounds(plant, task.envelope, name)
        if value not in limits:
            limit = limits.high if value > limits.high else limits.low
            return f"{told(task, name, float(value))} is required, beyond its limit {told_limit(task, name, limit)}"
    return ""
