"""Published linearizations from the spec to the verdict: the matrices and poles in the details of `differentiable`.

Sources stand beside the plants in tests/truth; next to each figure here: printed (seen), from memory, or derived.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
import scipy.linalg
from road import trimmed, verdict
from truth import car, converters, mariner, mechanics, quadcopter, quadruple_tank

from linverify.core.verdict import Status


def _matrices(spec: str, point: str) -> tuple[np.ndarray, ...]:
    """A, B, C, D of a point whose slopes pass."""
    found = verdict(spec, point, "differentiable")
    assert found.status is Status.PASS, found.reason
    return tuple(np.array(found.details[name]) for name in "ABCD")


def _poles(spec: str, point: str) -> np.ndarray:
    told = verdict(spec, point, "differentiable").details["poles"]
    return np.sort_complex([complex(pole["real"], pole["imag"]) for pole in told])


def _zeros(A: np.ndarray, B: np.ndarray, C: np.ndarray, D: np.ndarray) -> np.ndarray:
    """Transmission zeros: finite generalized eigenvalues of the system pencil."""
    n, m = B.shape
    pencil = np.block([[A, B], [C, D]])
    mass = scipy.linalg.block_diag(np.eye(n), np.zeros((m, m)))
    values = scipy.linalg.eigvals(pencil, mass)
    return np.sort_complex(values[np.isfinite(values) & (np.abs(values) < 1e6)])


# K. H. Johansson 2000: printed time constants and DC gains (P- printed; P+ time constants printed, matrix and zeros
# from memory); the four zeros from memory
TANKS: dict[str, dict[str, Any]] = {
    "tanks_minus": {
        "plant": quadruple_tank.minus,
        "volts": 3.0,
        "times": (62, 90, 23, 30),
        "gains": [[2.6, 1.5], [1.4, 2.8]],
        "zeros": (-0.060, -0.018),
        "close": 2e-3,
        "relative": 1.4,
    },
    "tanks_plus": {
        "plant": quadruple_tank.plus,
        "volts": 3.15,
        "times": (63, 91, 39, 56),
        "gains": [[1.5, 2.5], [2.5, 1.6]],
        "zeros": (-0.057, 0.013),
        "close": 1e-3,
        "relative": -0.63565,
    },
}


@pytest.mark.parametrize("spec", sorted(TANKS))
def test_tank_time_constants_and_structure(spec: str) -> None:
    A, B, C, D = _matrices(spec, "published")
    T1, T2, T3, T4 = -1.0 / np.diag(A)
    np.testing.assert_allclose([T1, T2, T3, T4], TANKS[spec]["times"], rtol=0.04)
    levels = np.array([trimmed(spec, "published")[f"h{i}"] for i in (1, 2, 3, 4)])
    areas, holes = np.array(quadruple_tank.AREAS), np.array(quadruple_tank.HOLES)
    exact = areas / holes * np.sqrt(2.0 * levels / quadruple_tank.GRAVITY)
    np.testing.assert_allclose([T1, T2, T3, T4], exact, rtol=1e-9)
    expected = np.diag(-1.0 / exact)
    expected[0, 2] = areas[2] / (areas[0] * T3)
    expected[1, 3] = areas[3] / (areas[1] * T4)
    np.testing.assert_allclose(A, expected, rtol=1e-9, atol=1e-14)
    p = TANKS[spec]["plant"].defaults
    pumped = [
        [p["gamma1"] * p["k1"] / 28, 0],
        [0, p["gamma2"] * p["k2"] / 32],
        [0, (1 - p["gamma2"]) * p["k2"] / 28],
        [(1 - p["gamma1"]) * p["k1"] / 32, 0],
    ]
    np.testing.assert_allclose(B, pumped, rtol=1e-9, atol=1e-13)
    np.testing.assert_allclose(C, [[0.5, 0, 0, 0], [0, 0.5, 0, 0]], rtol=1e-12, atol=1e-14)
    np.testing.assert_allclose(D, 0.0, atol=1e-14)


@pytest.mark.parametrize("spec", sorted(TANKS))
def test_tank_gains_zeros_and_interaction(spec: str) -> None:
    A, B, C, D = _matrices(spec, "published")
    gains = D - C @ np.linalg.solve(A, B)
    np.testing.assert_allclose(gains, TANKS[spec]["gains"], rtol=0.03)
    zeros = _zeros(A, B, C, D)
    np.testing.assert_allclose(np.sort(zeros.real), np.sort(TANKS[spec]["zeros"]), atol=TANKS[spec]["close"])
    assert np.abs(zeros.imag).max() < 1e-9
    # derived: relative gain g1 g2 / (g1 + g2 - 1)
    assert gains[0, 0] * np.linalg.inv(gains).T[0, 0] == pytest.approx(TANKS[spec]["relative"], rel=1e-5)


def test_tank_zeros_to_the_digits_derived_elsewhere() -> None:
    """Derived by an independent script at the exact trim; no published source."""
    np.testing.assert_allclose(_zeros(*_matrices("tanks_minus", "published")).real, [-0.05970, -0.01747], atol=5.1e-6)
    np.testing.assert_allclose(_zeros(*_matrices("tanks_plus", "published")).real, [-0.05625, 0.01276], atol=5.1e-6)


def test_van_de_vusse_jacobian() -> None:
    """B. W. Bequette: matrices, transfer function and the zero, from memory."""
    A, B, C, D = _matrices("van_de_vusse", "published")
    np.testing.assert_allclose(A, [[-2.4048, 0.0], [0.8333, -2.2381]], atol=5e-5)
    np.testing.assert_allclose(B, [[7.0], [-1.117]], atol=5e-5)
    den = np.poly(A)
    np.testing.assert_allclose(den, [1, 4.6429, 5.3821], atol=5e-5)
    dc = (D - C @ np.linalg.solve(A, B))[0, 0]
    assert dc * den[2] == pytest.approx(3.1472, abs=1e-4)
    assert _zeros(A, B, C, D).real == pytest.approx([2.81746], abs=5e-5)  # derived
    np.testing.assert_allclose(_poles("van_de_vusse", "published"), np.sort_complex(np.linalg.eigvals(A)), rtol=1e-9)


def test_the_yield_is_flat_where_it_is_highest() -> None:
    """From memory: F/V 1.2921; there a change of dilution no longer changes the product in the end."""
    A, B, C, D = _matrices("van_de_vusse", "best_yield")
    assert (D - C @ np.linalg.solve(A, B))[0, 0] == pytest.approx(0.0, abs=2e-5)


# R. W. Erickson, D. Maksimovic: D 0.6, R 10 Ohm, Vg 30 V, L = C = 160 u; buck-boost from memory (gains 1.5 and 187.5 V,
# 400 Hz, Q 4, zero at 2.65 kHz), buck and boost derived from the same formulas. Hertz, quality, zero in Hz, gains.
CONVERTERS: dict[str, tuple[float, float, float, float, float]] = {
    "buck_boost": (397.8874, 4.0, 2652.582, -187.5, -1.5),
    "boost": (397.8874, 4.0, 1591.549, 187.5, 2.5),
    "buck": (994.7184, 10.0, np.inf, 30.0, 0.6),
}


@pytest.mark.parametrize("spec", sorted(CONVERTERS))
def test_converter_small_signal_parameters(spec: str) -> None:
    hertz, quality, zero, duty_gain, supply_gain = CONVERTERS[spec]
    A, B, C, D = _matrices(spec, "published")
    np.testing.assert_allclose((D - C @ np.linalg.solve(A, B))[0], [duty_gain, supply_gain], rtol=1e-6)
    for pole in verdict(spec, "published", "differentiable").details["poles"]:
        assert pole["hertz"] == pytest.approx(hertz, rel=1e-6)
        assert pole["damping"] == pytest.approx(0.5 / quality, rel=1e-6)
        assert pole["real"] == pytest.approx(-312.5, rel=1e-9)  # derived
    zeros = _zeros(A, B[:, :1], C, D[:, :1])
    if np.isinf(zero):
        assert zeros.size == 0
    else:
        assert zeros.real / (2 * np.pi) == pytest.approx([zero], rel=1e-6)


def test_buck_boost_against_the_printed_digits() -> None:
    """From memory: 3.5 dB, 45.5 dBV, 400 Hz, 12 dB, 2.65 kHz."""
    A, B, C, D = _matrices("buck_boost", "published")
    duty, supply = np.abs((D - C @ np.linalg.solve(A, B))[0])
    pole = verdict("buck_boost", "published", "differentiable").details["poles"][0]
    assert 20 * np.log10([supply, duty, 0.5 / pole["damping"]]) == pytest.approx([3.5, 45.5, 12.0], abs=0.05)
    assert pole["hertz"] == pytest.approx(400, rel=6e-3)
    assert _zeros(A, B[:, :1], C, D[:, :1]).real[0] / (2 * np.pi) == pytest.approx(2650, rel=6e-3)
    assert (converters.VG, converters.D) == (30.0, 0.6)


@pytest.mark.parametrize(("point", "degrees"), [("hanging", 0.0), ("aside", 40.0), ("level", 90.0), ("upright", 180.0)])
def test_pendulum_in_closed_form(point: str, degrees: float) -> None:
    """Derived; where the arm is level gravity has no slope and the poles are 0 and -b/(m l^2)."""
    A, B, _, _ = _matrices("pendulum", point)
    inertia = mechanics.MASS * mechanics.LENGTH**2
    stiffness = mechanics.GRAVITY / mechanics.LENGTH * np.cos(np.deg2rad(degrees))
    friction = mechanics.DAMPING / inertia
    np.testing.assert_allclose(A, [[0.0, 1.0], [-stiffness, -friction]], rtol=1e-7, atol=1e-9)
    np.testing.assert_allclose(B, [[0.0], [1.0 / inertia]], rtol=1e-9)
    if point == "level":
        np.testing.assert_allclose(_poles("pendulum", "level"), [-friction, 0.0], atol=1e-7)
    assert (_poles("pendulum", point).real.max() > 1.0) == (point == "upright")


def test_balance_system_in_closed_form_and_as_printed() -> None:
    """K. J. Astrom, R. M. Murray: closed form; pole 2.68 and zero 2.09 from memory, for no friction at all."""
    A, B, C, D = _matrices("cart", "upright")
    m, arm, g = mechanics.BOB, mechanics.ARM, mechanics.G_CART
    total, swing = mechanics.CART + m, mechanics.INERTIA + m * arm**2
    mu = total * swing - (m * arm) ** 2
    expected = np.zeros((4, 4))
    expected[0, 2] = expected[1, 3] = 1.0
    friction, bearing = mechanics.C_CART, mechanics.C_ARM
    expected[2, 1:] = (m * m * arm * arm * g, -friction * swing, -bearing * arm * m)
    expected[3, 1:] = (total * m * g * arm, -friction * arm * m, -bearing * total)
    expected[2:] /= mu
    np.testing.assert_allclose(A, expected, rtol=1e-7, atol=1e-10)
    np.testing.assert_allclose(B[:, 0], [0, 0, swing / mu, arm * m / mu], rtol=1e-7, atol=1e-12)
    poles = _poles("cart", "upright")
    np.testing.assert_allclose(poles, [-2.68369, -0.00111, 0.0, 2.68287], atol=6e-6)  # derived
    assert poles.real.max() == pytest.approx(2.68, abs=5e-3)
    zeros = _zeros(A, B, C[:1], D[:1])
    assert np.abs(zeros) == pytest.approx([2.09, 2.09], abs=5e-3)


def test_levitated_ball_in_closed_form() -> None:
    """Derived: A21 1962, B2 -28.01428, poles +-44.29447, whatever the coil."""
    A, B, _, _ = _matrices("ball", "cm1")
    np.testing.assert_allclose(A, [[0.0, 1.0], [2 * mechanics.G_BALL / 0.01, 0.0]], rtol=1e-7, atol=1e-9)
    assert B[1, 0] == pytest.approx(-28.01428, abs=5e-6)
    np.testing.assert_allclose(_poles("ball", "cm1"), [-44.29447, 44.29447], atol=5e-6)


def test_quadcopter_at_hover_in_closed_form() -> None:
    """Derived; columns are the four rotor speeds."""
    A, B, _, _ = _matrices("quadcopter", "hover")
    expected = np.zeros((12, 12))
    expected[[0, 1, 2], [3, 4, 5]] = expected[[6, 7, 8], [9, 10, 11]] = 1.0
    expected[[3, 4, 5], [3, 4, 5]] = -0.5341880341880342
    expected[3, 7], expected[4, 6] = 9.81, -9.81
    np.testing.assert_allclose(A, expected, rtol=1e-8, atol=1e-8)
    turned = np.zeros((12, 4))
    turned[5] = 7.903504578e-3
    turned[9, 3], turned[9, 1] = 0.1713836557, -0.1713836557
    turned[10, 2], turned[10, 0] = 0.1713836557, -0.1713836557
    turned[11] = 0.01607763365 * np.array([1, -1, 1, -1])
    np.testing.assert_allclose(B, turned, rtol=1e-8, atol=1e-8)
    np.testing.assert_allclose(quadcopter.HOVER, 620.6107625, rtol=1e-6)  # printed


def _single_track(plant: Any, speed: float) -> tuple[np.ndarray, np.ndarray]:
    front, rear = plant.defaults["front"], plant.defaults["rear"]
    a, b, m, inertia = car.TO_FRONT, car.TO_REAR, car.MASS, car.INERTIA
    A = [
        [-(front + rear) / (m * speed), -speed - (a * front - b * rear) / (m * speed)],
        [-(a * front - b * rear) / (inertia * speed), -(a * a * front + b * b * rear) / (inertia * speed)],
    ]
    return np.array(A), np.array([front / m, a * front / inertia])


@pytest.mark.parametrize(
    ("spec", "point", "plant", "speed"),
    [
        ("car_understeering", "turn-10ms", car.understeering, 10.0),
        ("car_understeering", "turn-41.5ms", car.understeering, 41.5),
        ("car_understeering", "turn-60ms", car.understeering, 60.0),
        ("car_oversteering", "slow", car.oversteering, 20.0),
    ],
)
def test_single_track_car_in_closed_form(spec: str, point: str, plant: Any, speed: float) -> None:
    A, B, C, D = _matrices(spec, point)
    exact_A, exact_B = _single_track(plant, speed)
    np.testing.assert_allclose(A, exact_A, rtol=1e-8)
    np.testing.assert_allclose(B[:, 0], exact_B, rtol=1e-8)
    gain = (D - C @ np.linalg.solve(A, B))[0, 0]
    assert gain == pytest.approx(speed / (car.BASE + car.understeer(plant) * speed**2 / car.GRAVITY), rel=1e-8)


def test_yaw_gain_at_the_characteristic_speed() -> None:
    """From memory: 41.5 m/s, where the gain is V/(2 L); derived: 41.4644 m/s and 7.404365 1/s."""
    A, B, C, D = _matrices("car_understeering", "turn-41.5ms")
    gain = (D - C @ np.linalg.solve(A, B))[0, 0]
    assert gain == pytest.approx(41.5 / (2 * car.BASE), rel=5e-3)
    assert gain == pytest.approx(7.404365, rel=1e-5)  # the peak is flat


def test_determinant_falls_to_zero_at_the_critical_speed() -> None:
    """From memory: 53.3 m/s; derived: 53.10039318. det A = (1 - V^2/Vc^2) times what it is without understeer."""
    A = _matrices("car_oversteering", "slow")[0]
    front, rear = car.oversteering.defaults["front"], car.oversteering.defaults["rear"]
    plain = front * rear * car.BASE**2 / (car.MASS * car.INERTIA * 20.0**2)
    critical = 20.0 / np.sqrt(1.0 - np.linalg.det(A) / plain)
    assert critical == pytest.approx(53.3, rel=5e-3)
    assert critical == pytest.approx(53.10039318, rel=1e-8)


def test_mariner_steering() -> None:
    """T. I. Fossen 1994, from memory: K 0.185, T1 118, T2 7.8, T3 18.5; the matrix is derived."""
    A, B, _, _ = _matrices("mariner", "amidships")
    assert A[0, 0] == pytest.approx(-1.05045672e-2, rel=1e-7)
    steering, rudder = A[1:, 1:], B[1:, 0]
    np.testing.assert_allclose(steering, [[-3.69297790e-2, -2.58498991], [-1.01141572e-3, -1.00362409e-1]], rtol=1e-7)
    np.testing.assert_allclose(rudder, [6.304408e-2, -3.74282e-3], rtol=1e-6)
    T2, T1 = np.sort(-1.0 / np.linalg.eigvals(steering).real)
    np.testing.assert_allclose([T1, T2], [118.0, 7.8], atol=0.05)
    assert -np.linalg.solve(steering, rudder)[1] == pytest.approx(-0.185, abs=5e-4)
    zero = _zeros(steering, rudder[:, np.newaxis], np.array([[0.0, 1.0]]), np.zeros((1, 1))).real[0]
    assert -1.0 / zero == pytest.approx(18.5, abs=0.05)
    assert mariner.SPEED == 7.7175
