"""Sampled loops with a dead time between controller and hold, judged by the eigenvalues of everything that remembers.

The plant x' = A x + B u behind a hold, u late by (l + m) steps: x+ = Ad x + what was held before + what is held now,
with the last l + 1 commands as states. Nothing here is shared with the library.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from scipy.linalg import block_diag, expm


@dataclass(frozen=True)
class Sampled:
    """Plant A (n, n), B (n,), C (n,); controller F, G, H, K in z, from set point minus measurement; sample time."""

    A: np.ndarray
    B: np.ndarray
    C: np.ndarray
    F: np.ndarray
    G: np.ndarray
    H: np.ndarray
    K: float
    step: float

    def held(self, time: float) -> tuple[np.ndarray, np.ndarray]:
        """exp(A time) and the integral of exp(A s) B up to time."""
        n = self.A.shape[0]
        bordered = np.zeros((n + 1, n + 1))
        bordered[:n, :n], bordered[:n, n] = self.A * time, self.B * time
        both = expm(bordered)
        return both[:n, :n], both[:n, n]

    def closed(self, delay: float) -> np.ndarray:
        """The matrix of plant, controller and the commands under way, from one instant to the next."""
        whole = int(delay / self.step + 1e-12)
        rest = max(delay - whole * self.step, 0.0)
        Ad, _ = self.held(self.step)
        carried, now = self.held(self.step - rest)
        _, late = self.held(rest)
        n, k = self.A.shape[0], self.F.shape[0]
        past = whole + 1  # u[k-1], u[k-2], ...
        M = np.zeros((n + k + past, n + k + past))
        command = np.concatenate([-self.K * self.C, self.H, np.zeros(past)])  # u[k]
        M[:n, :n] = Ad
        M[:n] += np.outer(now, command) if whole == 0 else np.outer(now, np.eye(n + k + past)[n + k + whole - 1])
        M[:n] += np.outer(carried @ late, np.eye(n + k + past)[n + k + whole])
        M[n : n + k, :n], M[n : n + k, n : n + k] = -np.outer(self.G, self.C), self.F
        M[n + k] = command
        M[n + k + 1 :, n + k : -1] += np.eye(past - 1)
        return M

    def stable(self, delay: float) -> bool:
        return bool(np.abs(np.linalg.eigvals(self.closed(delay))).max() < 1.0)


def random_loop(seed: int) -> Sampled | None:
    """A plant of order 1 to 4 under a gain, PI or lead, stable without dead time; None where no gain is found."""
    rng = np.random.default_rng([2718, seed])
    rate = 10.0 ** rng.uniform(-2.0, 2.0)
    blocks = []
    for _ in range(int(rng.integers(1, 3))):
        w = rate * 10.0 ** rng.uniform(-0.5, 0.5)
        if rng.random() < 0.5:
            blocks.append(np.array([[w * rng.choice([-1.0, -1.0, -1.0, 0.0, 0.3])]]))
        else:
            damping = 10.0 ** rng.uniform(-2.5, 0.0)
            blocks.append(np.array([[-damping * w, w], [-w, -damping * w]]))
    A = block_diag(*blocks)
    n = A.shape[0]
    B, C = rng.normal(size=n), rng.normal(size=n) * rate
    step = 10.0 ** rng.uniform(-2.0, 0.3) / rate
    kind = rng.choice(["gain", "pi", "lead"])
    if kind == "gain":
        F, G, H, K = np.zeros((0, 0)), np.zeros(0), np.zeros(0), 1.0
    elif kind == "pi":
        F, G, H, K = np.eye(1), np.ones(1), np.array([0.3 * rate * step]), 1.0
    else:
        pole = math.exp(-5.0 * rate * step)
        F, G, H, K = np.array([[pole]]), np.ones(1), np.array([-3.0 * (1.0 - pole)]), 4.0
    gains = [sign * 10.0**power for power in rng.permutation(np.linspace(-2.0, 1.5, 15)) for sign in (1.0, -1.0)]
    for gain in gains:
        made = Sampled(A, B, C, F, G, gain * H, gain * K, step)
        if np.abs(np.linalg.eigvals(made.closed(0.0))).max() < 1.0 - 1e-6:
            return made
    return None
