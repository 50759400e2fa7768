"""What is tried when a delivered model is wrong: the spec's other points, every parameter, every held value."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from ..core.case import Case, Options
from ..core.errors import PlantError
from ..core.model import LocalModel, OperatingPoint
from ..numerics.cause import Cause, guess
from ..numerics.knobs import Knob
from ..numerics.pair import Pair
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
        held = replace(began.trim, hold={**case.trim.hold, knob.name: value})
        return _reference(replace(began, trim=held), study.options)

    return guess(
        pair,
        plant.time_unit,
        continuous=_continuous(study),
        others={one.point: _of(case, one.point, study.options) for one in case.relatives[:MOST]},
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
    return [*stale, *held]


def _begun(case: Case, point: OperatingPoint) -> Case:
    """The case with its search begun at the trim that was found, so that a small change stays with this equilibrium."""
    values = {name: point.value(name) for name in (*point.states.names, *point.inputs.names)}
    start = {name: value for name, value in values.items() if name not in case.trim.hold}
    return replace(case, trim=replace(case.trim, start=start))


def _of(case: Case, name: str, options: Options) -> Callable[[], LocalModel | None]:
    (other,) = (one for one in case.relatives if one.point == name)
    return lambda: _reference(replace(case, trim=other.trim, parameters=other.parameters), options)


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
