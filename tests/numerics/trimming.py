"""Trims of small plants that are written in one line."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from linverify.core.bound import BoundPlant
from linverify.core.case import Interval, TrimAsk
from linverify.core.plant import Plant
from linverify.numerics.trim import TrimResult, trim

Limits = Mapping[str, tuple[float, float]]


def plant_of(dynamics: Callable[..., Any], states: str, inputs: str = "", **more: Any) -> BoundPlant:
    """A plant without units; `outputs` as names, all else as Plant takes it."""
    if "outputs" in more:
        more["outputs"] = dict.fromkeys(more["outputs"].split(), "")
    units = (
        {name: more.pop("unit", "") for name in states.split()} if "unit" in more else dict.fromkeys(states.split(), "")
    )
    return BoundPlant(Plant(states=units, inputs=dict.fromkeys(inputs.split(), ""), dynamics=dynamics, **more))


def trimmed(
    plant: BoundPlant,
    find: str,
    *,
    limits: Limits | None = None,
    nominal: Mapping[str, float] | None = None,
    **ask: Any,
) -> TrimResult:
    """`trim` with `find` as names and limits as pairs; open sides are infinite."""
    envelope = {name: Interval(low, high) for name, (low, high) in (limits or {}).items()}
    ask.setdefault("hold", {})
    return trim(plant, TrimAsk(find=tuple(find.split()), **ask), envelope, nominal or {}, 0.0)


def values(result: TrimResult) -> np.ndarray:
    """States and inputs of the equilibrium that was found, one after the other."""
    if result.point is None:
        raise AssertionError(f"no trim: {result.outcome.name}: {result.message}")
    return np.concatenate([result.point.x, result.point.u])
