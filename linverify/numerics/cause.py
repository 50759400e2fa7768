"""A guess at why a delivered model is wrong, made only where exactly one thing explains every number of it.

Explanations without a number to choose (a sign, exchanged names, a unit, another point's model) are tried first: one
that fits leaves nothing to explain. Only then one number may be chosen (a parameter, a held value). Two that fit
equally well are no guess. Where nothing fits but a single entry differs, that is said: it is a fact and no guess. Last,
for a model that is a little off everywhere besides, a slip may explain all but a hundredth of the largest difference.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
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
    loops: Mapping[str, Callable[[], LocalModel | None]] | None = None,
    knobs: Sequence[Knob] = (),
    derive: Derive | None = None,
) -> Cause | None:
    """What explains the delivered model; None where nothing does, or more than one thing.

    continuous: the reference before it was sampled, where it was; others: models of other operating points by name, on
    the signals and at the sample time of the reference; loops: likewise, the reference with a loop inside it closed in
    another way, by the words for that; derive: the reference with another value of a knob.
    """
    wanted = target(pair)
    if wanted.explained(pair.reference):
        return _only_time(pair) if pair.time_clash else None
    if pair.time_clash:
        return None
    tried = list(_all_slips(pair, wanted, continuous, time_unit))
    found = _looped(wanted, loops or {})
    found = found or _distinct([slip for slip in tried if wanted.explained(slip.model)])
    found += _others(wanted, others or {})
    if found:
        return found[0] if len(found) == 1 else None
    if derive is not None:
        found = _turned(wanted, knobs, derive, pair.reference)
        if found:
            return found[0] if len(found) == 1 else None
    return _single(pair, wanted) or _nearly(wanted, tried)


def _only_time(pair: Pair) -> Cause:
    if pair.delivered.step is None:
        return Cause("sampling", "the matrices are those of the plant's steps, and only the sample time is missing")
    return Cause("sampling", "the matrices are those of the plant's steps, and only the sample time is wrong")


def _all_slips(pair: Pair, wanted: Target, continuous: LocalModel | None, time_unit: str) -> Iterator[Slip]:
    named = not pair.anonymous
    yield from slips(pair.reference, time_unit, named=named)
    step, course = pair.reference.step, pair.delivered.course
    if step is None:
        yield from sampling_slips(wanted, pair.reference, time_unit)
    elif continuous is not None:
        # slips made before the model was sampled; errors are dear to carry along and far below what counts
        for slip in slips(replace(continuous, errors={}), time_unit, named=named):
            yield replace(slip, model=sampled(slip.model, step, course))
        yield from sampling_slips(wanted, continuous, time_unit)


def _nearly(wanted: Target, tried: list[Slip]) -> Cause | None:
    found = _distinct([slip for slip in tried if wanted.nearly_explained(slip.model)])
    return found[0] if len(found) == 1 else None


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


def _looped(wanted: Target, loops: Mapping[str, Callable[[], LocalModel | None]]) -> list[Cause]:
    """A loop that is closed in another way is a thing of its own: in numbers it may look like a slip of signs."""
    models = ((text, derive()) for text, derive in loops.items())
    return [Cause("loop", text) for text, model in models if model is not None and wanted.explained(model)]


def _turned(wanted: Target, knobs: Sequence[Knob], derive: Derive, reference: LocalModel) -> list[Cause]:
    found = []
    for knob in knobs:
        value = fitted(knob, derive, wanted, reference)
        if value is not None:
            found.append(_told(knob, value))
    return found


def _told(knob: Knob, value: float) -> Cause:
    then, now = told(value, knob.unit), told(knob.value, knob.unit)
    if knob.kind == "parameter":
        return Cause("parameter", f"a stale parameter: {knob.name} = {then} explains all of it; the plant has {now}")
    if knob.kind == "gain":
        return Cause("loop", f"another controller: what loop {knob.name} gives, times {then}, explains all of it")
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
