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

from collections.abc import Mapping
from typing import Any

from ..core.case import CheckAsk, Expected
from ..core.model import OperatingPoint
from ..core.outcome import Outcome
from ..core.signals import Signals
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
        notes=(*result.notes, *_failed_calls(result)),
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
    return Figure(
        what="scaled residual",
        signal=result.worst_equation,
        worst=result.worst_residual,
        limit=study.case.trim.accuracy,
        origin="accuracy of the trim",
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
    away = abs(value - expected.value)
    status = Status.UNDECIDED
    if away + error <= expected.tolerance:
        status = Status.PASS
    elif away - error > expected.tolerance:
        status = Status.FAIL
    return Figure(
        what="distance from the expected value",
        signal=name,
        worst=away,
        limit=expected.tolerance,
        unit=study.case.plant.unit(name),
        error=error,
        origin=str(expected.place),
        status=status,
    )


def _reason(study: Study, point: OperatingPoint, figures: tuple[Figure, ...]) -> str:
    words = []
    for figure in figures:
        if figure.status is Status.PASS:
            continue
        expected = study.case.trim.expect[figure.signal]
        value, unit = point.value(figure.signal), figure.unit
        told = f"{figure.signal} trims at {_told(value, unit)}, {_told(figure.worst, unit)} from the expected"
        told += f" {_told(expected.value, unit)}; {_told(expected.tolerance, unit)} are allowed"
        if figure.status is Status.UNDECIDED:
            told += f", and the trimmed value is known only to within {_told(figure.error, unit)}"
        words.append(told)
    return "; ".join(words)


def _told(value: float, unit: str) -> str:
    return f"{value:.6g} {'' if unit == '1' else unit}".strip()


def _failed_calls(result: TrimResult) -> tuple[str, ...]:
    if not result.failed_calls:
        return ()
    is_new = result.first_failure and result.first_failure not in result.message
    first = f"; the first: {result.first_failure}" if is_new else ""
    return (f"{result.failed_calls} of {result.evaluations} calls of the plant failed during the search{first}",)


def _details(study: Study, result: TrimResult) -> dict[str, Any]:
    """Plain values for the record; what does not apply is left out."""
    names = study.case.trim.find
    details: dict[str, Any] = {
        "outcome": result.outcome.name.lower().replace("_", " "),
        "accuracy": study.case.trim.accuracy,
        "starts": result.starts,
        "evaluations": result.evaluations,
        "failed_calls": result.failed_calls,
        "residuals": _plain(result.residuals),
        "active_bounds": list(result.active_bounds),
        "other_equilibria": [{name: other.value(name) for name in names} for other in result.others],
    }
    if result.point is not None:
        details |= _values(result.point)
        details["drift"] = {
            name: float(rate) for name, rate in zip(result.point.states.names, result.point.drift, strict=True) if rate
        }
        details["errors"] = _plain(result.errors)
    if result.closest is not None:
        details["closest"] = {name: result.closest.value(name) for name in names}
    if result.nearest_holds:
        details["nearest_holds"] = _plain(result.nearest_holds)
    return {word: value for word, value in details.items() if value not in ([], {})}


def _values(point: OperatingPoint) -> dict[str, Any]:
    return {
        "states": _with_units(point.states, point),
        "inputs": _with_units(point.inputs, point),
        "outputs": _with_units(point.outputs, point),
    }


def _with_units(signals: Signals, point: OperatingPoint) -> dict[str, Any]:
    # names shared by a state and an output mean one value, so looking up by name is safe
    pairs = zip(signals.names, signals.units, strict=True)
    return {name: {"value": point.value(name), "unit": unit} for name, unit in pairs}


def _plain(values: Mapping[str, float]) -> dict[str, float]:
    return {name: float(value) for name, value in values.items()}
