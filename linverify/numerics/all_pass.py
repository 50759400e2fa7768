"""A rational stand-in for a dead time: a chain of all-passes whose error is known at every frequency.

Each section is the diagonal Pade approximation of order 8, realized by its poles, so that no coefficients of s^8 occur.
It has modulus one, as the dead time has; its phase is right to 3e-8 up to 4.5 rad of its share of the dead time.
"""

from __future__ import annotations

import math
from functools import cache

import numpy as np

from ..core.model import Array
from .mapped import Complex
from .transfer import Transfer

ORDER = 8
PER_SECTION = 4.5  # rad of lag that one section stands for


def sections(delay: float, omega: float) -> int:
    """How many sections stand for `delay` up to a frequency."""
    return max(1, math.ceil(delay * omega / PER_SECTION))


def share_off(delay: float, number: int, omega: float) -> float:
    """Largest |chain / exp(-s delay) - 1| between frequency zero and `omega`."""
    s = 1j * np.linspace(0.0, omega, 65) * delay / number
    chain = np.prod([(s + p) / (s - p) for p in _roots()], axis=0)  # of even order: one at s = 0
    return float(np.abs((chain * np.exp(s)) ** number - 1.0).max())


def delayed_by(loop: Transfer, number: int) -> Transfer:
    """`loop` with a chain of `number` sections in each input instead of its dead time."""
    A, b, c = _chain(loop.delay, number)
    m = loop.D.shape[1]
    eye = np.eye(m)
    inside, moved, seen = np.kron(eye, A), np.kron(eye, b[:, np.newaxis]), np.kron(eye, c[np.newaxis, :])
    n = len(loop.A)
    whole = np.block([[loop.A, loop.B @ seen], [np.zeros((len(inside), n)), inside]])
    return Transfer(whole, np.vstack([loop.B, moved]), np.hstack([loop.C, loop.D @ seen]), loop.D)


@cache
def _roots() -> Complex:
    """Poles of the section for a dead time of one."""
    p = ORDER
    terms = [math.factorial(2 * p - k) / (math.factorial(k) * math.factorial(p - k)) for k in range(p + 1)]
    return np.asarray(np.roots(np.array(terms[::-1]) / terms[p]), dtype=np.complex128)


def _chain(delay: float, number: int) -> tuple[Array, Array, Array]:
    """(A, b, c) of the chain, whose feedthrough is one."""
    A, b, c = np.zeros((0, 0)), np.zeros(0), np.zeros(0)
    pairs = [p * number / delay for p in _roots() if p.imag > 0]
    for pole in pairs * number:
        size, damping = abs(pole), -2.0 * pole.real
        # 1 - 2 damping s / (s^2 + damping s + size^2), of modulus one
        gain = math.sqrt(2.0 * damping)
        A = np.block(
            [
                [A, np.zeros((len(A), 2))],
                [np.vstack([np.zeros_like(c), gain * c]), np.array([[0.0, size], [-size, -damping]])],
            ]
        )
        b, c = np.concatenate([b, [0.0, gain]]), np.concatenate([c, [0.0, -gain]])
    return A, b, c
