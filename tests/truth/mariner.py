"""The Mariner ship in surge, sway and yaw, steered by its rudder.

M. S. Chislett, J. Stroem-Tejsen, report Hy-6, Hydro- and Aerodynamics Laboratory, Lyngby 1965; T. I. Fossen, Guidance
and Control of Ocean Vehicles, Wiley 1994. Coefficients seen in a public transcription (scaled by 1e-5,
nondimensional with length 160.93 m and speed 7.7175 m/s).
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

LENGTH, SPEED, S = 160.93, 7.7175, 1e-5
MASS, INERTIA, XG = 798 * S, 39.2 * S, -0.023


def dynamics(t, x, u, p):
    """States: deviations of surge, sway (m/s) and yaw rate (rad/s) from the straight course; input: rudder (rad)."""
    total = np.sqrt((SPEED + x[0]) ** 2 + x[1] ** 2)
    a, v, r, d = x[0] / total, x[1] / total, x[2] * LENGTH / total, u[0]
    X = S * (
        -184 * a - 110 * a**2 - 215 * a**3 - 899 * v**2 + 18 * r**2 + 798 * r * v - 95 * d**2 - 190 * a * d**2
        + 93 * v * d + 93 * a * v * d
    )  # fmt: skip
    Y = S * (
        p["sway_damping"] * v - 499 * r - 8078 * v**3 + 15356 * v**2 * r - 1160 * v * a - 499 * r * a + 278 * d
        - 90 * d**3 + 556 * a * d + 278 * a**2 * d - 4 * v * d**2 + 1190 * v**2 * d - 4 - 8 * a - 4 * a**2
    )  # fmt: skip
    N = S * (
        -264 * v - 166 * r + 1636 * v**3 - 5483 * v**2 * r - 264 * v * a - 166 * r * a - 139 * d + 45 * d**3
        - 278 * a * d - 139 * a**2 * d + 13 * v * d**2 - 489 * v**2 * d + 3 + 6 * a + 3 * a**2
    )  # fmt: skip
    m11, m22, m23 = MASS + 42 * S, MASS + 748 * S, MASS * XG + 9.354 * S
    m32, m33 = MASS * XG - 4.646 * S, INERTIA + 43.8 * S
    det = m22 * m33 - m23 * m32
    size = total**2 / LENGTH
    return np.stack([X * size / m11, (m33 * Y - m23 * N) / det * size, (m22 * N - m32 * Y) / det * size / LENGTH])


ship = Plant(
    states={"surge": "m/s", "sway": "m/s", "yaw_rate": "rad/s"},
    inputs={"rudder": "rad"},
    outputs={"yaw_rate": "rad/s"},
    parameters={"sway_damping": -1160.0},
    dynamics=dynamics,
    nominal={"yaw_rate": 0.01, "rudder": 0.1},
    domain={"surge": (-7.0, None)},
)
