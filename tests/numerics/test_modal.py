"""Modes: times, participation, controllability and observability against closed forms, and what units cannot change."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from linear_models import linear

from linverify.core.model import LocalModel
from linverify.numerics.modal import Mode, Modes, excusable, modes
from linverify.numerics.traits import TRAITS, Pole, pair_damping

# Etkin, Reid, Dynamics of Flight, 3rd ed. (1996), ch. 6, after NASA CR-2144: Boeing 747 at 40 000 ft, Mach 0.8. The
# longitudinal matrix is from public transcriptions; the lateral one, modes and times are values from memory.
LONGITUDINAL = [
    [-0.006868, 0.01395, 0.0, -32.2],
    [-0.09055, -0.3151, 773.98, 0.0],
    [0.0001187, -0.001026, -0.4285, 0.0],
    [0.0, 0.0, 1.0, 0.0],
]
LATERAL = [
    [-0.0558, 0.0, -774.0, 32.2],
    [-0.003865, -0.4342, 0.4136, 0.0],
    [0.001086, -0.006112, -0.1458, 0.0],
    [0.0, 1.0, 0.0, 0.0],
]


def of(A: object, B: object = None, C: object = None, *, step: float | None = None, error: float = 0.0) -> Modes:
    matrix = np.array(A, dtype=float)
    n = len(matrix)
    B = np.eye(n) if B is None else np.array(B, dtype=float).reshape(n, -1)
    C = np.eye(n) if C is None else np.array(C, dtype=float).reshape(-1, n)
    model = linear(matrix, B, C, np.zeros((len(C), B.shape[1])), step)
    return modes(replace(model, errors={"A": error * np.abs(matrix)}), {})


def figures(mode: Mode) -> dict[str, float]:
    return {word: trait(mode.pole).value for word, trait in TRAITS.items()}


def test_the_modes_of_a_published_aircraft() -> None:
    phugoid, short = of(LONGITUDINAL).modes
    assert phugoid.value == pytest.approx(-0.003289 + 0.06723j, abs=2e-6)
    assert short.value == pytest.approx(-0.3719 + 0.8875j, abs=1e-4)
    slow, fast = figures(phugoid), figures(short)
    assert slow["period"] == pytest.approx(93.4, abs=0.1)
    assert slow["time_to_half"] == pytest.approx(211.0, abs=0.5)
    assert slow["time_to_half"] / slow["period"] == pytest.approx(2.25, abs=0.01)
    assert slow["time_to_double"] == math.inf
    assert fast["period"] == pytest.approx(7.08, abs=0.005)
    assert fast["time_to_half"] == pytest.approx(1.86, abs=0.005)
    assert fast["time_to_half"] / fast["period"] == pytest.approx(0.26, abs=0.005)
    spiral, roll, dutch = of(LATERAL).modes
    assert spiral.value == pytest.approx(-0.0072973, abs=5e-7)
    assert roll.value == pytest.approx(-0.56248, abs=5e-6)
    assert dutch.value == pytest.approx(-0.033011 + 0.94655j, abs=5e-6)
    assert figures(roll)["time_constant"] == pytest.approx(1.0 / 0.56248, rel=1e-5)
    assert figures(spiral)["period"] == math.inf


def test_phugoid_and_short_period_belong_to_the_states_that_everybody_knows() -> None:
    found = of(LONGITUDINAL)  # u, w, q, theta
    phugoid, short = found.modes
    assert {name for name, _ in found.dominating(phugoid, 2)} == {"x0", "x3"}
    assert {name for name, _ in found.dominating(short, 2)} == {"x1", "x2"}
    for mode in found.modes:
        assert mode.shares.sum() == pytest.approx(1.0, rel=1e-12)


def test_participation_is_the_product_of_left_and_right_eigenvectors() -> None:
    A = np.random.default_rng(5).normal(size=(5, 5))
    values, right = np.linalg.eig(A)
    left = np.linalg.inv(right)
    for mode in of(A).modes:
        place = int(np.argmin(abs(values - mode.value)))
        weights = np.abs(right[:, place] * left[place])
        np.testing.assert_allclose(mode.shares, weights / weights.sum(), rtol=1e-9, atol=1e-12)
        assert mode.alone


def scaled(model: LocalModel, sizes: np.ndarray) -> tuple[LocalModel, dict[str, float]]:
    """The same model with states in other units, and the nominal sizes that go with them."""
    A, B, C = model.A * sizes / sizes[:, np.newaxis], model.B / sizes[:, np.newaxis], model.C * sizes
    nominal = dict(zip(model.states.names, 1.0 / sizes, strict=True))
    return replace(model, A=A, B=B, C=C), nominal


@settings(deadline=None, derandomize=True, max_examples=40)
@given(st.lists(st.integers(-10, 10), min_size=4, max_size=4), st.integers(0, 10**6))
def test_units_of_states_change_no_measure(powers: list[int], seed: int) -> None:
    generator = np.random.default_rng(seed)
    A, B, C = (generator.normal(size=shape) for shape in ((4, 4), (4, 2), (2, 4)))
    model = linear(A, B, C, np.zeros((2, 2)))
    before = modes(model, dict.fromkeys(model.states.names, 1.0))
    other, nominal = scaled(model, 2.0 ** np.array(powers))
    after = modes(other, nominal)
    for one, two in zip(before.modes, after.modes, strict=True):
        assert two.value == pytest.approx(one.value, rel=1e-9)
        np.testing.assert_allclose(two.shares, one.shares, rtol=1e-7, atol=1e-9)
        for name in model.inputs.names:
            pair = [found.controllability(mode, name).value for found, mode in ((before, one), (after, two))]
            assert pair[1] == pytest.approx(pair[0], rel=1e-7)
        for name in model.outputs.names:
            pair = [found.observability(mode, name).value for found, mode in ((before, one), (after, two))]
            assert pair[1] == pytest.approx(pair[0], rel=1e-7)


def test_metres_and_millimetres_give_the_same_measure() -> None:
    A, B, C = np.array([[0.0, 1.0], [-4.0, -0.4]]), np.array([[0.0], [2.0]]), np.array([[1.0, 0.0]])
    model = linear(A, B, C, 0.0)
    names = dict(zip(model.states.names, (0.1, 0.5), strict=True))
    metres = modes(model, names)
    mm = 1e3
    milli = modes(replace(model, A=A, B=B * mm, C=C / mm), {name: size * mm for name, size in names.items()})
    one, two = metres.modes[0], milli.modes[0]
    assert milli.controllability(two, "u0").value == pytest.approx(metres.controllability(one, "u0").value, rel=1e-9)
    assert milli.observability(two, "y0").value == pytest.approx(metres.observability(one, "y0").value, rel=1e-9)


def test_controllability_is_a_cosine() -> None:
    found = of(np.diag([-1.0, -3.0]), B=[[1.0], [0.0]], C=[[0.6, 0.8]])
    slow, fast = found.modes
    assert found.controllability(slow, "u0").value == pytest.approx(1.0)
    assert found.controllability(fast, "u0").value == pytest.approx(0.0, abs=1e-12)
    assert found.observability(slow, "y0").value == pytest.approx(0.6)
    assert found.observability(fast, "y0").value == pytest.approx(0.8)
    for known in (found.controllability(fast, "u0"), found.observability(slow, "y0")):
        assert known.low <= known.value <= known.high
    with pytest.raises(ValueError, match="not in tuple"):
        found.controllability(slow, "u7")


def test_an_input_that_does_nothing_controls_nothing() -> None:
    found = of([[-1.0]], B=[[0.0]])
    assert found.controllability(found.modes[0], "u0").high == 0.0


def test_one_input_cannot_reach_two_modes_of_one_pole() -> None:
    """Twins: x0' = -x0 + u, x1' = -x1 + u stay apart whatever u does."""
    twins = of(np.diag([-1.0, -1.0]), B=[[1.0], [1.0]])
    assert twins.controllability(twins.modes[0], "u0").value == pytest.approx(0.0, abs=1e-12)
    chain = of([[-1.0, 1.0], [0.0, -1.0]])  # through the second state the input reaches both, through the first not
    assert chain.controllability(chain.modes[0], "u1").value == pytest.approx(1.0, abs=1e-6)
    assert chain.controllability(chain.modes[0], "u0").value == pytest.approx(0.0, abs=1e-6)
    assert chain.observability(chain.modes[0], "y0").value == pytest.approx(1.0, abs=1e-6)
    assert chain.observability(chain.modes[0], "y1").value == pytest.approx(0.0, abs=1e-6)


@pytest.mark.parametrize("gap", [1e-6, 1e-9, 1e-13, 1e-17, 0.0])
@pytest.mark.parametrize("turned", [False, True])
def test_near_defective_poles_share_one_answer(gap: float, turned: bool) -> None:
    """Balancing keeps poles apart that lie sqrt(gap) apart; in other coordinates they melt into one."""
    A = np.array([[-1.0, 1.0, 0.0], [gap, -1.0, 0.0], [0.0, 0.0, -5.0]])
    T = np.array([[2.0, 1.0, 0.0], [1.0, 2.0, 0.0], [0.0, 0.0, 1.0]]) if turned else np.eye(3)
    found = of(np.linalg.solve(T, A @ T))
    first, second, other = found.modes
    for mode in (first, second):
        np.testing.assert_allclose(mode.shares, [0.5, 0.5, 0.0], atol=1e-3 if turned else 1e-6)
        assert mode.share_error < 1e-2
    np.testing.assert_allclose(other.shares, [0.0, 0.0, 1.0], atol=1e-12)
    assert other.alone
    assert first.alone is (gap > (1e-11 if turned else 0.0))


def test_what_has_nothing_to_do_with_each_other_is_told_apart_even_at_one_pole() -> None:
    """Two integrators of two each: each has its own states, though four poles lie at the origin."""
    pairs = of(np.kron(np.eye(2), [[0.0, 1.0], [0.0, 0.0]]))
    assert {mode.shared.poles for mode in pairs.modes} == {4}
    for mode in pairs.modes:
        assert sorted(np.round(mode.shares, 12)) == [0.0, 0.0, 0.5, 0.5]
        assert mode.shares.sum() == pytest.approx(1.0)


def test_a_chain_of_three_is_one_group_at_the_origin() -> None:
    chain = of([[0.0, 1.0, 0, 0], [0, 0, 1.0, 0], [0, 0, 0, 2.0], [0, 0, 0, -3.0]])
    assert [mode.origin for mode in chain.modes] == ["yes"] * 3 + ["no"]
    assert {mode.shared.poles for mode in chain.modes[:3]} == {3}
    assert all(excusable(mode, chain.speed) and mode.stable is False for mode in chain.modes[:3])
    T = np.random.default_rng(1).normal(size=(4, 4))
    turned = of(np.linalg.solve(T, np.array(chain.model.A) @ T))
    near = [mode for mode in turned.modes if mode.origin == "maybe"]
    assert sum(mode.poles for mode in near) == 3
    assert all(excusable(mode, turned.speed) and mode.stable is None for mode in near)
    assert max(abs(mode.value) for mode in near) > 1e-9


def test_a_pole_whose_error_is_large_is_not_excused_as_one_at_the_origin() -> None:
    loose = of([[0.01, 0.01], [0.01, -1.0]], error=2.0)
    assert loose.modes[0].origin == "maybe"
    assert not excusable(loose.modes[0], loose.speed)


def test_a_difference_equation_is_told_in_s() -> None:
    step, s = 0.05, complex(-0.4, 3.0)
    z = np.exp(s * step)
    found = of([[z.real, z.imag], [-z.imag, z.real]], step=step)
    (mode,) = found.modes
    assert mode.value == pytest.approx(s, rel=1e-12)
    assert mode.z == pytest.approx(z, rel=1e-12)
    assert mode.stable is True
    outside = of([[1.1]], step=step).modes[0]
    assert (outside.stable, outside.value) == (False, pytest.approx(math.log(1.1) / step))
    assert TRAITS["time_to_double"](outside.pole).value == pytest.approx(math.log(2.0) * step / math.log(1.1))
    assert of([[1.0]], step=step).modes[0].origin == "yes"
    alternating = of([[-0.5]], step=step).modes[0]
    assert TRAITS["period"](alternating.pole).value == pytest.approx(2 * step)


def test_a_dead_beat_pole_is_stable_and_fast() -> None:
    mode = of([[0.0, 1.0], [0.0, 0.0]], step=0.1).modes[0]
    assert mode.stable is True
    assert TRAITS["damping"](mode.pole).low > 0.9
    assert TRAITS["time_constant"](mode.pole).high < 0.1
    assert TRAITS["natural_frequency"](mode.pole).value == math.inf
    assert TRAITS["period"](mode.pole).low == pytest.approx(0.2)


@settings(deadline=None, derandomize=True, max_examples=200)
@given(st.floats(-3, 3), st.floats(0, 3), st.floats(0, 2), st.floats(0, 2 * math.pi), st.floats(0, 1))
def test_every_figure_of_every_pole_in_the_disc_lies_in_its_range(
    real: float, imag: float, radius: float, angle: float, share: float
) -> None:
    center, other = (
        complex(real, imag),
        complex(real, imag) + share * radius * complex(math.cos(angle), math.sin(angle)),
    )
    for trait in TRAITS.values():
        known, true = trait(Pole(center, radius)), trait(Pole(other, 0.0)).value
        slack = 1e-9 * (1.0 + abs(true)) if math.isfinite(true) else 0.0
        if other != 0:
            assert known.low - slack <= true <= known.high + slack
        assert known.low <= known.value <= known.high


def test_two_real_poles_as_one_factor() -> None:
    known = pair_damping(Pole(-1.0 + 0j, 0.0, True), Pole(-9.0 + 0j, 0.0, True))
    assert known.value == pytest.approx(10.0 / 6.0)  # s^2 + 10 s + 9
    assert known.low <= known.value <= known.high
    assert pair_damping(Pole(-1.0 + 0j, 0.0), Pole(1.0 + 0j, 0.0)).high == math.inf


def test_states_without_a_size_get_one_that_units_do_not_change() -> None:
    A = np.array([[-1.0, 5.0, 0.0], [0.3, -2.0, 1.0], [0.0, -4.0, -0.5]])
    model = linear(A, [[0.0], [1.0], [0.0]], [[1.0, 0.0, 0.0]], 0.0)
    sizes = np.array([1.0, 1.0, 1024.0])
    other = replace(model, A=A * sizes / sizes[:, np.newaxis])
    one, two = (modes(each, {"x0": 1.0, "x1": 2.0, "x2": math.inf}) for each in (model, other))
    for first, second in zip(one.modes, two.modes, strict=True):
        assert two.controllability(second, "u0").value == pytest.approx(
            one.controllability(first, "u0").value, rel=1e-9
        )
