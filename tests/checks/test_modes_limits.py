"""modes: every limit passes and fails 1 % beside its value, and what cannot be known is undecided, never a pass."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from modal_cases import PLACE, blocks, delivered, figure, judged, least, line, most, pair, plant, verdict

from linverify.core.loop import Limit
from linverify.core.plant import Plant
from linverify.core.shown import Shown
from linverify.core.verdict import Sense, Status
from linverify.report.wire import dumps, loads

OSCILLATOR = pair(2.0, 0.1)  # -0.2 +- 1.98997j
VALUES = {
    "damping": 0.1,
    "natural_frequency": 2.0,
    "decay_rate": 0.2,
    "time_constant": 5.0,
    "time_to_half": 5.0 * math.log(2.0),
    "period": math.pi / math.sqrt(0.99),
}


@pytest.mark.parametrize("word", VALUES)
@pytest.mark.parametrize("side", [least, most])
def test_a_limit_passes_one_per_cent_inside_and_fails_one_per_cent_outside(word: str, side: object) -> None:
    inside, outside = (0.99, 1.01) if side is least else (1.01, 0.99)
    value = VALUES[word]
    good = verdict(OSCILLATOR, line(side(word, inside * value)))
    assert good.status is Status.PASS, good.reason
    assert good.figures[0].worst == pytest.approx(value, rel=1e-9)
    bad = verdict(OSCILLATOR, line(side(word, outside * value), name="heave"))
    assert bad.status is Status.FAIL
    assert "heave: " in bad.reason
    assert "the pole -0.2 +- 1.99j (2 rad/s, damping 0.1; mostly x0 50 %, x1 50 %)" in bad.reason
    assert figure(bad, bad.figures[0].what).signal == "pole -0.2 +- 1.99j"


def test_time_to_double_of_a_growing_mode() -> None:
    growing = pair(2.0, -0.05)
    double = math.log(2.0) / 0.1
    assert verdict(growing, line(least("time_to_double", 0.99 * double))).status is Status.PASS
    bad = verdict(growing, line(least("time_to_double", 1.01 * double)))
    assert bad.status is Status.FAIL
    assert "time to double" in bad.reason


def test_a_growing_pole_hides_no_slow_pair() -> None:
    """Poles -1 and -10 are a factor with damping 11 / (2 sqrt(10)) = 1.739, whatever grows beside them."""
    slow = np.diag([-1.0, -10.0, 0.1]).tolist()
    assert verdict(slow, line(most("damping", 1.75))).status is Status.PASS
    bad = verdict(slow, line(most("damping", 1.73)))
    assert bad.status is Status.FAIL
    assert "damping ratio of pole -1 and pole -10 together is 1.739" in bad.reason
    alone = verdict(np.diag([-1.0, 0.1]).tolist(), line(most("damping", 1.2)))
    assert alone.status is Status.UNDECIDED
    assert "choose just two of them" in alone.reason


def test_a_range_is_judged_at_both_ends_and_shared_from_its_middle() -> None:
    inside = verdict(OSCILLATOR, line(Limit("damping", 0.05, 0.25, PLACE)))
    assert inside.status is Status.PASS
    assert inside.figures[0].sense is Sense.RANGE
    assert inside.figures[0].headroom == pytest.approx(0.5, rel=1e-9)
    for low, high in ((0.101, 0.3), (0.01, 0.099)):
        assert verdict(OSCILLATOR, line(Limit("damping", low, high, PLACE))).status is Status.FAIL


def test_a_strict_limit_does_not_hold_at_its_end() -> None:
    at_end = [[0.0]]
    words = {"place": PLACE, "strict": True}
    assert verdict(at_end, line(Limit("natural_frequency", low=0.0, **words))).status is Status.FAIL
    assert verdict(at_end, line(Limit("natural_frequency", low=0.0, place=PLACE))).status is Status.PASS
    assert verdict(OSCILLATOR, line(Limit("natural_frequency", high=2.1, **words))).status is Status.PASS
    bad = verdict(OSCILLATOR, line(Limit("damping", low=0.2, **words)))
    assert "more than 0.2 is asked for" in bad.reason


def test_what_a_mode_never_does_takes_infinitely_long() -> None:
    slow, growing = [[-0.5]], [[0.5]]
    assert verdict(slow, line(least("period", 3.0))).status is Status.PASS
    assert verdict(slow, line(most("period", 3.0))).status is Status.FAIL
    assert verdict(slow, line(least("time_to_double", 3.0))).status is Status.PASS
    assert verdict(growing, line(most("time_constant", 9.0))).status is Status.FAIL
    assert verdict(growing, line(most("time_to_half", 9.0))).status is Status.FAIL
    assert "infinite" in verdict(growing, line(most("time_to_half", 9.0))).reason


def test_the_limit_is_told_in_the_unit_of_the_spec() -> None:
    found = verdict(OSCILLATOR, line(Limit("time_constant", low=6.0, place=PLACE, shown=Shown("ms", 1e3))))
    assert figure(found, "time constant").worst == pytest.approx(5000.0)
    assert "5000 ms, at least 6000 ms is asked for" in found.reason


def test_several_modes_under_one_limit_are_judged_one_by_one() -> None:
    both = blocks(pair(1.0, 0.5), pair(5.0, 0.05))
    found = verdict(both, line(least("damping", 0.3)))
    assert [one.status for one in found.figures] == [Status.PASS, Status.FAIL]
    assert "-0.25 +- 4.994j" in found.reason
    assert "-0.5 +- 0.866j" not in found.reason
    assert verdict(both, line(least("damping", 0.3), high=2.0)).status is Status.PASS


# ------------------------------------------------------------------------------- which modes are meant


def test_a_window_without_a_mode_fails_unless_it_may_be_empty() -> None:
    asked = least("damping", 0.05)
    bad = verdict(OSCILLATOR, line(asked, low=3.0, high=6.0))
    assert bad.status is Status.FAIL
    assert "there is no mode between 3 and 6 rad/s" in bad.reason
    assert verdict(OSCILLATOR, line(asked, low=3.0, high=6.0, may_be_empty=True)).status is Status.PASS
    for low, high, expected in ((1.98, 3.0, Status.PASS), (2.02, 3.0, Status.FAIL), (1.0, 1.98, Status.FAIL)):
        assert verdict(OSCILLATOR, line(low=low, high=high)).status is expected


def test_a_mode_on_the_edge_of_a_window_is_undecided_where_it_would_break_the_limit() -> None:
    printed = {"digits": 3}
    edge = line(least("damping", 0.5), low=2.0, high=9.0)
    assert delivered([[0.0, 1.0], [-4.01, -0.4]], edge, **printed).status is Status.UNDECIDED
    harmless = line(least("damping", 0.01), low=2.0, high=9.0)
    found = delivered([[0.0, 1.0], [-4.01, -0.4]], harmless, **printed)
    assert found.status is Status.UNDECIDED  # whether a mode is there at all
    assert "within the errors" in found.reason


def test_a_place_wants_a_mode_there() -> None:
    true = complex(-0.2, math.sqrt(4.0 - 0.04))
    near = true * 1.05
    good = verdict(OSCILLATOR, line(near=near, within=0.05 / 1.05 * 1.01))
    assert good.status is Status.PASS
    assert good.figures[0].worst == pytest.approx(100 * 0.05 / 1.05)
    bad = verdict(OSCILLATOR, line(near=near, within=0.05 / 1.05 * 0.99, name="heave"))
    assert bad.status is Status.FAIL
    assert "heave: there is no mode within" in bad.reason
    assert "the nearest is the pole -0.2 +- 1.99j" in bad.reason


def test_modes_are_chosen_by_the_states_that_take_part() -> None:
    both = blocks(pair(1.0, 0.5), pair(5.0, 0.05))
    good = verdict(both, line(least("damping", 0.3), participates=(("x0", 0.3),)))
    assert good.status is Status.PASS
    bad = verdict(both, line(least("damping", 0.3), participates=(("x2", 0.3),)))
    assert bad.status is Status.FAIL
    none = verdict(both, line(least("damping", 0.3), participates=(("x2", 0.6),)))
    assert none.status is Status.FAIL
    assert "there is no mode with a share of at least 60 % of x2" in none.reason


def test_nobody_knows_which_anonymous_states_take_part() -> None:
    asks = (
        line(least("damping", 0.05), participates=(("x0", 0.3),)),
        line(controllable=(("u0", least("measure", 0.1)),)),
    )
    for ask in asks:
        found = delivered(OSCILLATOR, ask, states=None)
        assert found.status is Status.UNDECIDED
        assert "anonymous" in found.reason
    assert delivered(OSCILLATOR, line(least("damping", 0.05)), states=None).status is Status.PASS


# ------------------------------------------------------------------------------------------- stability


def test_stable_and_unstable() -> None:
    assert verdict(OSCILLATOR, line(stable=True)).status is Status.PASS
    bad = verdict(blocks(OSCILLATOR, pair(3.0, -0.02)), line(stable=True))
    assert bad.status is Status.FAIL
    assert "the pole 0.06 +- 2.999j" in bad.reason
    assert f"is unstable: it doubles in {math.log(2.0) / 0.06:.4g} s" in bad.reason


def test_a_pole_at_the_origin_is_not_stable_unless_excepted() -> None:
    integrator = blocks(0.0, OSCILLATOR)
    bad = verdict(integrator, line(stable=True))
    assert bad.status is Status.FAIL
    assert "lies at the origin, which is not stable unless `at_zero` excuses it" in bad.reason
    good = verdict(integrator, line(stable=True, at_zero=("x0",)))
    assert good.status is Status.PASS
    assert any("at_zero excuses the pole 0" in note for note in good.notes)
    elsewhere = verdict(integrator, line(stable=True, at_zero=("x2",)))
    assert elsewhere.status is Status.PASS
    assert any("x2 has hardly a part in it" in note for note in elsewhere.notes)


@pytest.mark.parametrize("leak", [0.1, 0.3, 0.7])
def test_a_pole_that_is_zero_to_within_its_error_is_told_as_zero(leak: float) -> None:
    # three vessels that exchange what they hold: the sum stays, and what is computed of its pole is rounding
    vessels = leak * np.array([[-1.0, 0.3, 0.7], [0.6, -0.8, 0.2], [0.4, 0.5, -0.9]])
    bad = verdict(vessels, line(stable=True))
    assert "the pole 0 (0 rad/s; mostly x0 33 %, x1 33 %, x2 33 %) lies at the origin" in bad.reason
    assert bad.figures[0].signal == "pole 0"
    told = bad.details["modes"][0]
    assert (told["real"], told["imag"], told["natural_frequency"]) == (0.0, 0.0, 0.0)
    assert not {"damping", "time_constant", "time_to_half", "time_to_double"} & set(told)
    assert 0.0 < told["error"] < 1e-10
    assert "the pole 1e-6" in verdict(blocks(1e-6, OSCILLATOR), line(stable=True)).reason


CHAIN = blocks(np.eye(3, k=1), -2.0)


@pytest.mark.parametrize(
    ("names", "expected"), [(3, Status.PASS), (4, Status.PASS), (2, Status.FAIL), (0, Status.FAIL)]
)
def test_a_chain_of_three_is_excused_by_three_names(names: int, expected: Status) -> None:
    found = verdict(CHAIN, line(stable=True, at_zero=tuple(f"x{at}" for at in range(names))))
    assert found.status is expected, found.reason


@pytest.mark.parametrize(("names", "expected"), [(3, Status.PASS), (2, Status.UNDECIDED), (0, Status.UNDECIDED)])
def test_a_chain_in_other_coordinates_is_excused_as_far_as_it_is_known(names: int, expected: Status) -> None:
    T = np.random.default_rng(4).normal(size=(4, 4))
    turned = np.linalg.solve(T, CHAIN @ T)
    found = verdict(turned, line(stable=True, at_zero=tuple(f"x{at}" for at in range(names))))
    assert found.status is expected, found.reason
    if expected is Status.PASS:
        assert any("3 poles lie at the origin to within" in note for note in found.notes)
    else:
        assert "may lie at the origin or on either side of it" in found.reason


def test_an_unstable_pole_is_not_excused_as_one_at_the_origin() -> None:
    found = verdict(blocks(1e-6, OSCILLATOR), line(stable=True, at_zero=("x0",)))
    assert found.status is Status.FAIL
    vague = delivered([[0.01, 0.02], [0.02, -1.0]], line(stable=True, at_zero=("x0",)), digits=1)
    assert vague.status is not Status.PASS


@pytest.mark.parametrize(("rate", "expected"), [(0.99, Status.PASS), (1.01, Status.FAIL)])
def test_slow_growth_may_be_excused(rate: float, expected: Status) -> None:
    pole = rate * math.log(2.0) / 20.0
    assert verdict(blocks(pole, -1.0), line(stable=True, time_to_double=20.0)).status is expected
    assert verdict(blocks(pair(1.0, -pole), -1.0), line(stable=True, time_to_double=20.0)).status is expected
    assert verdict(blocks(pole, -1.0), line(stable=True)).status is Status.FAIL


def test_a_chain_at_the_origin_is_no_slow_growth() -> None:
    assert verdict(blocks(0.0, -1.0), line(stable=True, time_to_double=20.0)).status is Status.PASS
    assert verdict(blocks(np.eye(2, k=1), -1.0), line(stable=True, time_to_double=20.0)).status is Status.FAIL


def test_stability_within_a_window_only() -> None:
    both = blocks(pair(1.0, 0.5), pair(5.0, -0.05))
    assert verdict(both, line(stable=True, high=2.0)).status is Status.PASS
    assert verdict(both, line(stable=True, low=2.0)).status is Status.FAIL


def test_a_sampled_model_is_stable_inside_the_unit_circle() -> None:
    for radius, expected in ((0.99, Status.PASS), (1.01, Status.FAIL)):
        turned = radius * np.array([[math.cos(1.0), math.sin(1.0)], [-math.sin(1.0), math.cos(1.0)]])
        found = delivered(turned, line(stable=True), step=0.1)
        assert found.status is expected, found.reason
    slow = delivered([[math.exp(-0.1 * 0.5)]], line(Limit("time_constant", 1.98, 2.02, PLACE)), step=0.1)
    assert slow.status is Status.PASS, slow.reason
    assert delivered([[1.0]], line(stable=True), step=0.1).status is Status.FAIL
    assert delivered([[1.0]], line(stable=True, at_zero=("x0",)), step=0.1).status is Status.PASS


# ---------------------------------------------------------------------------- errors of entries decide


def test_printed_digits_that_leave_a_limit_open_make_it_undecided() -> None:
    printed = [[0.0, 1.0], [-4.0, -0.39]]  # damping 0.0975, known to 0.00125 by its own entry
    rounding = {"A": np.array([[0.0, 0.0], [0.05, 0.005]])}
    assert delivered(printed, line(least("damping", 0.085)), rounding=rounding).status is Status.PASS
    assert delivered(printed, line(least("damping", 0.11)), rounding=rounding).status is Status.FAIL
    found = delivered(printed, line(least("damping", 0.0985)), rounding=rounding)
    assert found.status is Status.UNDECIDED
    assert "it is known to within" in found.reason
    assert delivered(printed, line(least("damping", 0.0985))).status is Status.FAIL
    assert delivered(printed, line(least("damping", 0.0985)), digits=2).status is Status.UNDECIDED


def test_a_double_pole_that_may_be_real_or_not() -> None:
    double = [[0.0, 1.0], [-1.0, -2.0]]
    period = line(least("period", 100.0))
    assert delivered(double, period, digits=2).status is Status.UNDECIDED
    assert delivered(double, line(least("period", 5.0)), digits=3).status is Status.PASS
    assert delivered(double, line(least("damping", 0.9)), digits=3).status is Status.PASS


def test_an_upper_limit_above_one_takes_two_real_poles_as_one_factor() -> None:
    limit = Limit("damping", 0.35, 1.3, PLACE)
    over = np.diag([-1.0, -9.0])  # 10 / 6
    assert verdict(over, line(limit)).status is Status.FAIL
    assert verdict(over, line(Limit("damping", 0.35, 1.01 * 10 / 6, PLACE))).status is Status.PASS
    assert verdict(over, line(Limit("damping", 0.35, 0.99 * 10 / 6, PLACE))).status is Status.FAIL
    assert verdict(np.diag([-1.0, -9.0, -20.0]), line(limit)).status is Status.UNDECIDED
    assert verdict(np.diag([-1.0, 9.0]), line(limit)).status is Status.FAIL
    assert verdict(pair(2.0, 0.5), line(limit)).status is Status.PASS
    assert verdict(pair(2.0, 0.3), line(limit)).status is Status.FAIL
    assert verdict([[-1.0]], line(most("damping", 0.9))).status is Status.FAIL


def test_the_plant_that_has_no_slopes_leaves_its_own_model_undecided_but_not_a_delivered_one() -> None:
    one = plant(OSCILLATOR)
    bent = Plant(
        states=one.states, inputs=one.inputs, outputs=one.outputs,
        measurement=lambda t, x, u, p: np.stack([0.0 * x[0]]),
        dynamics=lambda t, x, u, p: np.stack([x[1], -4.0 * x[0] - 0.4 * np.abs(x[1])]),
    )  # fmt: skip
    assert judged(bent, line(stable=True)).status is Status.UNDECIDED


# ----------------------------------------------------------- reach of inputs and outputs, zeros, gains


def test_modes_must_be_controllable_and_observable() -> None:
    A, B, C = np.diag([-1.0, -3.0]), [0.6, 0.8], [0.28, 0.96]
    for word, name, values in (("controllable", "u0", (0.6, 0.8)), ("observable", "y0", (0.28, 0.96))):
        for at, value in enumerate(values):
            window = {"low": (0.5, 2.0)[at], "high": (2.0, 4.0)[at]}
            good, bad = (line(**window, **{word: ((name, least("measure", share * value)),)}) for share in (0.99, 1.01))
            assert verdict(A, good, B=B, C=C).status is Status.PASS
            found = verdict(A, bad, B=B, C=C)
            assert found.status is Status.FAIL
            assert name in found.reason
            (note,) = (note for note in found.notes if "cosine" in note)
            assert note.startswith({"controllable": "controllability", "observable": "observability"}[word])
    assert not any("cosine" in note for note in verdict(A, line(stable=True), B=B, C=C).notes)
    lacking = verdict(A, line(controllable=(("u7", least("measure", 0.1)),)), B=B, C=C)
    assert lacking.status is Status.UNDECIDED
    assert "the local model has no u7" in lacking.reason


def test_a_mode_out_of_reach_fails() -> None:
    A = np.diag([-1.0, -3.0])
    found = verdict(A, line(controllable=(("u0", least("measure", 0.01)),)), B=[1.0, 0.0])
    assert found.status is Status.FAIL
    assert "the pole -3" in found.reason


def numerator(zero: float) -> tuple[list[list[float]], list[float], list[float]]:
    """(s - zero) / ((s + 1) (s + 2)) in controller form."""
    return [[0.0, 1.0], [-2.0, -3.0]], [0.0, 1.0], [-zero, 1.0]


@pytest.mark.parametrize(("zero", "expected"), [(-0.5, Status.PASS), (0.5, Status.FAIL), (-1e-3, Status.PASS)])
def test_minimum_phase(zero: float, expected: Status) -> None:
    A, B, C = numerator(zero)
    found = verdict(A, line(minimum_phase=True), B=B, C=C)
    assert found.status is expected, found.reason
    if expected is Status.FAIL:
        assert "the zero 0.5 from u0 to y0 lies right of the axis" in found.reason


@pytest.mark.parametrize(
    "A",
    [
        [[-1.0, 0.0], [0.0, 0.5]],  # a mode beside the channel
        [[-1.0, 0.0], [1.0, 0.5]],  # one that is moved and not seen
        [[-1.0, 1.0], [0.0, 0.5]],  # one that is seen and not moved
    ],
)
def test_modes_beside_a_channel_are_no_zeros_of_it(A: list[list[float]]) -> None:
    only = line(minimum_phase=True, inputs=("u0",), outputs=("y0",))
    found = verdict(A, only, B=np.eye(2), C=np.eye(2))
    assert found.status is Status.PASS, found.reason
    assert found.details["zeros"][0]["zeros"] == []


def test_a_washout_is_minimum_phase() -> None:
    A, B, C = numerator(0.0)
    assert verdict(A, line(minimum_phase=True), B=B, C=C).status is Status.PASS


def test_zeros_have_limits_of_their_own() -> None:
    A, B, C = numerator(-0.5)
    words = (("real", -0.5), ("natural_frequency", 0.5), ("damping", 1.0))
    for word, value in words:
        side = (1.01 if value < 0 else 0.99) * value
        assert verdict(A, line(zeros=(least(word, side),)), B=B, C=C).status is Status.PASS
    assert verdict(A, line(zeros=(least("real", -0.495),)), B=B, C=C).status is Status.FAIL
    assert verdict(A, line(zeros=(most("natural_frequency", 0.495),)), B=B, C=C).status is Status.FAIL


def test_outputs_that_do_not_answer_all_inputs_have_zeros_everywhere() -> None:
    A = np.diag([-1.0, -2.0])
    blind = verdict(A, line(minimum_phase=True), B=[[1.0, 2.0], [0.0, 0.0]], C=[[1.0, 0.0], [2.0, 0.0]])
    assert blind.status is Status.UNDECIDED
    assert "every place is a zero" in blind.reason
    none = verdict(A, line(minimum_phase=True), B=[1.0, 0.0], C=[0.0, 1.0])
    assert none.status is Status.UNDECIDED
    assert verdict(A, line(minimum_phase=True, inputs=("u9",)), B=[1.0, 0.0]).status is Status.UNDECIDED


def test_a_published_plant_with_a_zero_on_either_side() -> None:
    """Johansson, IEEE Trans. Control Systems Technology 8(3), 2000, 456-465: the quadruple tank at both its points.

    Time constants, static gains and zeros as printed there: -0.060, -0.018 and -0.057, 0.013, values from memory.
    """
    for T, gains, printed in (
        ((62.0, 90.0, 23.0, 30.0), (2.6, 1.5, 1.4, 2.8), (-0.060, -0.018)),
        ((63.0, 91.0, 39.0, 56.0), (1.5, 2.5, 2.5, 1.6), (-0.057, 0.013)),
    ):
        T1, T2, T3, T4 = T
        c11, c12, c21, c22 = gains
        A = np.array([[-1 / T1, 0, 1 / T3, 0], [0, -1 / T2, 0, 1 / T4], [0, 0, -1 / T3, 0], [0, 0, 0, -1 / T4]])
        B = [[c11 / T1, 0.0], [0.0, c22 / T2], [0.0, c12 / T1], [c21 / T2, 0.0]]
        found = verdict(A, line(minimum_phase=True), B=B, C=[[1.0, 0, 0, 0], [0, 1.0, 0, 0]])
        zeros = sorted(one["real"] for one in found.details["zeros"][0]["zeros"])
        assert zeros == pytest.approx(printed, abs=1.5e-3)
        assert found.status is (Status.PASS if printed[1] < 0 else Status.FAIL)


def test_static_gains() -> None:
    A, B, C = np.diag([-2.0, -4.0]), [1.0, 3.0], [1.0, 2.0]  # 1/2 + 6/4 = 2
    for low, high, expected in ((1.98, 2.02, Status.PASS), (2.02, 3.0, Status.FAIL), (1.0, 1.98, Status.FAIL)):
        limit = Limit("static_gain", low, high, PLACE)
        assert verdict(A, line(static_gain=(("u0", "y0", limit),)), B=B, C=C).status is expected
    wrong_way = verdict(A, line(static_gain=(("u0", "y0", least("static_gain", 1.0)),)), B=[-1.0, -3.0], C=C)
    assert wrong_way.status is Status.FAIL
    to_state = verdict(A, line(static_gain=(("u0", "x1", Limit("static_gain", 0.74, 0.76, PLACE)),)), B=B, C=C)
    assert to_state.status is Status.PASS, to_state.reason


def test_a_static_gain_through_an_integrator_is_infinite_and_one_beside_it_is_not() -> None:
    A = [[0.0, 1.0], [0.0, -2.0]]
    limit = (("u0", "y0", Limit("static_gain", 0.4, 0.6, PLACE)),)
    through = verdict(A, line(static_gain=limit), B=[0.0, 1.0], C=[1.0, 0.0])
    assert through.status is Status.FAIL
    assert "infinite" in through.reason
    beside = verdict(A, line(static_gain=limit), B=[0.0, 1.0], C=[0.0, 1.0])
    assert beside.status is Status.PASS, beside.reason


# ---------------------------------------------------------------------------------------- what is told


def test_the_details_hold_every_mode_with_its_states() -> None:
    found = loads(dumps(verdict(blocks(0.0, OSCILLATOR), line(stable=True, at_zero=("x0",)))))
    origin, osc = found.details["modes"]
    assert origin["at_origin"] == "yes"
    assert "damping" not in origin
    assert osc["natural_frequency"] == pytest.approx(2.0)
    assert osc["cycles_to_half"] == pytest.approx(5.0 * math.log(2.0) / VALUES["period"], rel=1e-5)
    assert osc["participation"]["x1"] == pytest.approx(0.5, rel=1e-5)
    assert sum(osc["participation"].values()) == pytest.approx(1.0, abs=1e-5)
    assert found.details["mode_lines"][0]["modes"] == ["pole 0", "pole -0.2 +- 1.99j"]


def test_minutes_are_told_as_minutes() -> None:
    found = judged(plant(OSCILLATOR, time_unit="min"), line(least("natural_frequency", 3.0)))
    assert "2 rad/min, at least 3 rad/min is asked for" in found.reason
    assert found.details["modes"][0]["hertz"] == pytest.approx(2.0 / (2.0 * math.pi * 60.0))


def test_light_damping_is_decided_although_the_stiffness_is_printed_to_few_digits() -> None:
    printed, rounding = [[0.0, 1.0], [-1.0e4, -0.4]], {"A": np.array([[0.0, 0.0], [5.0, 0.0005]])}
    words = {"rounding": rounding}
    assert delivered(printed, line(least("damping", 0.00195)), **words).status is Status.PASS
    assert delivered(printed, line(least("damping", 0.00205)), **words).status is Status.FAIL
    assert delivered(printed, line(least("damping", 0.0020001)), **words).status is Status.UNDECIDED


def test_many_findings_are_told_in_part_and_counted() -> None:
    found = verdict(np.diag(-np.arange(1.0, 11.0)), line(most("natural_frequency", 0.5)))
    assert found.status is Status.FAIL
    assert found.reason.endswith("; and 4 more")
    assert sum(figure.status is Status.FAIL for figure in found.figures) == 10


BY_HAND = ("damping", "natural_frequency", "decay_rate", "period")


def by_hand(word: str, pole: complex) -> float:
    if word == "period":
        return 2.0 * math.pi / abs(pole.imag) if pole.imag else math.inf
    return {"damping": -pole.real / abs(pole), "natural_frequency": abs(pole), "decay_rate": -pole.real}[word]


@settings(deadline=None, derandomize=True, max_examples=60)
@given(
    st.integers(2, 5), st.integers(0, 10**6), st.sampled_from(["damping", "natural_frequency", "decay_rate", "period"])
)
def test_no_model_within_the_printed_digits_contradicts_a_verdict(n: int, seed: int, word: str) -> None:
    """Brute force over roundings: a pass holds for all of them, a fail for none."""
    generator = np.random.default_rng(seed)
    A = generator.normal(size=(n, n)) - 0.5 * np.eye(n)
    A = np.vectorize(lambda entry: float(f"{entry:.2e}"))(A)
    rounding = 0.5 * 10.0 ** (np.floor(np.log10(np.abs(A))) - 2)
    values = [by_hand(word, value) for value in np.linalg.eigvals(A)]
    limit = float(generator.choice(values)) * float(generator.choice([0.98, 0.999, 1.001, 1.02]))
    if not math.isfinite(limit) or limit == 0.0:
        return
    status = delivered(A, line(least(word, limit)), rounding={"A": rounding}).status
    for _ in range(20):
        true = np.linalg.eigvals(A + rounding * generator.choice([-1.0, 1.0], (n, n)))
        keeps = min(by_hand(word, value) for value in true) >= limit * (1 - 1e-12 * np.sign(limit))
        assert status is Status.UNDECIDED or bool(keeps) == (status is Status.PASS)


def test_the_pole_that_nobody_named_is_the_one_that_fails() -> None:
    both = blocks(0.0, 0.0, OSCILLATOR)
    for named, other in (("x0", "x1"), ("x1", "x0")):
        found = verdict(both, line(stable=True, at_zero=(named,)))
        assert found.status is Status.FAIL
        assert f"mostly {other} 100 %" in found.reason


def test_an_excused_integrator_needs_no_damping_ratio() -> None:
    integrator = blocks(0.0, OSCILLATOR)
    good = verdict(integrator, line(least("damping", 0.05), stable=True, at_zero=("x0",)))
    assert good.status is Status.PASS, good.reason
    assert verdict(integrator, line(least("damping", 0.05))).status is Status.UNDECIDED
    assert verdict(integrator, line(least("damping", 0.11), stable=True, at_zero=("x0",))).status is Status.FAIL


def test_two_integrators_side_by_side_are_slow_growth_and_a_chain_is_not() -> None:
    beside = line(stable=True, time_to_double=20.0)
    assert verdict(blocks(0.0, 0.0, -1.0), beside).status is Status.PASS
    assert verdict(blocks(np.eye(2, k=1), -1.0), beside).status is Status.FAIL
