"""One operating point's shared work, done once: the plant behind its border, the trim, the linearization.

Checks of one point ask the same study, so that eight checks cost one trim. A study never depends on which check asked
first: every answer is a function of the case alone, so an item that runs by itself gives the same bits.
"""

from __future__ import annotations

from collections import OrderedDict
from dataclasses import replace
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

from ..core.bound import BoundPlant
from ..core.case import Case, Interval, Options
from ..core.delivered import Keep
from ..core.model import Array, LocalModel, OperatingPoint, frozen_array
from ..numerics.hold import straight
from ..numerics.instants import Update
from ..numerics.linearize import Linearization, linearize
from ..numerics.placed import placed
from ..numerics.reduce import Reduction, reduced, restricted
from ..numerics.sampled import sampled
from ..numerics.trim import TrimResult, trim

if TYPE_CHECKING:
    from .inside import Inside

PROBES = 7  # points at which a plant is tried for batches and determinism
SPANS = (0.37139, 1.93473, 13.7371, 211.393)  # time units after the trim at which dependence on t is looked for
STEPS = (1, 2, 7, 53)  # the same of a difference equation, in steps
SHARE = 0.9  # of the envelope: wide enough to cross saturations, inside its edges
KEPT = 64  # studies kept in a process; a scheduler hands points out in blocks, so more are never alive


