"""From a spec on disk to cases in numbers: read, import the plant, and bind names, units and counts.

Everything that can be known without calling the plant is judged here, and all mistakes are raised together.
"""

from __future__ import annotations

import math
import os
from collections.abc import Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from types import MappingProxyType
from typing import Literal

from linverify.core import units
from linverify.core.case import (
    NO_LOOPS,
    Band,
    Case,
    CheckAsk,
    DriveSet,
    Exits,
    Relative,
    Requirement,
    Setting,
    SlopeAsk,
    TrimAsk,
)
from linverify.core.errors import Place, Problem, SpecError
from linverify.core.loop import Loop
from linverify.core.mode import ModeAsk
from linverify.core.plant import Plant

from .actuators import bind_actuators, check_trimmed
from .bound_loops import BoundLoops, LoopBinder
from .closed import around_loops, by_set, check_bands, check_closed, inside, known_loops, moved_by_set
from .envelopes import bind_envelope, nominal_sizes
from .ground import Ground, whole_ratio
from .layout import Cell, Point, Spec, always_checked, matches
from .local_models import Asked, LocalModels, bind_delays, bind_wraps
from .modes import bind_modes, place_of_modes
from .motions import bind_band, bind_drives
from .plants import Loaded, load_plant
from .read import read
from .trims import bind_accuracy, bind_parameters, bind_trim, told_middles
from .written import limits_shown, signals_shown


def load(path: Path, root: Path, *, delivered: bool = True) -> tuple[Case, ...]:
    """Read the spec at `path` and bind it to its plant: one Case a cell of every operating point, in fixed order.

    root: the folder that ids count from, and the last place where `package.module` is looked for.
    delivered: False where files of models are not to be read, as if all were derived: they may not be there yet.
    Raises SpecError with every mistake in the spec, its defaults.yaml, its tables and the import of its plant.
    """
    shown = Path(os.path.relpath(path.resolve(), root.resolve())).as_posix()
    spec, problems = read(path, shown, root)
    if spec is None:
        raise SpecError(problems)
    cases, more = bind(spec, root, complete=not problems, delivered=delivered)
    if problems or more:
        raise SpecError((*problems, *more))
    return cases


def bind(
    spec: Spec, root: Path, *, complete: bool = True, delivered: bool = True
) -> tuple[tuple[Case, ...], tuple[Problem, ...]]:
    """Cases and mistakes of a spec that has been read; the cases are for use only where there is no mistake.

    complete: False where parts of the spec could not be read, so that nothing is counted that may be among them.
    """
    loaded = load_plant(spec.plant, root)
    if isinstance(loaded, Problem):
        return (), (loaded,)
    ground = Ground(loaded.plant, complete, spec.plant.place)
    _check_clock(ground, spec)
    cases = _Binder(spec, ground, loaded, LocalModels(ground, spec, root, delivered), LoopBinder(ground, root)).cases()
    return cases, tuple(ground.problems)


def _check_clock(ground: Ground, spec: Spec) -> None:
    """A plant's time unit is a time, and a difference equation counts in seconds, since its step does."""
    unit, place = ground.plant.time_unit, spec.plant.place
    if unit != "s" and not units.convertible(unit, "s"):
        ground.report(
            place, f"the plant's time_unit {unit!r} is no unit of time", "one such as s, min or h is expected"
        )
    elif unit != "s" and ground.plant.step is not None:
        wrong = f"the plant is a difference equation with time_unit {unit!r}"
        ground.report(place, wrong, "its step counts seconds, so time_unit='s' is expected")


@dataclass(frozen=True, slots=True)
class _Own:
    """What one cell has for itself."""

    parameters: Mapping[str, float]
    trim: TrimAsk
    closings: BoundLoops


@dataclass(frozen=True, slots=True)
class _Shared:
    """What all cells of a point share."""

    sets: tuple[DriveSet, ...]
    bands: tuple[Band, ...]
    modes: tuple[ModeAsk, ...]
    closed: tuple[str, ...]


BESIDE = 20  # points before and behind one that a model may have been meant for


