"""The frequency response of a local model, with the error that follows from the errors of its entries.

G(s) = C (s I - A)^-1 B + D by one solution a frequency, never by polynomials. The error is carried to first order, with
the factor that bounds all higher orders; where that bound fails, so near a pole that the pole itself may lie there, the
error is infinite.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import eigvals, matrix_balance

from ..core.model import Array, LocalModel

Complex = NDArray[np.complex128]
ROUNDING = 2.0**-50  # relative: errors of entries that the evaluation's own rounding may act like
CHUNK = 256  # frequencies solved at once


@dataclass(frozen=True, slots=True, eq=False)
class Blocks:
    """Matrices with states scaled by powers of two, so that A has rows and columns of one size."""

    A: Array
    B: Array
    C: Array
    D: Array
    step: float | None

    def points(self, omega: Array) -> Complex:
        """The points of the s or z plane that stand for angular frequencies."""
        s = 1j * omega
        return np.asarray(s if self.step is None else np.exp(s * self.step), dtype=np.complex128)


def blocks(model: LocalModel) -> Blocks:
    """The balanced matrices of `model`."""
    scale = _scale(model)
    return Blocks(*_scaled(scale, model.A, model.B, model.C, model.D), model.step)


def respond(model: LocalModel, omega: Array) -> Complex:
    """G at each of `omega` (F,), rad per time unit; (F, k, m). Infinite exactly at a pole."""
    return respond_within(model, None, omega)[0]


def respond_within(model: LocalModel, errors: Mapping[str, Array] | None, omega: Array) -> tuple[Complex, Array]:
    """G and a bound of its error, both (F, k, m), for entries that are off by at most `errors`, by matrix name."""
    scaled = blocks(model)
    known = _errors(model, errors)
    found = [
        _solved(scaled, known, scaled.points(omega[start : start + CHUNK])) for start in range(0, len(omega), CHUNK)
    ]
    return np.concatenate([one for one, _ in found]), np.concatenate([one for _, one in found])


def poles(model: LocalModel) -> Complex:
    """Poles in s, per time unit; a pole at z = 0 is infinitely fast and left out."""
    return in_s(np.asarray(np.linalg.eigvals(blocks(model).A), dtype=np.complex128), model.step)


def channel_zeros(model: LocalModel) -> Complex:
    """Zeros in s of every input-output pair, all in one array. Some that lie far away may be spurious."""
    scaled = blocks(model)
    n, (k, m) = len(scaled.A), scaled.D.shape
    found = [eigvals(_system(scaled, i, j), np.diag(np.append(np.ones(n), 0.0))) for i in range(k) for j in range(m)]
    values = np.asarray(np.concatenate(found) if found else [], dtype=np.complex128)
    return in_s(values[np.isfinite(values)], model.step)


def in_s(values: Complex, step: float | None) -> Complex:
    """Points of the z plane in s, with those one turn up and down, which repeat them; z = 0 has no place in s."""
    if step is None:
        return values
    values = values[np.abs(values) > 0.0]
    logs = np.log(values) / step
    turn = 2j * np.pi / step
    return np.concatenate([logs - turn, logs, logs + turn])


def _system(scaled: Blocks, i: int, j: int) -> Array:
    n = len(scaled.A)
    # the bordering row and column brought to the size of A, so that units cost no digits
    size = float(np.abs(scaled.A).max(initial=0.0)) or 1.0
    row, column, corner = scaled.C[i], scaled.B[:, j], scaled.D[i, j]
    by_row = size / (np.abs(row).max(initial=0.0) or 1.0)
    by_column = size / (np.abs(column).max(initial=0.0) or 1.0)
    system = np.zeros((n + 1, n + 1))
    system[:n, :n], system[:n, n] = scaled.A, column * by_column
    system[n, :n], system[n, n] = row * by_row, corner * by_row * by_column
    return system


def _solved(scaled: Blocks, known: tuple[Array, Array, Array, Array], points: Complex) -> tuple[Complex, Array]:
    n = len(scaled.A)
    eye = np.eye(n)
    moved = points[:, np.newaxis, np.newaxis] * eye - scaled.A
    inverse = _inverses(moved)
    with np.errstate(invalid="ignore", over="ignore"):
        left, right = scaled.C @ inverse, inverse @ scaled.B
        response = scaled.C @ right + scaled.D
        EA, EB, EC, ED = known
        left, right = np.abs(left), np.abs(right)
        bound = left @ EA @ right + left @ EB + EC @ right + ED
        growth = (np.abs(inverse) @ EA).sum(axis=2).max(axis=1, initial=0.0)
        factor = np.where(growth < 1.0, 1.0 / np.where(growth < 1.0, 1.0 - growth, 1.0), np.inf)
        bound = bound * factor[:, np.newaxis, np.newaxis]
    bad = ~np.isfinite(response)
    return np.where(bad, np.inf, response), np.where(bad | np.isnan(bound), np.inf, bound)


def _inverses(matrices: Complex) -> Complex:
    try:
        return np.asarray(np.linalg.inv(matrices), dtype=np.complex128)
    except np.linalg.LinAlgError:  # exactly at a pole: that one is infinite, the others are not
        found = np.full(matrices.shape, np.inf, dtype=np.complex128)
        for index, matrix in enumerate(matrices):
            try:
                found[index] = np.linalg.inv(matrix)
            except np.linalg.LinAlgError:
                continue
        return found


def _errors(model: LocalModel, errors: Mapping[str, Array] | None) -> tuple[Array, Array, Array, Array]:
    given = errors or {}
    plain = [
        given.get(name, np.zeros_like(entries)) + ROUNDING * np.abs(entries)
        for name, entries in (("A", model.A), ("B", model.B), ("C", model.C), ("D", model.D))
    ]
    A, B, C, D = _scaled(_scale(model), *plain)
    return A, B, C, D


def _scale(model: LocalModel) -> Array:
    if not len(model.A):
        return np.ones(0)
    _, (scale, _) = matrix_balance(model.A, permute=False, separate=True)
    return np.asarray(scale, dtype=np.float64)


def _scaled(scale: Array, A: Array, B: Array, C: Array, D: Array) -> tuple[Array, Array, Array, Array]:
    return A * scale / scale[:, np.newaxis], B / scale[:, np.newaxis], C * scale, D
