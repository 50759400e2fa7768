"""Longitudinal motion of a hydrofoil ferry on fore and aft foils (invented vessel, invented data).

The craft flies on two submerged foils with flaps. Each foil sees its own angle of attack (pitch, flap, heave and pitch
rate), stalls beyond it, and loses lift as it comes up to the surface, which is what holds the ride height.
"""

import numpy as np

from linverify import Plant

GRAVITY = 9.81  # m/s^2
AIR_DENSITY = 1.225  # kg/m^3
FORE = {"arm": 9.2, "area": 4.9, "chord": 0.62, "incidence": 0.045, "strut": 2.35}  # m, m^2, m, rad, m
AFT = {"arm": -5.9, "area": 7.9, "chord": 0.74, "incidence": 0.040, "strut": 2.45}
FLAP_EFFECT = 0.52  # rad of incidence a rad of flap
STALL_ANGLE = 0.23  # rad
PROFILE_DRAG = 0.011
INDUCED_DRAG = 0.058  # of the squared lift coefficient
STRUT_DRAG_AREA = 0.024  # m^2 a metre of wetted strut
AIR_DRAG_AREA = 21.0  # m^2, drag coefficient times frontal area
THRUST_ARM = 1.9  # m below the centre of gravity


def foil(foil, speed, heave_rate, pitch_rate, pitch, ride_height, flap, p):
    """Horizontal and vertical force of one foil with its strut, N."""
    rise = heave_rate + foil["arm"] * pitch_rate * np.cos(pitch)
    path = np.arctan2(rise, speed)
    angle = pitch + foil["incidence"] + FLAP_EFFECT * flap - path
    depth = foil["strut"] - ride_height - foil["arm"] * np.sin(pitch)
    surface = 1.0 - 0.55 * np.exp(-2.0 * depth / foil["chord"])
    lift_coefficient = p["lift_slope"] * angle * surface / (1.0 + (angle / STALL_ANGLE) ** 4)
    drag_coefficient = (
        PROFILE_DRAG + INDUCED_DRAG * lift_coefficient**2 + 0.4 * (angle / STALL_ANGLE) ** 4 * PROFILE_DRAG
    )
    pressure = 0.5 * p["water_density"] * (speed**2 + rise**2)
    lift = pressure * foil["area"] * lift_coefficient
    drag = pressure * (foil["area"] * drag_coefficient + STRUT_DRAG_AREA * np.logaddexp(0.0, 8.0 * depth) / 8.0)
    return -lift * np.sin(path) - drag * np.cos(path), lift * np.cos(path) - drag * np.sin(path)


def dynamics(t, x, u, p):
    """Rates of speed, heave rate, pitch rate, pitch and ride height."""
    speed, heave_rate, pitch_rate, pitch, ride_height = x
    fore_flap, aft_flap, thrust = u
    motion = (speed, heave_rate, pitch_rate, pitch, ride_height)
    fore_along, fore_up = foil(FORE, *motion, fore_flap, p)
    aft_along, aft_up = foil(AFT, *motion, aft_flap, p)
    air_drag = 0.5 * AIR_DENSITY * AIR_DRAG_AREA * speed**2
    along = fore_along + aft_along - air_drag + thrust * np.cos(pitch)
    upward = fore_up + aft_up + thrust * np.sin(pitch) - p["mass"] * GRAVITY
    moment = (
        FORE["arm"] * fore_up + AFT["arm"] * aft_up + FORE["strut"] * (fore_along + aft_along) + THRUST_ARM * thrust
    )
    return np.stack(
        [along / p["mass"], upward / p["mass"], moment / p["pitch_inertia"], pitch_rate, heave_rate + 0.0 * pitch]
    )


def measurement(t, x, u, p):
    """Ride height and pitch, and the height of the bow above its place in level flight."""
    return np.stack([x[4], x[3], x[4] + FORE["arm"] * np.sin(x[3])])


ferry = Plant(
    states={"speed": "m/s", "heave_rate": "m/s", "pitch_rate": "rad/s", "pitch": "rad", "ride_height": "m"},
    inputs={"fore_flap": "rad", "aft_flap": "rad", "thrust": "N"},
    outputs={"ride_height": "m", "pitch": "rad", "bow_height": "m"},
    parameters={
        "mass": (41_000.0, "kg"),
        "pitch_inertia": (1.15e6, "kg*m^2"),
        "water_density": (1025.0, "kg/m^3"),
        "lift_slope": (4.3, "1/rad"),  # of both foils, from the towing tank
    },
    dynamics=dynamics,
    measurement=measurement,
    nominal={
        "speed": 2.0,
        "heave_rate": 0.5,
        "pitch_rate": 0.05,
        "pitch": 0.03,
        "ride_height": 0.2,
        "thrust": 10_000.0,
    },
    domain={"speed": (0.5, None)},
)
