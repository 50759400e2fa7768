"""How large a deviation of a controller's state is: nobody says, but what it moves and what it reads have sizes."""

from __future__ import annotations

import math

import numpy as np

from ..core.loop import Controller
from ..core.model import Array


def controller_sizes(controller: Controller, errors: Array, outputs: Array) -> Array:
    """One size a state, (n,), positive: what alone moves one of the controller's outputs by that output's size.

    errors (k,), outputs (m,): sizes of what it reads and of what it moves. A state that no output reads counts by the
    states that it moves, over the time that is the controller's own; where there are none, by what it is moved by.
    """
    n = len(controller.A)
    found = np.full(n, math.inf)
    with np.errstate(divide="ignore"):
        by_output = outputs[:, np.newaxis] / np.abs(controller.C)
    found = np.minimum(found, by_output.min(axis=0, initial=math.inf))
    own = _pace(controller)
    for _ in range(n):  # a chain of states is as long as there are states
        known = np.isfinite(found)
        if known.all():
            break
        with np.errstate(divide="ignore"):
            by_state = own * found[known][:, np.newaxis] / np.abs(controller.A[known])
        found = np.where(known, found, by_state.min(axis=0, initial=math.inf))
    driven = np.abs(controller.B) @ errors / own
    return np.asarray(np.where(np.isfinite(found), found, np.where(driven > 0.0, driven, 1.0)), dtype=np.float64)


def _pace(controller: Controller) -> float:
    """Its fastest pole, per time unit; one step of a sampled controller; one where it only integrates."""
    if controller.step is not None:
        return 1.0
    fastest = float(np.abs(np.linalg.eigvals(controller.A)).max(initial=0.0)) if len(controller.A) else 0.0
    return fastest if fastest > 0.0 else 1.0
