"""A drive in one line, as an engineer would say it."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.core.drive import Drive
from linverify.core.shown import Shown
from linverify.drives.wording import worded

UNITS = {"flap": Shown("deg"), "valve": Shown("1"), "pitch": Shown("rad")}


@pytest.mark.parametrize(
    "values, said",
    [
        ([0, 0, 1.5, 1.5, 0, 0], "flap steps to +1.5 deg at 0.4 s, back at 0.8 s"),
        ([0, 0, 1.5, 1.5, 1.5, 1.5], "flap steps to +1.5 deg at 0.4 s"),
        ([-1, 1, 0, 0, 0, 0], "flap steps to -1 deg at 0 s, to +1 deg at 0.2 s, back at 0.4 s"),
        ([-1, 1, 1, 1, 1, 1], "flap steps to -1 deg at 0 s, to +1 deg at 0.2 s and stays there"),
        ([0.5, 1, 1.5, 2, 2, 0], "flap ramps to +2 deg from 0 s to 0.6 s, back at 1 s"),
        ([0] * 6, "nothing moves"),
    ],
)
def test_held(values: list[float], said: str) -> None:
    assert worded(Drive(0.2, ("flap",), np.array(values)[:, np.newaxis]), UNITS, Shown("s")) == said


def test_straight_offsets_and_several_inputs() -> None:
    values = np.array([[0.5, 0.0], [1.0, -0.1], [1.0, -0.1], [0.0, 0.0]])
    drive = Drive(1.0, ("flap", "valve"), values, "straight", {"pitch": -0.2})
    assert worded(drive, UNITS, Shown("min")) == (
        "flap ramps to +1 deg from 0 min to 2 min, back from 3 min to 4 min; "
        "valve ramps to -0.1 from 1 min to 2 min, back from 3 min to 4 min; pitch starts 0.2 rad low"
    )


def test_busy_courses_are_told_by_their_range() -> None:
    drive = Drive(0.5, ("flap",), np.array([[(-1.0) ** k] for k in range(20)]))
    assert worded(drive, UNITS, Shown("s")) == "flap changes 20 times between -1 and +1 deg from 0 s on"


def test_the_units_are_those_that_were_written() -> None:
    shown = {"flap": Shown("deg", 180.0 / np.pi), "pitch": Shown("deg", 180.0 / np.pi)}
    values = np.full((4, 1), 0.4 * np.pi / 180.0)
    drive = Drive(30.0, ("flap",), values, offsets={"pitch": 0.3 * np.pi / 180.0})
    told = worded(drive, shown, Shown("min", 1.0 / 60.0))
    assert told == "flap steps to +0.4 deg at 0 min; pitch starts 0.3 deg high"


def test_a_set_point_is_told_as_one() -> None:
    drive = Drive(0.5, ("pos", "flap"), np.array([[-0.1, 2.0], [-0.1, 0.0]]))
    told = worded(drive, {"pos": Shown("m"), "flap": Shown("deg")}, Shown("s"), ("pos", "speed"))
    assert told == "set point of pos steps to -0.1 m at 0 s; flap steps to +2 deg at 0 s, back at 0.5 s"
