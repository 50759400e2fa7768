"""Where the searches of a trim begin: the first guess, then a fixed low-discrepancy set over the bounds.

The set is Halton's (Halton 1960), written here in a few lines so that its points never change with a library.
"""

from __future__ import annotations

import numpy as np

from ..core.model import Array
from .equations import Equations

FEWEST, PER_UNKNOWN, MOST = 16, 8, 64  # starts: more unknowns hide more equilibria, and each start costs calls
SPREAD = 3.0  # half of the starts of an unbounded unknown lie within so many nominal sizes of the first guess


def start_points(system: Equations, centre: Array | None = None) -> Array:
    """Starts (q, N) inside the box, the first guess first; slack unknowns start at the allowed value nearest zero.

    centre: z (q,) to spread around where sides are open, in place of the first guess.
    """
    v = len(system.unknowns)
    low, high = system.low / system.sizes, system.high / system.sizes
    guess = np.clip(_guess(system) if centre is None else centre[:v], low, high)
    count = min(MOST, FEWEST + PER_UNKNOWN * v) if v else 1
    shares = halton(count - 1, v)
    spread = np.stack([_over(low[j], high[j], guess[j], shares[j]) for j in range(v)]) if v else np.zeros((0, 0))
    points = np.concatenate([guess[:, np.newaxis], spread], axis=1)
    slack_low, slack_high = (side[v:, np.newaxis] for side in system.box)
    tail = np.clip(np.zeros((len(system.slacks), points.shape[1])), slack_low, slack_high)
    return np.concatenate([points, tail])


def halton(count: int, dimensions: int) -> Array:
    """The first `count` points of Halton's set, (dimensions, count), each value inside 0..1."""
    points = np.empty((dimensions, count))
    for j, base in enumerate(_primes(dimensions)):
        for i in range(count):
            value, share, rest = 0.0, 1.0, i + 1
            while rest:
                share /= base
                rest, digit = divmod(rest, base)
                value += share * digit
            points[j, i] = value
    return points


def _guess(system: Equations) -> Array:
    x, u, plant = system.base_x, system.base_u, system.plant
    values = [
        x[plant.states.index(name)] if name in plant.states else u[plant.inputs.index(name)] for name in system.unknowns
    ]
    return np.array(values) / system.sizes


def _over(low: float, high: float, guess: float, shares: Array) -> Array:
    """Shares 0..1 spread over low..high; an open side reaches out from the guess with a long tail."""
    if np.isfinite(low) and np.isfinite(high):
        return low + (high - low) * shares
    scale = SPREAD * max(1.0, abs(guess))
    if np.isfinite(low):
        return low + scale * shares / (1.0 - shares)
    if np.isfinite(high):
        return high - scale * shares / (1.0 - shares)
    centred = 2.0 * shares - 1.0
    return guess + 1.5 * scale * centred / (1.0 - centred**2)


def _primes(count: int) -> list[int]:
    found: list[int] = []
    candidate = 2
    while len(found) < count:
        if all(candidate % prime for prime in found):
            found.append(candidate)
        candidate += 1
    return found
