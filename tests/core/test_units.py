"""Quantities: what is read, what is refused, what converts into what, and in which words a mistake is told."""

from __future__ import annotations

import math
import subprocess
import sys

import pytest
from hypothesis import given
from hypothesis import strategies as st

from linverify.core import units
from linverify.core.units import UnitError, convert, convertible, kind, per_time


@pytest.mark.parametrize(
    "number, unit, target, expected",
    [
        (30.0, "kn", "m/s", 30.0 * 1852.0 / 3600.0),
        (180.0, "deg", "rad", math.pi),
        (60.0, "rpm", "rad/s", 2.0 * math.pi),
        (1.0, "rev", "deg", 360.0),
        (20.0, "deg/s", "rad/min", 20.0 * math.pi / 180.0 * 60.0),
        (41.0, "t", "kg", 41000.0),
        (0.5, "t/h", "kg/s", 500.0 / 3600.0),
        (1.0, "lbf", "N", 4.4482216152605),
        (19.5, "ft/s", "m/s", 19.5 * 0.3048),
        (2.0, "bar", "Pa", 2e5),
        (3.0, "l/min", "m^3/h", 0.18),
        (4.0, "min", "s", 240.0),
        (5.0, "%", "1", 0.05),
        (5.0, "%", "", 0.05),
        (2.0, "pu", "1", 2.0),
        (1.0, "kWh", "J", 3.6e6),
        (50.0, "Hz", "1/s * cycle", 50.0),
        (2.0, "kHz", "Hz", 2000.0),
        (1.0, "N*m", "J", 1.0),
        (1.0, "J/(kg K)", "J/kg/degC", 1.0),
        (1.0, "m**2", "cm^2", 1e4),
        (3.0, "m³", "l", 3000.0),
        (3.0, "s⁻¹", "1/min", 180.0),
        (10.0, "µm", "mm", 0.01),
        (1.0, "V/Hz^0.5", "mV/Hz^0.5", 1000.0),
        (1.0, "kg·m²", "g*m^2", 1000.0),
        (1.0, "ft", "in", 12.0),
    ],
)
def test_units_convert(number: float, unit: str, target: str, expected: float) -> None:
    assert convert(number, unit, target) == pytest.approx(expected, rel=1e-14)


@pytest.mark.parametrize(
    "number, unit, target, point, difference",
    [
        (85.0, "degC", "K", 358.15, 85.0),
        (300.0, "K", "degC", 26.85, 300.0),
        (212.0, "degF", "degC", 100.0, 212.0 / 1.8),
        (0.0, "degC", "degF", 32.0, 0.0),
        (9.0, "°F", "K", 260.3722222222222, 5.0),
        (23000.0, "mK", "K", 23.0, 23.0),
        (2.0, "degC/min", "K/s", 2.0 / 60.0, 2.0 / 60.0),
        (1.8, "delta_degF", "K", 1.0, 1.0),
    ],
)
def test_temperatures_are_points_or_differences(
    number: float, unit: str, target: str, point: float, difference: float
) -> None:
    assert convert(number, unit, target) == pytest.approx(point, abs=1e-12)
    assert convert(number, unit, target, difference=True) == pytest.approx(difference, abs=1e-12)


def test_decimal_fractions_are_rounded_once() -> None:
    for whole in range(1, 2000):
        assert convert(float(whole), "ms", "s") == whole / 1000


@pytest.mark.parametrize(
    "text, target, message",
    [
        ("30 kg", "m/s", "'30 kg' is a mass; a speed is expected"),
        ("3 deg", "1", "'3 deg' is an angle; a plain number is expected"),
        ("3 %", "rad", "'3 %' is a plain number; an angle is expected"),
        ("6 dB", "1", "'6 dB' is a level in decibels; a plain number is expected"),
        (
            "10 Hz",
            "rad/s",
            "'10 Hz' is a frequency in cycles, and 62.8319 rad/s if one cycle counts as 2 pi rad; "
            "an angular rate is expected",
        ),
        (
            "60 rpm",
            "Hz",
            "'60 rpm' is an angular rate, and 1 Hz if one cycle counts as 2 pi rad; a frequency in cycles is expected",
        ),
        ("10 Hz", "1/s", "'10 Hz' is a frequency in cycles; a rate per time is expected"),
        ("5 delta_degC", "degC", "'5 delta_degC' is a difference of temperatures; a temperature in degC is expected"),
        ("5 kg*m^3/s", "m", "'5 kg*m^3/s' is a quantity of length^3*mass/time; a length is expected"),
        ("5 1/m/s", "m", "'5 1/m/s' is a quantity of 1/length/time; a length is expected"),
    ],
)
def test_a_wrong_dimension_is_told_in_words(text: str, target: str, message: str) -> None:
    number, unit = text.split(" ", 1)
    with pytest.raises(UnitError) as caught:
        convert(float(number), unit, target, text=text)
    assert str(caught.value) == message


