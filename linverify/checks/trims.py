"""trims: the equilibrium exists inside the envelope, to the stated accuracy, and expected values hold.

What a failed search means. The property of this check is that an equilibrium exists; where the search shows that there
is none, the property is violated and the verdict is *fail*. Shown means: every start of our own search and scipy's
bounded least squares, another code, ended without one, and where they came nearest the residual cannot be made smaller
by any move that the bounds allow, in a place where the plant answers and well above its own scatter. Anything less is
*undecided*: the plant could be called nowhere, or not at the answer; the residual is the plant's noise, or fades out
without an equilibrium near; the nearest point is no minimum. Several equilibria without a `start` that says which, a
family of them and a `minimize` that leaves a direction free are undecided too: something exists, but not *the*
equilibrium that other checks could work at. For those other checks every one of these is an unmet need.
"""

from __future__ import annotations

from typing import Any

from ..core import units
from ..core.case import Case, CheckAsk, Expected
from ..core.model import OperatingPoint
from ..core.outcome import Outcome
from ..core.shown import Shown, number, with_unit
from ..core.units import per_time
from ..core.verdict import Figure, Status, Verdict, merged
from ..numerics.trim import TrimResult
from .study import Study


def check(study: Study, ask: CheckAsk) -> Verdict:
    """The verdict on the equilibrium of one operating point."""
    case, result = study.case, study.trim()
    status, reason, figures = _judged(study, result)
    return Verdict(
        spec=case.spec,
        point=case.point,
        check=ask.name,
        status=status,
        place=ask.place,
        reason=reason,
        figures=figures,
        notes=(*result.notes, *_frozen(study), *_failed_calls(result)),
        details=_details(study, result),
    )


def _judged(study: Study, result: TrimResult) -> tuple[Status, str, tuple[Figure, ...]]:
    if result.point is None or not result.outcome.done:
        shown = result.outcome is Outcome.NO_TRIM and result.conclusive
        status = Status.FAIL if shown else Status.UNDECIDED
        return status, result.message or result.outcome.value, _shortfall(study, result, status)
    figures = (_residual(study, result, Status.PASS), *_expectations(study, result, result.point))
    status = merged(figure.status for figure in figures)
    return status, _reason(study, result.point, figures), figures


def _residual(study: Study, result: TrimResult, status: Status) -> Figure:
    told = study.case.trim.accuracy_told
    place = study.case.origin("trims.accuracy")
    return Figure(
        what="scaled residual",
        signal=result.worst_equation,
        worst=result.worst_residual,
        limit=study.case.trim.accuracy,
        origin=", ".join(part for part in ("accuracy of the trim", told, place) if part),
        status=status,
    )


def _shortfall(study: Study, result: TrimResult, status: Status) -> tuple[Figure, ...]:
    # an equilibrium beyond the envelope has no residual above the accuracy: nothing that a figure could show
    if result.worst_residual > study.case.trim.accuracy:
        return (_residual(study, result, status),)
    return ()


def _expectations(study: Study, result: TrimResult, point: OperatingPoint) -> list[Figure]:
    return [
        _expectation(study, name, expected, point.value(name), result.errors.get(name, 0.0))
        for name, expected in study.case.trim.expect.items()
    ]


def _expectation(study: Study, name: str, expected: Expected, value: float, error: float) -> Figure:
    away, shown = abs(value - expected.value), _shown(study, name, expected)
    status = Status.UNDECIDED
    if away + error <= expected.tolerance:
        status = Status.PASS
    elif away - error > expected.tolerance:
        status = Status.FAIL
    return Figure(
        what="distance from the expected value",
        signal=name,
        worst=shown.size(away),
        limit=shown.size(expected.tolerance),
        unit=shown.unit,
        error=shown.size(error),
        origin=str(expected.place),
        status=status,
    )


def _reason(study: Study, point: OperatingPoint, figures: tuple[Figure, ...]) -> str:
    words = []
    for figure in figures:
        if figure.status is Status.PASS:
            continue
        expected = study.case.trim.expect[figure.signal]
        shown = _shown(study, figure.signal, expected)
        told = f"{figure.signal} trims at {shown.told(point.value(figure.signal))}, "
        told += f"{with_unit(number(figure.worst), figure.unit)} from the expected {shown.told(expected.value)}; "
        told += f"{shown.told_size(expected.tolerance)} are allowed"
        if figure.status is Status.UNDECIDED:
            known = with_unit(number(figure.error), figure.unit)
            told += f", and the trimmed value is known only to within {known}"
        words.append(told)
    return "; ".join(words)


