"""What loops that are closed inside a delivered model add to it, and what an exact delivery with them inside would be.

The loops are closed around the derived model with the same diagram that closes them everywhere else. Sampled loops make
it a difference equation at the instants that they have in common. Names are those of the spec language: `level.1` for
the first state of a controller, `inflow.lag` for an actuator, `level.set_point.depth` for a set point.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from ..core.case import Case
from ..core.delivered import Course, DeliveredModel, Keep
from ..core.loop import Actuator, Loop
from ..core.model import Array, LocalModel, OperatingPoint, frozen_array
from ..core.signals import Signals
from ..numerics.at_samples import HELD, QUEUED, at_samples, remembering, repeats
from ..numerics.closed_model import closed_model, reading
from ..numerics.controller_sizes import controller_sizes
from ..numerics.hold import straight
from ..numerics.lifted import carried
from ..numerics.pieces import whole_steps
from ..numerics.reduce import Reduction, reduced
from ..numerics.sampled import ROUNDING, sampled
from ..numerics.wiring import Wiring, measured_by
from .closed import nested


@dataclass(frozen=True, slots=True, eq=False)
class Inside:
    """The loops closed inside the local model of one case, outer before inner, about its trimmed point."""

    case: Case
    bare: OperatingPoint
    loops: tuple[Loop, ...]

    @property
    def moved(self) -> tuple[str, ...]:
        """Plant inputs that the loops move, in the plant's order."""
        names = {moved.name for loop in self.loops for moved in loop.moves if not moved.loop}
        return tuple(name for name in self.case.plant.inputs if name in names)

    @property
    def set_points(self) -> tuple[tuple[str, str], ...]:
        """(loop, signal) of every set point."""
        return tuple((loop.name, name) for loop in self.loops for name in loop.measures)

    @property
    def point(self) -> OperatingPoint:
        """The trimmed point of plant and loops together: what loops add is at rest, set points are what is measured."""
        bare, added = self.bare, self._wiring(self.case.plant.input_signals.names).added
        named = [f"{loop}.set_point.{name}" for loop, name in self.set_points]
        units = [self.case.plant.unit(name) for _, name in self.set_points]
        spare = [name for name in self.moved if name not in bare.outputs]
        lags = {f"{name}.lag": name for name in self.moved}
        of_states = [self.case.plant.unit(lags[name]) if name in lags else "" for name in added]
        rests = [bare.value(lags[name]) if name in lags else 0.0 for name in added]
        return replace(
            bare,
            x=frozen_array([*bare.x, *rests]),
            u=frozen_array([*bare.u, *(bare.value(name) for _, name in self.set_points)]),
            y=frozen_array([*bare.y, *(bare.value(name) for name in spare)]),
            drift=frozen_array([*bare.drift, *np.zeros(len(added))]),
            states=_more(bare.states, added, of_states),
            inputs=_more(bare.inputs, named, units),
            outputs=_more(bare.outputs, spare, [self.case.plant.unit(name) for name in spare]),
        )  # fmt: skip

    @property
    def nominal(self) -> Mapping[str, float]:
        """Sizes by name, also of what the loops add: set points as what is measured, lags as what is moved.

        A state of a controller counts by what it alone moves, see `controller_sizes`; what a hold or a queue keeps, as
        what it is kept of.
        """
        sizes = dict(self.case.nominal)
        found = dict(sizes)
        found |= {f"{loop}.set_point.{name}": sizes.get(name, 1.0) for loop, name in self.set_points}
        found |= {f"{name}.lag": sizes.get(name, 1.0) for name in self.moved}
        for loop in self.loops:
            errors = np.array([sizes.get(name, 1.0) for name in loop.measures])
            outputs = np.array([sizes.get(moved.name, 1.0) for moved in loop.moves])
            own = controller_sizes(loop.controller, errors, outputs)
            found |= {f"{loop.name}.{row + 1}": float(size) for row, size in enumerate(own)}
        return found

    def measured(self, name: str) -> str:
        """The plant's signal whose trimmed value `name` has: itself, or what a set point or a lag belongs to."""
        if name in self.bare.states or name in self.bare.inputs or name in self.bare.outputs:
            return name
        return name.removesuffix(".lag").rpartition(".set_point.")[2]

    @property
    def unitless(self) -> frozenset[str]:
        """States that have no unit that anybody wrote: those of controllers, holds and queues."""
        added = self._wiring(self.case.plant.input_signals.names).added
        return frozenset(name for name in added if not name.endswith(".lag"))

    def closed(self, model: LocalModel, *, step: float | None, course: Course, keep: Keep | None) -> LocalModel:
        """`model`, the plant's own, with the loops closed, at multiples of `step` where one is given.

        keep: its inputs and outputs only, of those that are the plant's. Raises ValueError where that cannot be done.
        """
        model = replace(_with_measured(model, measured_by(self.loops)), errors={})
        wiring = replace(self._wiring(model.inputs.names), step=model.step)
        whole = closed_model(model, wiring, self.point, whole_names=True)
        if whole.jumps:
            whole = at_samples(whole, step or repeats(whole) or 0.0)
        elif step is not None and whole.step is None:
            ahead = frozen_array(straight(whole.A, whole.B, step)[2]) if course == "straight" else None
            whole = replace(sampled(whole, step, course), ahead=ahead)
        return _cut(whole, self._names(whole, keep))

    def _names(self, whole: LocalModel, keep: Keep | None) -> tuple[list[str], list[str]]:
        """Inputs and outputs: the plant's, as far as they are kept, and all that the loops add."""
        plant = self.case.plant
        inputs, outputs = list(plant.inputs), list(plant.outputs or {})
        spare = [name for name in self.moved if name not in outputs]
        if keep is not None:
            inputs = [name for name in inputs if name in keep.inputs]
            outputs = [name for name in outputs if name in keep.outputs]
        points = [f"{loop}.set_point.{name}" for loop, name in self.set_points]
        return [*inputs, *points], [*outputs, *spare]

    def _wiring(self, inputs: tuple[str, ...]) -> Wiring:
        points = self.set_points
        lags = {name: Actuator(lag=one.lag) for name, one in self.case.actuators.items() if one.lag > 0.0}
        return Wiring(
            inputs, np.zeros(len(inputs)), self.loops, {name: lags[name] for name in self.moved if name in lags},
            measured_by(self.loops), points, np.zeros(len(points)), self.case.delays, self.case.plant.step, False,
        )  # fmt: skip


