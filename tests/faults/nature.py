"""Equilibria and local models found without the package: extended precision and central differences of high order.

Nothing here comes from what is being tested but the plant functions themselves and the numbers that a spec declares.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from scipy.linalg import expm
from scipy.optimize import root

from linverify.core.case import Case, Interval

TRIES = 40  # places from which an equilibrium is sought

Matrix = np.ndarray
Parameters = Mapping[str, float]
NOWHERE: Parameters = {}


@dataclass(frozen=True)
class Here:
    """An operating point: x (n,), u (m,), y (k,) and the rates that remain there."""

    x: Matrix
    u: Matrix
    y: Matrix
    drift: Matrix


@dataclass(frozen=True)
class Matrices:
    """x' = A x + B u, y = C x + D u; or the next state, where step is given. Names in order."""

    A: Matrix
    B: Matrix
    C: Matrix
    D: Matrix
    states: tuple[str, ...]
    inputs: tuple[str, ...]
    outputs: tuple[str, ...]
    step: float | None = None


def rates(case: Case, parameters: Parameters, x: Matrix, u: Matrix) -> Matrix:
    return np.asarray(case.plant.dynamics(case.time, x, u, parameters))


def readings(case: Case, parameters: Parameters, x: Matrix, u: Matrix) -> Matrix:
    """Outputs; a plant without a measurement function reads the states of that name."""
    if case.plant.measurement is None:
        states = list(case.plant.states)
        return x[[states.index(name) for name in output_names(case)]]
    return np.asarray(case.plant.measurement(case.time, x, u, parameters))


def output_names(case: Case) -> tuple[str, ...]:
    """Names of outputs in order; of all states where a plant names none."""
    return tuple(case.plant.states if case.plant.outputs is None else case.plant.outputs)


def equilibrium(
    case: Case, parameters: Parameters, near: Here | None = None, moved: Mapping[str, float] = NOWHERE
) -> Here:
    """What the spec's holds come to, refined until the residuals are at the level of rounding.

    moved: holds with other values; near: where to begin, otherwise the spec's own start; then places drawn over the
    envelope. Raises ValueError where nothing is found inside it.
    """
    plant, ask = case.plant, replace(case.trim, hold={**case.trim.hold, **moved})
    names = [*plant.states, *plant.inputs]
    begin = np.array([ask.hold.get(name, ask.start.get(name, 0.0)) for name in names], dtype=np.longdouble)
    if near is not None:
        held = np.array([name in ask.hold for name in names])
        begin = np.where(held, begin, np.concatenate([near.x, near.u]))
    free = [names.index(name) for name in ask.find]
    due = [(row, ask.rates.get(name, 0.0)) for row, name in enumerate(plant.states) if name not in ask.free]
    outputs = output_names(case)
    held_outputs = [(outputs.index(name), value) for name, value in ask.hold.items() if name not in names]

    def residual(unknowns: Matrix) -> Matrix:
        point = begin.copy()
        point[free] = unknowns
        x, u = point[: len(plant.states)], point[len(plant.states) :]
        moved, read = rates(case, parameters, x, u), readings(case, parameters, x, u)
        return np.array([*(moved[i] - v for i, v in due), *(read[i] - v for i, v in held_outputs)])

    if free:
        begin[free] = _searched(residual, _starts(case, names, begin)[:, free], _inside(case, [names[i] for i in free]))
    x, u = begin[: len(plant.states)], begin[len(plant.states) :]
    parts = (x, u, readings(case, parameters, x, u), rates(case, parameters, x, u))
    return Here(*(np.asarray(part, dtype=np.float64) for part in parts))


def _starts(case: Case, names: list[str], begin: Matrix) -> Matrix:
    """Where to begin, one a row: as asked, then over the envelope; signals without a range stay where they are."""
    generator = np.random.default_rng(71)
    rows = [begin]
    for _ in range(TRIES):
        drawn = [
            case.envelope.get(name, Interval(float(value), float(value)))
            for name, value in zip(names, begin, strict=True)
        ]
        rows.append(np.array([generator.uniform(one.low, one.high) if one.bounded else 0.0 for one in drawn]))
    return np.array(rows, dtype=np.longdouble)


def _inside(case: Case, names: list[str]) -> Callable[[Matrix], bool]:
    rooms = [case.envelope.get(name, Interval()) for name in names]
    return lambda values: all(float(value) in room for value, room in zip(values, rooms, strict=True))


def _searched(residual: Callable[[Matrix], Matrix], starts: Matrix, inside: Callable[[Matrix], bool]) -> Matrix:
    told = "nothing was tried"
    for begin in starts:
        with np.errstate(all="ignore"):
            try:
                found = _solved(residual, begin)
            except (ValueError, ArithmeticError, np.linalg.LinAlgError) as error:
                told = str(error)
                continue
        if inside(found):
            return found
        told = f"outside the envelope: {found}"
    raise ValueError(f"no equilibrium: {told}")


