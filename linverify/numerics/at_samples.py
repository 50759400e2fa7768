"""A local model with sampled loops closed inside, as the difference equation that it is at their common instants.

Between two instants it flows, at an instant its controllers act. Taken at the instants alone, with inputs that are held
in between, both together are one linear map, and nothing is approximated. Outputs are read just after the controllers
have acted, as the input that drives a difference equation is the one from its instant on. What a hold kept until then
is gone by that time, so it is no state of the difference equation, unless something still reads it.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm

from ..core.model import Array, LocalModel, frozen_array
from ..core.signals import Signals
from .instants import SNAP, common_multiple

HELD, QUEUED = ".held.", ".delay."  # in the names of states that controllers keep between instants


def repeats(model: LocalModel) -> float | None:
    """The time after which all sampled loops of `model` are where they were; None where there is none.

    Raises ValueError for sample times without a short common multiple.
    """
    return common_multiple([jump.period for jump in model.jumps]) if model.jumps else None


def at_samples(model: LocalModel, step: float) -> LocalModel:
    """x[k+1] = A x[k] + B u[k], y = C x + D u at multiples of `step`, a multiple of what `repeats` says.

    x is taken just before the controllers act, y just after it. Raises ValueError for another step, for a model
    without sampled loops, and where the model steps itself and the step is no multiple of that.
    """
    period = repeats(model)
    count = 0 if period is None else round(step / period)
    if period is None or count < 1 or abs(count * period - step) > SNAP * step:
        raise ValueError(f"a step of {step:.6g} is no multiple of the sample times of the loops inside")
    n, m = model.B.shape
    once = np.eye(n + m)
    time, first = 0.0, np.eye(n + m)
    for instant, leap in _leaps(model, period):
        once = leap @ _flow(model, instant - time) @ once
        if instant <= SNAP * period:
            first = once.copy()
        time = instant
    once = _flow(model, period - time) @ once
    whole = np.linalg.matrix_power(once, count)
    outputs = np.hstack([model.C, model.D]) @ first
    return replace(
        model,
        A=frozen_array(whole[:n, :n]),
        B=frozen_array(whole[:n, n:]),
        C=frozen_array(outputs[:, :n]),
        D=frozen_array(outputs[:, n:]),
        step=step, errors={}, course="held", ahead=None, jumps=(),
    )  # fmt: skip


def remembering(model: LocalModel) -> LocalModel:
    """The same difference equation without the holds and queues that nothing reads any more."""
    kept = _remembered(model, model.A, model.C)
    square, rows, columns = np.ix_(kept, kept), (kept, slice(None)), (slice(None), kept)
    picked = {"A": square, "B": rows, "C": columns, "D": (slice(None), slice(None))}
    blocks = {name: frozen_array(getattr(model, name)[place]) for name, place in picked.items()}
    names, units = model.states.names, model.states.units
    return replace(
        model,
        **blocks,  # type: ignore[arg-type]
        states=Signals(tuple(names[row] for row in kept), tuple(units[row] for row in kept)),
        errors={name: frozen_array(values[picked[name]]) for name, values in model.errors.items()},
    )


def _leaps(model: LocalModel, period: float) -> list[tuple[float, Array]]:
    """Every jump within one period, as a map of states and inputs, in the order in which they act."""
    n, m = model.B.shape
    found = []
    for jump in model.jumps:
        leap = np.eye(n + m)
        leap[:n, :n], leap[:n, n:] = jump.A, jump.B
        found += [(jump.phase + index * jump.period, leap) for index in range(round(period / jump.period))]
    found.sort(key=lambda pair: pair[0])
    return found


def _flow(model: LocalModel, time: float) -> Array:
    """What the model does by itself in `time`, as a map of states and inputs, (n + m, n + m)."""
    n, m = model.B.shape
    whole = np.zeros((n + m, n + m))
    whole[:n, :n], whole[:n, n:] = model.A, model.B
    if model.step is None:
        return np.asarray(expm(whole * time)) if time > 0.0 else np.eye(n + m)
    steps = round(time / model.step)
    if abs(steps * model.step - time) > SNAP * max(time, model.step):
        raise ValueError(f"samples {time:.6g} apart do not fit a model that steps every {model.step:.6g}")
    whole[n:, n:] = np.eye(m)
    return np.linalg.matrix_power(whole, steps)


def _remembered(model: LocalModel, A: Array, C: Array) -> NDArray[np.intp]:
    """Rows of the states that matter for what comes: without holds and queues that nothing reads any more."""
    kept = np.arange(len(A), dtype=np.intp)
    while True:
        idle = [
            row
            for row in kept
            if any(word in model.states.names[row] for word in (HELD, QUEUED))
            and not A[np.ix_(kept, [row])].any()
            and not C[:, row].any()
        ]
        if not idle:
            return kept
        kept = np.setdiff1d(kept, idle)
