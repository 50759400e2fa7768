"""One operating point's shared work, done once: the plant behind its border, the trim, the linearization.

Checks of one point ask the same study, so that eight checks cost one trim. A study never depends on which check asked
first: every answer is a function of the case alone, so an item that runs by itself gives the same bits.
"""

from __future__ import annotations

from collections import OrderedDict
from functools import cached_property

import numpy as np

from ..core.bound import BoundPlant
from ..core.case import Case, Interval, Options
from ..core.model import Array, LocalModel, OperatingPoint
from ..numerics.linearize import Linearization, linearize
from ..numerics.trim import TrimResult, trim

PROBES = 7  # points at which a plant is tried for batches and determinism
SHARE = 0.9  # of the envelope: wide enough to cross saturations, inside its edges
KEPT = 64  # studies kept in a process; a scheduler hands points out in blocks, so more are never alive


class Study:
    """Work on one case. `model_override` puts another local model in place of the derived one."""

    def __init__(self, case: Case, options: Options, *, model_override: LocalModel | None = None) -> None:
        self.case = case
        self.options = options
        self.model_override = model_override

    @cached_property
    def bound(self) -> BoundPlant:
        """The plant with this point's parameters. Raises PlantError where it is not deterministic."""
        plant = BoundPlant(self.case.plant, self.case.parameters)
        plant.detect(self.case.time, *self._probes())
        plant.last_error = None
        return plant

    def trim(self) -> TrimResult:
        """The equilibrium of this point, searched once."""
        return self._trim

    def linearization(self) -> Linearization:
        """The derived local model with its slopes. Raises ValueError where there is no trim: ask `unmet` first."""
        return self._linearization

    def model(self) -> LocalModel:
        """The local model that is verified. Raises ValueError where there is none: ask `unmet` first."""
        model = self.model_override or self.linearization().model
        if model is None:
            raise ValueError(f"{self.case.point} has no local model")
        return model

    def point(self) -> OperatingPoint:
        """The trimmed operating point. Raises ValueError where there is none: ask `unmet` first."""
        point = self.trim().point
        if point is None:
            raise ValueError(f"{self.case.point} has no trim")
        return point

    def unmet(self, need: str) -> str:
        """Why `need` ("trim" or "model") cannot be met here; empty where it is met."""
        result = self.trim()
        if not result.outcome.done or result.point is None:
            return f"no operating point to work from: {result.outcome.value}"
        if need == "model" and self.model_override is None:
            linear = self.linearization()
            if not linear.outcome.done or linear.model is None:
                return f"no derived local model: {linear.outcome.value}"
        return ""

    @cached_property
    def _trim(self) -> TrimResult:
        case = self.case
        return trim(self.bound, case.trim, case.envelope, case.nominal, case.time)

    @cached_property
    def _linearization(self) -> Linearization:
        case = self.case
        return linearize(
            self.bound, self.point(), case.nominal, case.envelope, case.slopes, accuracy=case.trim.accuracy
        )

    def _probes(self) -> tuple[Array, Array]:
        """Points over the envelope and, on open sides, around the held values; the same every time."""
        generator = np.random.default_rng(20_011)
        names = [*self.case.plant.states, *self.case.plant.inputs]
        unit = generator.uniform(-SHARE, SHARE, size=(len(names), PROBES))
        ranges = [self._probed(name) for name in names]
        middle = np.array([[(low + high) / 2] for low, high in ranges])
        half = np.array([[(high - low) / 2] for low, high in ranges])
        points = middle + half * unit
        return points[: len(self.case.plant.states)], points[len(self.case.plant.states) :]

    def _probed(self, name: str) -> tuple[float, float]:
        case = self.case
        low, high = case.plant.domain.get(name, (None, None))
        domain = Interval(-np.inf if low is None else low, np.inf if high is None else high)
        inside = case.envelope.get(name, Interval()).meet(domain)
        if inside.bounded:
            return inside.low, inside.high
        size = case.nominal.get(name, 1.0)
        middle = case.trim.hold.get(name, case.trim.start.get(name, 0.0))
        middle = min(max(middle, inside.low + size), inside.high - size)
        return middle - size, middle + size


_studies: OrderedDict[tuple[int, int], Study] = OrderedDict()


def study_of(case: Case, options: Options) -> Study:
    """The study of this very case in this process; the least recently used are let go."""
    key = (id(case), hash(options))
    study = _studies.pop(key, None)
    if study is None or study.case is not case:
        study = Study(case, options)
    _studies[key] = study
    while len(_studies) > KEPT:
        _studies.popitem(last=False)
    return study
