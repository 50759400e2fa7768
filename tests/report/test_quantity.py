"""Numbers as an engineer reads them."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest

from linverify.core.verdict import Figure, Sense
from linverify.report import quantity

FIGURE = Figure("peak error", "height", 0.05, 0.04, "m")


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0"),
        (-0.0, "0"),
        (0.04, "0.04"),
        (1234.56789, "1234.57"),
        (123456.0, "123456"),
        (5e6, "5e6"),
        (-1.234567e-9, "-1.23457e-9"),
        (math.nan, "-"),
        (math.inf, "infinite"),
        (-math.inf, "-infinite"),
    ],
)
def test_numbers(value: float, text: str) -> None:
    assert quantity.number(value) == text


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (2.5, "m/s", "2.5 m/s"),
        (2.5, "1", "2.5"),
        (2.5, "", "2.5"),
        (math.nan, "m", "-"),
        (math.inf, "m", "infinite"),
        (12.0, "%", "12 %"),
    ],
)
def test_quantities(value: float, unit: str, text: str) -> None:
    assert quantity.quantity(value, unit) == text


@pytest.mark.parametrize(
    ("share", "text"),
    [
        (0.5423456, "54.2 %"),
        (1.0, "100 %"),
        (-0.28086, "-28.1 %"),
        (0.0, "0 %"),
        (-0.0004321, "-0.043 %"),
        (-4e7, "-4e9 %"),
        (math.nan, "-"),
        (-math.inf, "-"),
    ],
)
def test_shares(share: float, text: str) -> None:
    assert quantity.percent(share) == text


@pytest.mark.parametrize(
    ("worst", "limit", "text"),
    [
        (0.0512345678, 0.04, "0.05123 m"),
        (0.0400012345, 0.04, "0.0400012 m"),  # four digits would read as the limit
        (0.03999951, 0.04, "0.0399995 m"),
        (0.04, 0.04, "0.04 m"),
        (math.inf, 0.04, "infinite"),
        (math.nan, 0.04, "-"),
        (1.23456, math.nan, "1.235 m"),
    ],
)
def test_the_worst_is_told_from_its_limit(worst: float, limit: float, text: str) -> None:
    assert quantity.worst(replace(FIGURE, worst=worst, limit=limit)) == text


@pytest.mark.parametrize(
    ("change", "text"),
    [
        ({}, "at most 0.04 m"),
        ({"sense": Sense.LOWER, "limit": 2.0, "unit": ""}, "at least 2"),
        ({"limit": math.inf}, "at most infinite"),
        ({"limit": math.nan}, "-"),
        ({"sense": Sense.NONE}, "-"),
    ],
)
def test_limits(change: dict[str, object], text: str) -> None:
    assert quantity.limit(replace(FIGURE, **change)) == text  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("change", "text", "told"),
    [
        ({"worst": 0.03}, "25 %", "headroom 25 %"),
        ({"worst": 4.0}, "-9900 %", "headroom -9900 %"),
        ({"worst": 4.1}, "over 100 times the limit", "over 100 times the limit"),
        ({"worst": math.inf}, "over 100 times the limit", "over 100 times the limit"),
        ({"worst": 0.0001, "sense": Sense.LOWER}, "under 1/100 of the limit", "under 1/100 of the limit"),
        ({"worst": 0.03, "limit": 0.0}, "-", ""),
        ({"sense": Sense.NONE}, "-", ""),
    ],
)
def test_headroom_is_told_in_words_where_per_cent_mean_nothing(change: dict[str, object], text: str, told: str) -> None:
    figure = replace(FIGURE, **change)  # type: ignore[arg-type]
    assert (quantity.headroom(figure), quantity.headroom_told(figure)) == (text, told)


def test_subject_and_instant() -> None:
    assert quantity.subject(FIGURE) == "peak error of height"
    assert quantity.subject(replace(FIGURE, signal="")) == "peak error"
    assert quantity.instant(FIGURE) == ""
    assert quantity.instant(replace(FIGURE, when=3.25, time_unit="s")) == "t = 3.25 s"


@pytest.mark.parametrize(("unit", "text"), [("", "0.1"), ("1", "0.1"), ("m", "0.1 m")])
def test_exact_figures(unit: str, text: str) -> None:
    assert quantity.exactly(0.1, unit) == text


@pytest.mark.parametrize(
    ("worst", "limit", "sense", "share"),
    [
        (6.0, 6.0, Sense.LOWER, 1.0),
        (12.0, 6.0, Sense.LOWER, 10.0**-0.3),
        (3.0, 6.0, Sense.LOWER, 10.0**0.15),
        (math.inf, 6.0, Sense.LOWER, 0.0),
        (-6.0, 6.0, Sense.LOWER, 10.0**0.6),
        (3.0, 6.0, Sense.UPPER, 10.0**-0.15),
        (3.0, 0.0, Sense.LOWER, 10.0**-0.15),
        (1e6, 6.0, Sense.UPPER, math.inf),
    ],
)
def test_headroom_of_decibels_is_that_of_the_ratios(worst: float, limit: float, sense: Sense, share: float) -> None:
    assert Figure("gain margin", "ride", worst, limit, "dB", sense).used_share == pytest.approx(share, rel=1e-12)


def test_where_a_figure_was_met() -> None:
    margin = Figure("gain margin", "ride", 5.1, 6.0, "dB", Sense.LOWER, at_frequency=3.24159, frequency_unit="rad/s")
    assert quantity.met_at(margin) == "3.242 rad/s"
    assert quantity.worst_met(margin) == "5.1 dB at 3.242 rad/s"
    assert quantity.met_at(replace(margin, when=2.0, time_unit="s")) == "t = 2 s, 3.242 rad/s"
    assert quantity.met_at(FIGURE) == ""
    assert quantity.worst_met(FIGURE) == "0.05 m"


def test_a_range_is_told_with_both_ends_and_shared_from_its_middle() -> None:
    damping = Figure("damping ratio", "pole -1 +- 2j", 0.5, 1.3, "", Sense.RANGE, low=0.3)
    assert quantity.limit(damping) == "within 0.3 to 1.3"
    assert damping.used_share == pytest.approx(0.3 / 0.5)
    assert replace(damping, worst=1.3).headroom == pytest.approx(0.0)
    assert replace(damping, worst=0.2).used_share == pytest.approx(1.2)
    assert replace(damping, worst=math.inf).used_share == math.inf
    assert quantity.worst(replace(damping, worst=0.2999996)) == "0.3"
    assert quantity.worst(replace(damping, worst=0.29996)) == "0.29996"
