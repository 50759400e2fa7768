"""Stability of a loop with a dead time, exactly: roots are counted as they cross the axis, then found by Newton.

As the dead time grows from zero, closed-loop roots can cross the axis only at gain crossings of the loop without it,
and to the right where |L| falls with frequency, to the left where it rises (Walton, Marshall 1987, "Direct method for
TDS stability analysis", IEE Proceedings D 134). So the roots right of the axis are those without dead time, and two
more or fewer for each dead time passed at which a crossing's phase was used up. No approximation enters the verdict;
the roots themselves are sought from those of a rational stand-in. |D| < 1 is needed: else roots come from infinity.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from ..core.model import Array
from .crossings import Met, crossings, turn_of
from .curve import Complex, Curve
from .loop_stability import Poles, closed

SHARE = 0.3  # rad of the dead time's phase between two points of a walk
MOST = 200_000  # points of a walk
PER_SECTION = 1.5  # rad of phase that one section of the stand-in may lag
SECTIONS = 30
NEWTON = 40
AT_POLE = 1e-5  # of their size: a root this near a pole of the loop
FEW = 100  # unstable roots that are sought one by one
NEUTRAL = 1e-9  # |D| nearer to one than this: roots come from infinity
POLISHED = 1e-10  # of a root's size: the last step of Newton's method, where rounding allows no less
SAME = 1e-6  # of their size: two roots are one


def count(curve: Curve, met: Sequence[Met], free: Poles, sign: float = 1.0) -> tuple[int, bool]:
    """Roots right of the axis with the dead time, and whether one lies on it to within rounding.

    met: all gain crossings v > 0; free: the closed-loop poles without dead time, none of them on the axis.
    """
    number, on_edge = len(free.unstable), False
    for each in met:
        passed, edge = _passed(curve, each, sign)
        on_edge |= edge
        falling = (each.slope / each.at).real < 0.0
        number += (2 if falling else -2) * passed
    return number, on_edge


def _passed(curve: Curve, met: Met, sign: float) -> tuple[int, bool]:
    """How often the phase left at a gain crossing has been used up, and whether it is so just now."""
    turned = curve.delay * met.v
    slack = met.error / abs(met.at) + abs((met.slope / met.at).imag) * met.shift
    left = math.atan2(-sign * met.at.imag, -sign * met.at.real)
    free = (left + turned) % (2.0 * math.pi)
    return max(0, round((turned + left % (2.0 * math.pi) - free) / (2.0 * math.pi))), abs(left) <= slack


def roots(curve: Curve, further: Complex) -> Complex:
    """Closed-loop roots, polished on the exact equation, to which those of a rational stand-in lead, and `further`."""
    found: list[complex] = []
    for seed in np.concatenate([_seeds(curve), further]):
        root = _newton(curve, complex(seed), 2.0) or _newton(curve, complex(seed), 0.0)
        if root is not None and all(abs(root - other) > SAME * abs(root) for other in found):
            found += [root] if root.imag == 0.0 else [root, root.conjugate()]
    return np.array(sorted(found, key=lambda each: (abs(each), -each.imag)), dtype=np.complex128)


def near_axis(curve: Curve, opened: Complex, met: Sequence[Met], nodes: Array) -> Complex:
    """Where unstable roots are to be expected: at poles of the loop, and beside the axis where L is real below -1."""
    right = opened[(opened.real > 0.0) & (opened.imag >= 0.0)]
    last = max((each.v for each in met), default=0.0)
    right = right * (1.0 + 0.1 * AT_POLE)
    if last == 0.0:
        return right
    walked = dense(nodes, curve.delay, min(last, 0.02 * reach(curve)))
    v = crossings(curve, turn_of, walked)[0]
    L = curve.quick(v)
    v, L = v[(L.real < -1.0) & (np.abs(L) < 1e12)], L[(L.real < -1.0) & (np.abs(L) < 1e12)]
    # the real part at which the dead time has brought |L| down to one
    beside = 1j * v + np.log(np.abs(L)) / curve.delay
    return np.concatenate([right, 1j * v, beside][: 3 if len(v) <= FEW else 1])


def _newton(curve: Curve, s: complex, large: float) -> complex | None:
    """A root beside s, on 1 + L, or on 1 + 1 / L where |L| is `large`, as beside poles of the loop; None for none."""
    step = complex(math.inf)
    with np.errstate(all="ignore"):
        for _ in range(NEWTON):
            L, slope = curve.plane(s)
            if math.isinf(abs(L)) and abs(step) <= AT_POLE * abs(s):
                return s  # a root within rounding of a pole of the loop
            if not (np.isfinite(L) and np.isfinite(slope) and slope != 0.0):
                return None
            step = (1.0 + L) / slope if abs(L) < large else -(1.0 + L) * L / slope
            s -= step
            if not np.isfinite(s):
                return None
            if abs(step) <= 1e-13 * abs(s):
                break
    if not abs(step) <= POLISHED * abs(s):
        return None
    return complex(s.real, 0.0) if abs(s.imag) <= POLISHED * abs(s) else complex(s.real, abs(s.imag))


def _seeds(curve: Curve) -> Complex:
    """Closed-loop poles, upper half, with a chain of second-order all-passes in place of the dead time."""
    fastest = float(np.abs(closed(curve).values).max(initial=0.0))
    sections = int(np.clip(math.ceil(curve.delay * fastest / PER_SECTION), 4, SECTIONS))
    rate = sections / curve.delay
    p, r = 6.0 * rate, 12.0 * rate**2
    A, b, c, d = curve.A, curve.b, curve.c, curve.d
    for _ in range(sections):  # y = (s^2 - p s + r) / (s^2 + p s + r) u with u = c x + d
        below = np.array([[0.0, 1.0], [-r, -p]])
        driven = np.vstack([np.zeros_like(c), c])
        A = np.block([[A, np.zeros((len(A), 2))], [driven, below]])
        b, c = np.concatenate([b, [0.0, d]]), np.concatenate([c, [0.0, -2.0 * p]])
    values = np.linalg.eigvals(A - np.outer(b, c) / (1.0 + d))
    return np.asarray(values[values.imag >= 0.0], dtype=np.complex128)


def dense(nodes: Array, delay: float, end: float) -> Array:
    """`nodes` up to `end`, with more between them where the dead time turns the phase faster than they are close."""
    nodes = np.append(nodes[nodes < end], end)
    gaps = np.diff(nodes)
    parts = np.maximum(1, np.ceil(gaps * delay / SHARE)).astype(np.intp)
    start = np.repeat(np.cumsum(parts) - parts, parts)
    inside = np.arange(len(start)) - start
    return np.append(np.repeat(nodes[:-1], parts) + inside * np.repeat(gaps / parts, parts), end)


def reach(curve: Curve) -> float:
    """The frequency to which so many points as are allowed can follow the phase of the dead time."""
    return MOST * SHARE / curve.delay
