"""Robertson's kinetics: three concentrations with rate constants that are nine powers of ten apart.

H. H. Robertson 1966: a' = -0.04 a + 1e4 b c, b' = 0.04 a - 1e4 b c - 3e7 b^2, c' = 3e7 b^2.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant


def dynamics(t, x, u, p):
    a, b, c = x
    first = 0.04 * a - p["back"] * b * c - u[0]
    second = 3e7 * b**2
    return np.stack([-first, first - second, second])


kinetics = Plant(
    states={"a": "1", "b": "1", "c": "1"},
    inputs={"feed": "1/s"},
    parameters={"back": (1e4, "1/s")},
    dynamics=dynamics,
    nominal={"a": 1e-1, "b": 1e-5, "c": 1e-1, "feed": 1e-3},
)
