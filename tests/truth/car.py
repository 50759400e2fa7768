"""The single-track car with linear tyres; speed is an input that is held.

J. Y. Wong, Theory of Ground Vehicles, example 5.1, from memory: weight 20.105 kN, wheelbase 2.8 m, 53.5 % on the front
axle, tyres 38.92 (front) and 38.25 kN/rad each: understeer coefficient 0.016 rad, characteristic speed 41.5 m/s; with
47.82 kN/rad in front -0.0097 rad and critical speed 53.3 m/s. Yaw inertia invented: it does not enter steady turning.
"""

from __future__ import annotations

import numpy as np

from linverify.core.plant import Plant

GRAVITY, WEIGHT, BASE, FRONT = 9.81, 20105.0, 2.8, 0.535
MASS = WEIGHT / GRAVITY
TO_FRONT, TO_REAR = BASE * (1 - FRONT), BASE * FRONT
INERTIA = 3200.0


def dynamics(t, x, u, p):
    side, yaw = x
    steer, speed = u
    slip_front = steer - (side + TO_FRONT * yaw) / speed
    slip_rear = -(side - TO_REAR * yaw) / speed
    front, rear = p["front"] * slip_front, p["rear"] * slip_rear
    return np.stack([(front + rear) / MASS - speed * yaw, (TO_FRONT * front - TO_REAR * rear) / INERTIA])


def car(front: float, rear: float) -> Plant:
    """front, rear: cornering stiffness of an axle, N/rad."""
    return Plant(
        states={"side_speed": "m/s", "yaw_rate": "rad/s"},
        inputs={"steer": "rad", "speed": "m/s"},
        outputs={"yaw_rate": "rad/s"},
        parameters={"front": (front, "N/rad"), "rear": (rear, "N/rad")},
        dynamics=dynamics,
        domain={"speed": (0.1, None)},
    )


understeering = car(2 * 38920.0, 2 * 38250.0)
oversteering = car(2 * 47820.0, 2 * 38250.0)


def understeer(plant: Plant) -> float:
    """Understeer coefficient in rad: difference of axle load over cornering stiffness."""
    p = plant.defaults
    return FRONT * WEIGHT / p["front"] - (1 - FRONT) * WEIGHT / p["rear"]
