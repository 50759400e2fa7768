"""A guess at why a delivered model is wrong, made only where exactly one thing explains every number of it.

Explanations without a number to choose (a sign, exchanged names, a unit, another point's model) are tried first: one
that fits leaves nothing to explain. Only then one number may be chosen (a parameter, a held value). Two that fit
equally well are no guess. Where nothing fits but a single entry differs, that is said: it is a fact and no guess.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..core.model import LocalModel
from ..core.units import told
from .knobs import Derive, Knob, fitted
from .pair import MATRICES, Pair
from .sampled import sampled
from .sampling_slips import sampling_slips
from .slips import Slip, slips
from .target import Target, target


@dataclass(frozen=True, slots=True)
class Cause:
    """kind: a word for the record; text: one line."""

    kind: str
    text: str

    @property
    def told(self) -> str:
        """The line as a reason ends with it: that only one entry differs is no guess."""
        return self.text if self.kind == "entry" else f"probable cause: {self.text}"


def guess(
    pair: Pair,
    time_unit: str,
    *,
    continuous: LocalModel | None = None,
    others: Mapping[str, Callable[[], LocalModel | None]] | None = None,
    knobs: Sequence[Knob] = (),
    derive: Derive | None = None,
) -> Cause | None:
    """What explains the delivered model; None where nothing does, or more than one thing.

    continuous: the reference before it was sampled, where it was; others: models of other operating points by name, on
    the signals and at the sample time of the reference; derive: the reference with another value of a knob.
    """
    wanted = target(pair)
    if wanted.explained(pair.reference):
        return _only_time(pair) if pair.time_clash else None
    if pair.time_clash:
        return None
    found = _slipped(pair, wanted, continuous, time_unit) + _others(wanted, others or {})
    if found:
        return found[0] if len(found) == 1 else None
    if derive is not None:
        found = _turned(wanted, knobs, derive, pair.reference)
        if found:
            return found[0] if len(found) == 1 else None
    return _single(pair, wanted)


def _only_time(pair: Pair) -> Cause:
    if pair.delivered.step is None:
        return Cause("sampling", "the matrices are those of the plant's steps, and only the sample time is missing")
    return Cause("sampling", "the matrices are those of the plant's steps, and only the sample time is wrong")


def _slipped(pair: Pair, wanted: Target, continuous: LocalModel | None, time_unit: str) -> list[Cause]:
    fits = [slip for slip in slips(pair.reference, time_unit, named=not pair.anonymous) if wanted.explained(slip.model)]
    base = pair.reference if pair.reference.step is None else continuous
    if base is not None and base is not pair.reference and pair.reference.step is not None:
        # slips made before the model was sampled
        step, course, base = pair.reference.step, pair.delivered.course, replace(base, errors={})
        before = (
            Slip(slip.text, slip.kind, sampled(slip.model, step, course), slip.narrow)
            for slip in slips(base, time_unit, named=not pair.anonymous)
        )
        fits += [slip for slip in before if wanted.explained(slip.model)]
    fits += [slip for slip in sampling_slips(wanted, base, time_unit) if wanted.explained(slip.model)]
    return _distinct(fits)


def _distinct(fits: list[Slip]) -> list[Cause]:
    """Causes in different words; a slip of one entry stands for the whole row or column that has no other entry."""
    narrow = {slip.kind for slip in fits if slip.narrow}
    kept = [slip for slip in fits if slip.narrow or slip.kind not in narrow]
    return [Cause(slip.kind, text) for text, slip in {slip.text: slip for slip in kept}.items()]


def _others(wanted: Target, others: Mapping[str, Callable[[], LocalModel | None]]) -> list[Cause]:
    found = []
    for name, derive in others.items():
        model = derive()
        if model is not None and wanted.explained(model):
            found.append(Cause("point", f"this is the model of operating point {name}"))
    return found


def _turned(wanted: Target, knobs: Sequence[Knob], derive: Derive, reference: LocalModel) -> list[Cause]:
    found = []
    for knob in knobs:
        value = fitted(knob, derive, wanted, reference)
        if value is not None:
            found.append(_told(knob, value))
    return found


def _told(knob: Knob, value: float) -> Cause:
    then, now = told(float(f"{value:.4g}"), knob.unit), told(knob.value, knob.unit)
    if knob.kind == "parameter":
        return Cause("parameter", f"a stale parameter: {knob.name} = {then} explains all of it; the plant has {now}")
    return Cause("trim", f"another trim: {knob.name} held at {then} explains all of it; here it is held at {now}")


def _single(pair: Pair, wanted: Target) -> Cause | None:
    if pair.anonymous:
        return None
    off = np.flatnonzero(wanted.unexplained(pair.reference))
    if off.size != 1:
        return None
    return Cause("entry", f"only {_names(pair)[int(off[0])]} differs from the plant")


def _names(pair: Pair) -> list[str]:
    model = pair.reference
    rows = {"A": model.states, "B": model.states, "C": model.outputs, "D": model.outputs}
    columns = {"A": model.states, "B": model.inputs, "C": model.states, "D": model.inputs}
    return [
        f"{matrix}[{row}, {column}]"
        for matrix in MATRICES
        for row in rows[matrix].names
        for column in columns[matrix].names
    ]
