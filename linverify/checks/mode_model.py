"""The model whose modes are judged: the verified one, with the loops closed that belong inside it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, replace

from ..core.model import LocalModel
from ..numerics.allpass import good_up_to
from ..numerics.lifted import carried, lifted
from ..numerics.placed import printed_errors
from .closed import ClosedStudy, largest_delay, of_model
from .study import Study

SURE = 0.5  # of the frequency up to which a chain of states is good for a dead time: its poles are, to six digits


@dataclass(frozen=True, slots=True, eq=False)
class Judged:
    """model: with errors of its entries; nominal: sizes by name; notes: what a reviewer must know; refused: why there
    is none; fastest: natural frequency beyond which modes are those of an approximation, per time unit."""

    model: LocalModel | None
    nominal: Mapping[str, float]
    notes: tuple[str, ...] = ()
    refused: str = ""
    fastest: float = math.inf


def judged_model(study: Study) -> Judged:
    """The model to judge. Expects a study that has one: ask `unmet("model")` first."""
    case = study.case
    bare = with_rounding(study, study.model())
    inside = study.inside
    if inside is None:
        return Judged(bare, case.nominal)
    if case.local.delivered is not None and study.model_override is None:
        return Judged(bare, inside.nominal)
    closed = ClosedStudy(study, of_model(case))
    if reason := closed.unmet("model"):
        return Judged(None, {}, refused=reason)

    def around(model: LocalModel) -> LocalModel:
        return lifted(closed.closed_around(model, closed.closing.given))

    model = around(bare)
    notes = closed.told()
    if closed.model().jumps:
        told = f"{model.step:.6g} {case.plant.time_unit}"
        notes.append(f"sampled loops are closed inside the local model: its modes are taken over {told}")
    late = max((largest_delay(case, loop) for loop in closed.closing.loops if loop.sample is None), default=0.0)
    fastest = SURE * good_up_to(late) if late > 0.0 else math.inf
    return Judged(replace(model, errors=carried(bare, around, model)), closed.case.nominal, tuple(notes), "", fastest)


def with_rounding(study: Study, model: LocalModel) -> LocalModel:
    """A delivered model with half a unit in the last printed digit of its entries as their errors."""
    delivered = study.case.local.delivered
    if delivered is None or model.errors or study.model_override is not None:
        return model
    inside = study.inside
    return replace(model, errors=printed_errors(delivered, study.point() if inside is None else inside.point))
