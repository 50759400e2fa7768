"""Jacobians of closed-form functions: values, error estimates, domains, noise."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest

from linverify.core.outcome import Outcome
from linverify.numerics.differentiate import Slopes, slopes


def at(f: Callable[[np.ndarray], np.ndarray], z0: Any, sizes: Any = 1.0, **given: Any) -> Slopes:
    point = np.atleast_1d(np.array(z0, dtype=float))
    ones = np.ones(len(point))
    low, high = given.pop("low", -np.inf) * ones, given.pop("high", np.inf) * ones
    return slopes(f, point, np.asarray(sizes) * ones, low, high, **given)


SMOOTH = {
    "sin": (np.sin, np.cos, 0.3),
    "flat cosine": (np.cos, lambda z: -np.sin(z), 0.0),
    "square at rest": (lambda z: z**2, lambda z: 2 * z, 0.0),
    "exp": (np.exp, np.exp, 2.0),
    "root": (np.sqrt, lambda z: 0.5 / np.sqrt(z), 0.2),
    "steep": (lambda z: np.tanh(z / 1e-3), lambda z: 1e3 / np.cosh(z / 1e-3) ** 2, 3e-4),
    "x|x|": (lambda z: z * np.abs(z), lambda z: 2 * np.abs(z), 0.0),
    "x|x| beside": (lambda z: z * np.abs(z), lambda z: 2 * np.abs(z), 3e-4),
    "far offset": (lambda z: 1e4 + np.sin(z), np.cos, 1.0),
    "linear": (lambda z: 3.0 * z - 1.0, lambda z: 3.0 + 0 * z, 1e3),
    "constant": (lambda z: 5.0 + 0 * z, lambda z: 0 * z, 1.0),
    "power": (lambda z: np.abs(z) ** 1.5 * np.sign(z), lambda z: 1.5 * np.sqrt(np.abs(z)), 0.5),
}


@pytest.mark.parametrize("name", SMOOTH)
def test_smooth_functions_have_slopes_errors_and_no_corner(name: str) -> None:
    f, exact, z0 = SMOOTH[name]
    found = at(f, z0)
    assert found.outcome is Outcome.DONE
    assert found.gaps == ()
    assert abs(found.jacobian[0, 0] - exact(np.float64(z0))) <= found.error[0, 0]
    assert found.error[0, 0] <= 2e-8 * max(1.0, abs(exact(np.float64(z0))))
    assert found.left[0, 0] == pytest.approx(found.right[0, 0], abs=1e-3 * max(1.0, abs(found.jacobian[0, 0])))


def test_states_of_size_1e6_and_1e_6() -> None:
    """A one-sided step of 1e-6 for all states gives -1.9999 and -3.0 here; the exact slopes are -2 and -2."""

    def f(z: np.ndarray) -> np.ndarray:
        return np.stack([-(z[0] ** 2) / 1e6, -(z[1] ** 2) / 1e-6])

    for sizes in ([1e6, 1e-6], [1.0, 1e-6], [1e4, 1e-7]):
        found = at(f, [1e6, 1e-6], sizes)
        np.testing.assert_allclose(found.jacobian, np.diag([-2.0, -2.0]), rtol=1e-7, atol=1e-13)
        assert np.all(np.abs(found.jacobian - np.diag([-2.0, -2.0])) <= found.error)


def test_error_is_never_below_rounding_and_noise() -> None:
    offset = at(lambda z: 1e8 + np.sin(z), 0.3)
    assert offset.error[0, 0] >= np.finfo(float).eps * 1e8 / 0.08
    assert abs(offset.jacobian[0, 0] - np.cos(0.3)) <= offset.error[0, 0]
    hidden = at(lambda z: (1e8 + np.sin(z)) - 1e8, 0.3)  # the same noise, which the value does not show
    assert hidden.grainy[0]
    assert not offset.grainy[0]
    assert hidden.noise[0] == pytest.approx(4.3e-9, rel=1.0)
    assert abs(hidden.jacobian[0, 0] - np.cos(0.3)) <= hidden.error[0, 0]


def test_one_call_for_all_columns_and_levels() -> None:
    calls = []

    def f(z: np.ndarray) -> np.ndarray:
        calls.append(z.shape)
        return np.stack([np.sin(z[0]) + z[1] * z[2], np.exp(z[1])])

    found = at(f, [0.1, 0.2, 0.3])
    assert found.outcome is Outcome.DONE
    assert all(rows == 3 for rows, _ in calls)
    assert len(calls) <= 10
    assert sum(columns for _, columns in calls) < 3000


def test_at_the_edge_of_its_domain_a_slope_is_one_sided() -> None:
    found = at(np.exp, 0.0, low=0.0)
    assert found.one_sided == (1,)
    assert abs(found.jacobian[0, 0] - 1.0) <= found.error[0, 0] < 1e-8
    assert np.isnan(found.left[0, 0])
    upper = at(np.exp, 0.0, high=0.0)
    assert upper.one_sided == (-1,)
    assert abs(upper.jacobian[0, 0] - 1.0) <= upper.error[0, 0] < 1e-8


def test_no_step_leaves_the_domain() -> None:
    seen = []

    def f(z: np.ndarray) -> np.ndarray:
        seen.append((z.min(axis=1), z.max(axis=1)))
        return np.sqrt(z[:1]) * z[1:]

    found = at(f, [1e-3, 1.0], low=np.array([0.0, 0.999]), high=np.array([2e-3, 1.0]))
    low, high = np.min([one for one, _ in seen], axis=0), np.max([one for _, one in seen], axis=0)
    assert np.all(low >= [0.0, 0.999])
    assert np.all(high <= [2e-3, 1.0])
    assert found.one_sided == (0, -1)
    exact = np.array([[0.5 / np.sqrt(1e-3), np.sqrt(1e-3)]])
    assert np.all(np.abs(found.jacobian - exact) <= found.error)
    assert np.all(found.error < 1e-8)


def test_a_variable_that_moves_one_way_sees_its_own_side() -> None:
    def f(z: np.ndarray) -> np.ndarray:
        return 2.0 * np.minimum(z, 1.0)

    down = at(f, 1.0, sides=[-1])
    assert (down.one_sided, down.gaps) == ((-1,), ())
    assert down.jacobian[0, 0] == pytest.approx(2.0, abs=1e-11)
    up = at(f, 1.0, sides=[1])
    assert (up.one_sided, up.gaps) == ((1,), ())
    assert up.jacobian[0, 0] == 0.0
    (corner,) = (gap for gap in at(lambda z: f(z + 1e-6), 1.0, sides=[-1]).gaps if gap.near)
    assert (corner.kind, corner.gap) == ("kink", pytest.approx(2.0, rel=1e-3))
    assert corner.distance == pytest.approx(-1e-6, rel=1e-3)


def test_calls_that_fail_further_out_only_shorten_the_steps() -> None:
    def f(z: np.ndarray) -> np.ndarray:
        return np.where(z < 0.001, np.exp(z), np.nan)

    found = at(f, 0.0)
    assert found.outcome is Outcome.DONE
    assert abs(found.jacobian[0, 0] - 1.0) <= found.error[0, 0] < 1e-8


def test_calls_that_fail_next_to_the_point_leave_no_slope() -> None:
    with np.errstate(invalid="ignore"):
        found = at(lambda z: np.where(z >= 0, np.sqrt(np.maximum(z, 0.0)), np.nan) + z, [0.0])
    assert found.outcome is Outcome.NOT_FINITE
    assert found.lost == (True,)
    nowhere = at(lambda z: np.full_like(z, np.nan), 0.0)
    assert nowhere.outcome is Outcome.NOT_FINITE


def test_misuse_is_refused() -> None:
    with pytest.raises(ValueError, match="positive"):
        at(np.sin, 0.0, 0.0)
    with pytest.raises(ValueError, match="outside"):
        at(np.sin, 0.0, low=1.0)


def test_the_same_call_gives_the_same_bits() -> None:
    def f(z: np.ndarray) -> np.ndarray:
        return np.stack([np.sin(z[0] * z[1]), np.abs(z[0] - 0.3 - 1e-5)])

    first, second = at(f, [0.3, 0.7]), at(f, [0.3, 0.7])
    assert first.jacobian.tobytes() == second.jacobian.tobytes()
    assert first.error.tobytes() == second.error.tobytes()
    assert first.gaps == second.gaps


def test_a_wave_finer_than_the_noise_scales_is_not_taken_for_a_slope() -> None:
    """The nominal size is a million times too large: whatever is given, the error says how little is known."""
    found = at(lambda z: np.sin(z / 1e-6), 3e-7)
    exact = 1e6 * np.cos(0.3)
    # either the slope within its error, or an error of the size of the row itself
    assert abs(found.jacobian[0, 0] - exact) <= found.error[0, 0] or found.error[0, 0] > 0.5 * found.scales[0]
