"""Juice pasteurizer: heating loop, plate heat exchanger and a holding tube in four cells (invented plant and data).

Slow (the water loop), coupled (flow moves every temperature) and stiff (the plates between water and juice are thin).
Temperatures are in degrees Celsius, the time unit is the second.
"""

import numpy as np

from linverify import Plant

WATER_HEAT = 4.19  # kJ/(kg K)
JUICE_HEAT = 3.85  # kJ/(kg K)
LOOP_MASS = 160.0  # kg of water in the loop and its heater
LOOP_FLOW = 3.2  # kg/s, pumped round the loop
PLATE_CAPACITY = 0.35  # kJ/K of a bank of thin plates
HOT_SIDE = 9.5  # kJ/(s K), water to plate
COLD_SIDE = 10.5  # kJ/(s K), plate to juice at the nominal flow
CHANNEL_MASS = 2.6  # kg of juice between the plates, a bank
CELL_MASS = 5.5  # kg of juice in one cell of the holding tube
CELL_LOSS = 0.006  # kJ/(s K) from a cell to the room
RANGEABILITY = 30.0  # of the equal-percentage steam valve
FULL_STEAM = 190.0  # kJ/s with the valve open
NOMINAL_FLOW = 1.1  # kg/s


def dynamics(t, x, u, p):
    """Rates of water, two plate banks, two juice channels and four holding cells."""
    water, plate_1, plate_2, juice_1, juice_2, cell_1, cell_2, cell_3, cell_4 = x
    steam_valve, juice_flow, juice_inlet = u
    steam = FULL_STEAM * RANGEABILITY ** (steam_valve - 1.0)
    # juice enters bank 2 first and meets the hottest water in bank 1; the film grows thinner with flow
    film = p["fouling"] * COLD_SIDE * (juice_flow / NOMINAL_FLOW) ** 0.68
    returned = water - HOT_SIDE * (water - plate_1) / (LOOP_FLOW * WATER_HEAT)
    to_1 = HOT_SIDE * (water - plate_1)
    to_2 = HOT_SIDE * (returned - plate_2)
    from_1 = film * (plate_1 - juice_1)
    from_2 = film * (plate_2 - juice_2)
    carried = JUICE_HEAT * juice_flow
    tube = juice_flow / CELL_MASS
    loss = CELL_LOSS / (JUICE_HEAT * CELL_MASS)
    room = p["room"]
    return np.stack(
        [
            (steam - to_1 - to_2) / (LOOP_MASS * WATER_HEAT),
            (to_1 - from_1) / PLATE_CAPACITY,
            (to_2 - from_2) / PLATE_CAPACITY,
            (carried * (juice_2 - juice_1) + from_1) / (JUICE_HEAT * CHANNEL_MASS),
            (carried * (juice_inlet - juice_2) + from_2) / (JUICE_HEAT * CHANNEL_MASS),
            tube * (juice_1 - cell_1) - loss * (cell_1 - room),
            tube * (cell_1 - cell_2) - loss * (cell_2 - room),
            tube * (cell_2 - cell_3) - loss * (cell_3 - room),
            tube * (cell_3 - cell_4) - loss * (cell_4 - room),
        ]
    )


def measurement(t, x, u, p):
    """Temperature at the end of the holding tube, before it, and of the water loop."""
    return np.stack([x[8], x[3], x[0]])


pasteurizer = Plant(
    states=dict.fromkeys(
        ("water", "plate_1", "plate_2", "juice_1", "juice_2", "cell_1", "cell_2", "cell_3", "cell_4"), "degC"
    ),
    inputs={"steam_valve": "1", "juice_flow": "kg/s", "juice_inlet": "degC"},
    outputs={"holding_exit": "degC", "holding_entry": "degC", "water_loop": "degC"},
    parameters={"fouling": (1.0, "1"), "room": (19.0, "degC")},
    dynamics=dynamics,
    measurement=measurement,
    nominal=dict.fromkeys(("water", "plate_1", "plate_2", "juice_1", "juice_2"), 2.0)
    | dict.fromkeys(("cell_1", "cell_2", "cell_3", "cell_4"), 2.0)
    | {"steam_valve": 0.1, "juice_flow": 0.1, "juice_inlet": 2.0},
    domain={"juice_flow": (0.05, None)},
)
