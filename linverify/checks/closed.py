"""A study of the plant and its local model with loops closed and actuators in series, as drives meet them.

A closed plant is a plant and a closed local model a local model, so that whatever compares the two needs to know
nothing of loops. Ids, seeds and file names stay those of the case that the loops belong to.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from ..core.bound import BoundPlant
from ..core.case import Case, DriveSet
from ..core.loop import Actuator, Loop
from ..core.model import Array, LocalModel, OperatingPoint, frozen_array
from ..core.signals import Signals
from ..core.units import told
from ..numerics.allpass import ORDER, good_up_to
from ..numerics.closed_model import closed_model
from ..numerics.closed_plant import Closed, closed_plant
from ..numerics.instants import Update, related
from ..numerics.pieces import whole_steps
from ..numerics.reduce import restricted
from ..numerics.trim import TrimResult
from ..numerics.wiring import Wiring, measured_by, ordered
from .study import Study

TRACKS = 0.1  # of the shortest time that matters: the lag of a rate limit on an actuator that has no lag of its own


@dataclass(frozen=True, slots=True, eq=False)
class Closing:
    """What is closed for one purpose.

    loops: all of them, outer before inner; given: names of those that the verified local model has inside already;
    driven: plant inputs that drives move; points: measured signals of `at` whose set points drives move; every: time
    between instants of the drives, None where there are none.
    """

    loops: tuple[Loop, ...]
    given: tuple[str, ...] = ()
    driven: tuple[str, ...] = ()
    at: str = ""
    points: tuple[str, ...] = ()
    every: float | None = None


def nested(case: Case, names: Iterable[str]) -> tuple[Loop, ...]:
    """The loops called `names` and those closed inside them, outer before inner.

    Raises KeyError for a loop that the case does not have, ValueError where loops move each other in a ring.
    """
    found: dict[str, Loop] = {}
    waiting = list(names)
    while waiting:
        name = waiting.pop(0)
        if name not in found:
            found[name] = case.loops[name]
            waiting += [*found[name].within, *(moved.loop for moved in found[name].moves if moved.loop)]
    return ordered(loop for loop in case.loops.values() if loop.name in found)


def for_drives(case: Case, drives: DriveSet) -> Closing:
    """What is closed while `drives` run: their loop, and the loops that are closed inside the local model."""
    names = [*([drives.loop] if drives.loop else []), *case.local.closed]
    loops = nested(case, names)
    given: tuple[str, ...] = ()
    if case.local.delivered is not None:
        given = tuple(loop.name for loop in nested(case, case.local.closed))
    points: tuple[str, ...] = ()
    if drives.loop and drives.at == "set_point":
        points = tuple(name for name in case.loops[drives.loop].measures if name in drives.amplitude)
    driven = tuple(name for name in drives.amplitude if name in case.plant.inputs)
    return Closing(loops, given, driven, drives.loop, points, drives.every)


def of_model(case: Case) -> Closing:
    """What is closed inside the verified local model (`local_models.with`)."""
    loops = nested(case, case.local.closed)
    given = tuple(loop.name for loop in loops) if case.local.delivered is not None else ()
    return Closing(loops, given)


def changes(case: Case, closing: Closing) -> bool:
    """Whether anything is closed, or stands in series with what moves."""
    return bool(closing.loops) or any(name in case.actuators for name in closing.driven)


class ClosedStudy(Study):
    """`bare` with `closing` around it."""

    def __init__(self, bare: Study, closing: Closing) -> None:
        self.bare, self.closing = bare, closing
        super().__init__(bare.case, bare.options)
        self._models: dict[int, tuple[LocalModel, LocalModel]] = {}
        if not self.unmet("model"):
            # a rate in the envelope is one of an input, and no limit of the set point of a signal
            rates = {name: rate for name, rate in bare.case.rate_limits.items() if name in bare.case.plant.inputs}
            self.case = replace(bare.case, plant=self._closed.plant, nominal=self._nominal(), rate_limits=rates)

    @property
    def updates(self) -> tuple[Update, ...]:
        """What sampled controllers do to the closed plant's states."""
        return self._closed.updates

    @property
    def moved(self) -> tuple[str, ...]:
        """Plant inputs that a loop moves."""
        return self._wiring(self.bare.case.plant.input_signals.names, True, ()).moved

    @cached_property
    def moved_by_time(self) -> str:
        """As of the bare study."""
        return self.bare.moved_by_time

    @cached_property
    def bound(self) -> BoundPlant:
        """The closed plant behind its border; it answers batches where the plant inside does."""
        inner = self.bare.bound
        bound = BoundPlant(self._closed.plant, self.bare.case.parameters)
        if not inner.batched:
            bound.why_single = inner.why_single
            return bound
        bound.detect(self.case.moment, *self._closed_probes())
        bound.last_error = None
        return bound

    def trim(self) -> TrimResult:
        """The bare trim with everything that is added at rest."""
        return replace(self.bare.trim(), point=self.point())

    def point(self) -> OperatingPoint:
        """The trimmed point with everything that is added at rest."""
        return self._closed.point

    def model(self) -> LocalModel:
        """The verified local model with the loops closed that it does not have inside."""
        return self.closed_around(self.bare.model(), self.closing.given)

    def derived(self) -> LocalModel:
        """The full derived model with all loops closed."""
        return self.closed_around(self.bare.derived(), ())

    def reference(self) -> LocalModel:
        """What an exact delivery would be, with all loops closed."""
        if not self.closing.given:
            return self.model()
        return self.closed_around(self.bare.reference(), self.closing.given)

    def about(self) -> LocalModel | None:
        """The derived slopes with all loops closed, even where the plant has corners at the point."""
        bare = self.bare.about()
        return None if bare is None else self.closed_around(bare, ())

    def unmet(self, need: str) -> str:
        """As of the bare study, and where the loop cannot be closed at all."""
        reasons = self.reasons
        if need == "reference" and not self.closing.given:
            need = "model"  # loops are closed around what was derived, and an exact delivery is that
        return self.bare.unmet(need) or (reasons[0] if reasons else "")

    @cached_property
    def reasons(self) -> tuple[str, ...]:
        """Why these loops cannot be closed in time around this plant and its local model, a line each."""
        if self.bare.unmet("model"):
            return ()
        found = [*_clocks(self.bare, self.closing, self._actuators), *_names(self.bare, self.closing), *self._ranges()]
        if not found:
            try:
                _ = self._closed
                self.model()
            except ValueError as error:
                found.append(str(error))
        return tuple(found)

    def told(self) -> list[str]:
        """What a reviewer must know about how the loops are closed, a line each."""
        case, found = self.bare.case, []
        unit = case.plant.time_unit
        for name, actuator in self._actuators.items():
            if case.actuators[name].lag != actuator.lag:
                within = name in self._moved_by(self.closing.given)
                where = "the plant alone" if within else "both models"
                found.append(
                    f"the rate limit of {name} acts behind a lag of {actuator.lag:.3g} {unit} in {where}, "
                    f"since its actuator has none"
                )
        for loop in self.closing.loops:
            late = largest_delay(case, loop)
            if loop.sample is None and late > 0.0:
                limit = told(float(f"{good_up_to(late):.3g}"), f"rad/{unit}")
                found.append(
                    f"the dead time of loop {loop.name}, {late:.6g} {unit}, is an all-pass chain of order {ORDER} in "
                    f"both models, good to 1 % up to {limit}"
                )
        return found

    def _ranges(self) -> list[str]:
        return out_of_reach(self.bare.case, self.bare.point(), self._actuators)

    @cached_property
    def _actuators(self) -> dict[str, Actuator]:
        """The actuators of what is driven or moved; one with a rate limit and no lag gets a short one."""
        case = self.bare.case
        moves = {moved.name for loop in self.closing.loops for moved in loop.moves if not moved.loop}
        names = [name for name in case.plant.inputs if name in moves or name in self.closing.driven]
        found = {name: case.actuators[name] for name in names if name in case.actuators}
        if case.plant.step is not None:
            return found
        return {
            name: replace(one, lag=self._shortest()) if np.isfinite(one.rate) and not one.lag > 0.0 else one
            for name, one in found.items()
        }

    def _shortest(self) -> float:
        """A tenth of the shortest time among the plant's own, the samples' and that between instants."""
        times = [loop.sample for loop in self.closing.loops if loop.sample is not None]
        times += [self.closing.every] if self.closing.every is not None else []
        model = self.bare.about()
        if model is not None:
            fastest = float(np.abs(np.linalg.eigvals(model.A)).max(initial=0.0))
            times += [1.0 / fastest] if fastest > 0.0 else []
        return TRACKS * min(times, default=1.0)

    def _wiring(self, inputs: tuple[str, ...], limits: bool, without: Sequence[str]) -> Wiring:
        """The wiring of the plant (limits), or of a local model that has the loops `without` inside already."""
        case, point = self.bare.case, self.bare.point()
        loops = tuple(loop for loop in self.closing.loops if loop.name not in without)
        asked = self.closing.points if self.closing.at not in without else ()
        points = tuple((self.closing.at, name) for name in asked)
        trims = np.array([point.value(name) if limits else 0.0 for name in inputs])
        references = np.array([point.value(name) if limits else 0.0 for _, name in points])
        moves = {moved.name for loop in loops for moved in loop.moves if not moved.loop} | set(self.closing.driven)
        moves -= self._moved_by(without)  # behind an actuator that is inside already
        actuators = {name: one for name, one in self._actuators.items() if name in moves}
        step = case.plant.step if limits else self._step
        return Wiring(
            inputs, trims, loops, actuators, measured_by(loops), points, references, case.delays, step, limits
        )

    @property
    def _step(self) -> float | None:
        return self.bare.model().step

    @cached_property
    def _closed(self) -> Closed:
        bare = self.bare
        about = bare.about()
        wiring = self._wiring(bare.case.plant.input_signals.names, True, ())
        if about is None and not self.closing.given:
            about = bare.model()
        return closed_plant(bare.bound, bare.point(), wiring, about)

    def closed_around(self, model: LocalModel, without: Sequence[str]) -> LocalModel:
        """`model` with the loops but those `without` closed; the same model comes back as the same object."""
        if id(model) not in self._models:
            inner = self._named_as_driven(model, without)
            wiring = self._wiring(inner.inputs.names, False, without)
            if wiring.loops or wiring.actuators:
                whole = closed_model(inner, replace(wiring, step=model.step), self._closed.point)
            else:
                whole = replace(inner, at=self._closed.point)
            self._models[id(model)] = (model, self._driven_only(whole) if without else whole)
        return self._models[id(model)][1]

    def _named_as_driven(self, model: LocalModel, without: Sequence[str]) -> LocalModel:
        """Set points of a loop inside the model, where drives move them, under the names that drives call them by."""
        if self.closing.at not in without:
            return model
        called = {f"{self.closing.at}.set_point.{name}": name for name in self.closing.points}
        names = tuple(called.get(name, name) for name in model.inputs.names)
        return replace(model, inputs=Signals(names, model.inputs.units))

    def _driven_only(self, model: LocalModel) -> LocalModel:
        """The inputs that the closed plant has: set points of loops inside the model rest unless drives move them."""
        known = self._closed.plant.inputs
        kept = [name for name in model.inputs.names if name in known]
        if len(kept) == len(model.inputs):
            return model
        columns = [model.inputs.index(name) for name in kept]
        jumps = tuple(replace(jump, B=frozen_array(jump.B[:, columns])) for jump in model.jumps)
        ahead = None if model.ahead is None else frozen_array(model.ahead[:, columns])
        return replace(restricted(model, kept, model.outputs.names), jumps=jumps, ahead=ahead)

    def _moved_by(self, names: Sequence[str]) -> set[str]:
        """Plant inputs that the loops called `names` move."""
        loops = [loop for loop in self.closing.loops if loop.name in names]
        return {moved.name for loop in loops for moved in loop.moves if not moved.loop}

    def _nominal(self) -> dict[str, float]:
        """Nobody says how far a controller's state moves: the local model does, where it is asked."""
        bare = self.bare.case
        names = self._closed.point.states.names[len(bare.plant.states) :]
        found = {**bare.nominal, **dict.fromkeys(names, np.inf)}
        for name in names:
            if name.endswith(".lag"):
                found[name] = bare.nominal.get(name.removesuffix(".lag"), np.inf)
        return found

    def _closed_probes(self) -> tuple[Array, Array]:
        x, u = self.bare.probes()
        point, bare = self._closed.point, self.bare.point()
        rests = np.tile(point.x[len(bare.x) :, np.newaxis], (1, x.shape[1]))
        references = np.tile(point.u[len(bare.u) :, np.newaxis], (1, x.shape[1]))
        return np.concatenate([x, rests]), np.concatenate([u, references])