class _Binder:
    """What all cells of one spec share, bound once."""

    def __init__(self, spec: Spec, ground: Ground, loaded: Loaded, local: LocalModels, loops: LoopBinder) -> None:
        self.spec, self.ground, self.plant = spec, ground, loaded.plant
        self.local, self.loops = local, loops
        self.files = tuple(dict.fromkeys((*spec.files, *loaded.files)))
        self.envelope, self.rate_limits = bind_envelope(ground, spec.envelope)
        self.nominal, told = nominal_sizes(self.plant, self.envelope)
        self.settings = (*spec.settings, *told)
        self.slopes = SlopeAsk(spec.slope_gap, MappingProxyType(self._sides()))
        self.time = self._time()
        self.delays, self.wraps = bind_delays(ground, spec), bind_wraps(ground, spec)
        self.accuracy = bind_accuracy(ground, spec.accuracy, spec.accuracy_place or Place(spec.shown))
        self.accuracy_told = f"{units.shown(spec.accuracy)} {'a second' if self.plant.step is None else 'a step'}"
        self.limits_shown = limits_shown(ground, spec.envelope)
        self.actuators = bind_actuators(ground, spec.actuators, self.envelope)
        self.family = max(1, sum(not cell.skipped for point in spec.points for cell in point.cells))

    def cases(self) -> tuple[Case, ...]:
        """One case a cell, points and cells in the order of the spec."""
        found = tuple(case for point in self.spec.points for case in self._point(point))
        return tuple(
            case if case.local.delivered is None else replace(case, relatives=_relatives(found, index))
            for index, case in enumerate(found)
        )

    def _point(self, point: Point) -> tuple[Case, ...]:
        owned = [self._own(point, cell) for cell in point.cells]
        judged = [own for cell, own in zip(point.cells, owned, strict=True) if not cell.skipped]
        shared = self._shared(point, judged[0].closings.loops if judged else NO_LOOPS)
        return tuple(self._case(point, cell, own, shared) for cell, own in zip(point.cells, owned, strict=True))

    def _own(self, point: Point, cell: Cell) -> _Own:
        parameters = bind_parameters(self.ground, point, cell)
        trim = bind_trim(self.ground, point, cell, self.envelope, self.accuracy, self.accuracy_told)
        if not cell.skipped:
            check_trimmed(self.ground, trim.hold, (*point.hold, *cell.swept), self.actuators)
        return _Own(parameters, trim, self.loops.of(point.loops, cell, trim, parameters))

    def _shared(self, point: Point, loops: Mapping[str, Loop]) -> _Shared:
        """What all cells of a point share. loops: those of any cell that is judged; they differ in numbers only."""
        ground, names = self.ground, tuple(loop.name for loop in point.loops)
        all_bound = len(loops) == len(names)  # else mistakes are told, or nothing of this point is judged
        closed = known_loops(ground, self.spec.local.closed, names, "local_models: with")
        sets = tuple(bind_drives(ground, ask, self.rate_limits, self.limits_shown, loops) for ask in point.drives)
        moved = {drives.name: moved_by_set(loops, drives, closed) if all_bound else ground.inputs for drives in sets}
        bound = [bind_band(ground, ask, sets, moved) for ask in point.bands]
        bands = tuple(each for band in bound if band is not None for each in by_set(band, sets, moved, ground.inputs))
        if all_bound:
            check_closed(ground, point.drives, sets, loops, closed)
            check_bands(ground, sets, bands, loops, closed if self.spec.local.source else ())
        return _Shared(sets, bands, bind_modes(ground, point.modes), closed)

    def _case(self, point: Point, cell: Cell, own: _Own, shared: _Shared) -> Case:
        parameters, trim, sets, bands = own.parameters, own.trim, shared.sets, shared.bands
        around = around_loops(self.ground, own.closings.loops, shared.closed, self.actuators, self.delays)
        within = tuple(loop.name for loop in inside(own.closings.loops, shared.closed))
        asked = Asked(sets, bands, shared.modes, tuple(around.moved), within)
        local, told_local = self.local.of(cell, asked, around)
        told = (
            *told_local,
            *_told_rates(self.spec, point, self.ground.inputs),
            *told_middles(self.ground, trim, self.envelope),
        )
        return Case(
            spec=self.spec.shown,
            point=cell.name,
            title=self.spec.title,
            plant=self.plant,
            place=cell.place,
            trim=trim,
            parameters=parameters,
            envelope=self.envelope,
            nominal=self.nominal,
            checks=self._checks(point, cell, sets),
            time=self.time,
            rate_limits=self.rate_limits,
            slopes=self.slopes,
            drives=sets,
            bands=bands,
            exits=Exits(self.spec.complete, self.spec.mismatch),
            local=local,
            delays=self.delays,
            wraps=self.wraps,
            modes=shared.modes,
            loops=own.closings.loops,
            actuators=self.actuators,
            requirements=self._requirements(cell, self.spec.check_names(point)),
            settings=(*self.settings, *point.settings, *told, *_told_cell(self.plant, point, cell)),
            files=tuple(dict.fromkeys((*self.files, *self.local.files_of(local), *own.closings.files))),
            skipped=f"skipped by `skip: {cell.skipped.text}`, {cell.skipped.place}" if cell.skipped else "",
            shown=signals_shown(self.ground, point, cell, self.limits_shown),
            shown_limits=self.limits_shown,
            family=self.family,
        )

    def _checks(self, point: Point, cell: Cell, sets: tuple[DriveSet, ...]) -> tuple[CheckAsk, ...]:
        source, agree = self.spec.local.source, self.local.agree.place
        kinds = always_checked(delivered=source is not None and self.local.delivered)
        always = tuple(CheckAsk(kind, agree if kind == "agrees" else cell.place) for kind in kinds)
        follows = tuple(CheckAsk("follows", drives.place, drives.name) for drives in sets)
        place = place_of_modes(point.modes, point.modes_place)
        modes = (CheckAsk("modes", place),) if place and point.modes else ()
        margins = tuple(CheckAsk("margins", loop.place, loop=loop.name) for loop in point.loops)
        return (*always, *follows, *modes, *margins)

    def _requirements(self, cell: Cell, checks: tuple[str, ...]) -> tuple[Requirement, ...]:
        answered = []
        for ask in self.spec.requirements:
            named = tuple(
                name for name in checks if any(matches(word.text, f"{cell.name}.{name}") for word in ask.checks)
            )
            if named:
                answered.append(Requirement(ask.name, ask.text, ask.source, named))
        return tuple(answered)

    def _sides(self) -> dict[str, Literal["up", "down"]]:
        names = (*self.ground.states, *self.ground.inputs)
        what = "a state or input"
        return {
            side.name: side.value for side in self.spec.side if self.ground.known(side.name, side.place, names, what)
        }

    def _time(self) -> float | None:
        """The t of the trim, in the plant's unit; steps for a difference equation. None where it is not written."""
        if self.spec.time is None:
            return None
        time = self.ground.time(self.spec.time, "time")
        step = self.plant.step
        if step is None or time == 0.0 or math.isnan(time):
            return time
        count = whole_ratio(abs(time), step)
        if count is None:
            wrong = f"{self.spec.time.text!r} is no whole number of the plant's steps of {self.ground.told_time(step)}"
            self.ground.report(self.spec.time.place, wrong, "a multiple of the plant's step is expected")
            return 0.0
        return math.copysign(count, time)


