"""How the time between two instants is cut: where inputs can change, where samples are taken, and which of them count.

A dead time that is no multiple of the time between instants moves the changes of that input between them, and no
integration step may cross one. A dead time of an output moves the last sample that still arrives; that one is made a
node too. A sampled controller acts where a piece begins. What counts in samples (a difference equation, or a sampled
local model) is cut evenly into whole steps.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from ..core.model import Array
from .rig import Fidelity, Rig

FEWEST = 4  # nodes of an interval, so that those of a piece double when they do
SNAP = 1e-9  # of the time between instants: nearer breakpoints are one


@dataclass(frozen=True, slots=True, eq=False)
class Pieces:
    """lengths (P,): of the pieces of one interval, summing to `every`; nodes: sub-intervals of a piece; stride: nodes
    from one sample that counts to the next (1: all do); sampled: whether only right-hand values at nodes mean anything.
    """

    every: float
    lengths: Array
    nodes: int
    stride: int = 1
    sampled: bool = False

    @property
    def count(self) -> int:
        """Pieces of an interval P."""
        return len(self.lengths)

    def length(self, k: int) -> float:
        """Length of the k-th piece of a drive."""
        return float(self.lengths[k % self.count])

    def begins(self, intervals: int) -> Array:
        """When each piece begins since the drive began, and the end of the last, (K P + 1,)."""
        within = np.concatenate(([0.0], np.cumsum(self.lengths)[:-1]))
        starts = self.every * np.arange(intervals)[:, np.newaxis] + within
        return np.append(starts.ravel(), self.every * intervals)

    def folded(self, values: Array) -> Array:
        """From all pieces and nodes (q, K P, S + 1, ...) to intervals and the samples that count (q, K, W, ...)."""
        kept = values[:, :, :: self.stride]
        if self.sampled:
            kept = np.array(kept)
            kept[:, :-1, -1] = kept[:, 1:, 0]
        return kept.reshape(kept.shape[0], -1, self.count * kept.shape[2], *kept.shape[3:])


def cut(rig: Rig, every: float, fidelity: Fidelity) -> Pieces:
    """The pieces for drives that change every `every`. Raises ValueError where steps or dead times do not fit."""
    ticks = [step for step in (rig.plant.step, rig.model.step) if step is not None]
    if ticks:
        return _even(rig, every, fidelity, ticks[0])
    lengths = np.diff(np.append(_starts(rig, every), every))
    return Pieces(every, lengths, _shared(fidelity.nodes, lengths / every))


def _shared(nodes: int, shares: Array) -> int:
    """Sub-intervals of each piece, none longer than with `nodes` for the whole interval; twice as many for twice those.

    A sampled controller may cut an interval into dozens of pieces: each with all nodes would only be read for nothing.
    """
    if len(shares) == 1:
        return nodes
    quarters = 1 << math.ceil(math.log2(max(1.0, FEWEST * float(shares.max()) - SNAP)))
    return math.ceil(nodes / FEWEST) * quarters


def _even(rig: Rig, every: float, fidelity: Fidelity, tick: float) -> Pieces:
    whose = "a plant" if rig.plant.step is not None else "a local model"
    steps = whole_steps(every, tick)
    if not steps:
        raise ValueError(f"drives every {every} do not fit {whose} that steps every {tick}")
    shared = steps
    for name, delay in (*rig.delays.inputs.items(), *rig.delays.outputs.items()):
        late = whole_steps(delay, tick)
        if late is None:
            raise ValueError(f"the dead time {delay} of {name} does not fit {whose} that steps every {tick}")
        shared = math.gcd(shared, late)
    for instants in rig.instants:
        for time in (instants.period, instants.phase):
            between = whole_steps(time, tick)
            if between is None:
                raise ValueError(f"samples at multiples of {time} do not fit {whose} that steps every {tick}")
            shared = math.gcd(shared, between)
        instants.phases(every)  # raises where it does not fit
    lengths = np.full(steps // shared, every * shared / steps)
    if rig.plant.step is not None:
        return Pieces(every, lengths, shared, 1, True)
    stride = -(-fidelity.nodes // shared)
    return Pieces(every, lengths, shared * stride, stride, True)


def whole_steps(time: float, step: float) -> int | None:
    """How many steps make `time`; None where it is no whole number of them."""
    steps = round(time / step)
    return steps if abs(steps * step - time) <= SNAP * max(time, step) else None


def _starts(rig: Rig, every: float) -> Array:
    """Where pieces begin within an interval, ascending from zero."""
    phases, delays = [0.0], rig.delays
    sampled = [phase for instants in rig.instants for phase in instants.phases(every)]
    for shift in (*delays.inputs.values(), *(-late for late in delays.outputs.values()), *sampled):
        phase = shift % every
        if all(min(abs(phase - other), every - abs(phase - other)) > SNAP * every for other in phases):
            phases.append(phase)
    return np.array(sorted(phases))


def grid(pieces: Pieces, intervals: int) -> Array:
    """Instants of all nodes since the drive began, (K P, S + 1); the last of a row is the first of the next."""
    ends = pieces.begins(intervals)
    inner = np.tile(pieces.lengths, intervals)[:, np.newaxis] * np.arange(pieces.nodes) / pieces.nodes
    times = np.empty((len(ends) - 1, pieces.nodes + 1))
    times[:, :-1] = ends[:-1, np.newaxis] + inner
    times[:, -1] = ends[1:]
    return times