def out_of_reach(case: Case, point: OperatingPoint, names: Iterable[str]) -> list[str]:
    """What to tell of the named inputs whose actuator cannot bring them to their trimmed value."""
    found = []
    for name in names:
        actuator = case.actuators.get(name, Actuator())
        if not actuator.low <= point.value(name) <= actuator.high:
            unit = case.plant.unit(name)
            low, high, at = (told(value, unit) for value in (actuator.low, actuator.high, point.value(name)))
            wrong = f"the trimmed value of {name}, {at}, lies outside the range of its actuator"
            found.append(f"{wrong}, {low} to {high}")
    return found


def largest_delay(case: Case, loop: Loop) -> float:
    """The longest of the dead times that a chain of states stands for in this loop, in time units."""
    moves = [case.delays.inputs.get(moved.name, 0.0) for moved in loop.moves if not moved.loop]
    reads = [case.delays.outputs.get(name, 0.0) for name in loop.measures]
    return max(loop.delay + max(moves, default=0.0), max(reads, default=0.0))


def _clocks(study: Study, closing: Closing, actuators: Mapping[str, Actuator]) -> list[str]:
    """Sample times that do not go together."""
    plant, model, found = study.case.plant, study.model(), []
    unit, clock = plant.time_unit, plant.step if plant.step is not None else model.step
    whose = "the plant" if plant.step is not None else "the local model"
    for loop in closing.loops:
        inside = loop.name in closing.given and plant.step is None
        if inside and loop.sample is not None and model.step is not None and not related(loop.sample, model.step):
            found.append(
                f"loop {loop.name} inside it samples every {loop.sample:.6g} {unit}, the local model steps every "
                f"{model.step:.6g} {unit}: neither is a multiple of the other"
            )
        tick = None if inside else clock
        if loop.sample is None:
            if tick is not None:
                found.append(
                    f"loop {loop.name} is continuous, {whose} steps every {tick:.6g} {unit}: give it a `sample`"
                )
            continue
        sample = f"loop {loop.name} samples every {loop.sample:.6g} {unit}"
        if tick is not None and not whole_steps(loop.sample, tick):
            found.append(f"{sample}, {whose} steps every {tick:.6g} {unit}: no whole multiple")
        if closing.every is not None and not related(loop.sample, closing.every):
            found.append(
                f"{sample}, the drives change every {closing.every:.6g} {unit}: neither is a multiple of the other"
            )
    if plant.step is None and model.step is not None:
        around = [loop for loop in closing.loops if loop.name not in closing.given]
        if around and model.course == "straight":
            found.append("a local model sampled for straight inputs cannot take what a controller holds")
        within = {moved.name for loop in closing.loops if loop.name in closing.given for moved in loop.moves}
        lags = [name for name, one in actuators.items() if one.lag > 0.0 and name not in within]
        if lags:
            found.append(f"a sampled local model takes held inputs, which the lag of {lags[0]} does not give")
    return found


def _names(study: Study, closing: Closing) -> list[str]:
    """Signals that the verified local model does not have."""
    model, found = study.model(), []
    for loop in closing.loops:
        if loop.name in closing.given:
            continue
        for name in loop.measures:
            if name not in model.states and name not in model.outputs:
                found.append(f"the local model has no state or output {name}, which loop {loop.name} measures")
            elif model.anonymous and name not in model.outputs:
                found.append(
                    f"the local model's states are anonymous, and it has no output {name}, which loop "
                    f"{loop.name} measures"
                )
        for moved in loop.moves:
            if not moved.loop and moved.name not in model.inputs:
                found.append(f"the local model has no input {moved.name}, which loop {loop.name} moves")
            if moved.loop in closing.given and str(moved) not in model.inputs:
                found.append(f"the delivered model has no input {moved}, which loop {loop.name} moves")
    return found
