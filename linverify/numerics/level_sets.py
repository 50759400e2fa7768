"""The largest |S|, |T| and |S - T| / 2 of a stable loop: walked, climbed, and then certified by a level set.

At a level just above the largest value found, the pencil of the closed loop has no eigenvalue on the axis; one that is
there shows a higher place, from which the climb starts again (Bruinsma, Steinbuch 1990, "A fast algorithm to compute
the H-infinity norm of a transfer function matrix", Systems & Control Letters 14). Values are taken from L, not from the
closed loop's matrices, so that a small S keeps its digits.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np

from ..core.model import Array
from .crossings import BESIDE, level_pencil, on_axis
from .curve import Complex, Curve

Kind = Literal["S", "T", "disk"]
ABOVE = 1e-8  # of the largest value found: the level that is certified
ROUNDS, CLIMB, POINTS = 8, 12, 9
POLE = 1e-7  # of |S|: below it L stands for a pole on the axis where its own error has no bound


@dataclass(frozen=True, slots=True)
class Peak:
    """value: largest size; v: where, infinity allowed; error: absolute."""

    value: float
    v: float
    error: float


def size_of(kind: Kind, L: Complex) -> Array:
    """|S|, |T| or |S - T| / 2 of L, (F,)."""
    large = np.abs(L) > 1.0
    with np.errstate(all="ignore"):
        inverse = 1.0 / np.where(large, L, 1.0)
        S = np.where(large, inverse / (1.0 + inverse), 1.0 / (1.0 + np.where(large, 0.0, L)))
        T = np.where(large, 1.0 / (1.0 + inverse), L / (1.0 + np.where(large, 0.0, L)))
        found = np.abs({"S": S, "T": T, "disk": 0.5 * (S - T)}[kind])
    return np.asarray(np.where(np.isfinite(found), found, 1e300))


def peak(curve: Curve, kind: Kind, nodes: Array) -> Peak:
    """The largest value over all frequencies; needs a stable closed loop. nodes: a walk over open and closed poles.

    With a dead time there is no pencil: the walk must be close enough to show every top, and reach far enough.
    """
    best = _of(curve, kind, np.array([0.0] if curve.delay else [0.0, np.inf]))
    if curve.delay and (limit := _at_infinity(kind, abs(curve.d))) > best.value:
        best = Peak(limit, np.inf, 0.0)
    for _ in range(ROUNDS):
        found = _of(curve, kind, _climbed(lambda v: size_of(kind, curve.quick(v)), nodes))
        if found.value > best.value:
            best = found
        if curve.delay:
            break
        candidates = on_axis(_closed_pencil(curve, kind, best.value * (1.0 + ABOVE)))
        # their middles lie inside the sets that are above the level
        more = np.concatenate([candidates, candidates * (1 + BESIDE), candidates * (1 - BESIDE)])
        more = np.sort(np.concatenate([more, 0.5 * (candidates[1:] + candidates[:-1])]))
        if not len(more) or size_of(kind, curve.quick(more)).max() <= best.value * (1.0 + 0.5 * ABOVE):
            break
        nodes = more
    return Peak(best.value, best.v, best.error + ABOVE * best.value)


def _at_infinity(kind: Kind, d: float) -> float:
    """What is approached at infinite frequency, where the dead time turns d through every phase."""
    return {"S": 1.0, "T": d, "disk": 0.5 * (1.0 + d)}[kind] / (1.0 - d)


def _closed_pencil(curve: Curve, kind: Kind, level: float) -> Complex:
    one = 1.0 + curve.d
    b, c = curve.b / one, curve.c / one
    A = curve.A - np.outer(curve.b, c)
    d = {"S": 1.0 / one, "T": curve.d / one, "disk": 0.5 * (1.0 - curve.d) / one}[kind]
    return level_pencil(A, b, c if kind == "T" else -c, d, level)


def _climbed(ask: Callable[[Array], Array], nodes: Array) -> Array:
    """Tops of `ask` near every local maximum on the nodes that may turn out the largest."""
    if not len(nodes):
        return nodes
    values = ask(nodes)
    padded = np.concatenate([[-np.inf], values, [-np.inf]])
    tops = np.flatnonzero((values >= padded[:-2]) & (values >= padded[2:]))
    tops = tops[np.argsort(-values[tops], kind="stable")][:12]
    low, high = nodes[np.maximum(tops - 1, 0)], nodes[np.minimum(tops + 1, len(nodes) - 1)]
    top, share, rows = nodes[tops], np.linspace(0.0, 1.0, POINTS), np.arange(len(tops))
    for _ in range(CLIMB):
        grid = low[:, np.newaxis] + (high - low)[:, np.newaxis] * share
        place = np.argmax(ask(grid.ravel()).reshape(grid.shape), axis=1)
        top = grid[rows, place]
        low, high = grid[rows, np.maximum(place - 1, 0)], grid[rows, np.minimum(place + 1, POINTS - 1)]
    return top


def _of(curve: Curve, kind: Kind, v: Array) -> Peak:
    """The largest of exact values at some frequencies."""
    if not len(v):
        return Peak(0.0, 0.0, 0.0)
    found = curve.exact(v)
    sizes = size_of(kind, found.at)
    place = int(np.argmax(sizes))
    # dS = S^2 dL, and the same of T and of (S - T) / 2
    small = float(size_of("S", found.at[place : place + 1])[0])
    slack = float(found.error[place]) * small**2
    if not np.isfinite(slack):
        # at a pole of L on the axis, or as near as rounding tells: L is large beyond doubt, and S is all that is left
        slack = small if small < POLE else np.inf
    return Peak(float(sizes[place]), float(v[place]), slack)