class Study:
    """Work on one case. `model_override` puts another local model in place of the derived one."""

    def __init__(self, case: Case, options: Options, *, model_override: LocalModel | None = None) -> None:
        self.case = case
        self.options = options
        self.model_override = model_override
        self._closings: dict[str, Study] = {}

    @cached_property
    def bound(self) -> BoundPlant:
        """The plant with this point's parameters. Raises PlantError where it is not deterministic."""
        plant = BoundPlant(self.case.plant, self.case.parameters)
        plant.detect(self.case.moment, *self.probes())
        plant.last_error = None
        return plant

    @cached_property
    def moved_by_time(self) -> str:
        """The name of a row of the plant that t moves; empty where the plant does not depend on t."""
        case, step = self.case, self.case.plant.step
        spans = [*SPANS, *(share * drives.horizon for drives in case.drives for share in (0.31, 0.97))]
        if step is not None:
            spans = [*STEPS, *(round(span / step) for span in spans[len(SPANS) :])]
        name = self.bound.moved_by_time([case.moment, *(case.moment + span for span in spans)], *self.probes())
        self.bound.last_error = None
        return name

    @property
    def timeless(self) -> str:
        """Why nothing can be judged before the spec says at which time; empty where it does, or need not."""
        if self.case.time is not None or not self.moved_by_time:
            return ""
        return f"the plant depends on t ({self.moved_by_time} changes with it); say at which `time` it is trimmed"

    def trim(self) -> TrimResult:
        """The equilibrium of this point, searched once."""
        return self._trim

    def linearization(self) -> Linearization:
        """The derived local model with its slopes. Raises ValueError where there is no trim: ask `unmet` first."""
        return self._linearization

    def model(self) -> LocalModel:
        """The local model that is verified: delivered, or derived here, or derived and reduced.

        Raises ValueError where there is none: ask `unmet("model")` first.
        """
        if self.model_override is not None:
            return self.model_override
        if self.case.local.delivered is not None:
            return self._delivered
        if self._reduced.model is None:
            raise ValueError(f"{self.case.point} has no local model: {self._reduced.refusal}")
        return self._reduced.model

    def derived(self) -> LocalModel:
        """The full derived local model. Raises ValueError where there is none: ask `unmet("derived")` first."""
        linear = self.linearization()
        if not linear.outcome.done or linear.model is None:
            raise ValueError(f"{self.case.point} has no derived local model")
        return linear.model

    def reference(self) -> LocalModel:
        """What an exact delivery would be: the derived model on the same states, inputs and outputs, in plant order.

        Reduced where the spec keeps less, with the loops closed inside that belong there, sampled where a sampled model
        was delivered; all states where those of the delivered model are anonymous. Raises ValueError where there is
        none: ask `unmet("reference")` first.
        """
        if self._reference.model is None:
            raise ValueError(f"{self.case.point} has no reference: {self._reference.refusal}")
        return self._reference.model

    def about(self) -> LocalModel | None:
        """The derived slopes even where the plant has corners at the point: good for choosing steps, not for proof."""
        model = self.linearization().model
        if model is None or not all(np.isfinite(getattr(model, name)).all() for name in ("A", "B", "C", "D")):
            return None
        return model

    def point(self) -> OperatingPoint:
        """The trimmed operating point. Raises ValueError where there is none: ask `unmet` first."""
        point = self.trim().point
        if point is None:
            raise ValueError(f"{self.case.point} has no trim")
        return point

    @property
    def updates(self) -> tuple[Update, ...]:
        """What sampled controllers do to the plant's states; none without a loop."""
        return ()

    def closed(self, name: str) -> Study:
        """This study as the set of drives called `name` meets it: with loops closed and actuators in series.

        Itself where there are none. Raises KeyError for a set that the case does not have.
        """
        from .closed import ClosedStudy, changes, for_drives

        if name not in self._closings:
            closing = for_drives(self.case, self.case.drive_set(name))
            self._closings[name] = ClosedStudy(self, closing) if changes(self.case, closing) else self
        return self._closings[name]

    def unmet(self, need: str) -> str:
        """Why `need` ("trim", "model", "derived" or "reference") cannot be met here; empty where it is met.

        A delivered model needs no derived one: it is driven even where the plant has no slopes.
        """
        if self.timeless:
            return self.timeless
        result = self.trim()
        if not result.outcome.done or result.point is None:
            return f"no operating point to work from: {result.outcome.value}"
        if need == "model":
            if self.model_override is not None:
                return ""
            if self.case.local.delivered is not None:
                return self._unfit
            return self.unmet("derived") or self._reduced.refusal
        if need in ("derived", "reference"):
            linear = self.linearization()
            if not linear.outcome.done or linear.model is None:
                return f"no derived local model: {linear.outcome.value}"
        return self._reference.refusal if need == "reference" else ""

    @property
    def inside(self) -> Inside | None:
        """What loops closed inside the local model add to it; None without such loops. Expects a trim.

        Raises ValueError where loops are closed in a ring.
        """
        from .inside import inside

        return inside(self.case, self.point()) if self.case.local.closed else None

    @cached_property
    def _delivered(self) -> LocalModel:
        delivered, inside = self.case.local.delivered, self.inside
        if delivered is None:
            raise ValueError(f"{self.case.point} has no delivered model")
        model = placed(delivered, self.point() if inside is None else inside.point)
        if model.step is None or model.anonymous or self.case.plant.step is not None or model.course == "held":
            return model
        if inside is not None:
            reference = None if self.unmet("reference") else self.reference()
            return model if reference is None else replace(model, ahead=reference.ahead)
        about = self.about()
        return model if about is None else replace(model, ahead=_ahead(about, model, self.case.local.keep))

    @cached_property
    def _unfit(self) -> str:
        """Why the delivered model is none of this plant; empty where it is one."""
        try:
            _ = self._delivered
        except ValueError as error:
            return f"the delivered model does not fit the plant: {error}"
        return ""

    @cached_property
    def _reduced(self) -> Reduction:
        """The derived model, with what the spec keeps; loops are open."""
        keep = self.case.local.keep
        return reduced(self.derived(), keep) if keep is not None else Reduction(self.derived())

    @cached_property
    def _reference(self) -> Reduction:
        found, delivered = self._reduced, self.case.local.delivered
        if self.case.local.closed:
            return self._closed_reference
        if delivered is None or found.model is None:
            return found
        model = restricted(found.model, delivered.inputs, delivered.outputs)
        if delivered.step is not None and model.step is None:
            continuous, model = model, sampled(model, delivered.step, delivered.course)
            if delivered.course == "straight":
                model = replace(model, ahead=_ahead(continuous, model, None))
        return Reduction(model)

    @property
    def _closed_reference(self) -> Reduction:
        from .inside import exact

        try:
            inside = self.inside
        except ValueError as error:
            return Reduction(None, str(error))
        if inside is None:
            return self._reduced
        return exact(inside, self.derived(), self.case.local.delivered)

    @cached_property
    def _trim(self) -> TrimResult:
        case = self.case
        return trim(
            self.bound, case.trim, case.envelope, case.nominal, case.moment,
            shown=case.shown, shown_limits=case.shown_limits,
        )  # fmt: skip

    @cached_property
    def _linearization(self) -> Linearization:
        case = self.case
        return linearize(
            self.bound, self.point(), case.nominal, case.envelope, case.slopes, accuracy=case.trim.accuracy,
            shown=case.shown,
        )  # fmt: skip

    def probes(self) -> tuple[Array, Array]:
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


def _ahead(continuous: LocalModel, model: LocalModel, keep: Keep | None) -> Array | None:
    """What inputs at an instant add to the states of a model sampled for straight inputs; None where nobody knows."""
    if keep is not None:
        found = reduced(continuous, keep).model
        if found is None:
            return None
        continuous = found
    ahead = straight(continuous.A, continuous.B, model.step or 0.0)[2]
    rows = [continuous.states.index(name) for name in model.states.names]
    columns = [continuous.inputs.index(name) for name in model.inputs.names]
    return frozen_array(ahead[np.ix_(rows, columns)])


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
