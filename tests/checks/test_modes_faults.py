"""Seeded faults that limits on modes must catch, in a cart on a spring and in a car: the right one passes.

Car: J. Y. Wong, Theory of Ground Vehicles, example 5.1, values from memory; yaw inertia invented.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from modal_cases import PLACE, least, line, verdict

from linverify.core.loop import Limit
from linverify.core.verdict import Status

ASKS = (
    line(stable=True),
    line(
        Limit("natural_frequency", 1.4, 1.6, PLACE), least("damping", 0.12), participates=(("x0", 0.3),), name="spring"
    ),
    line(near=-4.0 + 0j, within=0.05, name="winch"),
    line(static_gain=(("u0", "y0", Limit("static_gain", 0.5, 0.6, PLACE)),)),
)
INPUT, OUTPUT = [0.0, 0.0, 4.0], [1.0, 0.0, 0.0]


def cart(
    *, stiffness: float = 9.0, damping: float = 1.6, mass: float = 4.0, gain: float = 5.0, lag: float = 0.25
) -> np.ndarray:
    """place, speed, winch."""
    return np.array([[0.0, 1.0, 0.0], [-stiffness / mass, -damping / mass, gain / mass], [0.0, 0.0, -1.0 / lag]])


def test_the_right_cart_passes() -> None:
    found = verdict(cart(), *ASKS, B=INPUT, C=OUTPUT)
    assert found.status is Status.PASS, found.reason


@pytest.mark.parametrize(
    ("fault", "word"),
    [
        ({"damping": 0.0}, "damping ratio"),
        ({"damping": -1.6}, "unstable"),
        ({"stiffness": -9.0}, "unstable"),
        ({"stiffness": 0.0}, "origin"),
        ({"mass": 4000.0}, "natural frequency"),  # kg taken for t
        ({"gain": 5.0 * math.pi / 180.0}, "static gain"),  # rad taken for deg
        ({"gain": -5.0}, "static gain"),
        ({"lag": 250.0}, "winch"),  # ms taken for s
        ({"lag": -0.25}, "unstable"),
    ],
)
def test_a_fault_fails_by_name(fault: dict[str, float], word: str) -> None:
    found = verdict(cart(**fault), *ASKS, B=INPUT, C=OUTPUT)
    assert found.status is not Status.PASS
    assert word in found.reason
    if fault != {"damping": 0.0}:  # without damping the pole lies on the axis to within its error
        assert found.status is Status.FAIL


MASS, TO_FRONT, TO_REAR, INERTIA = 20105.0 / 9.81, 2.8 * 0.465, 2.8 * 0.535, 3200.0


def car(speed: float, front: float, rear: float) -> list[list[float]]:
    """Side speed and yaw rate; front, rear: stiffness of an axle, N/rad."""
    turning = TO_FRONT * front - TO_REAR * rear
    return [
        [-(front + rear) / (MASS * speed), -speed - turning / (MASS * speed)],
        [-turning / (INERTIA * speed), -(TO_FRONT**2 * front + TO_REAR**2 * rear) / (INERTIA * speed)],
    ]


def test_the_oversteering_car_loses_its_stability_at_the_published_speed() -> None:
    """47.82 and 38.25 kN/rad a tyre: critical speed 53.3 m/s (from memory), 53.10039318 from det A = 0."""
    front, rear = 2.0 * 47_820.0, 2.0 * 38_250.0
    assert verdict(car(0.999 * 53.10039318, front, rear), line(stable=True)).status is Status.PASS
    beyond = verdict(car(1.001 * 53.10039318, front, rear), line(stable=True))
    assert beyond.status is Status.FAIL
    assert "doubles in" in beyond.reason
    slow = line(stable=True, time_to_double=5.0)
    assert verdict(car(1.001 * 53.10039318, front, rear), slow).status is Status.PASS
    assert verdict(car(80.0, front, rear), slow).status is Status.FAIL
    understeering = 2.0 * 38_920.0
    assert verdict(car(120.0, understeering, rear), line(stable=True)).status is Status.PASS


def test_units_of_states_change_no_verdict() -> None:
    """Metres or millimetres: the same poles, the same states, the same measure of control."""
    A, sizes = cart(), np.array([1e-3, 1e-3, 1.0])
    other = A / sizes[:, np.newaxis] * sizes
    asks = (*ASKS[:3], line(controllable=(("u0", least("measure", 0.05)),), low=1.0, high=2.0))
    nominal = {"x0": 0.1, "x1": 0.5, "x2": 0.2}
    one = verdict(A, *asks, B=INPUT, C=OUTPUT, nominal=nominal)
    in_mm = {name: size / scale for (name, size), scale in zip(nominal.items(), sizes, strict=True)}
    two = verdict(other, *asks, B=np.array(INPUT) / sizes, C=np.array(OUTPUT) * sizes, nominal=in_mm)
    assert one.status is two.status is Status.PASS
    for first, second in zip(one.figures, two.figures, strict=True):
        assert second.what == first.what
        assert second.worst == pytest.approx(first.worst, rel=1e-8)
    for first, second in zip(one.details["modes"], two.details["modes"], strict=True):
        assert second["participation"] == pytest.approx(first["participation"], abs=1e-8)
