"""Modes of a local model: poles with error discs, which states take part, how far inputs and outputs reach them.

Everything is computed with states scaled by their nominal sizes, so that units change nothing.

- Participation of a state: see `participation`. Modes that cannot be told apart share it.
- Controllability of a mode from an input: |w* b| / (|w| |b|), the cosine of the angle between its left eigenvector w
  and the input's column b, from 0 (out of reach) to 1. Observability at an output: |c v| / (|c| |v|) with the right
  eigenvector v. Of modes that share a projector: the smallest singular value of [N / |N|, b / |b|], where N is A on
  their left subspace less its mean eigenvalue. That is zero where one input cannot reach all of them, as for two
  independent modes with one and the same pole.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.linalg import matrix_balance

from ..core.model import Array, LocalModel
from .frequency import Complex
from .participation import Shared, projectors
from .spectrum import SPACING, Root, roots, structural
from .structure import Pattern
from .traits import Known, Pole, decay_rate

Origin = Literal["no", "maybe", "yes"]
AT_ORIGIN = 1e-9  # of the model's fastest rate: what surely lies nearer to the origin than this counts as there
EXCUSED = 1e-6  # the same, to the power of how many poles lie together: a chain of k is spread to the k-th root
BALANCING = 20  # sweeps that find sizes of states that have none
FARTHEST = 1e-2  # of the fastest rate: nothing farther away is at the origin, however little is known of it


@dataclass(frozen=True, slots=True, eq=False)
class Mode:
    """One real pole, or one conjugate pair.

    pole: in s, per time unit; z: of a difference equation, else NaN; poles: 1, or 2 for a pair; shared: what it has in
    common with other modes, unless it is alone; together: poles that share it and act on common states; cluster: poles
    in its disc of error; origin: whether it lies at the origin; shares (n,): participation of every state, sum one,
    among the states that have anything to do with the mode; share_error: of each.
    """

    pole: Pole
    z: complex
    poles: int
    shared: Shared
    alone: bool
    together: int
    cluster: int
    origin: Origin
    shares: Array
    share_error: float

    @property
    def value(self) -> complex:
        """The pole in s, of a pair the one above the real axis."""
        return self.pole.value

    @property
    def stable(self) -> bool | None:
        """True left of the axis, False right of it or at the origin, None where errors leave that open."""
        rate = decay_rate(self.pole)
        if self.origin == "yes" or rate.high < 0.0:
            return False
        return True if rate.low > 0.0 else None


@dataclass(frozen=True, slots=True, eq=False)
class Modes:
    """All modes of a model, slowest first.

    speed: the model's fastest rate, per time unit; sizes (n,): nominal sizes of the states; states: their names;
    matrix (n, n): A, less I of a difference equation, scaled by the sizes; acts (n, n): whether a column acts on a row.
    """

    modes: tuple[Mode, ...]
    speed: float
    sizes: Array
    states: tuple[str, ...]
    model: LocalModel
    matrix: Array
    acts: Pattern

    def participation(self, mode: Mode, state: str) -> Known:
        """Share of a state in a mode, 0 to 1. Raises ValueError for a state that the model lacks."""
        share, error = float(mode.shares[self.states.index(state)]), mode.share_error
        return Known(share, max(share - error, 0.0), min(share + error, 1.0))

    def dominating(self, mode: Mode, count: int = 3) -> tuple[tuple[str, float], ...]:
        """The states with the largest shares, largest first; shares that tell nothing are left out."""
        order = sorted(range(len(self.states)), key=lambda at: (-round(float(mode.shares[at]), 9), at))
        found = [(self.states[at], float(mode.shares[at])) for at in order[:count]]
        return tuple(one for one in found if one[1] >= 0.1) or tuple(found[:1])

    def controllability(self, mode: Mode, name: str) -> Known:
        """How well an input reaches a mode, 0 to 1. Raises ValueError for an input that the model lacks."""
        column = self.model.inputs.index(name)
        error = self._errors("B")[:, column] / self.sizes
        return self._measure(mode, self.model.B[:, column] / self.sizes, error, "left")

    def observability(self, mode: Mode, name: str) -> Known:
        """How well an output shows a mode, 0 to 1. Raises ValueError for an output that the model lacks."""
        row = self.model.outputs.index(name)
        error = self._errors("C")[row] * self.sizes
        return self._measure(mode, self.model.C[row] * self.sizes, error, "right")

    def _errors(self, name: str) -> Array:
        entries = getattr(self.model, name)
        return np.asarray(self.model.errors.get(name, np.zeros_like(entries)))

    def _measure(self, mode: Mode, vector: Array, error: Array, side: Literal["left", "right"]) -> Known:
        length, doubt = float(np.linalg.norm(vector)), float(np.linalg.norm(error))
        if length <= doubt or length == 0.0:
            # nothing is known to act at all
            return Known(0.0, 0.0, 0.0 if doubt == 0.0 else 1.0)
        basis = mode.shared.left if side == "left" else mode.shared.right
        matrix = self.matrix if side == "left" else self.matrix.T
        reach = basis.conj().T @ (vector / length) if side == "left" else basis.T @ (vector / length)
        value = _least(basis if side == "left" else basis.conj(), matrix, reach)
        away = 2.0 * mode.shared.direction_error + 2.0 * doubt / length + 8.0 * SPACING * len(vector)
        return Known(value, max(value - away, 0.0), min(value + away, 1.0))


def _least(basis: Complex, matrix: Array, reach: Complex) -> float:
    """The least singular value of the coupling inside the subspace beside what reaches it."""
    count = basis.shape[1]
    if count == 1:
        return min(abs(complex(reach[0])), 1.0)
    inner = basis.conj().T @ matrix @ basis
    inner = inner - np.trace(inner) / count * np.eye(count)
    size = float(np.linalg.norm(inner, 2))
    inner = inner / size if size > 1e-12 * float(np.linalg.norm(matrix)) else np.zeros_like(inner)
    return min(float(np.linalg.svd(np.column_stack([inner, reach]), compute_uv=False)[-1]), 1.0)


def modes(model: LocalModel, nominal: Mapping[str, float]) -> Modes:
    """The modes of a local model, with errors from those of its entries. nominal: sizes of states by name.

    A state without a finite size (a controller's) gets the one that balances its row against its column.

    Raises ValueError for a model with entries that are not finite.
    """
    names = model.states.names
    given = np.array([nominal.get(name, math.nan) for name in names], dtype=np.float64)
    sizes = _sizes(np.asarray(model.A), given)
    A = np.asarray(model.A, dtype=np.float64)
    errors = np.asarray(model.errors.get("A", np.zeros_like(A)), dtype=np.float64)
    if model.step is not None:
        A = A - np.eye(len(A))
        errors = np.where((A == 0.0) & (errors <= 4.0 * SPACING), 0.0, errors)  # one, written as one
    A, errors = A * sizes / sizes[:, np.newaxis], errors * sizes / sizes[:, np.newaxis]
    errors = structural(A, errors, _driven(model, sizes, nominal))
    found = sorted(roots(A, errors) if model.step is None else roots(A, errors, _inwards), key=_order)
    speed = _speed(A, found)
    shared = projectors(A, errors, found)
    whose = [(id(one), root.part) for root, one in zip(found, shared, strict=True)]
    made = []
    for root, one, own in zip(found, shared, whose, strict=True):
        together = sum(_poles(other) for other, its in zip(found, whose, strict=True) if its == own)
        made.append(_mode(root, one, model.step, speed, (shared.count(one) == 1, together)))
    per_time = speed if model.step is None else speed / model.step
    return Modes(tuple(sorted(made, key=_told_order)), per_time, sizes, names, model, A, (A != 0.0) | (errors > 0.0))


def _driven(model: LocalModel, sizes: Array, nominal: Mapping[str, float]) -> Array:
    """The largest term of inputs in each row (n,), scaled."""
    moves = np.array([nominal.get(name, 1.0) for name in model.inputs.names], dtype=np.float64)
    terms = np.abs(np.asarray(model.B)) * np.where(np.isfinite(moves), moves, 1.0) / sizes[:, np.newaxis]
    return np.asarray(terms.max(axis=1, initial=0.0), dtype=np.float64)


def _sizes(A: Array, given: Array) -> Array:
    """`given` (n,) with what is not finite replaced by sizes that balance rows against columns of A (n, n)."""
    known = np.isfinite(given)
    sizes = np.where(known, given, 1.0)
    if known.all():
        return sizes
    size = np.abs(A)
    size[np.diag_indices_from(size)] = 0.0
    for _ in range(BALANCING):
        for at in np.flatnonzero(~known):
            row, column = float(size[at] @ sizes), float(size[:, at] @ (1.0 / sizes))
            if row > 0.0 and column > 0.0:
                sizes[at] = math.sqrt(row / column)
            elif row > 0.0:  # it acts on nothing: as large as what acts on it makes it in one time unit
                sizes[at] = row
    return sizes


def _order(root: Root) -> tuple[float, float, float]:
    return _rounded(abs(root.value)), _rounded(root.value.real), -root.value.imag


def _told_order(mode: Mode) -> tuple[float, float, float]:
    return _rounded(abs(mode.value)), _rounded(mode.value.real), -mode.value.imag


def _rounded(value: float) -> float:
    # nine digits: the last bits of a repeated pole must not decide the order
    return float(f"{value:.9g}") if math.isfinite(value) else value


def _speed(A: Array, found: Sequence[Root]) -> float:
    """The fastest rate: of the poles, or of the balanced entries where all poles lie at the origin."""
    if not len(A):
        return 0.0
    balanced, _ = matrix_balance(A, permute=False, separate=True)
    return max([float(np.abs(balanced).max()), *(abs(root.value) for root in found)])


def _poles(root: Root) -> int:
    return 1 if root.value.imag == 0.0 else 2


def _mode(root: Root, shared: Shared, step: float | None, speed: float, company: tuple[bool, int]) -> Mode:
    place = list(root.part)
    weights = np.zeros_like(shared.shares)
    weights[place] = shared.shares[place]
    whole = float(weights.sum())
    if step is None:
        z, pole = complex(math.nan, math.nan), Pole(root.value, root.radius, root.real, along=root.along)
    else:
        z, pole = 1.0 + root.value, _in_s(root, step)
    return Mode(
        pole, z, _poles(root), shared, *company, root.together, _origin(root, speed),
        weights / whole, shared.share_error / whole,
    )  # fmt: skip


def _in_s(root: Root, step: float) -> Pole:
    """log z / step of a pole z = 1 + root, with what the disc about it becomes."""
    z = 1.0 + root.value
    size = abs(z)
    if not root.radius < size:
        # so near to z = 0 that its angle means nothing; all that is known is how fast it dies at least
        most = size + root.radius
        return Pole(complex(-math.inf, 0.0), math.inf, beyond=(-_log(most) / step, math.pi / step))
    value = complex(np.log1p(root.value)) / step
    share = root.radius / size
    # log(1 + d) = d + rest, and |rest| <= |d|^2 / (2 (1 - |d|))
    along = (root.along / size + 0.5 * share**2 / (1.0 - share)) / step
    return Pole(value, -math.log1p(-share) / step, root.real and z.real > 0.0, along=along)


def _inwards(value: complex) -> complex:
    """The direction in which z = 1 + value moves towards or away from z = 0: that of the real part of log z."""
    z = 1.0 + value
    return z.conjugate() / abs(z) if z else 1.0 + 0.0j


def _log(value: float) -> float:
    return -math.inf if value == 0.0 else math.log(value)


def _origin(root: Root, speed: float) -> Origin:
    """ "yes": zero for sure, or nearer to it than rounding of any use; "maybe": it may be, as far as is known."""
    if root.zero:
        return "yes"
    if abs(root.center) > root.spread:
        return "no"
    return "yes" if abs(root.center) + root.spread <= AT_ORIGIN * speed else "maybe"


def excusable(mode: Mode, speed: float) -> bool:
    """True for a pole that may be at the origin and is known well enough to be excused as such.

    A chain of k integrators whose entries are known to eps has poles up to eps^(1/k) away. speed: of `Modes`.
    """
    if mode.origin == "yes":
        return True
    if mode.origin == "no" or speed == 0.0:
        return False
    away = (abs(mode.value) + mode.pole.radius) / speed
    return away <= FARTHEST and away**mode.cluster <= EXCUSED
