"""Controllers in state space against their formulas, evaluated as written."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from linverify.core.realize import StateSpace, pid, rational, scaled, trapezoidal


def response(found: StateSpace, s: complex) -> complex:
    """C (s I - A)^-1 B + D of one channel."""
    A, B, C, D = found
    return complex((C @ np.linalg.solve(s * np.eye(len(A)) - A, B.astype(complex)) + D)[0, 0]) if len(A) else D[0, 0]


def of_pid(s: complex, kp: float, ki: float, kd: float, tf: float) -> complex:
    return kp + ki / s + kd * s / (tf * s + 1)


@pytest.mark.parametrize("w", [1e-3, 0.3, 7.0, 2e4])
@pytest.mark.parametrize(
    "parts", [(0.8, 0.2, 0.5, 0.02), (2.0, 0, 0, 0), (0, 3.0, 0, 0), (0, 0, 1.5, 4.0), (1, -2, -3, 5)]
)
def test_pid_is_its_formula(parts: tuple[float, float, float, float], w: float) -> None:
    found = pid(*parts)
    assert len(found[0]) == bool(parts[1]) + bool(parts[2])
    assert response(found, 1j * w) == pytest.approx(of_pid(1j * w, *parts), rel=1e-13)


@pytest.mark.parametrize("step", [1e-4, 0.01, 3.0])
@pytest.mark.parametrize("share", [0.001, 0.2, 0.97])
def test_the_trapezoidal_rule_puts_its_own_s_into_the_formula(step: float, share: float) -> None:
    z = cmath.exp(1j * math.pi * share)
    s = 2.0 / step * (z - 1.0) / (z + 1.0)
    found = trapezoidal(*pid(0.8, 0.2, 0.5, 0.02), step)
    assert response(found, z) == pytest.approx(of_pid(s, 0.8, 0.2, 0.5, 0.02), rel=1e-10)


def test_the_trapezoidal_integral_of_a_constant_is_a_ramp() -> None:
    A, B, C, D = trapezoidal(*pid(ki=3.0), 0.1)
    x, outputs = np.zeros((1, 1)), []
    for _ in range(4):
        outputs.append((C @ x + D)[0, 0])
        x = A @ x + B
    assert outputs == pytest.approx([0.15, 0.45, 0.75, 1.05], rel=1e-14)  # 3 (k + 1/2) 0.1


def test_a_pole_that_the_trapezoidal_rule_cannot_take() -> None:
    one = np.ones((1, 1))
    with pytest.raises(ValueError, match="pole at 2/step"):
        trapezoidal(2.0 * one, one, one, one, 1.0)


def test_a_derivative_needs_a_filter() -> None:
    with pytest.raises(ValueError, match="filter"):
        pid(kd=1.0)


RATIOS = {
    "gain": ([3.0], [2.0]),
    "lag": ([1.0], [0.5, 1.0]),
    "lead": ([2.0, 1.0], [0.1, 1.0]),
    "integral": ([1.0], [1.0, 0.0]),
    "light": ([4.0], [1.0, 2e-6, 1.0]),
    "zeros in front": ([0.0, 0.0, 1.0], [0.0, 1.0, 3.0]),
    "fast and slow": ([1.0, 1e4], [1.0, 1e6 + 1e-3, 1e3]),
    "zero": ([0.0], [1.0, 1.0]),
    "sixth": ([1.0, 2.0, 3.0], np.poly([-1e-2, -1.0, -50.0, -3e3, -1e5, -2e5]).tolist()),
}


@pytest.mark.parametrize("name", RATIOS)
@pytest.mark.parametrize("w", [1e-4, 1e-2, 1.1, 30.0, 4e3, 1e6])
def test_ratios_are_their_polynomials(name: str, w: float) -> None:
    num, den = RATIOS[name]
    s = 1j * w
    due = complex(np.polyval(num, s) / np.polyval(den, s))
    assert response(rational(num, den), s) == pytest.approx(due, rel=1e-9)


def test_badly_scaled_ratios_get_states_of_like_size() -> None:
    A, B, C, _ = rational([1.0], np.poly([-1e-2, -1.0, -50.0, -3e3, -1e5, -2e5]).tolist())
    rows, columns = np.hstack([np.abs(A), np.abs(B)]).sum(1), np.vstack([np.abs(A), np.abs(C)]).sum(0)
    assert np.all(np.abs(np.log2(rows / columns)) < 4.0)
    bare = np.poly([-1e-2, -1.0, -50.0, -3e3, -1e5, -2e5])[1:]
    assert max(abs(bare)) > 1e15  # what the companion form would have had in one row
    assert np.abs(A).max() < 1e7


def test_scaling_by_powers_of_two_changes_no_bit_of_the_markov_parameters() -> None:
    A = np.array([[0.1, 3e5], [7e-6, -0.3]])
    B, C, D = np.array([[1e4], [0.37]]), np.array([[1e-3, 12.0]]), np.array([[0.5]])
    found = scaled(A, B, C, D)
    assert not np.array_equal(found[0], A)
    for power in range(3):
        due = C @ np.linalg.matrix_power(A, power) @ B
        assert np.array_equal(found[2] @ np.linalg.matrix_power(found[0], power) @ found[1], due)


@pytest.mark.parametrize(
    ("num", "den", "why"),
    [([1.0, 2.0], [3.0], "improper"), ([1.0], [0.0, 0.0], "zero"), ([1.0, 0.0, 0.0], [0.0, 1.0, 1.0], "improper")],
)
def test_ratios_that_are_none(num: list[float], den: list[float], why: str) -> None:
    with pytest.raises(ValueError, match=why):
        rational(num, den)


NUMBERS = st.floats(-1e4, 1e4).map(lambda value: round(value, 3))


@settings(max_examples=200, deadline=None)
@given(num=st.lists(NUMBERS, min_size=1, max_size=5), den=st.lists(NUMBERS, max_size=5), w=st.floats(0.01, 100.0))
def test_any_ratio_is_its_polynomials(num: list[float], den: list[float], w: float) -> None:
    den = [1.0, *den, *[1.0] * (len(num) - 1 - len(den))]
    s = 1j * w
    above, below = complex(np.polyval(num, s)), complex(np.polyval(den, s))
    size = sum(abs(value) * w**power for power, value in enumerate(reversed(den)))
    if abs(below) < 1e-6 * size:  # too near a pole to tell
        return
    scale = sum(abs(value) * w**power for power, value in enumerate(reversed(num))) / abs(below) + abs(num[0])
    assert abs(response(rational(num, den), s) - above / below) <= 1e-8 * scale * size / abs(below) + 1e-12