def inside(case: Case, bare: OperatingPoint) -> Inside:
    """What is closed inside the local model of `case`; bare: its trimmed point. Raises ValueError for a ring."""
    return Inside(case, bare, nested(case, case.local.closed))


def exact(one: Inside, derived: LocalModel, delivered: DeliveredModel | None) -> Reduction:
    """What an exact delivery would be: reduced where the spec keeps less, its loops closed, sampled as `delivered` is.

    Entries carry the errors of those of `derived`. Controllers and actuators are kept whatever `keep` leaves out.
    """
    case, step = one.case, delivered.step if delivered is not None else None
    if why := _refused(one, delivered, derived.step):
        return Reduction(None, why)
    model = _with_measured(derived, measured_by(one.loops))
    keep, course = case.local.keep, delivered.course if delivered is not None else "held"
    if keep is not None:
        wide = replace(keep, inputs=model.inputs.names, outputs=model.outputs.names)
        found = reduced(model, wide)
        if found.model is None:
            return found
        model = found.model

    def made(each: LocalModel) -> LocalModel:
        return one.closed(each, step=step, course=course, keep=keep)

    try:
        whole = made(model)
        errors = carried(model, made, whole)
    except ValueError as error:
        return Reduction(None, str(error))
    errors = {name: frozen_array(each + ROUNDING * np.abs(getattr(whole, name))) for name, each in errors.items()}
    whole = _about_own_states(remembering(replace(whole, errors=errors)))
    return Reduction(whole) if delivered is None else _like(whole, delivered)


def _like(whole: LocalModel, delivered: DeliveredModel) -> Reduction:
    """`whole` with the inputs and outputs that were delivered."""
    if delivered.states is not None and set(delivered.states) != set(whole.states.names):
        missing = [name for name in whole.states.names if name not in delivered.states]
        spare = [name for name in delivered.states if name not in whole.states]
        told = [f"lacks the states {', '.join(missing)}"] if missing else []
        told += [f"has the states {', '.join(spare)}, which the closed loop does not have"] if spare else []
        return Reduction(None, f"the delivered model {' and '.join(told)}: leave its states without names")
    inputs = [name for name in whole.inputs.names if name in delivered.inputs]
    return Reduction(_cut(whole, (inputs, [name for name in whole.outputs.names if name in delivered.outputs])))


