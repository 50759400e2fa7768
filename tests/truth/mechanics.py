"""A pendulum with a torque, a cart with an inverted pendulum, and a levitated ball: linearizations in closed form.

Cart: K. J. Astrom, R. M. Murray, Feedback Systems, balance system; data from memory (M 10 kg, m 80 kg, J 100 kg m^2,
l 1 m, c 0.1, gamma 0.01, g 9.8), published pole 2.68 and zero 2.09 from memory. The other two are our own derivations.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

MASS, LENGTH, DAMPING, GRAVITY = 0.7, 0.4, 0.05, 9.81  # pendulum, invented
CART, BOB, INERTIA, ARM, C_CART, C_ARM, G_CART = 10.0, 80.0, 100.0, 1.0, 0.1, 0.01, 9.8
BALL, COIL, G_BALL = 0.05, 1e-4, 9.81


def _pendulum(t, x, u, p):
    angle, rate = x
    torque = u[0]
    mass = p["mass"]
    inertia = mass * LENGTH**2
    return np.stack([rate, (torque - DAMPING * rate - mass * GRAVITY * LENGTH * np.sin(angle)) / inertia])


def _cart(t, x, u, p):
    _, angle, speed, rate = x
    s, c = np.sin(angle), np.cos(angle)
    bob = p["bob"]
    total, swing, coupling = CART + bob, INERTIA + bob * ARM**2, bob * ARM
    # [total, -coupling c; -coupling c, swing] [q''; angle''] = right-hand sides
    first = u[0] - C_CART * speed - coupling * s * rate**2
    second = coupling * G_CART * s - C_ARM * rate
    det = total * swing - (coupling * c) ** 2
    return np.stack(
        [speed, rate, (swing * first + coupling * c * second) / det, (coupling * c * first + total * second) / det]
    )


def _ball(t, x, u, p):
    gap, speed = x
    return np.stack([speed, G_BALL - p["coil"] / BALL * (u[0] / gap) ** 2])


pendulum = Plant(
    states={"angle": "rad", "rate": "rad/s"},
    inputs={"torque": "N*m"},
    outputs={"angle": "rad"},
    parameters={"mass": (MASS, "kg")},
    dynamics=_pendulum,
)
cart = Plant(
    states={"position": "m", "angle": "rad", "speed": "m/s", "rate": "rad/s"},
    inputs={"force": "N"},
    outputs={"position": "m", "angle": "rad"},
    parameters={"bob": (BOB, "kg")},
    dynamics=_cart,
)
ball = Plant(
    states={"gap": "m", "speed": "m/s"},
    inputs={"current": "A"},
    outputs={"gap": "m"},
    parameters={"coil": (COIL, "N*m^2/A^2")},
    dynamics=_ball,
    nominal={"gap": 1e-3, "speed": 0.1, "current": 0.1},
    domain={"gap": (1e-4, None)},
)
