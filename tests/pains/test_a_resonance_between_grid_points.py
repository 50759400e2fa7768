"""A lightly damped mode that falls between the points of a grid: the worst of the loop happens where nobody looked."""

from __future__ import annotations

import math

import numpy as np
import pytest
from margins.bench import transfer
from margins.oracle import truth
from margins.response import Loop

from linverify.core.verdict import Status
from linverify.numerics.margins import margins

DAMPING, AT, CIRCLE, TILT = 1e-5, 7.3, 1.00005, math.radians(1.18)


def resonant() -> Loop:
    """0.5/s plus a mode whose response is a circle through 0 and nearly -1, 1.5e-4 rad/s wide."""
    strength = 2.0 * DAMPING * AT * CIRCLE
    A = np.array([[0.0, 0.0, 0.0], [0.0, 0.0, 1.0], [0.0, -(AT**2), -2.0 * DAMPING * AT]])
    C = np.array([0.5, strength * AT * math.sin(TILT), -strength * math.cos(TILT)])
    return Loop(A, np.array([1.0, 0.0, 1.0]), C, 0.0)


def test_what_a_thousand_points_do_not_show(record_property: pytest.RecordProperty) -> None:
    """python-control 0.10.2 on 1000 points from 0.01 to 100 rad/s: 90 deg and a disk margin of 2.0."""
    import control

    loop = resonant()
    found, exact = margins(transfer(loop)), truth(loop)
    assert found.stable
    for name in ("gain_up", "phase", "delay", "sensitivity", "complementary", "disk"):
        assert getattr(found, name).value == pytest.approx(getattr(exact, name), rel=1e-6), name
    assert math.degrees(found.phase.value) == pytest.approx(2.6745, abs=5e-5)
    assert found.disk.value == pytest.approx(0.006244, abs=5e-7)
    assert len(found.crossovers) == 3
    grid = np.logspace(-2, 2, 1000)
    system = control.ss(loop.A, loop.B[:, None], loop.C[None, :], 0.0)
    there = system(1j * grid)
    _, phase, *_ = control.stability_margins((np.abs(there), np.angle(there, deg=True), grid))
    disk = float(control.disk_margins(system, grid)[0])
    record_property("python-control", f"on a grid: phase margin {phase} deg, disk margin {disk}")
    assert phase == pytest.approx(90.0, abs=0.1)
    assert disk == pytest.approx(2.0, abs=1e-3)


def test_python_control_on_a_grid_by_its_own_word_raises() -> None:
    """0.10.2, method "frd" of a transfer function: the grid that it makes does not hold what it then asks for."""
    import control

    with pytest.raises(ValueError, match="not all frequencies"):
        control.stability_margins(control.tf([1.0], [1.0, 1.0, 0.0]), method="frd")


def test_a_gate_on_the_disk_margin_fails(judged) -> None:
    plant = f"""
    plant = Plant(
        states={{"level": "", "x": "", "v": ""}},
        inputs={{"u": ""}},
        outputs={{"y": ""}},
        dynamics=lambda t, x, u, p: np.stack([u[0], x[2], u[0] - {AT}**2 * x[1] - 2 * {DAMPING} * {AT} * x[2]]),
        measurement=lambda t, x, u, p: np.stack([
            np.tensordot(np.array({resonant().C.tolist()}), x, 1)
        ]),
    )
    """
    spec = """
    operating_points: {rest: {hold: {level: 0}}}
    loops:
      light: {controller: {gain: [[1]]}, measures: [y], moves: [u], require: {disk_margin: 0.4, phase_margin: 45 deg}}
    """
    found = judged(plant, spec)["rest.margins.light"]
    assert found.status is Status.FAIL
    assert "disk margin is 0.006244" in found.reason
    assert "phase margin is 2.675 deg at 7.3 rad/s" in found.reason
