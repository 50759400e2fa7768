"""Derived local models written to files, in every format that delivered ones are read from."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from .checks.study import study_of
from .core.case import Case, Options
from .core.errors import PlantError
from .spec.write_models import Sheet, check_targets, sheet, write_models


@dataclass(frozen=True, slots=True)
class Derived:
    """Files written, and a line for each operating point whose model could not be derived."""

    written: tuple[Path, ...]
    failed: tuple[str, ...]


def derive(cases: Sequence[Case], to: str, options: Options, *, force: bool = False) -> Derived:
    """Trim and linearize each operating point, and write the models to `to`, where `{point}` stands for its name.

    A spec that keeps less gets reduced models. Points that the spec skips have none. Nothing is written unless all
    others have one. Raises ModelFileError, before anything is computed, and OSError.
    """
    asked = [case for case in cases if not case.skipped]
    check_targets(to, [case.point for case in asked], force=force)
    sheets: dict[str, Sheet] = {}
    failed = []
    for case in asked:
        study = study_of(case, options)
        try:
            unmet = study.unmet("reference")
            if not unmet:
                sheets[case.point] = sheet(study.reference(), case.point, case.plant.time_unit)
        except PlantError as error:
            unmet = f"the plant misbehaved: {error}"
        if unmet:
            failed.append(f"{case.spec}::{case.point}: {unmet}")
    return Derived(() if failed or not sheets else write_models(sheets, to, force=force), tuple(failed))
