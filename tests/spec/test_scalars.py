"""What a single scalar means, trap by trap."""

from __future__ import annotations

import math

import pytest

from linverify.spec.scalars import Amount, Wrong, amount, fraction, is_text, number, quoted, truth, whole


@pytest.mark.parametrize(
    ("text", "value", "unit"),
    [
        ("0", 0.0, ""), ("-3", -3.0, ""), ("+3", 3.0, ""), ("1e3", 1000.0, ""), ("1.0e3", 1000.0, ""),
        ("1e-6", 1e-6, ""), (".5", 0.5, ""), ("5.", 5.0, ""), ("-0.8E+2", -80.0, ""), ("30 kn", 30.0, "kn"),
        ("30kn", 30.0, "kn"),
        ("-6 deg", -6.0, "deg"), ("1e3 rad/s", 1000.0, "rad/s"), ("90 %", 90.0, "%"), ("90%", 90.0, "%"),
        ("20 °C", 20.0, "°C"), ("5 1/s", 5.0, "1/s"), ("0.5 rad*s/m", 0.5, "rad*s/m"), ("3 kg/(m s)", 3.0, "kg/(m s)"),
        ("7 m**2", 7.0, "m**2"), ("100 µs", 100.0, "µs"), ("30\u00a0kn", 30.0, "kn"), ("  12 s ", 12.0, "s"),
        ("0.02 kg/s/s", 0.02, "kg/s/s"), ("5e", 5.0, "e"),
    ],
)  # fmt: skip
def test_numbers_and_units(text: str, value: float, unit: str) -> None:
    assert amount(text) == Amount(value, unit)


@pytest.mark.parametrize(
    "text",
    [
        "010", "-010", "00", "007 kg", "1_000", "1_000 kg", "0x1F", "0o17", "0b101", "1:30", "12:30:45",
        "190:20:30.15",
        "2024-01-01", "2024-01-01T10:00:00Z", "on", "off", "yes", "no", "true", "inf", ".inf", "-.INF", "nan", ".NaN",
        "1e400", "-1e400 kg", "1e-400", "1,5", "1,5 kg", "", "-", "+", ".", "e3", "five", "\u22125", "\u22125 deg",
        "1.2.3", "1 2", "--3", "3 +- ,", "1:30 min", "5 [m]x:", "7" * 5000, "0." + "0" * 500 + "1", "<<", "=", "*x",
        "1 000", "\u0663", "½",
    ],
)  # fmt: skip
def test_what_is_no_number_is_refused(text: str) -> None:
    read = amount(text)
    assert isinstance(read, Wrong)
    assert len(read.wrong) < 120


def test_a_number_in_quotes_is_text() -> None:
    assert isinstance(amount("5", plain=False), Wrong)
    assert amount("5 kn", plain=False) == Amount(5.0, "kn")


@pytest.mark.parametrize("text", ["true", "True", "TRUE"])
def test_true(text: str) -> None:
    assert truth(text) is True


@pytest.mark.parametrize("text", ["false", "False", "FALSE"])
def test_false(text: str) -> None:
    assert truth(text) is False


@pytest.mark.parametrize(
    ("text", "hint"),
    [("on", "true"), ("yes", "true"), ("Y", "true"), ("off", "false"), ("NO", "false"), ("n", "false")],
)
def test_what_only_yaml_1_1_calls_true_gets_a_hint(text: str, hint: str) -> None:
    assert truth(text) == Wrong(f"{text!r} is no truth value", f"true or false is expected; write {hint}")


def test_other_words_are_no_truth_values() -> None:
    assert truth("1") == Wrong("'1' is no truth value", "true or false is expected")
    assert isinstance(truth("true", plain=False), Wrong)


def test_whole_numbers() -> None:
    assert whole("300") == 300
    assert whole("1e3") == 1000
    for text in ("2.5", "1e300", "-.5", "3 m", "x"):
        assert isinstance(whole(text), Wrong)


def test_fractions() -> None:
    assert fraction("5 %") == fraction("0.05") == 0.05
    assert isinstance(fraction("5 m"), Wrong)


def test_a_number_without_unit() -> None:
    assert number("1e-8") == 1e-8
    assert isinstance(number("1e-8 m"), Wrong)


@pytest.mark.parametrize("text", ["on", "yes", "1:30", "2024-01-01", "1_000", "text", "=", "<<", "1e3 kn", "0b1"])
def test_text_by_the_core_rules(text: str) -> None:
    assert is_text(text)


@pytest.mark.parametrize(
    "text", ["", "~", "null", "true", "FALSE", "1", "010", "1e3", ".5", "0x1F", "0o7", ".inf", "-.inf", ".nan"]
)
def test_no_text_by_the_core_rules(text: str) -> None:
    assert not is_text(text)


def test_shown_text_is_short_and_printable() -> None:
    assert quoted("\x07\u202e") == "'\\x07\\u202e'"
    assert len(quoted("x" * 1000)) == 62


def test_values_are_finite() -> None:
    read = amount("1e308")
    assert isinstance(read, Amount)
    assert math.isfinite(read.value)
