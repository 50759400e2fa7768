"""Fewer states: what is left out is held at trim (freeze), or follows the rest quasi-steadily (settle).

Freezing keeps rows and columns. Settling solves the left-out equations for rates of zero (in a difference equation: for
no change from step to step), and is right only where what is left out dies out much faster than what is kept moves.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from ..core.delivered import Keep
from ..core.errors import Place
from ..core.model import Array, LocalModel, frozen_array
from .placed import part

FASTER = 3.0  # least ratio of the slowest decay left out to the fastest motion kept
SHOWN = 4  # digits of poles in messages
Poles = NDArray[np.complex128]
_NOWHERE = Place("<python>")


@dataclass(frozen=True, slots=True, eq=False)
class Reduction:
    """The reduced model, or why there is none."""

    model: LocalModel | None
    refusal: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class _Blocks:
    """kept and left-out rows of A, B and columns of C; D."""

    kept: LocalModel
    A12: Array
    A21: Array
    A22: Array
    B2: Array
    C2: Array


def reduced(model: LocalModel, keep: Keep) -> Reduction:
    """`model` with the states, inputs and outputs of `keep` only, in the order of `model`.

    Entries carry the errors of those they are made from. Raises ValueError for a name that the model does not have.
    """
    for names, signals in ((keep.states, model.states), (keep.inputs, model.inputs), (keep.outputs, model.outputs)):
        if foreign := [name for name in names if name not in signals]:
            raise ValueError(f"the model has no {foreign[0]} to keep")
    blocks, errors = _blocks(model, keep), _blocks(_errors_of(model), keep)
    if keep.others == "freeze" or not len(blocks.A22):
        return Reduction(_with_errors(blocks.kept, errors.kept))
    return _settled(blocks, errors)


def restricted(model: LocalModel, inputs: Sequence[str], outputs: Sequence[str]) -> LocalModel:
    """`model` with these inputs and outputs only, in its own order; all states are kept."""
    keep = Keep(model.states.names, tuple(inputs), tuple(outputs), "freeze", _NOWHERE)
    return _with_errors(_blocks(model, keep).kept, _blocks(_errors_of(model), keep).kept)


def _blocks(model: LocalModel, keep: Keep) -> _Blocks:
    states, i = part(model.states, keep.states)
    inputs, j = part(model.inputs, keep.inputs)
    outputs, k = part(model.outputs, keep.outputs)
    out = np.setdiff1d(np.arange(len(model.states)), i)
    kept = replace(
        model,
        A=frozen_array(model.A[np.ix_(i, i)]),
        B=frozen_array(model.B[np.ix_(i, j)]),
        C=frozen_array(model.C[np.ix_(k, i)]),
        D=frozen_array(model.D[np.ix_(k, j)]),
        states=states,
        inputs=inputs,
        outputs=outputs,
        errors={},
    )
    return _Blocks(
        kept,
        model.A[np.ix_(i, out)],
        model.A[np.ix_(out, i)],
        model.A[np.ix_(out, out)],
        model.B[np.ix_(out, j)],
        model.C[np.ix_(k, out)],
    )


def _settled(blocks: _Blocks, errors: _Blocks) -> Reduction:
    kept, step = blocks.kept, blocks.kept.step
    still = blocks.A22 if step is None else blocks.A22 - np.eye(len(blocks.A22))
    if np.linalg.cond(still) > 1.0 / np.finfo(np.float64).eps:
        return Reduction(None, "settle: what is left out does not settle: it integrates (a pole at the origin)")
    follow, driven = -np.linalg.solve(still, blocks.A21), -np.linalg.solve(still, blocks.B2)
    model = replace(
        kept,
        A=frozen_array(kept.A + blocks.A12 @ follow),
        B=frozen_array(kept.B + blocks.A12 @ driven),
        C=frozen_array(kept.C + blocks.C2 @ follow),
        D=frozen_array(kept.D + blocks.C2 @ driven),
    )
    if refusal := _too_slow(rates(blocks.A22, step), rates(model.A, step)):
        return Reduction(None, refusal)
    left = np.abs(np.linalg.solve(still.T, blocks.A12.T).T)
    read = np.abs(np.linalg.solve(still.T, blocks.C2.T).T)
    follow, driven = np.abs(follow), np.abs(driven)
    e = errors.kept
    spread = replace(
        e,
        A=e.A + errors.A12 @ follow + left @ (errors.A21 + errors.A22 @ follow),
        B=e.B + errors.A12 @ driven + left @ (errors.B2 + errors.A22 @ driven),
        C=e.C + errors.C2 @ follow + read @ (errors.A21 + errors.A22 @ follow),
        D=e.D + errors.C2 @ driven + read @ (errors.B2 + errors.A22 @ driven),
    )
    return Reduction(_with_errors(model, spread))


def rates(A: Array, step: float | None) -> Poles:
    """Poles as continuous rates, complex, per time unit; a pole at zero of a difference equation is infinitely fast."""
    poles = np.asarray(np.linalg.eigvals(A), dtype=np.complex128)
    if step is None:
        return poles
    found = np.full(poles.shape, -np.inf, dtype=np.complex128)
    alive = np.abs(poles) > 0.0
    found[alive] = np.log(poles[alive]) / step
    return found


def _too_slow(left: Poles, kept: Poles) -> str:
    """Why what is left out may not be settled; empty where it may."""
    growing = left[left.real >= 0.0]
    if growing.size:
        return f"settle: what is left out is not stable (pole {_told(growing[np.argmax(growing.real)])})"
    slowest = left[np.argmax(left.real)]
    fastest = kept[np.argmax(np.abs(kept))] if kept.size else 0.0
    if -slowest.real < FASTER * abs(fastest):
        ratio = -slowest.real / abs(fastest)
        return (
            f"settle: what is left out decays only {ratio:.3g} times as fast as what is kept moves (pole "
            f"{_told(slowest)} left out, {_told(fastest)} kept); at least {FASTER:g} times is needed"
        )
    return ""


def _told(pole: complex) -> str:
    if abs(pole.imag) <= 1e-9 * abs(pole):
        return f"{pole.real:.{SHOWN}g}"
    return f"{pole.real:.{SHOWN}g} +- {abs(pole.imag):.{SHOWN}g}j"


def _errors_of(model: LocalModel) -> LocalModel:
    """The errors of all entries in the place of the entries; zero where none are known."""
    found = {name: model.errors.get(name, np.zeros_like(getattr(model, name))) for name in ("A", "B", "C", "D")}
    return replace(model, A=found["A"], B=found["B"], C=found["C"], D=found["D"])


def _with_errors(model: LocalModel, errors: LocalModel) -> LocalModel:
    return replace(model, errors={name: frozen_array(getattr(errors, name)) for name in ("A", "B", "C", "D")})