def _relatives(cases: tuple[Case, ...], index: int) -> tuple[Relative, ...]:
    """The points beside one, in the order of the spec: for one of them its model may have been handed over."""
    beside = (*cases[max(index - BESIDE, 0) : index], *cases[index + 1 : index + 1 + BESIDE])
    return tuple(Relative(case.point, case.trim, case.parameters, case.loops) for case in beside if not case.skipped)


def _told_cell(plant: Plant, point: Point, cell: Cell) -> tuple[Setting, ...]:
    """What is swept in this cell, and the plant's own parameters where neither spec nor sweep says otherwise."""
    said = {entry.name for entry in (*point.parameters, *cell.swept)}
    own = [(name, *plant.parameter(name)) for name in plant.parameters if name not in said]
    swept = tuple(
        Setting(
            f"{'parameters' if entry.name in plant.parameters else 'hold'}.{entry.name}",
            entry.value.text,
            str(entry.value.place),
        )
        for entry in cell.swept
    )
    return (*swept, *(Setting(f"parameters.{name}", units.told(value, unit), "plant") for name, value, unit in own))


def _told_rates(spec: Spec, point: Point, inputs: tuple[str, ...]) -> tuple[Setting, ...]:
    """Rates of driven inputs that come from the envelope."""
    lines = [line for line in spec.envelope if line.name in inputs]
    limits = {line.name: line.value.rate for line in lines if line.value.rate is not None}
    told = []
    for drives in point.drives:
        word = f"drives.{drives.name}.rate" if drives.name else "drives.rate"
        own = {entry.name for entry in drives.rate}
        for name in (entry.name for entry in drives.amplitude if entry.name in limits and entry.name not in own):
            told.append(Setting(f"{word}.{name}", limits[name].text, str(limits[name].place)))
    return tuple(told)
