"""What the spec declares, cut to the envelope and turned into numbers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from declared_sets import limits

from linverify.core.case import Amplitude, Course, DriveSet, Interval
from linverify.core.drive import Drive
from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.signals import Signals
from linverify.drives.declared import declared

SIGNALS = (Signals.of({"x": "m"}), Signals.of({"f": "N", "g": "N"}), Signals.of({"y": "m"}))
POINT = OperatingPoint(np.array([1.0]), np.array([2.0, 0.0]), np.array([1.0]), np.zeros(1), 0.0, *SIGNALS)
# x' = -x + f + 2 g: held at one for T the state reaches 1 - exp(-T) for f
MODEL = LocalModel(np.array([[-1.0]]), np.array([[1.0, 2.0]]), np.array([[1.0]]), np.zeros((1, 2)), *SIGNALS, POINT)


def test_amplitudes_offsets_and_rates_are_taken_in_plant_order() -> None:
    drives = DriveSet("", 0.5, 4, {"g": Amplitude(-1, 0.5), "f": Amplitude(0, 3)}, offsets={"x": 0.2}, rate={"g": 4.0})
    found = declared(drives, POINT, MODEL, {}, {"f": 10.0, "g": 99.0})
    assert found.inputs == ("f", "g")
    assert found.low.tolist() == [0.0, -1.0]
    assert found.high.tolist() == [3.0, 0.5]
    assert found.change.tolist() == [5.0, 2.0]
    assert (found.offset_low.tolist(), found.offset_high.tolist()) == ([-0.2], [0.2])
    assert found.told == ()


def test_what_the_envelope_does_not_leave_is_cut_and_told() -> None:
    drives = DriveSet("", 0.5, 4, {"f": Amplitude(-1, 1)}, offsets={"x": 0.5})
    found = declared(drives, POINT, MODEL, {"f": Interval(1.5, 9), "x": Interval(0, 1.25)}, {})
    assert (found.low.tolist(), found.high.tolist()) == ([-0.5], [1.0])
    assert (found.offset_low.tolist(), found.offset_high.tolist()) == ([-0.5], [0.25])
    assert found.told == (
        "amplitude of f cut to the envelope: -0.5 to +1 N",
        "offset of x cut to the envelope: -0.5 to +0.25 m",
    )


@pytest.mark.parametrize("course", ["held", "straight"])
def test_until_is_the_size_over_the_largest_response(course: Course) -> None:
    """The largest response to a first-order lag with |f| <= 1 is the step's: closed form for held and straight."""
    drives = DriveSet("", 0.5, 4, {"f": Amplitude(until=("y", 0.3))}, course=course)
    found = declared(drives, POINT, MODEL, {}, {})
    held = 1 - np.exp(-2.0)
    ramped = 1 - np.exp(-2.0) * (np.exp(0.5) - 1) / 0.5
    assert found.high[0] == pytest.approx(0.3 / (held if course == "held" else ramped), rel=1e-9)
    assert found.low[0] == -found.high[0]
    assert "at which the largest possible deviation of y" in found.told[0]


def test_until_a_signal_that_does_not_move_leaves_nothing() -> None:
    still = replace(MODEL, B=np.array([[0.0, 2.0]]))
    found = declared(DriveSet("", 0.5, 4, {"f": Amplitude(until=("y", 0.3))}), POINT, still, {}, {})
    assert found.high.tolist() == [0.0]
    assert "does not move y" in found.told[0]


def test_a_rate_is_followed_from_trim_on() -> None:
    drive = limits(rate=0.4).drive(np.ones((24, 2)))
    assert drive.values[:4, 0] == pytest.approx([0.4, 0.8, 1.0, 1.0])
    assert drive.values[0, 1] == 0.5


def test_members_and_strangers() -> None:
    allowed = limits(rate=0.4)
    good = allowed.drive(np.ones((24, 2)), {"pitch": 0.3})
    assert allowed.contains(good)
    assert allowed.contains(Drive.from_data(good.to_data()))
    strangers = {
        "flap goes from": Drive(0.1, ("flap",), np.full((24, 1), 0.4).cumsum(axis=0)),
        "flap changes by 0.5": Drive(0.1, ("flap",), np.full((24, 1), 0.5)),
        "it changes every 0.2": Drive(0.2, ("flap",), np.zeros((24, 1))),
        "course straight": Drive(0.1, ("flap",), np.zeros((24, 1)), "straight"),
        "rudder is not driven": Drive(0.1, ("rudder",), np.zeros((24, 1))),
        "pitch starts +0.4 off trim": Drive(0.1, ("flap",), np.zeros((24, 1)), offsets={"pitch": 0.4}),
        "speed has no offset": Drive(0.1, ("flap",), np.zeros((24, 1)), offsets={"speed": 0.4}),
    }
    for words, drive in strangers.items():
        assert any(words in problem for problem in allowed.problems(drive)), words
