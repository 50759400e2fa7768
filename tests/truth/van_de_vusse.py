"""The isothermal van de Vusse reactor, in mol/l and minutes.

B. W. Bequette, Process Control: Modeling, Design and Simulation, van de Vusse reactor module. Values from memory
(equilibrium 3 and 1.117 mol/l at F/V = 4/7, highest yield 1.266 mol/l at F/V = 1.2921), reproduced to their digits.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

K1, K2, K3, FEED = 5 / 6, 5 / 3, 1 / 6, 10.0


def dynamics(t, x, u, p):
    ca, cb = x
    q = u[0]
    return np.stack([q * (FEED - ca) - K1 * ca - K3 * ca**2, -q * cb + K1 * ca - p["k2"] * cb])


reactor = Plant(
    states={"ca": "mol/l", "cb": "mol/l"},
    inputs={"dilution": "1/min"},
    outputs={"cb": "mol/l"},
    parameters={"k2": (K2, "1/min")},
    dynamics=dynamics,
    time_unit="min",
)
