"""The check `agrees`: names, the claimed point and entries; passes, fails and stays undecided as it says."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from delivering import ENTRIES_AT, POINT_AT, changed, delivered, derived, verdict

from linverify.core.delivered import AgreeAsk
from linverify.core.verdict import Status
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
    start, plant = "A[speed, place]: delivered -2.5, plant -2.75625 +- ", " 1/s^2"
    assert found.reason.startswith(start)
    assert found.reason.endswith(plant)
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


def test_anonymous_states_have_no_entries_to_compare():
    found = verdict(delivered(states=None), ENTRIES)
    assert found.status is Status.UNDECIDED
    assert found.reason == "the delivered states have no names, so entries cannot be compared; ask for `response`"


def test_an_absent_output_is_no_difference():
    right = delivered()
    assert verdict(replace(right, C=right.C[:1], D=right.D[:1], outputs=("place",)), ENTRIES).status is Status.PASS


def test_the_verdict_survives_the_record():
    written = record.dumps(verdict(changed(delivered(), "B", {(2, 0): -4.0}), ENTRIES))
    assert record.dumps(record.loads(written)) == written
