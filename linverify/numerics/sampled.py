"""A continuous local model at the instants of a sample time, with the error of every entry carried along."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from ..core.delivered import Course
from ..core.model import Array, LocalModel, frozen_array
from .hold import held, straight

Blocks = tuple[Array, Array, Array, Array]
ROUNDING = 2.0**-50  # relative, of the exponential's own arithmetic


def sampled(model: LocalModel, step: float, course: Course) -> LocalModel:
    """x[k+1] = A x[k] + B u[k], y = C x + D u at multiples of `step` time units, exact for inputs of that course.

    For straight courses the state is shifted by what the input at the instant itself contributes, since the next state
    depends on both ends of a line: z[k] = x[k] - G1 u[k]. Raises ValueError for a model that is discrete already.
    """
    if model.step is not None:
        raise ValueError(f"the model is sampled already, every {model.step}")
    blocks = (model.A, model.B, model.C, model.D)
    transform = _held if course == "held" else _straight
    made = transform(*blocks, step)
    return replace(
        model,
        A=frozen_array(made[0]),
        B=frozen_array(made[1]),
        C=frozen_array(made[2]),
        D=frozen_array(made[3]),
        step=step,
        course=course,
        errors=_carried(model, lambda A, B, C, D: transform(A, B, C, D, step), made),
    )


def _held(A: Array, B: Array, C: Array, D: Array, step: float) -> Blocks:
    return (*held(A, B, step), C, D)


def _straight(A: Array, B: Array, C: Array, D: Array, step: float) -> Blocks:
    Ad, start, ahead = straight(A, B, step)
    return Ad, start + Ad @ ahead, C, D + C @ ahead


def _carried(
    model: LocalModel, transform: Callable[[Array, Array, Array, Array], Blocks], made: Blocks
) -> dict[str, Array]:
    """Sum over the entries of what each one's error does to the transformed entries, to first order."""
    blocks = {name: getattr(model, name) for name in "ABCD"}
    totals = {name: np.zeros_like(block) for name, block in zip("ABCD", made, strict=True)}
    for name, errors in model.errors.items():
        for place in zip(*np.nonzero(errors), strict=True):
            size = float(errors[place])
            # a step large enough to stand out of rounding; the map is close to linear over it
            step = max(size, 1e-6 * float(np.abs(blocks[name]).max(initial=0.0)))
            moved = {key: np.array(block) for key, block in blocks.items()}
            moved[name][place] += step
            changed = transform(moved["A"], moved["B"], moved["C"], moved["D"])
            for key, new, old in zip("ABCD", changed, made, strict=True):
                totals[key] += np.abs(new - old) * (size / step)
    return {
        name: frozen_array(totals[name] + ROUNDING * np.abs(block)) for name, block in zip("ABCD", made, strict=True)
    }
