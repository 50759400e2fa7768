"""A small plant that the bad specs name: a heated tank in degC, min and litres, a difference equation, and odd ones."""

import numpy as np

from linverify import Plant


def _tank(t, x, u, p):
    level, temperature, angle = x
    inflow, heat, pump = u
    return np.stack([inflow - 0.1 * level, heat - 0.2 * temperature, pump - angle])


def _measured(t, x, u, p):
    return np.stack([x[1] - 20.0, x[0], 0.5 * x[0] + 0.0 * u[0]])


tank = Plant(
    states={"level": "m", "temperature": "degC", "angle": "rad"},
    inputs={"inflow": "m^3/h", "heat": "kW", "pump": "rad/s"},
    outputs={"excess": "K", "level": "m", "share": "%"},
    parameters={"area": (2.0, "m^2"), "ambient": (20.0, "degC")},
    dynamics=_tank,
    measurement=_measured,
    nominal={"heat": 3.0},
    time_unit="min",
    domain={"level": (0.0, 10.0), "inflow": (0.0, None)},
)

counter = Plant(
    states={"position": "m", "speed": "m/s"},
    inputs={"push": "N"},
    dynamics=lambda t, x, u, p: np.stack([x[0] + 0.02 * x[1], 0.9 * x[1] + u[0]]),
    step=0.02,
)

slow_counter = Plant(
    states={"position": "m"}, inputs={"push": "N"}, dynamics=lambda t, x, u, p: x + u, step=2.0, time_unit="min"
)
lengthy = Plant(states={"position": "m"}, inputs={"push": "N"}, dynamics=lambda t, x, u, p: x + u, time_unit="km")
strange = Plant(states={"position": "smoot"}, inputs={"push": "N"}, dynamics=lambda t, x, u, p: x + u)
not_a_plant = {"states": ["level"]}