def _refused(one: Inside, delivered: DeliveredModel | None, tick: float | None) -> str:
    """Why no finite model is the closed plant exactly in the way in which it was delivered; empty where one is."""
    unit = one.case.plant.time_unit
    for loop in one.loops:
        if loop.sample is None:
            if late := _dead_time(one.case, loop):
                return f"{late} lies inside loop {loop.name}, and no model with finitely many states has it inside"
            if tick is not None:
                return f"loop {loop.name} is continuous, the plant steps every {tick:.6g} {unit}: give it a `sample`"
            continue
        if delivered is None:
            continue
        every = f"loop {loop.name} samples every {loop.sample:.6g} {unit}"
        if delivered.step is None:
            return f"{every}: with it inside, the plant is a difference equation, and the delivered model is continuous"
        if not whole_steps(delivered.step, loop.sample):
            return f"{every}, the delivered model steps every {delivered.step:.6g} {unit}: no whole multiple"
        if delivered.course == "straight":
            return f"loop {loop.name} holds what it gives: a model for straight inputs cannot have it inside"
    return ""


def _dead_time(case: Case, loop: Loop) -> str:
    if loop.delay:
        return "the dead time of the loop"
    for moved in loop.moves:
        if not moved.loop and case.delays.inputs.get(moved.name):
            return f"the dead time of {moved.name}"
    return next((f"the dead time of {name}" for name in loop.measures if case.delays.outputs.get(name)), "")


def _with_measured(model: LocalModel, names: tuple[str, ...]) -> LocalModel:
    """`model` with every measured signal among its outputs, so that a loop can measure a state that is left out."""
    more = [name for name in names if name not in model.outputs and name in model.states]
    if not more:
        return model
    rows = [reading(model, name) for name in more]
    zeros = {"C": np.zeros((len(more), len(model.states))), "D": np.zeros((len(more), len(model.inputs)))}
    errors = {
        name: frozen_array(np.vstack([values, zeros[name]])) if name in zeros else values
        for name, values in model.errors.items()
    }
    return replace(
        model,
        C=frozen_array(np.vstack([model.C, [row for row, _ in rows]])),
        D=frozen_array(np.vstack([model.D, [row for _, row in rows]])),
        outputs=_more(model.outputs, more, [model.states.unit(name) for name in more]),
        errors=errors,
    )


def _cut(model: LocalModel, names: tuple[list[str], list[str]]) -> LocalModel:
    """`model` with these inputs and outputs, in this order."""
    inputs, outputs = names
    columns = [model.inputs.index(name) for name in inputs]
    rows = [model.outputs.index(name) for name in outputs]

    def blocks(A: Array, B: Array, C: Array, D: Array) -> dict[str, Array]:
        found = {"A": A, "B": B[:, columns], "C": C[rows], "D": D[np.ix_(rows, columns)]}
        return {name: frozen_array(values) for name, values in found.items()}

    return replace(
        model,
        **blocks(model.A, model.B, model.C, model.D),  # type: ignore[arg-type]
        inputs=Signals(tuple(inputs), tuple(model.inputs.units[at] for at in columns)),
        outputs=Signals(tuple(outputs), tuple(model.outputs.units[at] for at in rows)),
        errors=blocks(**model.errors) if model.errors else {},
        ahead=None if model.ahead is None else frozen_array(model.ahead[:, columns]),
    )


def _about_own_states(model: LocalModel) -> LocalModel:
    """About a point without the holds and queues that are no states of the model."""
    at = model.at
    kept = [
        row
        for row, name in enumerate(at.states.names)
        if name in model.states or not any(word in name for word in (HELD, QUEUED))
    ]
    states = Signals(tuple(at.states.names[row] for row in kept), tuple(at.states.units[row] for row in kept))
    own = replace(at, x=frozen_array(at.x[kept]), drift=frozen_array(at.drift[kept]), states=states)
    return replace(model, at=own)


def _more(signals: Signals, names: list[str] | tuple[str, ...], units: list[str]) -> Signals:
    return Signals((*signals.names, *names), (*signals.units, *units))