@pytest.mark.parametrize(
    "unit, hint",
    [
        ("Kn", "kn"),
        ("hz", "Hz"),
        ("Nm", "N*m"),
        ("kmh", "km/h"),
        ("cm3", "cm^3"),
        ("secods", "second"),
        ("furlong", ""),
    ],
)
def test_an_unknown_unit_gets_the_nearest_right_one(unit: str, hint: str) -> None:
    with pytest.raises(UnitError) as caught:
        units.check(f"kg/{unit}")
    assert caught.value.wrong == f"{unit!r} is no unit"
    assert caught.value.hint == hint


@pytest.mark.parametrize(
    "unit",
    ["2 m", "m^", "((m", "m)", "m//s", "m/", "*m", "m^2^2", "m^99", "m^(2", "()", "m,s", "+- 3 m", "-", "m^-", "^2"],
)
def test_what_breaks_the_grammar_of_units_is_refused(unit: str) -> None:
    with pytest.raises(UnitError) as caught:
        units.check(unit)
    assert caught.value.wrong == f"{unit!r} is no unit"


def test_kinds_of_quantities_have_names() -> None:
    assert [kind(unit) for unit in ("bar", "", "%", "knot", "N*m", "W/m^2/K")] == [
        "a pressure",
        "a plain number",
        "a plain number",
        "a speed",
        "an energy or torque",
        "a heat transfer coefficient",
    ]


@pytest.mark.parametrize(
    "unit, time_unit, rate",
    [
        ("rad", "s", "rad/s"),
        ("m/s", "s", "m/s^2"),
        ("m/s", "min", "m/s/min"),
        ("1", "h", "1/h"),
        ("", "s", "1/s"),
        ("m/s^2", "s", "m/s^2/s"),
        ("J/(kg K)", "s", "J/(kg K)/s"),
        ("kg/m/s", "s", "kg/m/s/s"),
    ],
)
def test_units_of_rates(unit: str, time_unit: str, rate: str) -> None:
    assert per_time(unit, time_unit) == rate
    assert convert(1.0, rate, f"({unit or '1'})/({time_unit})") == 1.0


@pytest.mark.parametrize("unit, base", [("ms", "s"), ("ds", "s"), ("hours", "s"), ("km", "m"), ("min", "s")])
def test_symbols_have_prefixes_and_words_have_plurals(unit: str, base: str) -> None:
    assert convertible(unit, base)


@pytest.mark.parametrize("unit", ["Ns", "rads", "degs", "Hzs", "kgs", "kns"])
def test_symbols_have_no_plural(unit: str) -> None:
    with pytest.raises(UnitError, match="is no unit"):
        units.check(unit)


def test_convertible_never_raises() -> None:
    assert convertible("kn", "m/s")
    assert not convertible("kn", "kg")
    assert not convertible("kn", "smoot")


def test_decibels_become_ratios_of_amplitudes() -> None:
    assert units.amplitude_ratio(6.0, "dB") == pytest.approx(10.0**0.3)
    assert units.amplitude_ratio(200.0, "%") == 2.0
    assert units.amplitude_ratio(2.0, "") == 2.0
    with pytest.raises(UnitError, match="'2 m' is a length; a plain number is expected"):
        units.amplitude_ratio(2.0, "m")


def test_every_unit_and_every_named_kind_is_known() -> None:
    for name in units._unit_names():
        assert kind(name)
    for line in units.WORDS.strip().splitlines():
        unit, words = line.split(": ")
        assert kind(unit) == words


def test_plain_numbers_and_equal_units_do_not_load_pint() -> None:
    code = (
        "import sys; from linverify.core import units; "
        "units.convert(3.0, '', 'm/s'); units.convert(3.0, 'rad', 'rad'); sys.exit('pint' in sys.modules)"
    )
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


@given(st.text(alphabet="kgmsNradHz%°^*/().- 0123456789eE+_,:", max_size=40))
def test_any_text_is_a_unit_or_refused(unit: str) -> None:
    try:
        units.check(unit)
    except UnitError as error:
        assert error.wrong.endswith("is no unit")
    else:
        assert kind(unit)


@given(st.floats(-1e6, 1e6), st.sampled_from(["degC", "degF", "K"]), st.sampled_from(["degC", "degF", "K"]))
def test_temperatures_survive_a_round_trip(number: float, unit: str, target: str) -> None:
    there = convert(number, unit, target)
    assert convert(there, target, unit) == pytest.approx(number, rel=1e-12, abs=1e-9)
