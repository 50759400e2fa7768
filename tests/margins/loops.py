"""Random loops with fixed seeds: what each draw is made of, and a gain that leaves many closed loops stable.

Orders 1 to 12, none to two integrators, damping down to 1e-6, unstable poles, feedthrough up to just above 1, states
scaled by factors up to 1e6 either way, dead time, sampling down to 1e-5 of the time unit.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace

import numpy as np
import scipy.linalg

from .oracle import crossings, delay_margin, growth, loudness
from .response import Loop, closed_roots, grid, landmarks

LONGEST = 500.0  # dead time times the fastest rate: more would take too many points to scan
GAINS = np.geomspace(1e-3, 1e3, 13)
KINDS = ("passive", "any", "designed")


@dataclass(frozen=True)
class Drawn:
    """A loop and what is special about it."""

    seed: int
    kind: str
    loop: Loop
    tags: tuple[str, ...]

    @property
    def told(self) -> str:
        return f"seed {self.seed}: {self.kind}, order {self.loop.n}, {', '.join(self.tags) or 'plain'}"


@dataclass(frozen=True)
class Block:
    """A real pole, a pair, or a chain of integrators: A (n, n), B (n,), C (n,)."""

    A: np.ndarray
    B: np.ndarray
    C: np.ndarray


def drawn(seed: int) -> Drawn:
    """The loop of a seed."""
    rng = np.random.default_rng([314159, seed])
    kind = KINDS[int(rng.choice(3, p=[0.45, 0.35, 0.2]))]
    loop, tags = designed(rng) if kind == "designed" else summed(rng, passive=kind == "passive")
    if loop.step is None and abs(loop.D) < 1.0 and rng.random() < 0.3:
        loop = late(loop, rng)
        tags.append("dead time")
    loop = disguised(loop, rng, tags)
    return Drawn(seed, kind, loop, tuple(tags))


def all_of(seeds: Iterable[int]) -> list[Drawn]:
    return [drawn(seed) for seed in seeds]


# -- modal sums ------------------------------------------------------------------------------------------------------


def summed(rng: np.random.Generator, *, passive: bool) -> tuple[Loop, list[str]]:
    """A sum of modes: with residues of one sign (which any gain leaves stable) but for some, or with any."""
    order = int(rng.integers(1, 13))
    tags: list[str] = []
    step = sample_time(rng, tags)
    blocks = modes(rng, order, passive=passive, step=step, tags=tags)
    if step is not None:
        blocks = [held(block, step) for block in blocks]
    A = scipy.linalg.block_diag(*(block.A for block in blocks))
    B, C = (np.concatenate([getattr(block, name) for block in blocks]) for name in "BC")
    D = feedthrough(rng, tags)
    return with_gain(Loop(A, B, C, D, step=step), rng), tags


def sample_time(rng: np.random.Generator, tags: list[str]) -> float | None:
    chance = rng.random()
    if chance < 0.68:
        return None
    tags.append("sampled fast" if chance > 0.88 else "sampled")
    return 1e-5 if chance > 0.88 else float(10.0 ** rng.uniform(-3.0, 0.0))


def modes(rng: np.random.Generator, order: int, *, passive: bool, step: float | None, tags: list[str]) -> list[Block]:
    blocks = []
    centre, spread = 10.0 ** rng.uniform(-1.0, 2.5), rng.uniform(0.3, 2.5)
    if step is not None:  # from just below half the sampling frequency down
        centre = min(centre, 0.5 / step) if step == 1e-5 else 10.0 ** rng.uniform(-2.0, 0.2) / step
    light, integrators = rng.random() < 0.4, int(rng.choice(3, p=[0.55, 0.3, 0.15]))
    if integrators and order >= integrators:
        tags.append("integrators" if integrators == 2 else "integrator")
        blocks.append(chain(rng, integrators, centre))
        order -= integrators
    if light and order >= 2:
        tags.append("light")
    while order > 0:
        w = centre * 10.0 ** (spread * rng.uniform(-0.5, 0.5))
        right = rng.random() < (0.03 if passive else 0.08)
        if right and "unstable poles" not in tags:
            tags.append("unstable poles")
        if order >= 2 and rng.random() < 0.6:
            damping = 10.0 ** rng.uniform(-6.0, -1.0) if light else rng.uniform(0.05, 1.0)
            blocks.append(pair(rng, w, -damping if right else damping, passive=passive))
            order -= 2
        else:
            blocks.append(lone(rng, w if right else -w, passive=passive))
            order -= 1
    return blocks


def chain(rng: np.random.Generator, length: int, centre: float) -> Block:
    """One or two integrators in a row, with a zero left of the axis."""
    if length == 1:
        return Block(np.zeros((1, 1)), np.ones(1), np.array([centre]))
    return Block(np.array([[0.0, 1.0], [0.0, 0.0]]), np.array([0.0, 1.0]), np.array([0.2 * centre**2, centre]))


def pair(rng: np.random.Generator, w: float, damping: float, *, passive: bool) -> Block:
    turn = w * math.sqrt(max(1.0 - damping**2, 0.0))
    A = np.array([[-damping * w, turn], [-turn, -damping * w]])
    B = rng.normal(size=2)
    strength = w * 10.0 ** rng.uniform(-1.5, 0.5) * (abs(damping) if rng.random() < 0.5 else 1.0)
    odd = not passive or rng.random() < 0.1
    return Block(A, B, strength * (rng.normal(size=2) if odd else B))


def lone(rng: np.random.Generator, pole: float, *, passive: bool) -> Block:
    sign = 1.0 if passive or rng.random() < 0.5 else -1.0
    return Block(np.array([[pole]]), np.ones(1), np.array([sign * abs(pole) * 10.0 ** rng.uniform(-1.0, 1.0)]))


def held(block: Block, step: float) -> Block:
    """The block behind a hold; integrators stay exact."""
    n = block.A.shape[0]
    if not block.A.any():
        return Block(np.eye(1), block.B * step, block.C)
    if n == 2 and not block.A[1].any():
        return Block(np.array([[1.0, step], [0.0, 1.0]]), np.array([step**2 / 2.0, step]), block.C)
    bordered = np.zeros((n + 1, n + 1))
    bordered[:n, :n], bordered[:n, n] = block.A, block.B
    both = scipy.linalg.expm(bordered * step)
    return Block(both[:n, :n], both[:n, n], block.C)


def feedthrough(rng: np.random.Generator, tags: list[str]) -> float:
    chance = rng.random()
    if chance < 0.6:
        return 0.0
    if chance < 0.8:
        tags.append("feedthrough")
        return float(rng.uniform(-0.9, 0.9))
    tags.append("feedthrough near 1")
    return float(rng.choice([-1.0, 1.0]) * (1.0 + rng.choice([-1.0, 1.0]) * 10.0 ** rng.uniform(-6.0, -1.0)))


def with_gain(loop: Loop, rng: np.random.Generator) -> Loop:
    """With C by a gain that leaves the closed loop stable where one is found, and rather with a crossing."""
    w = grid(loop)
    size = float(np.median(np.abs(loop.bare(w[:: max(w.size // 200, 1)]) - loop.D))) or 1.0
    gains = np.concatenate([GAINS, -GAINS]) / size
    candidates = [replace(loop, C=gain * loop.C) for gain in gains]
    stable = [each for each in candidates if steady(each)]
    crossing = [each for each in stable if crosses(each, w)]
    chance = rng.random()
    pool = (crossing or stable) if chance < 0.75 else stable if chance < 0.85 else candidates
    pool = pool or candidates
    return pool[int(rng.integers(len(pool)))]


def steady(loop: Loop) -> bool:
    return bool(growth(loop, closed_roots(loop)).max(initial=-math.inf) < 0.0)


def crosses(loop: Loop, w: np.ndarray) -> bool:
    size = np.abs(loop.bare(w))
    return bool(size.max() > 1.0 > size.min())


# -- unstable plants with controllers that hold them -----------------------------------------------------------------


def designed(rng: np.random.Generator) -> tuple[Loop, list[str]]:
    """A plant with unstable poles in a row with an observer and state feedback found by Riccati equations."""
    n = int(rng.integers(1, 7))
    tags = ["unstable poles"]
    A = scipy.linalg.block_diag(*(np.array([[1.0 * x]]) for x in rng.uniform(-2.0, 1.0, n)))
    A += np.triu(rng.normal(size=(n, n)), 1)
    if rng.random() < 0.4 and n >= 2:
        damping, w = 10.0 ** rng.uniform(-6.0, -1.0), rng.uniform(0.5, 20.0)
        A[-2:, -2:] = [[-damping * w, w], [-w, -damping * w]]
        tags.append("light")
    B, C = rng.normal(size=(n, 1)), rng.normal(size=(1, n))
    weight = 10.0 ** rng.uniform(-2.0, 2.0)
    K = B.T @ scipy.linalg.solve_continuous_are(A, B, C.T @ C + 1e-3 * np.eye(n), np.eye(1) / weight) * weight
    noise = 10.0 ** rng.uniform(-2.0, 2.0)
    G = scipy.linalg.solve_continuous_are(A.T, C.T, B @ B.T + 1e-3 * np.eye(n), np.eye(1) / noise) @ C.T * noise
    whole = np.block([[A - B @ K - G @ C, np.zeros((n, n))], [B @ K, A]])  # controller, then plant
    rate = 10.0 ** rng.uniform(-2.0, 3.0)
    loop = Loop(rate * whole, rate * np.concatenate([G[:, 0], np.zeros(n)]), np.concatenate([np.zeros(n), C[0]]), 0.0)
    if rng.random() < 0.3:
        tags.append("sampled fast")
        fastest = float(np.abs(np.linalg.eigvals(loop.A)).max())
        block = held(Block(loop.A, loop.B, loop.C), step := 1e-5 if rng.random() < 0.5 else 0.02 / fastest)
        loop = Loop(block.A, block.B, block.C, 0.0, step=step)
    if rng.random() < 0.3:
        loop = replace(loop, C=loop.C * rng.uniform(0.3, 3.0))
    return loop, tags


# -- dead time and disguise ------------------------------------------------------------------------------------------


def late(loop: Loop, rng: np.random.Generator) -> Loop:
    """With a dead time below the delay margin, three times out of four, or some way beyond it."""
    w = grid(loop)
    crossovers = crossings(loop, w, loudness, negative=False).astype(float)
    share = rng.uniform(0.05, 0.95) if rng.random() < 0.75 else rng.uniform(1.05, 4.0)
    longest = LONGEST / float(np.abs(landmarks(loop)).max())
    if not crossovers.size:
        return replace(loop, delay=longest * float(10.0 ** rng.uniform(-4.0, 0.0)))
    turns = np.mod(np.angle(-loop.response(crossovers)), 2.0 * math.pi)
    return replace(loop, delay=min(share * delay_margin(loop, turns / crossovers), longest))


def disguised(loop: Loop, rng: np.random.Generator, tags: list[str]) -> Loop:
    """The same loop in states that are mixed (never integrators with others), scaled and put in another order."""
    A, B, C = loop.A, loop.B, loop.C
    if rng.random() < 0.35 and not any(tag.startswith("integrator") for tag in tags):
        tags.append("mixed")
        turn = scipy.linalg.qr(rng.normal(size=A.shape))[0]
        A, B, C = turn @ A @ turn.T, turn @ B, C @ turn.T
    if rng.random() < 0.4:
        tags.append("badly scaled")
        scale = 10.0 ** rng.uniform(-6.0, 6.0, loop.n)
        A, B, C = A * scale[:, None] / scale[None, :], B * scale, C / scale
    order = rng.permutation(loop.n)
    return replace(loop, A=A[np.ix_(order, order)], B=B[order], C=C[order])
