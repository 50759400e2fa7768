"""Published operating points, from the spec to the verdict. The figures that a source prints stand as `expect` in the
specs; closed forms are compared here. Sources stand beside the plants in tests/truth."""

from __future__ import annotations

import numpy as np
import pytest
from road import cases, plant_value, trimmed, verdict
from truth import car, mariner, mechanics, quadcopter, quadruple_tank

from linverify.core.verdict import Status

# every operating point whose spec expects what its source prints
PRINTED = [
    ("tanks_minus", "published"),
    ("tanks_minus", "levels_held"),
    ("tanks_plus", "published"),
    ("tanks_plus", "outputs_held"),
    ("van_de_vusse", "published"),
    ("van_de_vusse", "best_yield"),
    ("buck", "published"),
    ("buck", "duty_found"),
    ("boost", "published"),
    ("boost", "duty_found"),
    ("buck_boost", "published"),
    ("buck_boost", "duty_found"),
    ("ball", "cm1"),
    ("quadcopter", "hover"),
]


@pytest.mark.parametrize("spec, point", PRINTED, ids=[f"{spec}-{point}" for spec, point in PRINTED])
def test_the_printed_operating_point_is_found(spec, point):
    found = verdict(spec, point)
    assert found.status is Status.PASS, found.reason
    assert len(found.figures) > 1  # the residual and at least one printed value


@pytest.mark.parametrize(
    "spec, plant, volts",
    [("tanks_minus", quadruple_tank.minus, 3.0), ("tanks_plus", quadruple_tank.plus, 3.15)],
)
def test_tank_levels_in_closed_form(spec, plant, volts):
    values = trimmed(spec, "published")
    expected = quadruple_tank.levels(plant, volts, volts)
    np.testing.assert_allclose([values[f"h{i}"] for i in (1, 2, 3, 4)], expected, rtol=1e-10)


def test_tank_levels_to_the_digits_derived_elsewhere():
    # derived by an independent script at the published pump voltages; no published source
    for spec, levels in (
        ("tanks_minus", (12.26297, 12.78316, 1.63394, 1.40904)),
        ("tanks_plus", (12.44186, 13.16681, 4.73026, 4.98633)),
    ):
        values = trimmed(spec, "published")
        np.testing.assert_allclose([values[f"h{i}"] for i in (1, 2, 3, 4)], levels, atol=6e-6)


def test_no_dilution_gives_more_than_the_highest_yield_and_the_highest_is_named():
    found = verdict("van_de_vusse", "beyond_best_yield")
    assert found.status is Status.FAIL
    assert found.reason.startswith("no equilibrium was found inside the envelope: the rate of cb cannot vanish")
    # 1.266 mol/l from memory, 1.265986 derived
    assert found.details["nearest_holds"]["cb"]["value"] == pytest.approx(1.265986, abs=1e-6)


def test_reactor_steady_state_in_closed_form():
    q = 4 / 7
    ca = (-(q + 5 / 6) + np.sqrt((q + 5 / 6) ** 2 + 4 / 6 * 10.0 * q)) / (2 / 6)
    values = trimmed("van_de_vusse", "published")
    np.testing.assert_allclose([values["ca"], values["cb"]], [ca, 5 / 6 * ca / (q + 5 / 3)], rtol=1e-9)


def test_pendulum_torque_in_closed_form():
    most = mechanics.MASS * mechanics.GRAVITY * mechanics.LENGTH
    for point, angle in (("hanging", 0.0), ("aside", np.deg2rad(40.0)), ("level", np.pi / 2)):
        assert trimmed("pendulum", point)["torque"] == pytest.approx(most * np.sin(angle), rel=1e-12, abs=1e-12)


def test_the_upright_pendulum_is_the_equilibrium_nearest_its_start():
    found = verdict("pendulum", "upright")
    assert found.status is Status.PASS
    assert found.details["states"]["angle"]["value"] == pytest.approx(np.pi, rel=1e-12)
    others = sorted(plant_value(other["angle"]) for other in found.details["other_equilibria"])
    np.testing.assert_allclose(others, [-np.pi, 0.0], atol=1e-9)


def test_without_start_the_pendulum_has_three_equilibria_and_none_is_meant():
    found = verdict("pendulum", "undecided")
    assert found.status is Status.UNDECIDED
    assert len(found.details["other_equilibria"]) == 3


def test_a_torque_that_gravity_cannot_balance_fails_and_the_largest_is_named():
    found = verdict("pendulum", "too_heavy")
    assert found.status is Status.FAIL
    most = mechanics.MASS * mechanics.GRAVITY * mechanics.LENGTH
    assert found.details["nearest_holds"]["torque"]["value"] == pytest.approx(most, rel=1e-6)


