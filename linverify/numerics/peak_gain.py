"""The largest singular value of a transfer matrix over all frequencies, by level sets.

At a level above every value the gain pencil has no eigenvalue on the imaginary axis; below it, the axis is crossed
where the largest singular value passes the level, however narrow the peak (Boyd, Balakrishnan & Kabamba 1989; Bruinsma
& Steinbuch 1990). The level climbs: each eigenvalue that may lie on the axis is a place to look, the response there is
polished by evaluation, and the climb ends where no place lies above the level. An eigenvalue is never believed, only
looked at, so that its rounding error costs a look and not a wrong peak.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.linalg import eigvals

from ..core.model import Array
from ..core.outcome import Outcome
from .mapped import Complex, Mapped, mapped
from .transfer import Transfer

RISE = 1e-7  # relative: the last level above the peak, and thus what the peak is known to
NEAR = 1e-3  # of the modulus: an eigenvalue this far from the axis is still looked at
ROUNDS, POINTS, SHRINK = 14, 9, 3.0  # polishing: each round looks at so many points, then at a third of the stretch
LEVELS = 40  # most levels of a climb; three or four are usual
SINGULAR = 1e-3  # level above the largest singular value of D, relative: nearer to it no Hamiltonian matrix is formed
NOTHING = 1e-150  # a response of this size is none, and no level can be set below it
MANY = 200_000  # complex numbers solved at once


@dataclass(frozen=True, slots=True)
class Peak:
    """value: the supremum over frequency; frequency: where, rad per time unit, infinite where it is the limit there (of
    a sampled transfer function never above the Nyquist frequency); error: of the value, from level and rounding.
    """

    value: float
    frequency: float
    error: float
    outcome: Outcome = Outcome.DONE


def peak(transfer: Transfer) -> Peak:
    """The supremum of the largest singular value of `transfer` over all frequencies; infinite with a pole on the axis.

    Poles may lie on either side of the axis. A common dead time does not matter. Zero for no inputs or outputs.
    """
    if not all(np.isfinite(each).all() for each in (transfer.A, transfer.B, transfer.C, transfer.D)):
        return Peak(math.nan, math.nan, math.inf, Outcome.NOT_FINITE)
    system = mapped(transfer)
    if system.nyquist:
        return Peak(math.inf, math.pi / (system.step or 1.0), 0.0)
    on_axis = system.axis_poles()
    if len(on_axis):
        return Peak(math.inf, system.told(float(np.abs(on_axis.imag).min())), 0.0)
    value, omega, done = climb(system)
    error = RISE * value + rounding(system, omega)
    return Peak(value, system.told(omega), error, Outcome.DONE if done else Outcome.UNVERIFIED)


def climb(system: Mapped) -> tuple[float, float, bool]:
    """Largest singular value of `system` over frequency, where, and whether the climb came to its end."""
    if not min(system.D.shape):
        return 0.0, 0.0, True
    poles = system.poles()
    omega = _starts(poles)
    sizes = gains(system, omega)
    value, where = _best(omega, sizes)
    value, where = _better((value, where), _polished(system, poles, _tops(omega, sizes)))
    for _ in range(LEVELS):
        if value < NOTHING:
            return value, where, True
        level = value * (1.0 + RISE)
        looked = looked_at(system, level)
        found = _best(looked, gains(system, looked))
        tops = looked if found[0] <= level else np.array([found[1]])
        found = _better(found, _polished(system, poles, tops))
        if found[0] <= level:
            return *_better((value, where), found), True
        value, where = found
    return value, where, False


def gains(system: Mapped, omega: Array) -> Array:
    """Largest singular value at each of the mapped frequencies (F,); (F,)."""
    if len(omega) == 0:
        return np.zeros(0)
    at_once = max(1, MANY // max(1, len(system.A)) ** 2)
    parts = [_norms(system.respond(omega[start : start + at_once])) for start in range(0, len(omega), at_once)]
    return np.concatenate(parts)


def _norms(responses: Complex) -> Array:
    if responses.shape[1] == 1 or responses.shape[2] == 1:
        return np.asarray(np.sqrt(np.sum(np.abs(responses) ** 2, axis=(1, 2))))
    return np.asarray(np.linalg.svd(responses, compute_uv=False)[:, 0])


def axis_values(system: Mapped, level: float) -> Complex:
    """Eigenvalues, those on the axis being where a singular value of `system` equals `level` > 0."""
    A, B, C, D = system.A, system.B, system.C, system.D
    (n, m), k = B.shape, len(C)
    if n == 0:
        return np.zeros(0, dtype=np.complex128)
    if level > (1.0 + SINGULAR) * float(np.linalg.norm(D, 2)):
        return _hamiltonian(system, level)
    # inputs and outputs divided by the root of the level, so that its square appears nowhere
    root = math.sqrt(level)
    B, C, D = B / root, C / root, D / level
    whole = np.block(
        [
            [A, np.zeros((n, n)), B, np.zeros((n, k))],
            [np.zeros((n, n)), -A.T, np.zeros((n, m)), -C.T],
            [C, np.zeros((k, n)), D, -np.eye(k)],
            [np.zeros((m, n)), B.T, -np.eye(m), D.T],
        ]
    )
    moving = np.zeros_like(whole)
    moving[: 2 * n, : 2 * n] = np.eye(2 * n)
    with np.errstate(all="ignore"):
        values = eigvals(whole, moving, check_finite=False)
    return np.asarray(values[np.isfinite(values)], dtype=np.complex128)


def _hamiltonian(system: Mapped, level: float) -> Complex:
    root = math.sqrt(level)
    A, B, C, D = system.A, system.B / root, system.C / root, system.D / level
    inner = np.linalg.solve(np.eye(D.shape[1]) - D.T @ D, np.hstack([D.T @ C, B.T]))
    seen, moved = inner[:, : len(A)], inner[:, len(A) :]
    half = A + B @ seen
    matrix = np.block([[half, B @ moved], [-C.T @ (C + D @ seen), -half.T]])
    return np.asarray(np.linalg.eigvals(matrix), dtype=np.complex128)


def crossings(system: Mapped, level: float, near: float = NEAR) -> Array:
    """Mapped frequencies, sorted, at which a singular value may pass `level`; some of them may not."""
    values = axis_values(system, level)
    on = np.abs(values.real) <= near * np.abs(values)
    return np.unique(np.abs(values[on].imag))


def looked_at(system: Mapped, level: float) -> Array:
    """Mapped frequencies of the crossings of `level` and between each two of them; never empty."""
    found = np.concatenate([[0.0], crossings(system, level)])
    return np.unique(np.concatenate([found, 0.5 * (found[1:] + found[:-1]), [2.0 * found[-1], math.inf]]))


def rounding(system: Mapped, omega: float) -> float:
    """Error of the largest singular value at a mapped frequency from rounding of all entries of A, to first order."""
    n = len(system.A)
    size = 2.0**-50 * float(np.linalg.norm(system.D))
    if n == 0 or not math.isfinite(omega):
        return size
    shifted = 1j * omega * np.eye(n) - system.A
    moved = np.abs(np.linalg.solve(shifted, system.B.astype(np.complex128)))
    seen = np.abs(np.linalg.solve(shifted.T, system.C.T.astype(np.complex128))).T
    return size + 2.0**-52 * n * float(np.linalg.norm(seen @ (np.abs(system.A) + abs(omega) * np.eye(n)) @ moved))


def _starts(poles: Complex) -> Array:
    """Where peaks are likely: at poles, between them, at both ends."""
    sizes = np.unique(np.abs(np.concatenate([poles.imag, np.abs(poles)])))
    sizes = sizes[sizes > 0]
    between = np.sqrt(sizes[1:] * sizes[:-1])
    return np.unique(np.concatenate([[0.0], sizes, between, sizes * 0.5, sizes * 2.0, [math.inf]]))


def _best(omega: Array, sizes: Array) -> tuple[float, float]:
    place = int(np.argmax(sizes))
    return float(sizes[place]), float(omega[place])


def _better(one: tuple[float, float], other: tuple[float, float]) -> tuple[float, float]:
    return one if one[0] >= other[0] else other


def _tops(omega: Array, sizes: Array) -> Array:
    """The three highest of `omega`."""
    return omega[np.argsort(-sizes, kind="stable")[:3]]


def _polished(system: Mapped, poles: Complex, places: Array) -> tuple[float, float]:
    """The highest point near any of `places`, each followed over stretches set by the nearest pole."""
    places = places[np.isfinite(places)]
    if len(places) == 0 or len(poles) == 0:
        return -math.inf, 0.0
    width = np.min(np.abs(1j * places[:, np.newaxis] - poles[np.newaxis, :]), axis=1)
    best = (-math.inf, 0.0)
    steps = np.linspace(-1.0, 1.0, POINTS)
    for _ in range(ROUNDS):
        grid = np.abs(places[:, np.newaxis] + width[:, np.newaxis] * steps)
        sizes = gains(system, grid.ravel()).reshape(grid.shape)
        best = _better(best, _best(grid.ravel(), sizes.ravel()))
        top = np.argmax(sizes, axis=1)
        places = grid[np.arange(len(places)), top]
        # a top at the end of the stretch lies further on: the stretch moves and does not shrink
        width = np.where((top > 0) & (top < POINTS - 1), width / SHRINK, width)
    return best
