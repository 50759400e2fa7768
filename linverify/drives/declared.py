"""The declared set of drives at one operating point, in numbers.

What the spec declares about trim (amplitudes, rates, offsets) is cut here to what the envelope leaves at this point,
and amplitudes given by their effect (`until`) are turned into numbers with the local model. Everything that draws,
seeds, shrinks or replays a drive asks `Limits` what is allowed.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

import numpy as np

from ..core.case import Course, DriveSet, Interval
from ..core.delivered import Delays
from ..core.drive import Drive
from ..core.model import Array, LocalModel, OperatingPoint, frozen_array
from ..core.shown import Shown
from ..numerics.worst import NO_DELAYS, reaches

# A value read back from a file, or a sum of many small changes, may miss a limit by rounding.
SLACK = 1e-9
PLAIN = Shown()


@dataclass(frozen=True, slots=True, eq=False)
class Limits:
    """What a drive of the declared set may do at this point, as deviations from trim.

    low, high (m,): smallest and largest deviation of each driven input, low <= 0 <= high; change (m,): largest change
    from one instant to the next, infinite where no rate is declared; offset_low, offset_high: of each state in
    `offsets`; told: one line for each amplitude that was cut to the envelope or found from `until`; shown: the units
    that inputs and states are told in, shown_time: that of times.
    """

    every: float
    intervals: int
    course: Course
    inputs: tuple[str, ...]
    low: Array
    high: Array
    change: Array
    offsets: tuple[str, ...] = ()
    offset_low: Array = field(default_factory=lambda: frozen_array(()))
    offset_high: Array = field(default_factory=lambda: frozen_array(()))
    told: tuple[str, ...] = ()
    shown: Mapping[str, Shown] = field(default_factory=lambda: MappingProxyType({}))
    shown_time: Shown = PLAIN

    def drive(self, values: Array, offsets: Mapping[str, float] | None = None) -> Drive:
        """A drive of this set from wanted values (K, m): cut to amplitude and, instant by instant, to the rate."""
        return Drive(self.every, self.inputs, self.kept(values), self.course, dict(offsets or {}))

    def kept(self, values: Array) -> Array:
        """Wanted values (K, m) cut to amplitude; each input then follows them as fast as its rate allows."""
        wanted: Array = np.clip(np.asarray(values, dtype=np.float64), self.low, self.high)
        if not np.any(np.isfinite(self.change)):
            return wanted
        kept: Array = np.empty_like(wanted)
        before = np.zeros(len(self.inputs))
        for k, row in enumerate(wanted):
            before = np.clip(row, before - self.change, before + self.change)
            kept[k] = before
        return kept

    def sized(self, shape: Array, column: int) -> Array:
        """A shape within [-1, 1] as deviations of one input: +1 is its highest, -1 its lowest."""
        return np.asarray(np.where(shape >= 0.0, shape * self.high[column], -shape * self.low[column]))

    def turned(self, share: float, column: int) -> float:
        """A share of the amplitude, turned to the side where a one-sided input can move at all."""
        if (share < 0.0 and self.low[column] == 0.0) or (share > 0.0 and self.high[column] == 0.0):
            return -share
        return share

    def offset(self, column: int, share: float) -> float:
        """An offset from a share within [-1, 1] of what is allowed to that side."""
        side = self.offset_high[column] if share >= 0.0 else -self.offset_low[column]
        return float(share * side)

    def problems(self, drive: Drive) -> tuple[str, ...]:
        """Why a drive does not belong to the declared set, a line each; empty where it does."""
        if drive.course != self.course or drive.intervals != self.intervals or not _same(drive.every, self.every):
            time = self.shown_time
            made = f"every {time.told_size(drive.every)} over {drive.intervals} intervals, course {drive.course}"
            due = f"every {time.told_size(self.every)} over {self.intervals} intervals, course {self.course}"
            return (f"it changes {made}; the spec declares {due}",)
        found = [f"{name} is not driven in this set" for name in drive.inputs if name not in self.inputs]
        found += [f"{name} has no offset in this set" for name in drive.offsets if name not in self.offsets]
        return tuple(found) if found else (*self._input_problems(drive), *self._offset_problems(drive))

    def _input_problems(self, drive: Drive) -> list[str]:
        found = []
        for position, name in enumerate(drive.inputs):
            at = self.inputs.index(name)
            course = drive.values[:, position]
            slack = SLACK * max(self.high[at], -self.low[at])
            low, high = float(np.min(course)), float(np.max(course))
            told = self.shown.get(name, PLAIN)
            if low < self.low[at] - slack or high > self.high[at] + slack:
                found.append(
                    f"{name} goes from {told.told_range(low, high)} about trim; "
                    f"the set allows {told.told_range(float(self.low[at]), float(self.high[at]))}"
                )
            change = float(np.max(np.abs(np.diff(course, prepend=0.0))))
            if change > self.change[at] + slack:
                found.append(
                    f"{name} changes by {told.told_size(change)} from one instant to the next; "
                    f"the rate allows {told.told_size(self.change[at])}"
                )
        return found

    def _offset_problems(self, drive: Drive) -> list[str]:
        found = []
        for name, value in drive.offsets.items():
            at = self.offsets.index(name)
            low, high = float(self.offset_low[at]), float(self.offset_high[at])
            slack = SLACK * max(high, -low)
            if not low - slack <= value <= high + slack:
                told = self.shown.get(name, PLAIN)
                room = f"the set allows {told.told_range(low, high)}"
                found.append(f"{name} starts {told.told_change(value)} off trim; {room}")
        return found

    def contains(self, drive: Drive) -> bool:
        """True where the drive belongs to the declared set."""
        return not self.problems(drive)


def _same(first: float, second: float) -> bool:
    return abs(first - second) <= SLACK * max(abs(first), abs(second))


def declared(
    drives: DriveSet,
    point: OperatingPoint,
    model: LocalModel,
    envelope: Mapping[str, Interval],
    rate_limits: Mapping[str, float],
    delays: Delays = NO_DELAYS,
) -> Limits:
    """The declared set at this operating point.

    An amplitude with `until: (signal, size)` becomes size / G, where G is the largest |deviation| of that signal of
    the local model at any time of the horizon under this input alone, within +-1 and without its rate limit (the L1
    norm of the response). A rate that the set does not give comes from the envelope's `rate_limits`.
    """
    inputs = tuple(name for name in point.inputs.names if name in drives.amplitude)
    told: list[str] = []
    ranges = [_input_range(drives, name, model, point, envelope, delays, told) for name in inputs]
    states = tuple(name for name in point.states.names if drives.offsets.get(name, 0.0) > 0.0)
    offsets = [
        _cut(drives, name, -drives.offsets[name], drives.offsets[name], point, envelope, told, "offset")
        for name in states
    ]
    rates = [drives.rate.get(name, rate_limits.get(name, np.inf)) for name in inputs]
    return Limits(
        drives.every, drives.intervals, drives.course, inputs,
        frozen_array([low for low, _ in ranges]), frozen_array([high for _, high in ranges]),
        frozen_array([rate * drives.every for rate in rates]), states,
        frozen_array([low for low, _ in offsets]), frozen_array([high for _, high in offsets]), tuple(told),
        MappingProxyType({name: _shown(drives, name, point) for name in (*inputs, *states)}),
        drives.shown_time or Shown(),
    )  # fmt: skip


def _input_range(
    drives: DriveSet,
    name: str,
    model: LocalModel,
    point: OperatingPoint,
    envelope: Mapping[str, Interval],
    delays: Delays,
    told: list[str],
) -> tuple[float, float]:
    amplitude = drives.amplitude[name]
    low, high = amplitude.low, amplitude.high
    if amplitude.until is not None:
        signal, size = amplitude.until
        inputs, _ = reaches(model, (signal,), drives.every, drives.intervals, drives.course, delays)
        gain = float(inputs[0, model.inputs.index(name)])
        if not gain > 0.0:
            reach = _shown(drives, signal, point).told_size(size)
            told.append(f"{name} does not move {signal} in the local model: its amplitude `until` {reach} is zero")
            return 0.0, 0.0
        low, high = -size / gain, size / gain
        told.append(
            f"amplitude of {name}: {_shown(drives, name, point).told_size(high)}, at which the largest possible "
            f"deviation of {signal} in the local model over the horizon under {name} alone is "
            f"{_shown(drives, signal, point).told_size(size)}"
        )
    return _cut(drives, name, low, high, point, envelope, told, "amplitude")


def _shown(drives: DriveSet, name: str, point: OperatingPoint) -> Shown:
    """The unit that a signal's deviations are told in."""
    if name in drives.shown:
        return drives.shown[name]
    kinds = (point.states, point.inputs, point.outputs)
    return Shown(next((signals.unit(name) for signals in kinds if name in signals), ""))


def _cut(
    drives: DriveSet,
    name: str,
    low: float,
    high: float,
    point: OperatingPoint,
    envelope: Mapping[str, Interval],
    told: list[str],
    what: str,
) -> tuple[float, float]:
    """The range about trim that the envelope leaves; a trim outside the envelope leaves nothing to that side."""
    room = envelope.get(name, Interval())
    here = point.value(name)
    kept_low, kept_high = max(low, min(room.low - here, 0.0)), min(high, max(room.high - here, 0.0))
    if (kept_low, kept_high) != (low, high):
        shown = _shown(drives, name, point)
        told.append(f"{what} of {name} cut to the envelope: {shown.told_range(kept_low, kept_high)}")
    return kept_low, kept_high
