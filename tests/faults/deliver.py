"""Models as somebody might hand them over: right ones, printed to so many digits, and ones with one known fault.

Every delivery is drawn from a seeded generator; `cause` is the word for what was done to it.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np

from linverify.core.delivered import DeliveredModel
from linverify.core.model import frozen_array
from linverify.core.plant import Plant

from .nature import Here, Matrices, Matrix, equilibrium, held, slopes, without
from .subjects import PLACE, Subject

MATRICES = ("A", "B", "C", "D")
DIGITS = (4, 5, 6, 17)


@dataclass(frozen=True)
class Ground:
    """What faults start from: the right matrices, as asked for, where they hold, and all of them."""

    subject: Subject
    here: Here
    whole: Matrices  # all states, continuous
    right: Matrices  # reduced or sampled where that is what is delivered


@dataclass(frozen=True)
class Delivery:
    """Matrices with names, what they claim, and what is wrong with them."""

    cause: str
    size: str
    model: Matrices
    x0: Mapping[str, float]
    u0: Mapping[str, float]
    kinds: tuple[str, ...] = ()  # kinds of guesses at the cause that are right
    clues: tuple[str, ...] = ()  # what a right guess names
    value: float = np.nan  # and the number that it gives
    plant: Plant | None = None  # the plant itself, where the fault is there


Fault = Callable[[Ground, np.random.Generator], Delivery]


def claimed(ground: Ground, here: Here) -> tuple[dict[str, float], dict[str, float]]:
    """The operating point by name: of the states and inputs that the model has."""
    plant = ground.subject.case.plant
    x0 = {name: float(v) for name, v in zip(plant.states, here.x, strict=True) if name in ground.right.states}
    return x0, {name: float(v) for name, v in zip(plant.inputs, here.u, strict=True)}


def _with(
    ground: Ground, cause: str, size: str, model: Matrices, here: Here | None = None, kinds: str = "", clues: str = ""
) -> Delivery:
    """kinds, clues: words with a bar between them."""
    told = (tuple(word for word in text.split("|") if word) for text in (kinds, clues))
    return Delivery(cause, size, model, *claimed(ground, here or ground.here), *told)


def _named(model: Matrices, name: str, i: int, j: int) -> str:
    rows, columns = (model.states if name in "AB" else model.outputs), (model.states if name in "AC" else model.inputs)
    return f"{name}[{rows[i]}, {columns[j]}]"


def _entry(ground: Ground, generator: np.random.Generator) -> tuple[str, int, int]:
    """A place that is not zero, in any matrix."""
    places = [
        (name, i, j)
        for name in MATRICES
        for i, j in zip(*np.nonzero(getattr(ground.right, name)), strict=True)
        if name in "AB" or generator.random() < 0.3
    ]
    name, i, j = places[int(generator.integers(len(places)))]
    return name, int(i), int(j)


def _put(model: Matrices, name: str, change: Callable[[Matrix], None]) -> Matrices:
    block = getattr(model, name).copy()
    change(block)
    return replace(model, **{name: block})


def right(ground: Ground, generator: np.random.Generator) -> Delivery:
    return _with(ground, "none", "", ground.right)


def scaled(ground: Ground, generator: np.random.Generator) -> Delivery:
    factor = float(generator.choice([1.001, 1.01, 1.05, 1.2, 2.0]))
    name, i, j = _entry(ground, generator)
    step = 1.0 if ground.right.step is not None and name == "A" and i == j else 0.0

    def change(block: Matrix) -> None:
        block[i, j] = step + (block[i, j] - step) * (factor if generator.random() < 0.5 else 1.0 / factor)

    told = _named(ground.right, name, i, j)
    return _with(ground, "entry scaled", f"{factor:g}", _put(ground.right, name, change), kinds="entry", clues=told)


def sign(ground: Ground, generator: np.random.Generator) -> Delivery:
    name, i, j = _entry(ground, generator)

    def change(block: Matrix) -> None:
        block[i, j] = -block[i, j]

    told = _named(ground.right, name, i, j)
    return _with(ground, "sign", name, _put(ground.right, name, change), kinds="sign", clues=told)


def swapped(ground: Ground, generator: np.random.Generator) -> Delivery:
    kinds = [kind for kind in ("states", "inputs", "outputs") if len(getattr(ground.right, kind)) > 1]
    kind = kinds[int(generator.integers(len(kinds)))]
    names = list(getattr(ground.right, kind))
    i, j = generator.choice(len(names), size=2, replace=False)
    names[i], names[j] = names[j], names[i]
    model, told = replace(ground.right, **{kind: tuple(names)}), f"{names[i]}|{names[j]}"
    return _with(ground, "names swapped", kind, model, kinds="exchange", clues=told)


def transposed(ground: Ground, generator: np.random.Generator) -> Delivery:
    model = replace(ground.right, A=ground.right.A.T.copy())
    return _with(ground, "transpose", "A", model, kinds="transpose", clues="A")


def unit(ground: Ground, generator: np.random.Generator) -> Delivery:
    """An angle in degrees that is said to be in radians, or rates per minute instead of per second."""
    angles, model = ground.subject.row.angles, ground.right
    known = [name for name in angles if name in (*model.states, *model.inputs, *model.outputs)]
    if not known or generator.random() < 0.25:
        factor = float(generator.choice([60.0, 1.0 / 60.0]))
        model = replace(model, A=model.A * factor, B=model.B * factor)
        return _with(ground, "unit", "time", model, kinds="time")
    name, degrees = known[int(generator.integers(len(known)))], 180.0 / np.pi
    if name in model.inputs:
        j = model.inputs.index(name)
        B, D = model.B.copy(), model.D.copy()
        B[:, j] /= degrees
        D[:, j] /= degrees
        return _with(ground, "unit", "degrees", replace(model, B=B, D=D), kinds="unit", clues=f"{name}|deg")
    if name in model.outputs and (name not in model.states or generator.random() < 0.5):
        i = model.outputs.index(name)
        C, D = model.C.copy(), model.D.copy()
        C[i] *= degrees
        D[i] *= degrees
        return _with(ground, "unit", "degrees", replace(model, C=C, D=D), kinds="unit", clues=f"{name}|deg")
    i = model.states.index(name)
    A, B, C = model.A.copy(), model.B.copy(), model.C.copy()
    A[i], B[i] = A[i] * degrees, B[i] * degrees
    A[:, i], C[:, i] = A[:, i] / degrees, C[:, i] / degrees
    return _with(ground, "unit", "degrees", replace(model, A=A, B=B, C=C), kinds="unit", clues=f"{name}|deg")


def neighbour(ground: Ground, generator: np.random.Generator) -> Delivery:
    case = ground.subject.case
    there = equilibrium(case, case.parameters, ground.here, ground.subject.row.neighbour)
    told = there if generator.random() < 0.5 else ground.here
    model = _alike(ground, slopes(case, case.parameters, there))
    (moved,) = ground.subject.row.neighbour
    return _with(ground, "another point", "", model, told, kinds="trim|point", clues=moved)


def stale(ground: Ground, generator: np.random.Generator) -> Delivery:
    case = ground.subject.case
    names = ground.subject.row.drifting
    name = names[int(generator.integers(len(names)))]
    share = float(generator.choice([-0.2, -0.03, -0.003, 0.003, 0.03, 0.2, 0.5]))
    old = {**case.parameters, name: case.parameters[name] * (1.0 + share)}
    there = equilibrium(case, old, ground.here)
    told = there if generator.random() < 0.5 else ground.here
    model = _alike(ground, slopes(case, old, there))
    made = _with(ground, "stale parameter", f"{name} {share:+g}", model, told, kinds="parameter", clues=name)
    return replace(made, value=old[name])


def mistrimmed(ground: Ground, generator: np.random.Generator) -> Delivery:
    """The right matrices with a claim that is off by a share of a nominal size."""
    delivery = right(ground, generator)
    share = float(generator.choice([0.003, 0.02, 0.2, 1.0]))
    names = [*delivery.x0, *delivery.u0]
    name = names[int(generator.integers(len(names)))]
    by = share * ground.subject.case.nominal.get(name, 1.0)
    x0, u0 = ({**claim, name: claim[name] + by} if name in claim else claim for claim in (delivery.x0, delivery.u0))
    return replace(delivery, cause="wrong trim", size=f"{share:g}", x0=x0, u0=u0)


def missing(ground: Ground, generator: np.random.Generator) -> Delivery:
    """Reduced the other way than the spec says: what is left out frozen instead of settled, or settled instead.

    What cannot settle (it integrates) gives another slip: a state that was kept is frozen as well.
    """
    row = ground.subject.row
    other = "freeze" if row.others == "settle" else "settle"
    out = [ground.whole.states.index(name) for name in ground.whole.states if name not in row.keep]
    if other == "settle" and np.linalg.matrix_rank(ground.whole.A[np.ix_(out, out)]) < len(out):
        A = ground.right.A.copy()
        column = int(generator.integers(len(A)))
        A[:, column] = 0.0
        model, told = replace(ground.right, A=A), f", {ground.right.states[column]}]"
        return _with(ground, "reduced wrongly", "one frozen too", model, kinds="entry", clues=told)
    return _with(ground, "reduced wrongly", other, without(ground.whole, row.keep, other))


def mistimed(ground: Ground, generator: np.random.Generator) -> Delivery:
    """Sampled with another step than it says, or by the forward difference instead of the exponential."""
    step = ground.right.step or 1.0
    factor = float(generator.choice([0.5, 0.9, 0.99, 1.01, 1.1, 2.0]))
    model = held(ground.whole, step * factor, step)
    return replace(_with(ground, "sample time", f"{factor:g}", model, kinds="sampling"), value=step * factor)


def _alike(ground: Ground, whole: Matrices) -> Matrices:
    """Another full model brought to the form that was asked for."""
    if ground.right.step is not None:
        return held(whole, ground.right.step)
    if len(ground.right.states) < len(ground.whole.states):
        return without(whole, ground.subject.row.keep, ground.subject.row.others)
    return whole


def bent(ground: Ground, generator: np.random.Generator) -> Delivery:
    """The right model of a smooth plant; the plant itself has a corner at the operating point."""
    case, model = ground.subject.case, ground.whole
    rate, moving = ground.subject.row.bend
    row, column = model.states.index(rate), model.states.index(moving)
    size = float(generator.choice([0.004, 0.02, 0.1, 0.5]))
    sizes = [[case.nominal.get(name, 1.0) for name in names] for names in (model.states, model.inputs)]
    scale = float(max(np.abs(model.A[row] * sizes[0]).max(), np.abs(model.B[row] * sizes[1]).max()))
    strength = size * scale / sizes[0][column]
    middle, smooth = float(ground.here.x[column]), case.plant.dynamics

    def dynamics(t, x, u, p):
        moved = np.array(smooth(t, x, u, p))
        moved[row] = moved[row] + strength * np.abs(x[column] - middle)
        return moved

    return replace(_with(ground, "corner", f"{size:g}", model), plant=replace(case.plant, dynamics=dynamics))


FAULTS: dict[str, Fault] = {
    "entry scaled": scaled,
    "sign": sign,
    "names swapped": swapped,
    "transpose": transposed,
    "unit": unit,
    "another point": neighbour,
    "stale parameter": stale,
    "wrong trim": mistrimmed,
    "reduced wrongly": missing,
    "sample time": mistimed,
    "corner": bent,
}


def printed(value: float, digits: int) -> float:
    return float(f"{value:.{digits - 1}e}")


def handed(delivery: Delivery, digits: int, generator: np.random.Generator) -> DeliveredModel:
    """As it would stand in a file: rounded, and with signals in any order."""
    model = delivery.model
    blocks = {
        name: np.vectorize(lambda v: printed(v, digits), otypes=[float])(getattr(model, name)) for name in MATRICES
    }
    order = {kind: generator.permutation(len(getattr(model, kind))) for kind in ("states", "inputs", "outputs")}
    s, i, o = order["states"], order["inputs"], order["outputs"]
    names = {kind: tuple(getattr(model, kind)[at] for at in places) for kind, places in order.items()}
    claims = generator.random() < 0.6 or delivery.cause == "wrong trim"
    return DeliveredModel(
        PLACE.file, PLACE,
        frozen_array(blocks["A"][np.ix_(s, s)]), frozen_array(blocks["B"][np.ix_(s, i)]),
        frozen_array(blocks["C"][np.ix_(o, s)]), frozen_array(blocks["D"][np.ix_(o, i)]),
        names["states"], names["inputs"], names["outputs"], model.step,
        x0={k: printed(v, digits) for k, v in delivery.x0.items()} if claims else {},
        u0={k: printed(v, digits) for k, v in delivery.u0.items()} if claims else {},
        digits=digits,
    )  # fmt: skip
