"""A batched Rosenbrock method of order 4(3) for stiff plants: one linear solve a stage, no iteration.

Explicit pairs take steps that are bounded by the fastest pole however little it moves. A Rosenbrock method suits
batches better than implicit Runge-Kutta methods, since every column does the same work a step. Jacobians are
differences, all columns of all drives in one call of the plant. The method is stiffly accurate and L-stable; its
coefficients are the set RODAS of E. Hairer, G. Wanner, Solving Ordinary Differential Equations II (2nd edition, 1996),
section IV.10; a test proves their order.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from ..core.model import Array, frozen_array
from .integrate import Attempt, Mask, Rates

GAMMA = 0.25
NODES = (0.0, 0.386, 0.21, 0.63, 1.0, 1.0)
TIMES = (0.25, -0.1043, 0.1035, -0.0362, 0.0, 0.0)  # weights of the time derivative
STAGES = (  # weights of earlier stages in each stage's argument
    frozen_array([]),
    frozen_array([1.544]),
    frozen_array([0.9466785280815826, 0.2557011698983284]),
    frozen_array([3.314825187068521, 2.896124015972201, 0.9986419139977817]),
    frozen_array([1.221224509226641, 6.019134481288629, 12.53708332932087, -0.6878860361058950]),
    frozen_array([1.221224509226641, 6.019134481288629, 12.53708332932087, -0.6878860361058950, 1.0]),
)
RIGHTS = (  # weights of earlier stages, over the step, on each stage's right side
    frozen_array([]),
    frozen_array([-5.6688]),
    frozen_array([-2.430093356833875, -0.2063599157091915]),
    frozen_array([-0.1073529058151375, -9.594562251023355, -20.47028614809616]),
    frozen_array([7.496443313967647, -10.24680431464352, -33.99990352819905, 11.70890893206160]),
    frozen_array([8.083246795921522, -7.981132988064893, -31.52159432874371, 16.31930543123136, -6.058818238834054]),
)
DENSE = (  # third-order continuous extension
    frozen_array([10.12623508344586, -7.487995877610167, -34.80091861555747, -7.992771707568823, 1.025137723295662, 0]),
    frozen_array([-0.6762803392801253, 6.087714651680015, 16.43084320892478, 24.76722511418386, -6.594389125716872, 0]),
)
SMALL = 1.5e-8  # root of rounding: step of a one-sided difference as a share of the state
TYPICAL = 1e-4  # and, for states near zero, as a share of the acceptable error
TOGETHER = 1024  # columns a call of the plant: more of them no longer fit the processor's cache
AHEAD = 1e-6  # of a step: difference for the time derivative


@dataclass(frozen=True, slots=True, eq=False)
class _Slopes:
    """Slopes of the rates at `start`, where they are `first`: by states (n, n, N), row by row, and by time (n, N)."""

    start: float
    first: Array
    states: Array
    time: Array


@dataclass(slots=True, eq=False)
class Rosenbrock:
    """weights (n,): acceptable errors, for the size of differences; high (n, 1): upper end of the plant's domain.

    Not frozen: a step that was rejected is tried again from the same point, whose slopes are kept until then.
    """

    weights: Array
    high: Array
    name: str = "Rosenbrock 4(3)"
    order: int = 4
    kept: _Slopes | None = field(default=None, init=False)

    def attempt(self, rates: Rates, start: float, x: Array, first: Array, step: float) -> Attempt:
        """One step of size `step` from (start, x); first (n, N): rates there."""
        n, width = x.shape
        if self.kept is None or self.kept.first is not first or self.kept.start != start:
            self.kept = self._slopes(rates, start, x, first, step)
        solve, pull = _solver(self.kept.states, 1.0 / (GAMMA * step)), self.kept.time
        stages = np.zeros((6, n, width))
        flat = stages.reshape(6, -1)
        end = x
        for stage in range(6):
            rise = first
            if stage:
                end = x + (STAGES[stage] @ flat[:stage]).reshape(n, width)
                rise = rates(start + NODES[stage] * step, end)
            right = rise + (RIGHTS[stage] @ flat[:stage]).reshape(n, width) / step + TIMES[stage] * step * pull
            np.einsum("ijc,jc->ic", solve, right, out=stages[stage])
        end = end + stages[5]
        bend, twist = ((weights @ flat).reshape(n, width) for weights in DENSE)

        def between(shares: Array) -> Array:
            share = shares[:, np.newaxis]
            inner = end[:, np.newaxis] + (1.0 - share) * (bend[:, np.newaxis] + share * twist[:, np.newaxis])
            return np.asarray((1.0 - share) * x[:, np.newaxis] + share * inner)

        return Attempt(end, stages[5], rates(start + step, end), between)

    def _slopes(self, rates: Rates, start: float, x: Array, first: Array, step: float) -> _Slopes:
        n, width = x.shape
        size = np.maximum(SMALL * np.abs(x), TYPICAL * self.weights[:, np.newaxis])
        size = np.where(x + size > self.high, -size, size)
        states, together = np.empty((n, n, width)), max(1, TOGETHER // width)
        for begin in range(0, n, together):
            moving = np.arange(begin, min(begin + together, n))
            moved = np.repeat(x[:, np.newaxis], len(moving), axis=1)
            moved[moving, moving - begin] += size[moving]
            each = moved[moving, moving - begin] - x[moving]
            found = rates(start, moved.reshape(n, -1)).reshape(moved.shape)
            states[:, moving] = (found - first[:, np.newaxis]) / each
        ahead = (start + AHEAD * step) - start or AHEAD * step
        return _Slopes(start, first, states, (rates(start + ahead, x) - first) / ahead)


def _solver(slopes: Array, shift: float) -> Array:
    """(shift I - slopes)^-1, (n, n, N) as the slopes; NaN for a column whose matrix is not finite or singular."""
    n, _, width = slopes.shape
    matrices = np.empty((width, n, n))
    np.negative(slopes.transpose(2, 0, 1), out=matrices)
    diagonal = np.arange(n)
    matrices[:, diagonal, diagonal] += shift
    # columns last, as everywhere else: six products with it are to come
    return np.ascontiguousarray(_inverses(matrices).transpose(1, 2, 0))


def _inverses(matrices: Array) -> Array:
    """Inverses of a stack (N, n, n); NaN for a column whose matrix is not finite or singular."""
    good: Mask = np.asarray(np.isfinite(matrices).all(axis=(1, 2)))
    whole = bool(good.all())
    safe = matrices if whole else np.where(good[:, np.newaxis, np.newaxis], matrices, np.eye(matrices.shape[1]))
    try:
        inverses = np.linalg.inv(safe)
    except np.linalg.LinAlgError:
        return np.full_like(matrices, np.nan)
    return np.asarray(inverses if whole else np.where(good[:, np.newaxis, np.newaxis], inverses, np.nan))
