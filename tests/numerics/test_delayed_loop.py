"""Loops of several channels with a dead time: the stand-in against the exact response and exact counts of roots."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from channels import highest, respond, sigma, transfer
from test_multiloop import gain, rotating

from linverify.core.outcome import Outcome
from linverify.numerics.allpass import delayed_by, sections, share_off
from linverify.numerics.multiloop import both_sides, multiloop
from linverify.numerics.transfer import Transfer


def lag(top: float, pole: float, delay: float) -> Transfer:
    return Transfer(np.array([[pole]]), np.ones((1, 1)), np.array([[top]]), np.zeros((1, 1)), delay)


@pytest.mark.parametrize(("delay", "omega"), [(2.0, 0.5), (2.0, 2.25), (0.01, 900.0), (1.0, 40.0)])
def test_chain_stands_for_the_dead_time(delay: float, omega: float) -> None:
    loop = Transfer(np.zeros((0, 0)), np.zeros((0, 2)), np.zeros((2, 0)), np.array([[1.0, 2.0], [3.0, 4.0]]), delay)
    number = sections(delay, omega)
    grid = np.linspace(0.0, omega, 200)
    off = share_off(delay, number, omega)
    wrong = respond(delayed_by(loop, number), grid) - respond(loop, grid)
    assert np.abs(wrong / loop.D).max() <= off * (1.0 + 1e-6) + 1e-13
    assert off < 1e-6


def test_integrator_loses_stability_where_it_should() -> None:
    """k exp(-s tau) / s is stable for k tau < pi / 2."""
    for share in (0.5, 0.999, 1.001, 1.5):
        found = multiloop(lag(2.0, 0.0, share * math.pi / 4.0))
        assert found.stable == (share < 1.0)
    (upper, lower) = multiloop(lag(2.0, 0.0, 1.001 * math.pi / 4.0)).unstable
    assert upper == pytest.approx(2.0j, abs=5e-3)
    assert lower == upper.conjugate()


def test_unstable_loop_that_a_dead_time_can_lose() -> None:
    """3 exp(-s tau) / (s - 1): stable for tau < arccos(1 / 3) / sqrt(8)."""
    edge = math.acos(1.0 / 3.0) / math.sqrt(8.0)
    assert multiloop(lag(3.0, 1.0, 0.999 * edge)).stable
    assert not multiloop(lag(3.0, 1.0, 1.001 * edge)).stable


@pytest.mark.parametrize("delay", [1e-4, 0.01, 0.05, 0.1])
def test_rotating_body_with_a_dead_time(delay: float) -> None:
    loop = replace(rotating(3.0), delay=delay)
    found = multiloop(loop)
    poles = np.array([-0.5 + 0.3j, -0.5 - 0.3j])
    eye, omega = np.eye(2), np.geomspace(1e-3, 300.0, 4000)

    def S(w: np.ndarray) -> np.ndarray:
        return np.linalg.inv(eye + respond(loop, w))

    assert found.outcome is Outcome.DONE
    assert found.stable
    assert found.sensitivity.value == pytest.approx(highest(lambda w: sigma(S(w)), omega, poles), rel=1e-6)
    assert found.complementary.value == pytest.approx(highest(lambda w: sigma(eye - S(w)), omega, poles), rel=1e-6)
    disk = found.disk
    # the perturbation makes 1 + L F singular with the exact dead time
    L = respond(loop, np.array([disk.frequency]))[0]
    assert np.linalg.svd(eye + L @ np.diag(disk.factors), compute_uv=False)[-1] < 1e-6
    assert disk.low == pytest.approx(disk.high, rel=1e-5)
    rng = np.random.default_rng(0)
    for _ in range(50):
        Q = np.exp(1j * rng.uniform(-np.pi, np.pi, 2))
        assert np.abs(np.linalg.eigvals((S(omega) - 0.5 * eye) * Q)).max() <= 1.0 / disk.low


def test_more_dead_time_leaves_less() -> None:
    margins = [multiloop(replace(rotating(3.0), delay=delay)).disk.low for delay in (0.0, 0.1, 0.2)]
    assert margins == sorted(margins, reverse=True)
    both = [both_sides(replace(rotating(3.0), delay=delay), gain(np.eye(2))) for delay in (0.0, 0.1)]
    assert both[1].high < both[0].low


def test_feedthrough() -> None:
    """The limit at infinity counts; from |D| = 1 on poles come from infinity."""
    loop = replace(lag(0.5, -1.0, 0.3), D=np.array([[0.6]]))
    found = multiloop(loop)
    assert found.stable
    assert found.sensitivity.value >= 1.0 / (1.0 - 0.6) * (1.0 - 1e-6)
    omega = np.linspace(1e-3, 5e2, 500_001)
    exact = float(np.abs(1.0 / (1.0 + respond(loop, omega)[:, 0, 0])).max())
    assert found.sensitivity.value + found.sensitivity.error >= exact
    assert found.sensitivity.value == pytest.approx(exact, rel=2e-2)
    largest = float(np.abs(1.0 / (1.0 + respond(loop, omega)[:, 0, 0]) - 0.5).max())
    assert found.disk.low <= 1.0 / largest
    assert found.disk.high == pytest.approx(1.0 / largest, rel=2e-2)
    assert multiloop(replace(loop, D=np.array([[1.0]]))).outcome is Outcome.DELAY_NOT_DECIDED


def turns(loop: Transfer) -> int:
    """Unstable closed-loop poles by the turns of det(1 + L) on a fine scan, the open loop having none."""
    omega = np.concatenate([np.linspace(0.0, 200.0, 60_001), np.geomspace(200.0, 1e5, 60_000)])
    eye = np.eye(len(loop.D))
    phase = np.unwrap(np.angle(np.linalg.det(eye + respond(loop, omega))))
    return round(-2.0 * (phase[-1] - phase[0]) / (2.0 * math.pi))


@pytest.mark.parametrize("seed", range(4))
def test_stability_against_turns(seed: int) -> None:
    rng = np.random.default_rng(seed)
    one = transfer(rng, 4, 2, 2, 0.1)
    loop = replace(one, C=0.3 * one.C, delay=10 ** rng.uniform(-2.5, 0.0))
    found = multiloop(loop)
    assert found.outcome is Outcome.DONE
    assert len(found.unstable) == turns(loop)
