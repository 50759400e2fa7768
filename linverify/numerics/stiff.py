"""A batched Rosenbrock method of order 4(3) for stiff plants: one linear solve a stage, no iteration.

Explicit pairs take steps that are bounded by the fastest pole however little it moves. A Rosenbrock method suits
batches better than implicit Runge-Kutta methods, since every column does the same work a step. Jacobians are
differences, all columns of all drives in one call of the plant. The method is stiffly accurate and L-stable; its
coefficients are the set RODAS of E. Hairer, G. Wanner, Solving Ordinary Differential Equations II (2nd edition, 1996),
section IV.10; a test proves their order.
"""

from __future__ import annotations

from dataclasses import dataclass

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
AHEAD = 1e-6  # of a step: difference for the time derivative


@dataclass(frozen=True, slots=True, eq=False)
class Rosenbrock:
    """weights (n,): acceptable errors, for the size of differences; high (n, 1): upper end of the plant's domain."""

    weights: Array
    high: Array
    name: str = "Rosenbrock 4(3)"
    order: int = 4

    def attempt(self, rates: Rates, start: float, x: Array, first: Array, step: float) -> Attempt:
        """One step of size `step` from (start, x); first (n, N): rates there."""
        n, width = x.shape
        solve, pull = self._linearized(rates, start, x, first, step)
        stages = np.zeros((6, n, width))
        flat = stages.reshape(6, -1)
        end = x
        for stage in range(6):
            rise = first
            if stage:
                end = x + (STAGES[stage] @ flat[:stage]).reshape(n, width)
                rise = rates(start + NODES[stage] * step, end)
            right = rise + (RIGHTS[stage] @ flat[:stage]).reshape(n, width) / step + TIMES[stage] * step * pull
            stages[stage] = np.einsum("cij,jc->ic", solve, right)
        end = end + stages[5]
        bend, twist = ((weights @ flat).reshape(n, width) for weights in DENSE)

        def between(shares: Array) -> Array:
            share = shares[:, np.newaxis]
            inner = end[:, np.newaxis] + (1.0 - share) * (bend[:, np.newaxis] + share * twist[:, np.newaxis])
            return np.asarray((1.0 - share) * x[:, np.newaxis] + share * inner)

        return Attempt(end, stages[5], rates(start + step, end), between)

    def _linearized(self, rates: Rates, start: float, x: Array, first: Array, step: float) -> tuple[Array, Array]:
        """(I / (gamma h) - J)^-1, (N, n, n), and the time derivative of the rates (n, N)."""
        n, width = x.shape
        size = np.maximum(SMALL * np.abs(x), TYPICAL * self.weights[:, np.newaxis])
        size = np.where(x + size > self.high, -size, size)
        moved = np.tile(x, n).reshape(n, n, width)
        diagonal = np.arange(n)
        moved[diagonal, diagonal] += size
        size = moved[diagonal, diagonal] - x
        slopes = rates(start, moved.reshape(n, n * width)).reshape(n, n, width) - first[:, np.newaxis]
        jacobian = slopes / size
        matrices = np.eye(n) / (GAMMA * step) - jacobian.transpose(2, 0, 1)
        ahead = (start + AHEAD * step) - start or AHEAD * step
        pull = (rates(start + ahead, x) - first) / ahead
        return _inverses(matrices), pull


def _inverses(matrices: Array) -> Array:
    """Inverses of a stack (N, n, n); NaN for a column whose matrix is not finite or singular."""
    good: Mask = np.asarray(np.isfinite(matrices).all(axis=(1, 2)))
    safe = np.where(good[:, np.newaxis, np.newaxis], matrices, np.eye(matrices.shape[1]))
    try:
        inverses = np.linalg.inv(safe)
    except np.linalg.LinAlgError:
        return np.full_like(matrices, np.nan)
    result: Array = np.where(good[:, np.newaxis, np.newaxis], inverses, np.nan)
    return result
