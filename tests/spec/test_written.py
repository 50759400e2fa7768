"""The units that a spec is written in come back with what is found."""

from __future__ import annotations

from pathlib import Path

import pytest

from linverify.core.case import Case
from linverify.core.shown import Shown, number
from linverify.spec.bind import load

PLANT = """
from linverify import Plant

wing = Plant(
    states={"pitch": "rad", "warmth": "degC", "speed": "m/s"},
    inputs={"flap": "rad", "shaft": "rad/s", "mix": "1"},
    outputs={"lift": "N", "pitch": "rad"},
    dynamics=lambda t, x, u, p: [0.0 * x[0], 0.0 * x[1], 0.0 * x[2]],
    measurement=lambda t, x, u, p: [0.0 * x[0], 1.0 * x[0]],
    time_unit="TIME",
)
"""
SPEC = """
linverify: 1
plant: plant.py:wing
envelope: {flap: [-3 deg, 3 deg], speed: [4, 16], warmth: [0 degC, 80 degC]}
operating_points:
  cruise:
    hold: {speed: 20 kn, warmth: 300 K, flap: 0.5 deg}
    find: [pitch, shaft, mix]
    start: {mix: 20 %}
    expect: {shaft: 120 rpm +- 3 rpm}
drives:
  horizon: HORIZON
  every: EVERY
  amplitude: {flap: 0.4 deg, mix: 0.1, shaft: {until: {lift: 2 kN}}}
  offsets: {warmth: 2 K}
  discerns: {delay: 50 ms}
error_bands:
  pitch: {peak: 0.3 deg, relative: 20 %}
  warmth: {wider_of: [1.5 K, 10 %]}
  lift: {rms: 12}
"""


def bound(folder: Path, *, time_unit: str = "s", horizon: str = "2 min", every: str = "30 s") -> Case:
    (folder / "plant.py").write_text(PLANT.replace("TIME", time_unit), encoding="utf-8")
    path = folder / "wing.yaml"
    path.write_text(SPEC.replace("HORIZON", horizon).replace("EVERY", every), encoding="utf-8")
    (case,) = load(path, folder)
    return case


def test_bands_are_told_as_written(tmp_path: Path) -> None:
    case = bound(tmp_path)
    told = {(band.signal, band.kind): case.shown_band(band).told_size(band.limit) for band in case.bands}
    assert told["pitch", "peak"] == "0.3 deg"
    assert told["warmth", "wider_of"] == "1.5 K"  # a difference, whatever the zero of the scale
    assert told["lift", "rms"] == "12 N"


def test_signals_are_told_as_held_then_as_the_envelope_has_them(tmp_path: Path) -> None:
    case = bound(tmp_path)
    assert case.shown_as("speed").told(case.trim.hold["speed"]) == "20 kn"
    assert case.shown_limit("speed").told(case.envelope["speed"].high) == "16 m/s"
    assert case.shown_as("warmth").told(26.85) == "300 K"
    assert case.shown_as("warmth").told_size(2.0) == "2 K"
    assert case.shown_limit("warmth").told(80.0) == "80 degC"
    assert case.shown_limit("flap").told(case.envelope["flap"].low) == "-3 deg"
    assert case.shown_as("mix").told(0.25) == "25 %"
    assert case.shown_as("lift") == Shown("N")
    expected = case.trim.expect["shaft"]
    assert expected.shown is not None
    assert expected.shown.told_size(expected.tolerance) == "3 rpm"


def test_drives_are_told_as_written(tmp_path: Path) -> None:
    (drives,) = (case := bound(tmp_path)).drives
    moves = case.shown_moves(drives)
    assert moves["flap"].told_change(drives.amplitude["flap"].high) == "+0.4 deg"
    assert moves["mix"].told_change(0.1) == "+0.1"
    assert moves["warmth"].told_size(2.0) == "2 K"
    assert drives.shown["lift"].told_size(2000.0) == "2 kN"
    assert drives.shown_delay is not None
    assert drives.shown_delay.told_size(0.05) == "50 ms"


@pytest.mark.parametrize(
    ("horizon", "every", "unit"),
    [("2 min", "30 s", "min"), ("2 min", "1 s", "s"), ("120", "30", "s"), ("120 s", "500 ms", "s"), ("2", "0.5", "s")],
)
def test_times_are_told_in_the_unit_of_the_horizon_where_that_shows_every_instant(
    tmp_path: Path, horizon: str, every: str, unit: str
) -> None:
    case = bound(tmp_path, horizon=horizon, every=every)
    assert case.shown_time(case.drives[0]).unit == unit


def test_the_accuracy_of_a_trim_is_told_as_asked(tmp_path: Path) -> None:
    case = bound(tmp_path, time_unit="min")
    assert case.trim.accuracy == pytest.approx(6e-7)
    assert case.trim.accuracy_told == "1e-8 a second"


def test_numbers_have_one_form() -> None:
    assert [number(value) for value in (1e6, 9.3e-5, -0.0, 1234567.0, 0.04)] == [
        "1e6", "9.3e-5", "0", "1.23457e6", "0.04",
    ]  # fmt: skip
    assert Shown("deg", 2.0).told_range(-0.5, 0.25) == "-1 to +0.5 deg"
    assert Shown("1").told_change(0.0) == "0"
