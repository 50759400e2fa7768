"""Averaged boost converter between the battery and the payload of a sea buoy (invented converter and data).

Continuous conduction, averaged over the switching period, with the losses that matter: battery and coil resistance,
switch resistance, diode drop, and the capacitor's series resistance in the output. The duty cycle moves the output
the wrong way first (right-half-plane zero), further the deeper the battery is drained.
"""

import numpy as np

from linverify import Plant


def output_voltage(x, u, p):
    """Voltage at the payload's terminals, behind the capacitor's series resistance."""
    current, charge_voltage = x
    duty, _battery, load = u
    into = (1.0 - duty) * current - load
    shunt = p["bleeder"] / (p["bleeder"] + p["capacitor_resistance"])
    return shunt * (charge_voltage + p["capacitor_resistance"] * into)


def dynamics(t, x, u, p):
    """Rates of the coil current and of the capacitor's inner voltage."""
    current, _ = x
    duty, battery, load = u
    rail = output_voltage(x, u, p)
    resistance = p["battery_resistance"] + p["coil_resistance"] + duty * p["switch_resistance"]
    coil = battery - resistance * current - (1.0 - duty) * (rail + p["diode_drop"])
    capacitor = (1.0 - duty) * current - load - rail / p["bleeder"]
    return np.stack([coil / p["inductance"], capacitor / p["capacitance"]])


def measurement(t, x, u, p):
    """Rail voltage and coil current."""
    return np.stack([output_voltage(x, u, p), x[0] + 0.0 * u[0]])


converter = Plant(
    states={"coil_current": "A", "charge_voltage": "V"},
    inputs={"duty": "1", "battery": "V", "load": "A"},
    outputs={"rail": "V", "coil_current": "A"},
    parameters={
        "inductance": (68e-6, "H"),
        "capacitance": (330e-6, "F"),
        "battery_resistance": (0.035, "ohm"),
        "coil_resistance": (0.028, "ohm"),
        "switch_resistance": (0.016, "ohm"),
        "diode_drop": (0.42, "V"),
        "capacitor_resistance": (0.045, "ohm"),
        "bleeder": (150.0, "ohm"),
    },
    dynamics=dynamics,
    measurement=measurement,
    nominal={"coil_current": 1.0, "charge_voltage": 1.0, "duty": 0.05, "battery": 1.0, "load": 0.5},
)
