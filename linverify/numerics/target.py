"""What a guessed cause must explain: every entry of a delivered model, to within printed digits and our own errors.

Where states are anonymous their entries mean nothing, and the responses at many frequencies stand in for them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from ..core.model import Array, LocalModel
from .frequency import Complex, respond_within
from .pair import MATRICES, Pair
from .similarity import frequencies

NEARLY, NEAR = 0.01, 0.005  # of the largest gap, and of a row's largest term
OWN = 0.1  # of a changed number itself
FLOOR = 1e-6  # of a row's largest term: trims and slopes found twice differ by less, faults that matter by more


@dataclass(frozen=True, slots=True, eq=False)
class Target:
    """The delivered model as numbers (q,), in a scaling in which 1 is the largest term of a row or response."""

    pair: Pair
    values: Array
    printed: Array
    scale: Array
    omega: Array

    def gap(self, model: LocalModel) -> Array:
        """Delivered minus `model`, scaled, (q,). `model` has the inputs, outputs and states of the pair's reference."""
        return (self.values - _numbers(self.pair, model, self.omega)[0]) / self.scale

    def allowed(self, model: LocalModel) -> Array:
        """How much of the gap printed digits, errors of `model` and our own repeatability explain, (q,)."""
        return (self.printed + _numbers(self.pair, model, self.omega)[1]) / self.scale + FLOOR

    def explained(self, model: LocalModel) -> bool:
        """True where no number of the delivered model is off from `model` by more than is allowed."""
        return not self.unexplained(model).any()

    def nearly_explained(self, model: LocalModel) -> bool:
        """True where `model` is near everywhere, and nearer than a hundredth of the reference's largest gap.

        What it changes it must also get right by its own size: numbers that are simply missing are near to whatever a
        unit a thousand times larger would have left of them.
        """
        gap, found = self.gap(model), self.gap(self.pair.reference)
        left, most = np.abs(gap), np.abs(found).max(initial=0.0)
        changed = np.abs(found - gap) > NEARLY * most
        own = np.abs(self.values / self.scale - gap)
        near = left.max(initial=0.0) <= min(NEAR, NEARLY * most)
        return bool(near and np.all(left[changed] <= OWN * own[changed]))

    def unexplained(self, model: LocalModel) -> Array:
        """Which numbers are off, (q,)."""
        return np.asarray(np.abs(self.gap(model)) > self.allowed(model))


def target(pair: Pair) -> Target:
    """The delivered model of `pair` as what has to be explained."""
    omega = frequencies(pair) if pair.anonymous else np.zeros(0)
    values, printed = _numbers(pair, pair.delivered, omega, pair.rounding)
    return Target(pair, values, printed, _scale(pair, omega), omega)


def _numbers(
    pair: Pair, model: LocalModel, omega: Array, errors: Mapping[str, Array] | None = None
) -> tuple[Array, Array]:
    known = errors or model.errors
    if pair.anonymous:
        response, bound = respond_within(model, known or None, omega)
        return _parts(response), np.concatenate([bound.ravel(), bound.ravel()])
    blocks = [getattr(model, name) for name in MATRICES]
    given = [known.get(name, np.zeros_like(block)) for name, block in zip(MATRICES, blocks, strict=True)]
    return _flat(blocks), _flat(given)


def _scale(pair: Pair, omega: Array) -> Array:
    if pair.anonymous:
        size = np.abs(respond_within(pair.reference, None, omega)[0])
        top = np.where(np.isfinite(size), size, 0.0).max(axis=0)
        whole = np.broadcast_to(np.where(top > 0, top, 1.0), size.shape).ravel()
        return np.concatenate([whole, whole])
    ours, theirs = _tops(pair, pair.reference), _tops(pair, pair.delivered)
    # the smaller of both: a discrete model handed over as a continuous one has rows of another size
    tops = [
        np.where(one * other > 0, np.minimum(one, other), np.where(one + other > 0, one + other, 1.0))
        for one, other in zip(ours, theirs, strict=True)
    ]
    return _flat([tops[0] / pair.states, tops[0] / pair.inputs, tops[1] / pair.states, tops[1] / pair.inputs])


def _tops(pair: Pair, model: LocalModel) -> tuple[Array, Array]:
    rates = np.hstack([model.A * pair.states, model.B * pair.inputs])
    outputs = np.hstack([model.C * pair.states, model.D * pair.inputs])
    first, second = (np.abs(rows).max(axis=1, initial=0.0)[:, np.newaxis] for rows in (rates, outputs))
    return first, second


def _parts(response: Complex) -> Array:
    whole = np.where(np.isfinite(response), response, 1e300).ravel()
    return np.concatenate([whole.real, whole.imag])


def _flat(blocks: list[Array]) -> Array:
    return np.concatenate([np.asarray(block, dtype=np.float64).ravel() for block in blocks])
