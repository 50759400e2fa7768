"""Poles of the bicycle benchmark, from its matrices and through numerical Jacobians. Source: tests/truth/bicycle.py."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import brentq
from truth import bicycle

from linverify.core.bound import BoundPlant
from linverify.core.case import SlopeAsk
from linverify.core.model import OperatingPoint
from linverify.core.outcome import Outcome
from linverify.numerics.linearize import linearize
from linverify.numerics.poles import eigenvalues


def _sorted(values: list[complex]) -> np.ndarray:
    return np.array(sorted(values, key=lambda value: (round(value.real, 6), value.imag)))


@pytest.mark.parametrize("speed", bicycle.TABLE)
def test_eigenvalues_of_table_2(speed: int) -> None:
    poles = eigenvalues(bicycle.matrix(speed))
    np.testing.assert_allclose(
        _sorted([pole.value for pole in poles]), _sorted(bicycle.eigenvalues(speed)), rtol=0, atol=1e-11
    )


@pytest.mark.parametrize("speed", [0, 4, 5, 7, 10])
def test_eigenvalues_through_a_numerical_jacobian(speed: int) -> None:
    plant = BoundPlant(bicycle.bicycle, {"speed": float(speed)})
    rest = np.zeros(4)
    point = OperatingPoint(rest, np.zeros(1), np.zeros(1), rest, 0.0, plant.states, plant.inputs, plant.outputs)
    found = linearize(plant, point, {"lean": 0.1, "steer": 0.2}, {}, SlopeAsk())
    assert found.outcome is Outcome.DONE
    poles = eigenvalues(found.model.A, np.array([0.1, 0.2, 1.0, 1.0]))
    np.testing.assert_allclose(
        _sorted([pole.value for pole in poles]), _sorted(bicycle.eigenvalues(speed)), rtol=0, atol=1e-6
    )


def _weave(speed: float) -> complex:
    return max((pole.value for pole in eigenvalues(bicycle.matrix(speed))), key=lambda value: value.imag)


def test_weave_and_capsize_speeds() -> None:
    weave = brentq(lambda speed: _weave(speed).real, 4.0, 5.0, xtol=1e-13)
    assert weave == pytest.approx(bicycle.WEAVE_SPEED, abs=1e-10)
    assert _weave(weave).imag == pytest.approx(bicycle.WEAVE_FREQUENCY, abs=1e-9)

    def capsize(speed: float) -> float:
        return max(pole.value.real for pole in eigenvalues(bicycle.matrix(speed)) if pole.value.imag == 0)

    assert brentq(capsize, 5.5, 6.5, xtol=1e-13) == pytest.approx(bicycle.CAPSIZE_SPEED, abs=1e-10)


def test_double_root() -> None:
    """Two poles that meet move with the square root of a change of speed."""
    largest = sorted(pole.value.real for pole in eigenvalues(bicycle.matrix(bicycle.DOUBLE_SPEED)))[-2:]
    assert largest == pytest.approx([bicycle.DOUBLE_ROOT] * 2, abs=1e-4)
