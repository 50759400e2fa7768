"""The public road without pytest: a spec in `specs` beside this file, to the verdict of one check of one point."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import Any

from linverify.checks.judge import judge
from linverify.core.case import Case, Options
from linverify.core.verdict import Verdict
from linverify.spec.bind import load

HERE = Path(__file__).parent


@cache
def cases(spec: str) -> dict[str, Case]:
    """Cases of `specs/SPEC.yaml` by the name of their operating point."""
    return {case.point: case for case in load(HERE / "specs" / f"{spec}.yaml", HERE)}


def verdict(spec: str, point: str, check: str = "trims") -> Verdict:
    """What `check` finds at an operating point."""
    case = cases(spec)[point]
    (ask,) = (ask for ask in case.checks if ask.name == check)
    return judge(case, ask, Options())


def trimmed(spec: str, point: str) -> dict[str, float]:
    """Trimmed values of states, inputs and outputs by name, in the plant's units."""
    details = verdict(spec, point).details
    kinds = ("states", "inputs", "outputs")
    return {name: plant_value(told) for kind in kinds for name, told in details.get(kind, {}).items()}


def plant_value(told: Mapping[str, Any]) -> float:
    """A value of the details in the plant's unit, whichever the spec writes."""
    return float(told.get("in_plant", told)["value"])
