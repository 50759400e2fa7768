"""The small values that layers meet at: drives, verdicts, places, names."""

from __future__ import annotations

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from linverify.core.case import Interval
from linverify.core.drive import Drive
from linverify.core.errors import Place, Problem, SpecError
from linverify.core.signals import Signals, nearest
from linverify.core.verdict import Figure, Sense, Status, Verdict, merged

NUMBERS = st.floats(-1e6, 1e6)


@given(st.lists(st.tuples(NUMBERS, NUMBERS), min_size=1, max_size=8), st.sampled_from(["held", "straight"]), NUMBERS)
def test_a_drive_survives_plain_data_to_the_last_bit(
    rows: list[tuple[float, float]], course: str, offset: float
) -> None:
    drive = Drive(0.1, ("flap", "thrust"), np.array(rows), course, {"pitch": offset}, "as found")  # type: ignore[arg-type]
    again = Drive.from_data(drive.to_data())
    assert again.to_data() == drive.to_data()
    assert again.digest == drive.digest


def test_the_text_of_a_drive_does_not_name_it_but_every_number_does() -> None:
    base = Drive(0.1, ("flap",), np.array([[1.0], [2.0]]), text="a")
    assert base.digest == Drive(0.1, ("flap",), np.array([[1.0], [2.0]]), text="b").digest
    others = [base.scaled(1.0000001), Drive(0.2, ("flap",), base.values), Drive(0.1, ("flop",), base.values)]
    assert base.digest not in {other.digest for other in others}


def test_a_drive_of_the_wrong_shape_or_content_is_refused() -> None:
    with pytest.raises(ValueError, match=r"values must have shape \(K, 2\), got \(3, 1\)"):
        Drive(0.1, ("flap", "thrust"), np.zeros((3, 1)))
    data = Drive(0.1, ("flap",), np.zeros((3, 1))).to_data()
    for wrong in ({"course": "curved"}, {"values": [[math.nan]]}):
        with pytest.raises(ValueError, match="course held or straight and finite values"):
            Drive.from_data({**data, **wrong})


TABLE = {
    (Status.PASS, Status.PASS): Status.PASS,
    (Status.PASS, Status.UNDECIDED): Status.UNDECIDED,
    (Status.PASS, Status.FAIL): Status.FAIL,
    (Status.UNDECIDED, Status.UNDECIDED): Status.UNDECIDED,
    (Status.UNDECIDED, Status.FAIL): Status.FAIL,
    (Status.FAIL, Status.FAIL): Status.FAIL,
}


@pytest.mark.parametrize("pair", list(itertools.product((Status.PASS, Status.UNDECIDED, Status.FAIL), repeat=2)))
def test_every_cell_of_the_precedence_table(pair: tuple[Status, Status]) -> None:
    assert merged(pair) is TABLE.get(pair, TABLE.get(pair[::-1]))  # type: ignore[arg-type]


def test_no_finding_has_no_status() -> None:
    with pytest.raises(ValueError, match="empty"):
        merged([])


def test_what_breaks_the_build() -> None:
    assert [status for status in Status if status.breaks_build] == [Status.FAIL, Status.UNDECIDED, Status.NOT_RUN]


SHARES = [
    (3.0, 4.0, Sense.UPPER, 0.75),
    (4.0, 3.0, Sense.LOWER, 0.75),
    (math.inf, 3.0, Sense.LOWER, 0.0),
    (3.0, 0.0, Sense.UPPER, math.nan),
    (3.0, math.nan, Sense.UPPER, math.nan),
    (3.0, 4.0, Sense.NONE, math.nan),
]


@pytest.mark.parametrize(("worst", "limit", "sense", "share"), SHARES)
def test_used_share_and_headroom(worst: float, limit: float, sense: Sense, share: float) -> None:
    figure = Figure("peak error", "pitch", worst, limit, "rad", sense)
    np.testing.assert_equal(figure.used_share, share)
    np.testing.assert_equal(figure.headroom, 1 - share)


def test_the_tightest_figure_is_the_one_with_least_headroom() -> None:
    figures = (Figure("a", "x", 1.0, 2.0), Figure("b", "x", 3.0, 4.0), Figure("c", "x", 9.0, sense=Sense.NONE))
    verdict = Verdict("s.yaml", "kn30", "follows.fast", Status.PASS, Place("s.yaml", 3), figures=figures)
    assert verdict.tightest == figures[1]
    assert verdict.id == "s.yaml::kn30::follows.fast"
    assert Verdict("s.yaml", "kn30", "trims", Status.PASS, Place("s.yaml")).tightest is None


def test_problems_are_told_once_in_order_of_place() -> None:
    first = Problem(Place("a.yaml", 2, 3), "unknown word 'dampng'", "one of damping, stable is expected", "damping")
    second = Problem(Place("a.yaml", 10, 1), "no operating point")
    error = SpecError([second, first, first])
    assert str(error) == (
        "a.yaml:2:3: unknown word 'dampng'; one of damping, stable is expected; did you mean 'damping'?\n"
        "a.yaml:10:1: no operating point"
    )


def test_nearest_word() -> None:
    assert nearest("Dampng", ["stable", "damping"]) == "damping"
    assert nearest("xyz", ["stable", "damping"]) == ""


def test_signals_and_intervals() -> None:
    signals = Signals.of({"speed": "m/s", "pitch": "rad"})
    assert (signals.index("pitch"), signals.unit("speed"), len(signals), "roll" in signals) == (1, "m/s", 2, False)
    both = Interval(0.0, 2.0).meet(Interval(1.0))
    assert (both, 1.5 in both, 2.5 in both, both.bounded, Interval().bounded) == (
        Interval(1.0, 2.0),
        True,
        False,
        True,
        False,
    )
