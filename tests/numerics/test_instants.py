"""When sampled controllers act: between other instants, over many of them, several at once."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.core.errors import PlantError
from linverify.numerics.instants import Instants, Update, common_multiple, related, updated


def test_an_instant_is_met_within_rounding_and_never_before_the_first() -> None:
    instants = Instants(0.1, 0.03)
    assert instants.due(0.03)
    assert instants.due(0.1 * 12345 + 0.03)
    assert not instants.due(0.1)
    assert not instants.due(0.0300001)
    assert not Instants(0.1).due(-0.1)


@pytest.mark.parametrize("every, expected", [(0.3, [0.04, 0.14, 0.24]), (0.1, [0.04]), (0.05, [0.04])])
def test_phases_within_an_interval(every: float, expected: list[float]) -> None:
    assert Instants(0.1, 0.04).phases(every) == pytest.approx(expected)


def test_times_that_do_not_fit_are_refused() -> None:
    with pytest.raises(ValueError, match="do not fit"):
        Instants(0.1).phases(0.07)
    assert related(0.1, 0.7)
    assert not related(0.3, 0.7)


def test_the_common_multiple_of_sample_times() -> None:
    assert common_multiple([0.02, 0.05]) == pytest.approx(0.1)
    assert common_multiple([0.1, 0.1]) == 0.1
    with pytest.raises(ValueError, match="no short common multiple"):
        common_multiple([0.1, 0.1 * np.pi])


def test_a_column_that_fails_is_told_alone() -> None:
    def jump(t: float, x: np.ndarray, u: np.ndarray) -> np.ndarray:
        if (x > 1.0).any():
            raise PlantError("too large")
        return 2.0 * x

    x = np.array([[0.5, 2.0, 0.25]])
    after, errors = updated([Update(Instants(0.1), jump)], 0.2, 0.0, x, np.zeros((0, 3)))
    assert after[0, [0, 2]].tolist() == [1.0, 0.5]
    assert np.isnan(after[0, 1])
    assert list(errors) == [1]
    same, none = updated([Update(Instants(0.1), jump)], 0.15, 0.0, x, np.zeros((0, 3)))
    assert np.array_equal(same, x)
    assert not none
