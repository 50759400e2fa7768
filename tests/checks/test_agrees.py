"""The check `agrees`: names, the claimed point and entries; passes, fails and stays undecided as it says."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from delivering import CART, ENTRIES_AT, POINT_AT, changed, delivered, derived, verdict

from linverify.checks import moved
from linverify.core.delivered import AgreeAsk, GainsAsk, ResponseAsk
from linverify.core.verdict import Status
from linverify.numerics.sampled import sampled
from linverify.report import record

ENTRIES = AgreeAsk(entries=0.01, place=POINT_AT, entries_place=ENTRIES_AT)


def test_the_right_model_agrees_and_says_what_was_compared():
    found = verdict(delivered(), ENTRIES)
    assert (found.status, found.reason, found.id) == (Status.PASS, "", "specs/cart/tow.yaml::out::agrees")
    assert [figure.what for figure in found.figures] == ["entry against the plant"]
    assert found.figures[0].origin == str(ENTRIES_AT)
    assert found.figures[0].worst < 1e-6


def test_without_words_only_names_and_the_claimed_point_are_looked_at_and_it_says_so():
    found = verdict(changed(delivered(), "A", {(1, 0): 5.0}))
    assert found.status is Status.PASS
    assert found.notes == (
        "the delivered model claims no operating point",
        "`agree` asks for no comparison of the model itself: names, units and the claimed point were looked at",
    )


def test_a_wrong_entry_fails_and_is_named_with_both_values_and_its_unit():
    found = verdict(changed(delivered(), "A", {(1, 0): -2.5}), ENTRIES)
    assert found.status is Status.FAIL
    start = "A[speed, place]: delivered -2.5, plant -2.75625 +- "
    assert found.reason.startswith(start)
    assert found.reason.endswith(" 1/s^2")
    assert found.notes[0] == "only A[speed, place] differs from the plant"
    assert found.figures[0].signal == "A[speed, place]"
    # scaled: 0.25625 x 0.1 m against the row's largest term, 2.75625 x 0.1 or 1.25 x 0.2
    assert found.figures[0].worst == pytest.approx(100 * 0.25625 / 2.75625, rel=1e-6)


def test_a_difference_of_what_the_row_does_is_what_counts():
    small = changed(delivered(), "A", {(1, 1): -0.4 - 0.0099 * 2.75625 * 0.1 / 0.5})
    large = changed(delivered(), "A", {(1, 1): -0.4 - 0.0101 * 2.75625 * 0.1 / 0.5})
    assert verdict(small, ENTRIES).status is Status.PASS
    assert verdict(large, ENTRIES).status is Status.FAIL


def test_order_of_states_inputs_and_outputs_is_no_difference():
    right = delivered()
    order = [2, 0, 1]
    turned = replace(
        right,
        A=right.A[np.ix_(order, order)],
        B=right.B[order],
        C=right.C[::-1][:, order],
        D=right.D[::-1],
        states=tuple(right.states[i] for i in order),
        outputs=right.outputs[::-1],
    )
    assert verdict(turned, ENTRIES).status is Status.PASS
    assert verdict(replace(turned, states=right.states), ENTRIES).status is Status.FAIL


@pytest.mark.parametrize("digits", [3, 4, 5, 6])
def test_a_right_model_in_a_few_digits_agrees(digits: int):
    assert verdict(delivered(digits=digits), ENTRIES).status is Status.PASS


def test_too_few_digits_for_the_band_fail_and_the_message_says_why():
    found = verdict(delivered(digits=2), replace(ENTRIES, entries=1e-3))
    assert found.status is Status.FAIL
    assert "A[speed, place]: delivered -2.8, plant -2.75625" in found.reason
    assert "(within the printed digits)" in found.reason


def test_an_entry_is_never_judged_beyond_what_the_derived_one_is_known_to():
    known = max(float(errors.max()) for errors in derived().errors.values())
    assert 0.0 < known < 1e-6
    found = verdict(delivered(), replace(ENTRIES, entries=1e-18))
    assert found.status is Status.UNDECIDED


def test_the_claimed_point_is_held_against_the_trim_in_nominal_sizes():
    right = delivered(x0={"place": 0.5}, u0={"command": 0.9675}, y0={"pull": 4.8375})
    found = verdict(right)
    assert found.status is Status.PASS
    assert [(figure.signal, figure.limit, figure.origin) for figure in found.figures] == [
        ("place", 1.0, str(POINT_AT)),
        ("command", 1.0, str(POINT_AT)),
        ("pull", 1.0, str(POINT_AT)),
    ]
    off = verdict(replace(right, u0={"command": 0.97}))
    assert off.status is Status.FAIL
    assert off.reason == "command: claimed 0.97 rad, trimmed 0.9675 rad"
    assert off.figures[1].worst == pytest.approx(1.25)
    assert verdict(replace(right, u0={"command": 0.97}), AgreeAsk(point=0.013, place=POINT_AT)).status is Status.PASS


def test_a_wrong_point_tells_its_worst_claims_and_how_many_more():
    found = verdict(delivered(x0={"place": 0.4, "speed": 0.1, "winch": 0.8}, u0={"command": 0.8}, y0={"pull": 4.0}))
    assert found.status is Status.FAIL
    assert found.reason == (
        "place: claimed 0.4 m, trimmed 0.5 m; winch: claimed 0.8 rad, trimmed 0.9675 rad; "
        "command: claimed 0.8 rad, trimmed 0.9675 rad; and 2 more claimed values"
    )


def test_anonymous_states_have_no_entries_to_compare():
    found = verdict(delivered(states=None), ENTRIES)
    assert found.status is Status.UNDECIDED
    assert found.reason == "the delivered states have no names, so entries cannot be compared; ask for `response`"


def test_what_the_file_says_of_its_printed_digits_goes_with_its_names():
    right = changed(delivered(), "A", {(1, 0): -2.76})
    order = [2, 0, 1]
    rounding = np.zeros((3, 3))
    rounding[1, 0] = 0.005
    turned = replace(
        right,
        A=right.A[np.ix_(order, order)],
        B=right.B[order],
        C=right.C[:, order],
        states=tuple(right.states[i] for i in order),
        rounding={"A": rounding[np.ix_(order, order)]},
    )
    found = verdict(turned, replace(ENTRIES, entries=1e-3))
    assert found.status is Status.FAIL
    assert found.reason.startswith("A[speed, place]: delivered -2.76, plant -2.75625 +- ")
    assert found.reason.endswith("1/s^2 (within the printed digits)")


def test_an_absent_output_is_no_difference():
    right = delivered()
    assert verdict(replace(right, C=right.C[:1], D=right.D[:1], outputs=("place",)), ENTRIES).status is Status.PASS


def test_the_verdict_survives_the_record():
    written = record.dumps(verdict(changed(delivered(), "B", {(2, 0): -4.0}), ENTRIES))
    assert record.dumps(record.loads(written)) == written


RESPONSE = AgreeAsk(response=ResponseAsk(0.02, 0.01, 20.0, 0.01, POINT_AT), place=POINT_AT)


def test_a_response_within_the_band_passes_and_every_channel_is_told():
    found = verdict(delivered(), RESPONSE)
    assert found.status is Status.PASS
    assert [(figure.what, figure.unit, figure.limit) for figure in found.figures] == [("frequency response", "%", 2.0)]
    assert {(one["input"], one["output"]) for one in found.details["response"]} == {
        ("command", "place"),
        ("command", "pull"),
    }


def test_a_response_off_by_too_much_fails_and_names_channel_frequency_and_both_values():
    right = delivered()
    found = verdict(replace(right, B=1.05 * right.B), RESPONSE)
    assert found.status is Status.FAIL
    assert found.figures[0].worst == pytest.approx(5.0, rel=1e-6)
    assert found.figures[0].status is Status.FAIL
    assert "command to place at " in found.reason
    assert "command to pull at " in found.reason
    assert "rad/s: delivered " in found.reason
    assert "off by 5 %" in found.reason
    assert verdict(replace(right, B=1.0199 * right.B), RESPONSE).status is Status.PASS


def test_anonymous_states_are_compared_by_what_outputs_do_and_recognised():
    right = delivered()
    T = np.array([[1.0, 0.2, 0.0], [0.3, 2.0, 0.1], [0.0, -1.0, 0.5]])
    turned = replace(right, A=np.linalg.solve(T, right.A @ T), B=np.linalg.solve(T, right.B), C=right.C @ T)
    found = verdict(replace(turned, states=None), RESPONSE)
    assert found.status is Status.PASS
    assert moved.SAME in found.notes
    named = verdict(turned, ENTRIES)
    assert named.status is Status.FAIL
    assert moved.SAME in named.notes
    assert moved.SAME not in verdict(changed(right, "A", {(1, 0): -2.5}), ENTRIES).notes


def test_a_state_that_no_output_sees_may_differ_without_a_change_of_what_outputs_do():
    right = delivered(outputs=("pull",), C=delivered().C[1:], D=delivered().D[1:])
    found = verdict(changed(right, "A", {(1, 1): -0.9}), ENTRIES)
    assert found.status is Status.FAIL
    assert moved.UNSEEN in found.notes


def test_poles_zeros_and_static_gains_are_told_in_pairs():
    details = verdict(changed(delivered(), "A", {(2, 2): -5.0}), ENTRIES).details
    fast = details["poles_moved"][-1]
    assert (fast["delivered"]["real"], fast["plant"]["real"]) == (pytest.approx(-5.0), pytest.approx(-4.0, rel=1e-7))
    assert len(details["poles_moved"]) == 3
    gain = details["static_gains"][1]
    assert (gain["input"], gain["output"]) == ("command", "pull")
    assert (gain["delivered"], gain["plant"]) == (pytest.approx(4.0), pytest.approx(5.0, rel=1e-7))


def test_static_gains_are_judged_as_asked():
    right = delivered()
    ask = AgreeAsk(gains=GainsAsk(POINT_AT, singular_values=0.1), place=POINT_AT)
    assert verdict(replace(right, B=1.09 * right.B), ask).status is Status.PASS
    found = verdict(replace(right, B=1.11 * right.B), ask)
    assert found.status is Status.FAIL
    assert found.figures[0].what == "static gain, scaled by nominal sizes"
    assert found.figures[0].worst == pytest.approx(11.0, rel=1e-6)
    assert found.reason.startswith("singular value 1 of the static gain, scaled by nominal sizes: delivered ")


def test_a_determinant_of_gains_that_are_not_square_is_undecided():
    ask = AgreeAsk(gains=GainsAsk(POINT_AT, determinant_sign="same"), place=POINT_AT)
    found = verdict(delivered(), ask)
    assert found.status is Status.UNDECIDED
    assert "2 outputs and 1 inputs" in found.reason
    one = delivered(outputs=("place",), C=delivered().C[:1], D=delivered().D[:1])
    assert verdict(one, ask).status is Status.PASS
    flipped = verdict(replace(one, B=-one.B), ask)
    assert flipped.status is Status.FAIL
    assert flipped.reason.startswith("determinant of the static gain: delivered negative, plant positive")


@pytest.mark.parametrize("course", ["held", "straight"])
def test_a_sampled_model_is_compared_with_the_plant_sampled_alike(course: str):
    right = sampled(derived(), 0.05, course)
    given = delivered(right, step=0.05, course=course)
    assert verdict(given, ENTRIES).status is Status.PASS
    assert verdict(given, RESPONSE).status is Status.PASS
    other = delivered(sampled(derived(), 0.06, course), step=0.05, course=course)
    assert verdict(other, ENTRIES).status is Status.FAIL
    # A is nearly the identity: a fast sample time must not make errors of the dynamics look small
    wrong = delivered(sampled(derived(parameters={**CART.defaults, "damping": 2.2}), 1e-3, course), step=1e-3)
    assert verdict(replace(wrong, course=course), ENTRIES).status is Status.FAIL


def test_a_band_beyond_nyquist_is_cut_and_said():
    given = delivered(sampled(derived(), 0.5, "held"), step=0.5)
    found = verdict(given, RESPONSE)
    assert found.status is Status.PASS
    assert "responses are compared up to half the sampling frequency, 6.28319 rad/s" in found.notes
    above = AgreeAsk(response=ResponseAsk(0.02, 7.0, 20.0, 0.01, POINT_AT), place=POINT_AT)
    assert verdict(given, above).status is Status.UNDECIDED
