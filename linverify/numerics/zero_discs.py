"""Transmission zeros of some channels of a local model, with errors from those of the entries.

A zero is where the system matrix [A - s I, B; C, D] loses rank. Its first-order shift by an error X of that matrix is
y* X x / y* [I 0; 0 0] x, with the null vectors x and y there; its bound sums over entries without regard to sign. Only
as many inputs as outputs have zeros that stay when entries change: of others it is told that nothing bounds them.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..core.model import Array, LocalModel, frozen_array
from ..core.signals import Signals
from .frequency import Complex, respond_within
from .spectrum import SPACING
from .traits import Pole
from .zeros import transmission_zeros

RESERVE = 4.0  # times the first-order bound: for what is of higher order
AT_ORIGIN = 1e-9  # of the largest rate of the model: a zero that surely lies nearer than this counts as at the origin
BLIND = 1e-9  # of the largest response: a singular value below it is none


@dataclass(frozen=True, slots=True)
class Zero:
    """A zero in s, per time unit, on or above the real axis; z: of a difference equation; at_origin: it counts so."""

    pole: Pole
    z: complex
    at_origin: bool


@dataclass(frozen=True, slots=True)
class Zeros:
    """What was found of the zeros of some channels.

    blind: the outputs do not answer all of the inputs independently, so that every place is a zero; square: there are
    as many inputs as outputs.
    """

    blind: bool
    square: bool
    zeros: tuple[Zero, ...]


def channels(model: LocalModel, inputs: Sequence[str], outputs: Sequence[str]) -> LocalModel:
    """The model from some inputs to some outputs or states. Raises ValueError for a name that it does not have."""
    columns = [model.inputs.index(name) for name in inputs]
    n, m = model.B.shape
    rows, blocks = [], {"C": np.zeros((len(outputs), n)), "D": np.zeros((len(outputs), m))}
    errors = {"C": np.zeros((len(outputs), n)), "D": np.zeros((len(outputs), m))}
    for at, name in enumerate(outputs):
        rows.append(model.outputs.unit(name) if name in model.outputs else model.states.unit(name))
        if name not in model.outputs:
            blocks["C"][at, model.states.index(name)] = 1.0
            continue
        row = model.outputs.index(name)
        for word in ("C", "D"):
            blocks[word][at] = getattr(model, word)[row]
            errors[word][at] = model.errors.get(word, np.zeros_like(getattr(model, word)))[row]
    units = tuple(model.inputs.units[column] for column in columns)
    of_B = model.errors.get("B", np.zeros_like(model.B))
    return replace(
        model,
        B=frozen_array(model.B[:, columns]),
        C=frozen_array(blocks["C"]),
        D=frozen_array(blocks["D"][:, columns]),
        inputs=Signals(tuple(inputs), units),
        outputs=Signals(tuple(outputs), tuple(rows)),
        errors={
            "A": model.errors.get("A", np.zeros_like(model.A)),
            "B": of_B[:, columns],
            "C": errors["C"],
            "D": errors["D"][:, columns],
        },
        ahead=None,
    )


def zeros_of(model: LocalModel) -> Zeros:
    """The zeros of all channels of `model` together, nearest to the origin first."""
    k, m = model.D.shape
    if _blind(model):
        return Zeros(True, k == m, ())
    found = [value for value in transmission_zeros(model) if value.imag >= 0.0]
    speed = _speed(model)
    made = [_zero(model, complex(value), speed, k == m) for value in found]
    return Zeros(False, k == m, tuple(sorted(made, key=_order)))


def _order(zero: Zero) -> tuple[float, float, float]:
    return abs(zero.pole.value), zero.pole.value.real, zero.pole.value.imag


def _speed(model: LocalModel) -> float:
    """The fastest rate of a model, per time unit or per step."""
    if not len(model.A):
        return 0.0
    rates = np.linalg.eigvals(model.A) - (0.0 if model.step is None else 1.0)
    return float(np.abs(rates).max())


def _blind(model: LocalModel) -> bool:
    """True where the response loses rank everywhere: told at a frequency that nothing singles out."""
    speed = _speed(model) or 1.0
    omega = 0.7318 * speed if model.step is None else 0.7318 / model.step
    response, bound = (part[0] for part in respond_within(model, model.errors, np.array([omega])))
    if not response.size or not np.isfinite(response).all():
        return False
    response = np.where(np.abs(response) <= bound, 0.0, response)
    for axis in (1, 0):  # rows and columns of one size: units do not decide what is small
        size = np.abs(response).max(axis=axis, keepdims=True)
        if not size.all():
            return True
        response = response / size
    sizes = np.linalg.svd(response, compute_uv=False)
    return bool(sizes[-1] <= BLIND * sizes[0])


def _zero(model: LocalModel, value: complex, speed: float, square: bool) -> Zero:
    radius = _radius(model, value) if square else math.inf
    about = value if model.step is None else value - 1.0
    at_origin = abs(about) <= radius and abs(about) + radius <= AT_ORIGIN * speed
    at_origin = at_origin or about == 0.0
    nan = complex(math.nan, math.nan)
    if model.step is None:
        return Zero(Pole(value, radius, value.imag == 0.0), nan, at_origin)
    size = abs(value)
    if not radius < size:
        most = size + radius
        rate = math.inf if most == 0.0 else -math.log(most) / model.step if math.isfinite(most) else -math.inf
        return Zero(Pole(complex(-math.inf, 0.0), math.inf, beyond=(rate, math.pi / model.step)), value, at_origin)
    in_s = complex(np.log(value)) / model.step
    real = value.imag == 0.0 and value.real > 0.0
    return Zero(Pole(in_s, -math.log1p(-radius / size) / model.step, real), value, at_origin)


def _radius(model: LocalModel, value: complex) -> float:
    """The reserve times the first-order error of one zero; infinite where it is repeated."""
    n = len(model.A)
    scale = _scales(model)
    left, sizes, right = np.linalg.svd(scale[0] * _system(model, value) * scale[1])
    y, x = left[:, -1], right[-1].conj()
    moves = abs(complex((y[:n].conj() * scale[0][:n, 0] * scale[1][0, :n] * x[:n]).sum()))
    errors = scale[0] * _errors(model) * scale[1] + SPACING * float(sizes[0])
    return RESERVE * float(np.abs(y) @ errors @ np.abs(x)) / moves if moves > 0.0 else math.inf


def _system(model: LocalModel, value: complex) -> Complex:
    n = len(model.A)
    top = np.hstack([model.A - value * np.eye(n), model.B])
    return np.asarray(np.vstack([top, np.hstack([model.C, model.D])]), dtype=np.complex128)


def _errors(model: LocalModel) -> Array:
    known = model.errors
    A, B, C, D = (known.get(name, np.zeros_like(getattr(model, name))) for name in "ABCD")
    return np.asarray(np.vstack([np.hstack([A, B]), np.hstack([C, D])]), dtype=np.float64)


def _scales(model: LocalModel) -> tuple[Array, Array]:
    """Factors of rows (n + k, 1) and columns (1, n + m) that bring the system matrix to entries of about one."""
    size = np.abs(np.vstack([np.hstack([model.A, model.B]), np.hstack([model.C, model.D])])) + 0.0
    rows, columns = np.ones((size.shape[0], 1)), np.ones((1, size.shape[1]))
    for _ in range(5):
        by_row = (rows * size * columns).max(axis=1, keepdims=True, initial=0.0)
        rows = rows / np.where(by_row > 0.0, np.sqrt(by_row), 1.0)
        by_column = (rows * size * columns).max(axis=0, keepdims=True, initial=0.0)
        columns = columns / np.where(by_column > 0.0, np.sqrt(by_column), 1.0)
    return rows, columns
