"""Drives as arrays, the trimmed course they start from, and the local model's exact answer to them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..core.drive import Drive
from ..core.model import Array
from ..core.signals import Signals
from .hold import responses
from .rig import Rig


@dataclass(frozen=True, slots=True, eq=False)
class Courses:
    """N drives of one grid as deviations from trim.

    every, intervals K, course: what they share; start, end (m, K, N): each input at both ends of each interval;
    offsets (n, N): initial deviations of the states.
    """

    every: float
    intervals: int
    held: bool
    start: Array
    end: Array
    offsets: Array

    @property
    def width(self) -> int:
        """Number of drives N."""
        return int(self.start.shape[2])

    def padded(self, width: int) -> Courses:
        """The same drives and copies of the last one up to `width` columns."""
        pick = np.minimum(np.arange(width), self.width - 1)
        return Courses(
            self.every, self.intervals, self.held, self.start[:, :, pick], self.end[:, :, pick], self.offsets[:, pick]
        )

    def part(self, first: int, last: int) -> Courses:
        """Columns `first` to `last` (excluded)."""
        pick = slice(first, last)
        return Courses(
            self.every, self.intervals, self.held, self.start[:, :, pick], self.end[:, :, pick], self.offsets[:, pick]
        )


def courses(drives: Sequence[Drive], inputs: Signals, states: Signals) -> Courses:
    """Stack `drives`; raises ValueError where they differ in every, intervals or course, or name foreign signals."""
    if not drives:
        raise ValueError("no drive to simulate")
    every, intervals, course = drives[0].every, drives[0].intervals, drives[0].course
    start = np.zeros((len(inputs), intervals, len(drives)))
    end, offsets = np.zeros_like(start), np.zeros((len(states), len(drives)))
    for column, drive in enumerate(drives):
        if (drive.every, drive.intervals, drive.course) != (every, intervals, course):
            raise ValueError("drives of one run must share every, number of intervals and course")
        for name, values in zip(drive.inputs, drive.values.T, strict=True):
            row = inputs.index(name)
            end[row, :, column] = values
            start[row, :, column] = values if course == "held" else np.concatenate(([0.0], values[:-1]))
        for name, value in drive.offsets.items():
            offsets[states.index(name), column] = value
    return Courses(every, intervals, course == "held", start, end, offsets)


def grid(every: float, intervals: int, nodes: int) -> Array:
    """Instants of all nodes since the drive began, (K, S + 1); the last of a row is the first of the next."""
    ends = every * np.arange(intervals + 1)
    inner = every * np.arange(nodes) / nodes
    times = np.empty((intervals, nodes + 1))
    times[:, :-1] = ends[:-1, np.newaxis] + inner
    times[:, -1] = ends[1:]
    return times


def model_offsets(rig: Rig, drives: Courses) -> Array:
    """Initial deviations of the local model's states (n, N): of those that are the plant's, by name."""
    found = np.zeros((len(rig.model.states), drives.width))
    for row, name in enumerate(rig.model.states.names):
        if name in rig.plant.states:
            found[row] = drives.offsets[rig.plant.states.index(name)]
    return found


def _for_model(rig: Rig, drives: Courses) -> Courses:
    """The inputs that the local model has, in its order."""
    if rig.model.inputs.names == rig.plant.inputs.names:
        return drives
    pick = [rig.plant.inputs.index(name) for name in rig.model.inputs.names]
    return replace(drives, start=drives.start[pick], end=drives.end[pick])


def linear(rig: Rig, drives: Courses, nodes: int) -> Array:
    """The local model's states at all nodes, (n, K, S + 1, N): exact, as deviations from the trimmed course."""
    drives = _for_model(rig, drives)
    A, B = rig.model.A, rig.model.B
    out = np.empty((A.shape[0], drives.intervals, nodes + 1, drives.width))
    if rig.plant.step is not None:
        _stepped(rig, drives, nodes, out)
        return out
    times = drives.every * np.arange(1, nodes + 1) / nodes
    P, Q, R = responses(A, B, times)
    x = model_offsets(rig, drives)
    slopes = None if drives.held else (drives.end - drives.start) / drives.every
    for k in range(drives.intervals):
        out[:, k, 0] = x
        after = P @ x + Q @ drives.start[:, k]
        if slopes is not None:
            after += R @ slopes[:, k]
        out[:, k, 1:] = after.transpose(1, 0, 2)
        x = np.ascontiguousarray(after[-1])
    return out


def _stepped(rig: Rig, drives: Courses, nodes: int, out: Array) -> None:
    A, B, x = rig.model.A, rig.model.B, model_offsets(rig, drives)
    for k in range(drives.intervals):
        out[:, k, 0] = x
        for j in range(nodes):
            x = A @ x + B @ input_at(drives, k, j / nodes)
            out[:, k, j + 1] = x


def input_at(drives: Courses, k: int, share: float) -> Array:
    """Inputs in interval k after `share` of it, (m, N), as deviations."""
    if drives.held:
        return drives.start[:, k]
    result: Array = drives.start[:, k] + share * (drives.end[:, k] - drives.start[:, k])
    return result


def linear_signals(rig: Rig, drives: Courses, states: Array, names: Sequence[str]) -> Array:
    """The local model's states and outputs called `names` at all nodes, (len(names), K, S + 1, N).

    NaN for what the model does not have.
    """
    nodes, drives = states.shape[2] - 1, _for_model(rig, drives)
    out = np.empty((len(names), *states.shape[1:]))
    model = rig.model
    for row, name in enumerate(names):
        if name in model.states:
            out[row] = states[model.states.index(name)]
            continue
        if name not in model.outputs:
            out[row] = np.nan
            continue
        index = model.outputs.index(name)
        out[row] = np.tensordot(model.C[index], states, axes=1)
        for j in range(nodes + 1):
            share = j / nodes
            inputs = drives.start if drives.held else drives.start + share * (drives.end - drives.start)
            out[row, :, j] += np.tensordot(model.D[index], inputs, axes=1)
    return out


def settled_ends(rig: Rig, values: Array) -> Array:
    """For a difference equation, give the last node of each interval the values of the next instant.

    Its outputs are read at instants only, with the input of that instant: there is no left side of a jump to see.
    """
    if rig.plant.step is not None:
        values[:, :-1, -1] = values[:, 1:, 0]
    return values