def _shown(study: Study, name: str, expected: Expected) -> Shown:
    """The unit that the expected value is written in."""
    return expected.shown or Shown(study.case.plant.unit(name))


def _frozen(study: Study) -> tuple[str, ...]:
    """Where the plant depends on t: that its local model does not."""
    case, step = study.case, study.case.plant.step
    if case.time is None or not study.moved_by_time:
        return ()
    moment = units.told(case.time if step is None else case.time * step, case.plant.time_unit)
    return (f"the plant depends on t ({study.moved_by_time}): its local model is that of {moment}, frozen",)


def _failed_calls(result: TrimResult) -> tuple[str, ...]:
    if not result.failed_calls:
        return ()
    is_new = result.first_failure and result.first_failure not in result.message
    first = f"; the first: {result.first_failure}" if is_new else ""
    return (f"{result.failed_calls} of {result.evaluations} calls of the plant failed during the search{first}",)


def _details(study: Study, result: TrimResult) -> dict[str, Any]:
    """Plain values for the record, a unit beside each; what does not apply is left out."""
    case, names = study.case, study.case.trim.find
    details: dict[str, Any] = {
        "outcome": result.outcome.name.lower().replace("_", " "),
        "accuracy": _with_unit(case.trim.accuracy, _scaled_unit(study)),
        "accuracy_asked": case.trim.accuracy_told,
        "starts": result.starts,
        "evaluations": result.evaluations,
        "failed_calls": result.failed_calls,
        "residuals": {name: _with_unit(value, _scaled_unit(study, name)) for name, value in result.residuals.items()},
        "active_bounds": list(result.active_bounds),
        "other_equilibria": [{name: _value(case, name, one.value(name)) for name in names} for one in result.others],
    }
    if result.point is not None:
        details |= _values(case, result.point)
        details["drift"] = {
            name: _with_unit(float(rate), _rate_unit(study, name))
            for name, rate in zip(result.point.states.names, result.point.drift, strict=True)
            if rate
        }
        details["errors"] = {
            name: _with_unit(case.shown_as(name).size(error), case.shown_as(name).unit)
            for name, error in result.errors.items()
        }
    if result.closest is not None:
        details["closest"] = {name: _value(case, name, result.closest.value(name)) for name in names}
    if result.nearest_holds:
        details["nearest_holds"] = {name: _value(case, name, value) for name, value in result.nearest_holds.items()}
    return {word: value for word, value in details.items() if value not in ([], {}, "")}


def _values(case: Case, point: OperatingPoint) -> dict[str, Any]:
    # names shared by a state and an output mean one value, so looking up by name is safe
    kinds = {"states": point.states, "inputs": point.inputs, "outputs": point.outputs}
    return {
        kind: {name: _value(case, name, point.value(name)) for name in signals.names} for kind, signals in kinds.items()
    }


def _value(case: Case, name: str, value: float) -> dict[str, Any]:
    """A value of a signal as the spec writes it, and in the plant's unit where that is another."""
    shown, own = case.shown_as(name), case.plant.unit(name)
    told = _with_unit(shown.value(value), shown.unit)
    return told if shown == Shown(own) else {**told, "in_plant": _with_unit(value, own)}


def _with_unit(value: float, unit: str) -> dict[str, Any]:
    return {"value": float(value), "unit": unit}


def _scaled_unit(study: Study, name: str = "") -> str:
    """What a scaled residual counts in: of a rate nominal sizes per time, of a held output nominal sizes."""
    plant = study.case.plant
    if name and name not in plant.states:
        return "nominal sizes"
    return "nominal sizes a step" if plant.step is not None else f"nominal sizes per {plant.time_unit}"


def _rate_unit(study: Study, name: str) -> str:
    plant = study.case.plant
    unit = plant.unit(name)
    return f"{unit} a step" if plant.step is not None else per_time(unit, plant.time_unit)