def _solved(residual: Callable[[Matrix], Matrix], begin: Matrix) -> Matrix:
    def rough(z: Matrix) -> Matrix:
        return np.nan_to_num(residual(z.astype(np.longdouble)).astype(np.float64), nan=1e6, posinf=1e6, neginf=-1e6)

    found = root(rough, begin.astype(np.float64), method="hybr").x.astype(np.longdouble)
    scale = np.abs(_differences(residual, found)).astype(np.float64) @ np.maximum(
        np.abs(found.astype(np.float64)), 1e-3
    )
    for _ in range(8):
        slopes = _differences(residual, found).astype(np.float64)
        if not np.all(np.isfinite(slopes)):
            raise ValueError("the plant gives no numbers there")
        change = np.linalg.lstsq(slopes, -residual(found).astype(np.float64), rcond=None)[0]
        found = found + change
    left = np.abs(residual(found).astype(np.float64))
    if not np.all(left <= 1e-12 * np.maximum(scale, 1e-12)):
        raise ValueError(f"residuals of {left} remain")
    return found


def _differences(f: Callable[[Matrix], Matrix], at: Matrix) -> Matrix:
    """Slopes by central differences of sixth order in extended precision: good to about eleven digits."""
    columns = []
    for j in range(len(at)):
        h = np.longdouble(2e-3) * max(np.longdouble(1e-2), abs(at[j]))
        total = np.zeros_like(f(at))
        for k, weight in ((1, 45.0), (2, -9.0), (3, 1.0)):
            up, down = at.copy(), at.copy()
            up[j] += k * h
            down[j] -= k * h
            total = total + weight * (f(up) - f(down))
        columns.append(total / (60.0 * h))
    return np.stack(columns, axis=1)


def slopes(case: Case, parameters: Parameters, here: Here) -> Matrices:
    """The local model about a point, in the plant's order and units."""
    n = len(here.x)
    at = np.concatenate([here.x, here.u]).astype(np.longdouble)

    def both(z: Matrix) -> Matrix:
        x, u = z[:n], z[n:]
        return np.concatenate([rates(case, parameters, x, u), readings(case, parameters, x, u)])

    whole = _differences(both, at).astype(np.float64)
    whole[np.abs(whole) < 1e-13 * np.abs(whole).max(axis=1, keepdims=True)] = 0.0
    return Matrices(
        whole[:n, :n], whole[:n, n:], whole[n:, :n], whole[n:, n:],
        tuple(case.plant.states), tuple(case.plant.inputs), output_names(case),
    )  # fmt: skip


def held(model: Matrices, step: float, told: float | None = None) -> Matrices:
    """Sampled every `step` with held inputs; said to be sampled every `told`."""
    n, m = model.B.shape
    whole = np.zeros((n + m, n + m))
    whole[:n, :n], whole[:n, n:] = model.A * step, model.B * step
    made = expm(whole)
    return Matrices(
        made[:n, :n], made[:n, n:], model.C, model.D, model.states, model.inputs, model.outputs, told or step
    )


def without(model: Matrices, keep: tuple[str, ...], others: str) -> Matrices:
    """Fewer states: what is left out stands still (freeze) or is where its rate is zero (settle)."""
    inside = [model.states.index(name) for name in model.states if name in keep]
    outside = [row for row in range(len(model.states)) if row not in inside]
    A, B, C, D = model.A[np.ix_(inside, inside)], model.B[inside], model.C[:, inside], model.D
    if others == "settle":
        back = np.linalg.inv(model.A[np.ix_(outside, outside)])
        into, read = model.A[np.ix_(inside, outside)] @ back, model.C[:, outside] @ back
        A, B = A - into @ model.A[np.ix_(outside, inside)], B - into @ model.B[outside]
        C, D = C - read @ model.A[np.ix_(outside, inside)], D - read @ model.B[outside]
    return Matrices(A, B, C, D, tuple(model.states[row] for row in inside), model.inputs, model.outputs)


def responses(model: Matrices, frequencies: Matrix) -> Matrix:
    """C (s - A)^-1 B + D at angular frequencies, (F, k, m); s on the unit circle for a sampled model."""
    s = 1j * frequencies if model.step is None else np.exp(1j * frequencies * model.step)
    inner = s[:, np.newaxis, np.newaxis] * np.eye(len(model.A)) - model.A
    return model.C @ np.linalg.solve(inner, np.broadcast_to(model.B, (len(s), *model.B.shape))) + model.D
