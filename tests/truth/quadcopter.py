"""A quadcopter with four rotor speeds as inputs.

T. Luukkonen, Modelling and control of quadcopter, Aalto University, 2011. Parameters and the hover values (620.6107625
rad/s, 0.04390797988 N m) seen in public transcriptions.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

MASS, GRAVITY, ARM, THRUST, TORQUE = 0.468, 9.81, 0.225, 2.980e-6, 1.140e-7
ROTOR, IX, IY, IZ, DRAG = 3.357e-5, 4.856e-3, 4.856e-3, 8.801e-3, 0.25


def dynamics(t, x, u, p):
    vx, vy, vz, phi, theta, psi, pp, qq, rr = x[3:]
    w1, w2, w3, w4 = u
    thrust = p["thrust"]
    lift = thrust * (w1**2 + w2**2 + w3**2 + w4**2) / MASS
    spin = w1 - w2 + w3 - w4
    (sf, cf), (st, ct), (ss, cs) = ((np.sin(a), np.cos(a)) for a in (phi, theta, psi))
    roll = ARM * thrust * (w4**2 - w2**2)
    pitch = ARM * thrust * (w3**2 - w1**2)
    yaw = TORQUE * (w1**2 - w2**2 + w3**2 - w4**2)
    return np.stack(
        [
            vx,
            vy,
            vz,
            lift * (cs * st * cf + ss * sf) - DRAG / MASS * vx,
            lift * (ss * st * cf - cs * sf) - DRAG / MASS * vy,
            lift * ct * cf - GRAVITY - DRAG / MASS * vz,
            pp + sf * st / ct * qq + cf * st / ct * rr,
            cf * qq - sf * rr,
            sf / ct * qq + cf / ct * rr,
            (IY - IZ) * qq * rr / IX - ROTOR * qq * spin / IX + roll / IX,
            (IZ - IX) * pp * rr / IY + ROTOR * pp * spin / IY + pitch / IY,
            (IX - IY) * pp * qq / IZ + yaw / IZ,
        ]
    )


ANGLES = dict.fromkeys(("phi", "theta", "psi"), "rad")
copter = Plant(
    states={
        **dict.fromkeys(("px", "py", "pz"), "m"),
        **dict.fromkeys(("vx", "vy", "vz"), "m/s"),
        **ANGLES,
        **dict.fromkeys(("p", "q", "r"), "rad/s"),
    },
    inputs=dict.fromkeys(("w1", "w2", "w3", "w4"), "rad/s"),
    outputs={"pz": "m"},
    parameters={"thrust": (THRUST, "N*s^2/rad^2")},
    dynamics=dynamics,
    nominal={**{f"w{i}": 50.0 for i in (1, 2, 3, 4)}, **dict.fromkeys(ANGLES, 0.1)},
    domain={"theta": (-1.5, 1.5)},
)
HOVER = float(np.sqrt(MASS * GRAVITY / (4 * THRUST)))
