"""What is tried when a delivered model is wrong: other points of the spec, every parameter, every held value, and other
ways to close the loops that it has inside."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from ..core.case import Case, Options
from ..core.errors import PlantError
from ..core.model import LocalModel, OperatingPoint, frozen_array
from ..numerics.cause import Cause, guess
from ..numerics.knobs import Knob
from ..numerics.pair import Pair
from .closed import nested
from .study import Study

MOST = 40  # other points that are derived for one guess; in the order of the spec
SHARE = 0.1  # of the nominal size: the first change of a held value is small against what the point is about


def guessed(study: Study, pair: Pair) -> Cause | None:
    """The one thing that explains the delivered model, or None."""
    case, plant = study.case, study.case.plant
    began = _begun(case, study.point())

    def derive(knob: Knob, value: float) -> LocalModel | None:
        if knob.kind == "parameter":
            return _reference(replace(began, parameters={**case.parameters, knob.name: value}), study.options)
        if knob.kind == "gain":
            return _reference(_scaled(began, knob.name, value), study.options)
        held = replace(began.trim, hold={**case.trim.hold, knob.name: value})
        return _reference(replace(began, trim=held), study.options)

    return guess(
        pair,
        plant.time_unit,
        continuous=_continuous(study),
        others={one.point: _of(case, one.point, study.options) for one in case.relatives[:MOST]},
        loops=_loops(began, study),
        knobs=_knobs(case),
        derive=derive,
    )


def _knobs(case: Case) -> list[Knob]:
    plant = case.plant
    stale = [
        Knob(name, "parameter", value, plant.unit(name), abs(value) or 1.0) for name, value in case.parameters.items()
    ]
    held = [
        Knob(name, "hold", value, plant.unit(name), SHARE * case.nominal.get(name, 1.0))
        for name, value in case.trim.hold.items()
    ]
    gains = [Knob(loop.name, "gain", 1.0, "", 1.0) for loop in nested(case, case.local.closed)]
    return [*stale, *held, *gains]


def _loops(case: Case, study: Study) -> dict[str, Callable[[], LocalModel | None]]:
    """The reference with one loop open, and with one loop closed with the wrong sign."""
    found: dict[str, Callable[[], LocalModel | None]] = {}
    for loop in nested(case, case.local.closed):
        ways = ((f"loop {loop.name} is open in it", 0.0), (f"loop {loop.name} is closed with the wrong sign", -1.0))
        for text, factor in ways:
            found[text] = lambda name=loop.name, factor=factor: _reference(  # type: ignore[misc]
                _scaled(case, name, factor), study.options
            )
    return found


def _scaled(case: Case, name: str, factor: float) -> Case:
    """The case with what one loop gives times `factor`."""
    loop = case.loops[name]
    one = loop.controller
    given = replace(one, C=frozen_array(factor * one.C), D=frozen_array(factor * one.D))
    return replace(case, loops={**case.loops, name: replace(loop, controller=given)})


def _begun(case: Case, point: OperatingPoint) -> Case:
    """The case with its search begun at the trim that was found, so that a small change stays with this equilibrium."""
    values = {name: point.value(name) for name in (*point.states.names, *point.inputs.names)}
    start = {name: value for name, value in values.items() if name not in case.trim.hold}
    return replace(case, trim=replace(case.trim, start=start))


def _of(case: Case, name: str, options: Options) -> Callable[[], LocalModel | None]:
    (other,) = (one for one in case.relatives if one.point == name)
    loops = case.loops if other.loops is None else other.loops
    return lambda: _reference(replace(case, trim=other.trim, parameters=other.parameters, loops=loops), options)


def _continuous(study: Study) -> LocalModel | None:
    """The reference before it was sampled; None where it never was."""
    case, delivered = study.case, study.case.local.delivered
    if delivered is None or delivered.step is None or case.plant.step is not None:
        return None
    return _reference(replace(case, local=replace(case.local, delivered=replace(delivered, step=None))), study.options)


def _reference(case: Case, options: Options) -> LocalModel | None:
    study = Study(case, options)
    try:
        return None if study.unmet("reference") else study.reference()
    except PlantError:
        return None
