"""The quadruple-tank process, in cm, V and s.

K. H. Johansson, "The Quadruple-Tank Process: A Multivariable Laboratory Process with an Adjustable Zero", IEEE Trans.
Control Systems Technology 8(3), 456-465, May 2000, doi 10.1109/87.845876. Parameters and both operating points seen in
a public transcription that cites it.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

AREAS = (28.0, 32.0, 28.0, 32.0)
HOLES = (0.071, 0.057, 0.071, 0.057)
GRAVITY = 981.0
SENSOR = 0.50


def dynamics(t, x, u, p):
    level = np.sqrt(2.0 * GRAVITY * x)
    (A1, A2, A3, A4), (a1, a2, a3, a4) = AREAS, HOLES
    v1, v2 = u
    g1, g2, k1, k2 = p["gamma1"], p["gamma2"], p["k1"], p["k2"]
    return np.stack(
        [
            (-a1 * level[0] + a3 * level[2] + g1 * k1 * v1) / A1,
            (-a2 * level[1] + a4 * level[3] + g2 * k2 * v2) / A2,
            (-a3 * level[2] + (1 - g2) * k2 * v2) / A3,
            (-a4 * level[3] + (1 - g1) * k1 * v1) / A4,
        ]
    )


def measurement(t, x, u, p):
    return SENSOR * x[:2]


def tanks(gamma1: float, gamma2: float, k1: float, k2: float) -> Plant:
    return Plant(
        states={"h1": "cm", "h2": "cm", "h3": "cm", "h4": "cm"},
        inputs={"v1": "V", "v2": "V"},
        outputs={"y1": "V", "y2": "V"},
        parameters={
            "gamma1": gamma1,
            "gamma2": gamma2,
            "k1": (k1, "cm^3/(V*s)"),
            "k2": (k2, "cm^3/(V*s)"),
        },
        dynamics=dynamics,
        measurement=measurement,
        domain=dict.fromkeys(("h1", "h2", "h3", "h4"), (0.001, None)),
    )


minus = tanks(0.70, 0.60, 3.33, 3.35)  # minimum phase
plus = tanks(0.43, 0.34, 3.14, 3.29)  # non-minimum phase


def levels(plant: Plant, v1: float, v2: float) -> np.ndarray:
    """Equilibrium levels in closed form: what flows in flows out of each hole."""
    p = plant.defaults
    upper3, upper4 = (1 - p["gamma2"]) * p["k2"] * v2, (1 - p["gamma1"]) * p["k1"] * v1
    flows = np.array([p["gamma1"] * p["k1"] * v1 + upper3, p["gamma2"] * p["k2"] * v2 + upper4, upper3, upper4])
    return (flows / np.array(HOLES)) ** 2 / (2.0 * GRAVITY)
