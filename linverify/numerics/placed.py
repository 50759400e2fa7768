"""A delivered model as a local model of the plant: by name, about the trim that was found here."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from ..core.delivered import DeliveredModel
from ..core.model import Array, LocalModel, OperatingPoint, frozen_array
from ..core.signals import Signals, nearest
from .pair import EXACT, MATRICES, printed_to

Places = NDArray[np.intp]


def placed(delivered: DeliveredModel, point: OperatingPoint) -> LocalModel:
    """`delivered` in the plant's order, with the states, inputs and outputs that it has.

    The order of a delivered file means nothing. Anonymous states are called "state 1", "state 2", ..., which no plant
    can call its own. Raises ValueError for a name that the plant does not have, or shapes that do not fit the names.
    """
    inputs, columns = _picked(delivered.inputs, point.inputs, "input")
    outputs, rows = _picked(delivered.outputs, point.outputs, "output")
    if delivered.states is None:
        count = int(np.shape(delivered.A)[0])
        states, inner = anonymous_states(count), np.arange(count, dtype=np.intp)
    else:
        states, inner = _picked(delivered.states, point.states, "state")
    n, m, k = len(states), len(inputs), len(outputs)
    due = {"A": (n, n), "B": (n, m), "C": (k, n), "D": (k, m)}
    for name, shape in due.items():
        if np.shape(getattr(delivered, name)) != shape:
            raise ValueError(f"{name} has shape {np.shape(getattr(delivered, name))}; its names ask for {shape}")
    return LocalModel(
        A=_block(delivered.A, inner, inner),
        B=_block(delivered.B, inner, columns),
        C=_block(delivered.C, rows, inner),
        D=_block(delivered.D, rows, columns),
        states=states,
        inputs=inputs,
        outputs=outputs,
        at=point,
        step=delivered.step,
        anonymous=delivered.states is None,
        course=delivered.course,
    )


def printed_errors(delivered: DeliveredModel, point: OperatingPoint) -> dict[str, Array]:
    """Half a unit in the last printed digit of every entry of `placed`, by matrix name; rounding where it is exact.

    Raises ValueError as `placed` does.
    """
    digits = EXACT if delivered.rounding else delivered.digits
    exact = {name: printed_to(np.asarray(getattr(delivered, name)), digits) for name in MATRICES}
    A, B, C, D = (exact[name] + delivered.rounding.get(name, 0.0) for name in MATRICES)
    model = placed(replace(delivered, A=A, B=B, C=C, D=D), point)
    return {name: getattr(model, name) for name in MATRICES}


def anonymous_states(count: int) -> Signals:
    """Names of states that mean nothing by themselves."""
    return Signals(tuple(f"state {index + 1}" for index in range(count)), ("",) * count)


def part(signals: Signals, names: Sequence[str]) -> tuple[Signals, Places]:
    """Those of `signals` that are among `names`, in the order of `signals`, with their rows."""
    rows = [row for row, name in enumerate(signals.names) if name in names]
    kept = Signals(tuple(signals.names[row] for row in rows), tuple(signals.units[row] for row in rows))
    return kept, np.array(rows, dtype=np.intp)


def _picked(names: Sequence[str], known: Signals, what: str) -> tuple[Signals, Places]:
    """Signals in the plant's order, and where each stands in the delivered order."""
    for name in names:
        if name not in known:
            close = nearest(name, known.names)
            raise ValueError(f"the plant has no {what} {name}" + (f"; did you mean {close}" if close else ""))
    if len(set(names)) != len(names):
        raise ValueError(f"an {what} is named twice" if what != "state" else "a state is named twice")
    kept, _ = part(known, names)
    return kept, np.array([list(names).index(name) for name in kept.names], dtype=np.intp)


def _block(matrix: Array, rows: Places, columns: Places) -> Array:
    whole = np.asarray(matrix, dtype=np.float64)
    return frozen_array(whole[np.ix_(rows, columns)])
