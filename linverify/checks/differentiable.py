"""Does the plant have one slope at the operating point: no kink, saturation edge, jump or table corner that matters?"""

from __future__ import annotations

from typing import Any

import numpy as np

from ..core.case import CheckAsk
from ..core.model import Array, LocalModel
from ..core.outcome import Outcome
from ..core.units import convert
from ..core.verdict import Figure, Status, Verdict
from ..numerics.linearize import Corner, Linearization, row_names, row_units, told_corner
from ..numerics.poles import eigenvalues
from .study import Study

FAILS = (Outcome.NOT_DIFFERENTIABLE, Outcome.WRONG_JACOBIAN)
TOLD = 8  # corners told in notes; all of them are in the details


def check(study: Study, ask: CheckAsk) -> Verdict:
    """The verdict on slopes at one operating point, with the derived local model in its details."""
    found = study.linearization()
    status = Status.PASS
    if not found.outcome.done:
        status = Status.FAIL if found.outcome in FAILS else Status.UNDECIDED
    return Verdict(
        spec=study.case.spec,
        point=study.case.point,
        check=ask.name,
        status=status,
        place=ask.place,
        reason=_reason(found),
        figures=_figures(study, found, status),
        notes=_notes(study, found),
        details=_details(study, found),
    )


def _reason(found: Linearization) -> str:
    if found.outcome.done:
        return ""
    return f"{found.outcome.value}: {found.message}" if found.message else found.outcome.value


def _figures(study: Study, found: Linearization, status: Status) -> tuple[Figure, ...]:
    if found.model is None:
        return ()
    return (
        Figure(
            what="slope gap",
            signal=found.largest_entry,
            worst=100 * found.largest,
            limit=100 * study.case.slopes.slope_gap,
            unit="%",
            error=100 * found.largest_error,
            origin=study.case.origin("differentiable.slope_gap"),
            status=status if found.outcome is not Outcome.WRONG_JACOBIAN else Status.PASS,
        ),
    )


def _notes(study: Study, found: Linearization) -> tuple[str, ...]:
    limit = study.case.slopes.slope_gap
    on_point = [told_corner(corner) for corner in found.gaps if corner.near]
    further = [told_corner(corner) for corner in found.gaps if not corner.near and corner.gap > limit]
    small = sum(not corner.near and corner.gap <= limit for corner in found.gaps)
    corners = [text for text in (*on_point, *further) if text != found.message]
    hidden = len(corners) - TOLD
    notes = [*found.notes, *(f"corner: {text}" for text in corners[:TOLD])]
    if hidden > 0:
        notes.append(f"{hidden} more corners are in the record")
    if small:
        lie = "smaller corner lies" if small == 1 else "smaller corners lie"
        notes.append(f"{small} {lie} within 0.01 nominal sizes, below `slope_gap`")
    notes += [mismatch.told() for mismatch in found.cross_check[:TOLD] if mismatch.told() != found.message]
    return tuple(notes)


def _details(study: Study, found: Linearization) -> dict[str, Any]:
    units = dict(zip(row_names(study.bound), row_units(study.bound), strict=True))
    details: dict[str, Any] = {
        "jacobian_source": found.jacobian_source,
        "noise": {name: _with_unit(float(f"{value:.3g}"), units[name]) for name, value in (found.noise or {}).items()},
        "corners": [_corner(study, corner) for corner in found.gaps],
        "wrong_entries": [mismatch.told() for mismatch in found.cross_check],
    }
    if found.model is not None and _usable(found.model):
        details |= _matrices(found.model)
        details["poles"] = _poles(study, found.model)
    return details


def _usable(model: LocalModel) -> bool:
    return all(np.isfinite(block).all() for block in (model.A, model.B, model.C, model.D, *model.errors.values()))


def _with_unit(value: float, unit: str) -> dict[str, Any]:
    return {"value": value, "unit": unit}


def _corner(study: Study, corner: Corner) -> dict[str, Any]:
    column = study.case.shown_as(corner.column)
    return {
        "entry": f"d {corner.row} / d {corner.column}",
        "kind": corner.kind,
        "distance": _with_unit(corner.distance, "nominal sizes"),
        "at": _with_unit(column.value(corner.place), column.unit),
        "gap": _with_unit(100 * corner.gap, "%"),
        "below": _with_unit(corner.left, corner.slope_unit),
        "above": _with_unit(corner.right, corner.slope_unit),
        "on_point": corner.near,
    }


def _matrices(model: LocalModel) -> dict[str, Any]:
    blocks = {"A": model.A, "B": model.B, "C": model.C, "D": model.D}
    errors = {f"error_of_{name}": _plain(model.errors[name]) for name in blocks}
    return {name: _plain(block) for name, block in blocks.items()} | errors


def _plain(matrix: Array) -> list[list[float]]:
    return [[float(value) for value in row] for row in matrix]


def _poles(study: Study, model: LocalModel) -> list[dict[str, Any]]:
    scale = np.array([study.case.nominal.get(name, 1.0) for name in model.states.names])
    poles = eigenvalues(model.A, scale, step=model.step, seconds=_seconds(study))
    return [
        {
            "real": _finite(pole.value.real),
            "imag": pole.value.imag,
            "natural_frequency": _finite(pole.natural),
            "hertz": _finite(pole.hertz),
            "damping": _finite(pole.damping),
            "time_constant": _finite(pole.time_constant),
            **({} if model.step is None else {"z_real": pole.z.real, "z_imag": pole.z.imag}),
        }
        for pole in poles
    ]


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None


def _seconds(study: Study) -> float:
    unit = study.case.plant.time_unit
    return 1.0 if unit == "s" else convert(1.0, unit, "s")