def test_the_balance_system_stands_upright_where_it_is_held_and_anywhere_if_not():
    values = trimmed("cart", "upright")
    np.testing.assert_allclose(list(values.values()), 0.0, atol=1e-12)
    found = verdict("cart", "anywhere")
    assert found.status is Status.UNDECIDED
    assert "a family in which position may change" in found.reason


def test_the_ball_hangs_at_the_current_of_the_closed_form():
    current = 0.01 * np.sqrt(mechanics.BALL * mechanics.G_BALL / mechanics.COIL)
    assert trimmed("ball", "cm1")["current"] == pytest.approx(current, rel=1e-10)


@pytest.mark.parametrize("point", ["hover", "rotors_free"])
def test_hover_in_closed_form(point):
    values = trimmed("quadcopter", point)
    for rotor in ("w1", "w2", "w3", "w4"):
        assert values[rotor] == pytest.approx(quadcopter.HOVER, rel=1e-9)
    torque = quadcopter.TORQUE * values["w1"] ** 2
    assert torque == pytest.approx(0.04390797988, rel=1e-9)  # seen in a public transcription


def test_a_steady_climb_needs_the_thrust_of_weight_and_drag():
    found = verdict("quadcopter", "climb")
    assert found.status is Status.PASS
    assert found.details["drift"]["pz"] == {"value": 2.0, "unit": "m/s"}
    lift = quadcopter.MASS * quadcopter.GRAVITY + 2.0 * quadcopter.DRAG
    values = trimmed("quadcopter", "climb")
    assert values["w3"] == pytest.approx(np.sqrt(lift / (4 * quadcopter.THRUST)), rel=1e-9)


@pytest.mark.parametrize(
    "spec, point, plant",
    [
        ("car_understeering", "turn-10ms", car.understeering),
        ("car_understeering", "turn-41.5ms", car.understeering),
        ("car_understeering", "turn-60ms", car.understeering),
        ("car_oversteering", "slow", car.oversteering),
    ],
)
def test_steady_turning_in_closed_form(spec, point, plant):
    values = trimmed(spec, point)
    speed = values["speed"]
    gain = speed / (car.BASE + car.understeer(plant) * speed**2 / car.GRAVITY)
    assert values["yaw_rate"] == pytest.approx(gain * 0.01, rel=1e-9)


def test_the_printed_understeer_and_speeds_come_from_these_plants():
    under, over = car.understeer(car.understeering), car.understeer(car.oversteering)
    assert under == pytest.approx(0.016, rel=5e-3)  # from memory
    assert np.sqrt(car.GRAVITY * car.BASE / under) == pytest.approx(41.5, rel=5e-3)  # from memory
    assert over == pytest.approx(-0.0097, rel=5e-3)  # from memory
    assert np.sqrt(car.GRAVITY * car.BASE / -over) == pytest.approx(53.3, rel=5e-3)  # from memory


def test_next_to_the_critical_speed_the_car_has_no_steady_turn_inside_the_envelope():
    found = verdict("car_oversteering", "near_critical")
    assert found.status is Status.FAIL
    assert found.details["active_bounds"]
    assert found.details["nearest_holds"]["speed"]["value"] < 53.0


def test_the_ship_keeps_a_straight_course_with_a_little_rudder():
    found = verdict("mariner", "straight")
    assert found.status is Status.PASS
    values = trimmed("mariner", "straight")
    x, u = [values[name] for name in ("surge", "sway", "yaw_rate")], [values["rudder"]]
    assert np.abs(mariner.dynamics(0.0, np.array(x), np.array(u), mariner.ship.defaults)).max() < 1e-9
    assert 0.0 < abs(values["rudder"]) < np.deg2rad(3.0)


def test_the_ship_amidships_is_no_equilibrium_and_its_rates_become_the_drift():
    found = verdict("mariner", "amidships")
    assert found.status is Status.PASS
    rates = mariner.dynamics(0.0, np.zeros(3), np.zeros(1), mariner.ship.defaults)
    assert found.details["drift"]["sway"]["value"] == pytest.approx(rates[1], rel=1e-12)
    assert found.details["drift"]["yaw_rate"]["value"] == pytest.approx(rates[2], rel=1e-12)


def test_all_operating_points_of_these_specs_are_looked_at():
    assert sum(len(cases(spec)) for spec in ("pendulum", "cart", "mariner", "quadcopter")) == 13
