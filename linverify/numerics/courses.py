"""Drives as arrays, the trimmed course they start from, and the local model's exact answer to them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ..core.drive import Drive
from ..core.model import Array, LocalModel
from .hold import responses
from .instants import Instants
from .pieces import SNAP, Pieces, cut
from .rig import Fidelity, Rig


@dataclass(frozen=True, slots=True, eq=False)
class Courses:
    """N drives of one grid as deviations from trim, piece by piece.

    pieces, intervals K: what they share; start, end (m, K P, N): each input at both ends of each piece; offsets (n, N):
    initial deviations of the states.
    """

    pieces: Pieces
    intervals: int
    held: bool
    start: Array
    end: Array
    offsets: Array

    @property
    def width(self) -> int:
        """Number of drives N."""
        return int(self.start.shape[2])

    @property
    def count(self) -> int:
        """Number of pieces K P."""
        return int(self.start.shape[1])

    def padded(self, width: int) -> Courses:
        """The same drives and copies of the last one up to `width` columns."""
        return self._picked(np.minimum(np.arange(width), self.width - 1))

    def part(self, first: int, last: int) -> Courses:
        """Columns `first` to `last` (excluded)."""
        return self._picked(slice(first, last))

    def _picked(self, pick: slice | NDArray[np.intp]) -> Courses:
        return replace(self, start=self.start[:, :, pick], end=self.end[:, :, pick], offsets=self.offsets[:, pick])


def courses(rig: Rig, drives: Sequence[Drive], fidelity: Fidelity) -> Courses:
    """Stack `drives`, each input after its dead time.

    Raises ValueError where they differ in every, intervals or course, name foreign signals or do not fit the rig.
    """
    if not drives:
        raise ValueError("no drive to simulate")
    inputs, states = rig.plant.inputs, rig.plant.states
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
    pieces = cut(rig, every, fidelity)
    if pieces.count > 1 or any(rig.delays.inputs.values()):
        late = np.array([rig.delays.inputs.get(name, 0.0) for name in inputs.names])
        start, end = _after(pieces, late, start, end)
    return Courses(pieces, intervals, course == "held", start, end, offsets)


def _after(pieces: Pieces, late: Array, start: Array, end: Array) -> tuple[Array, Array]:
    """Both ends of each piece, (m, K P, N), of inputs that arrive `late` (m,); at trim before they do."""
    begins = pieces.begins(start.shape[1])
    first = np.zeros((len(start), len(begins) - 1, start.shape[2]))
    last = np.zeros_like(first)
    for row, delay in enumerate(late):
        ends = (begins - delay) / pieces.every  # in intervals
        # the middle of a piece tells its interval: its ends may miss an instant by rounding
        source = np.floor(0.5 * (ends[:-1] + ends[1:])).astype(np.intp)
        arrived = np.flatnonzero(source >= 0)
        here, there = start[row, source[arrived]], end[row, source[arrived]]
        for side, shares in ((first, ends[:-1] - source), (last, ends[1:] - source)):
            share = shares[arrived, np.newaxis]
            share = np.where(share < SNAP, 0.0, np.where(share > 1.0 - SNAP, 1.0, share))
            side[row, arrived] = np.where(share < 1.0, here + share * (there - here), there)
    return first, last


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


def linear(rig: Rig, drives: Courses) -> Array:
    """The local model's states at all nodes, (n, K P, S + 1, N): exact, as deviations from the trimmed course.

    Between the instants of a sampled model, which says nothing there, straight lines stand for them.
    """
    pieces, drives = drives.pieces, _for_model(rig, drives)
    A, B = rig.model.A, rig.model.B
    if rig.model.step is not None:
        steps = pieces.nodes // pieces.stride
        return _filled(_stepped(rig, drives, steps), pieces.stride)
    out = np.empty((A.shape[0], drives.count, pieces.nodes + 1, drives.width))
    maps = [responses(A, B, length * np.arange(1, pieces.nodes + 1) / pieces.nodes) for length in pieces.lengths]
    x, begins = model_offsets(rig, drives), pieces.begins(drives.intervals)
    for k in range(drives.count):
        x = _jumped(rig.model, float(begins[k]), x, drives.start[:, k])
        P, Q, R = maps[k % pieces.count]
        out[:, k, 0] = x
        after = P @ x + Q @ drives.start[:, k]
        if not drives.held:
            after += R @ ((drives.end[:, k] - drives.start[:, k]) / pieces.length(k))
        out[:, k, 1:] = after.transpose(1, 0, 2)
        x = np.ascontiguousarray(after[-1])
    if pieces.sampled:
        out[:, -1, -1] = _jumped(rig.model, float(begins[-1]), x, drives.end[:, -1])
    return out


def _stepped(rig: Rig, drives: Courses, steps: int) -> Array:
    A, B, x = rig.model.A, rig.model.B, model_offsets(rig, drives)
    out, begins = np.empty((A.shape[0], drives.count, steps + 1, drives.width)), drives.pieces.begins(drives.intervals)
    for k in range(drives.count):
        x = _jumped(rig.model, float(begins[k]), x, drives.start[:, k])
        out[:, k, 0] = x
        for j in range(steps):
            x = A @ x + B @ input_at(drives, k, j / steps)
            out[:, k, j + 1] = x
    # only right-hand values mean anything in samples, the last one too
    out[:, -1, -1] = _jumped(rig.model, float(begins[-1]), x, drives.end[:, -1])
    return out


def _jumped(model: LocalModel, time: float, x: Array, u: Array) -> Array:
    """States (n, N) after the jumps that are due at `time`; u (m, N): the inputs just after it."""
    for jump in model.jumps:
        if Instants(jump.period, jump.phase).due(time):
            x = jump.A @ x + jump.B @ u
    return x


def _filled(states: Array, stride: int) -> Array:
    """Nodes in straight lines between instants; at instants the very values."""
    if stride == 1:
        return states
    last = states.shape[2] - 1
    nodes = np.arange(last * stride + 1)
    before = nodes // stride
    share = (nodes % stride / stride)[:, np.newaxis]
    return np.asarray(states[:, :, before] * (1.0 - share) + states[:, :, np.minimum(before + 1, last)] * share)


def input_at(drives: Courses, k: int, share: float) -> Array:
    """Inputs in piece k after `share` of it, (m, N), as deviations."""
    if drives.held:
        return drives.start[:, k]
    result: Array = drives.start[:, k] + share * (drives.end[:, k] - drives.start[:, k])
    return result


def linear_signals(rig: Rig, drives: Courses, states: Array, names: Sequence[str]) -> Array:
    """The local model's states and outputs called `names` at all nodes, (len(names), K P, S + 1, N).

    NaN for what the model does not have.
    """
    nodes, drives = states.shape[2] - 1, _for_model(rig, drives)
    out = np.empty((len(names), *states.shape[1:]))
    model = rig.model
    for row, name in enumerate(names):
        if name in model.outputs:  # before the state of that name: it is what the model says of the signal
            index = model.outputs.index(name)
            out[row], feed = np.tensordot(model.C[index], states, axes=1), model.D[index]
        elif name in model.states:
            out[row] = states[model.states.index(name)]
            feed = None if model.ahead is None else model.ahead[model.states.index(name)]
        else:
            out[row], feed = np.nan, None
        if feed is None:
            continue
        for j in range(nodes + 1):
            share = j / nodes
            inputs = drives.start if drives.held else drives.start + share * (drives.end - drives.start)
            out[row, :, j] += np.tensordot(feed, inputs, axes=1)
    return out
