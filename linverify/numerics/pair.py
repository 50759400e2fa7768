"""A delivered model beside the model that an exact delivery would be, brought to one order of names and one time.

Everything that compares the two works on a `Pair`: no comparison is ever made by position in a file.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ..core.delivered import DeliveredModel
from ..core.model import Array, LocalModel, frozen_array
from ..core.signals import Signals
from .sampled import sampled

MATRICES = ("A", "B", "C", "D")
EXACT = 17  # significant digits from which on a printed number is the number itself
SAME_STEP = 1e-9  # sample times nearer than this share are the same time, written differently
SPACING = 2.0**-52


@dataclass(frozen=True, slots=True, eq=False)
class Pair:
    """Both models on the inputs and outputs that they share, in the plant's order; states too unless anonymous.

    rounding: half a unit in the last printed digit of every delivered entry, by matrix name; sizes: nominal sizes of
    the states (of the reference), inputs and outputs; unitless: states whose unit nobody wrote.
    """

    delivered: LocalModel
    reference: LocalModel
    rounding: Mapping[str, Array]
    states: Array
    inputs: Array
    outputs: Array
    unitless: frozenset[str] = frozenset()

    @property
    def anonymous(self) -> bool:
        """True where the delivered states mean nothing by themselves."""
        return self.delivered.anonymous

    @property
    def time_clash(self) -> str:
        """Why the two cannot be compared sample by sample; empty where they can."""
        theirs, ours = self.delivered.step, self.reference.step
        if theirs is None and ours is None:
            return ""
        if theirs is None:
            return f"delivered as a continuous model; the plant steps every {ours:.6g}"
        if ours is None or abs(theirs - ours) > SAME_STEP * ours:
            return f"delivered for a sample time of {theirs:.6g}, but the plant steps every {ours:.6g}"
        return ""


def paired(delivered: DeliveredModel, reference: LocalModel, nominal: Mapping[str, float]) -> Pair:
    """Match by name. Where a discrete model of a continuous plant was delivered, the reference is sampled as it was.

    Raises ValueError where named states are not those of the reference.
    """
    inputs = [name for name in reference.inputs.names if name in delivered.inputs]
    outputs = [name for name in reference.outputs.names if name in delivered.outputs]
    ours = _cut(reference, inputs, outputs)
    if delivered.step is not None and ours.step is None:
        ours = sampled(ours, delivered.step, delivered.course)
    states = _state_order(delivered, reference)
    rows, columns = _order(delivered.outputs, outputs), _order(delivered.inputs, inputs)
    places = {
        "A": np.ix_(states, states),
        "B": np.ix_(states, columns),
        "C": np.ix_(rows, states),
        "D": np.ix_(rows, columns),
    }
    blocks = {name: getattr(delivered, name)[place] for name, place in places.items()}
    anonymous = delivered.states is None
    theirs = LocalModel(
        A=frozen_array(blocks["A"]),
        B=frozen_array(blocks["B"]),
        C=frozen_array(blocks["C"]),
        D=frozen_array(blocks["D"]),
        states=_numbered(len(states)) if anonymous else ours.states,
        inputs=ours.inputs,
        outputs=ours.outputs,
        at=reference.at,
        step=delivered.step,
        anonymous=anonymous,
        course=delivered.course,
    )
    rounding = {name: _rounding(delivered, name, place) for name, place in places.items()}
    x, u, y = (_sizes(signals, nominal) for signals in (ours.states, ours.inputs, ours.outputs))
    return Pair(theirs, ours, rounding, x, u, y)


def _rounding(delivered: DeliveredModel, name: str, place: tuple[NDArray[np.intp], ...]) -> Array:
    """What the file says of its printed digits; of a model that came from no file, what `digits` says."""
    entries = getattr(delivered, name)[place]
    if not delivered.rounding:
        return printed_to(entries, delivered.digits)
    exact = printed_to(entries, EXACT)
    return exact if name not in delivered.rounding else np.asarray(delivered.rounding[name][place] + exact)


def printed_to(entries: Array, digits: int) -> Array:
    """Half a unit in the last of `digits` significant digits of every entry, same shape; rounding errors if exact."""
    size = np.abs(entries)
    if digits >= EXACT:
        return SPACING * size
    with np.errstate(divide="ignore"):
        decade = np.where(size > 0, np.floor(np.log10(np.where(size > 0, size, 1.0))), 0.0)
    return np.where(size > 0, 0.5 * 10.0 ** (decade + 1 - digits), 0.0) * (1.0 + 1e-9)


def _cut(model: LocalModel, inputs: Sequence[str], outputs: Sequence[str]) -> LocalModel:
    columns, rows = _order(model.inputs.names, inputs), _order(model.outputs.names, outputs)
    errors = {name: model.errors.get(name, np.zeros_like(getattr(model, name))) for name in MATRICES}
    return replace(
        model,
        B=frozen_array(model.B[:, columns]),
        C=frozen_array(model.C[rows]),
        D=frozen_array(model.D[np.ix_(rows, columns)]),
        inputs=Signals(tuple(inputs), tuple(model.inputs.unit(name) for name in inputs)),
        outputs=Signals(tuple(outputs), tuple(model.outputs.unit(name) for name in outputs)),
        errors={
            "A": errors["A"],
            "B": errors["B"][:, columns],
            "C": errors["C"][rows],
            "D": errors["D"][np.ix_(rows, columns)],
        },
    )


def _state_order(delivered: DeliveredModel, reference: LocalModel) -> list[int]:
    if delivered.states is None:
        return list(range(len(delivered.A)))
    if set(delivered.states) != set(reference.states.names):
        raise ValueError(f"states {delivered.states} are not those of the reference, {reference.states.names}")
    return _order(delivered.states, reference.states.names)


def _numbered(count: int) -> Signals:
    return Signals(tuple(f"state {index + 1}" for index in range(count)), ("",) * count)


def _order(names: Sequence[str], wanted: Sequence[str]) -> list[int]:
    place = {name: index for index, name in enumerate(names)}
    return [place[name] for name in wanted]


def _sizes(signals: Signals, nominal: Mapping[str, float]) -> Array:
    return np.array([nominal.get(name, 1.0) for name in signals.names])
