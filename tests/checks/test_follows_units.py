"""What `follows` tells a reader: figures and drives in the units of the spec, exits and open questions in words."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from oscillator import DRIVES, OSCILLATOR, case, model, study

from linverify.checks.follows import check
from linverify.checks.replay import replayed_study
from linverify.core.case import Amplitude, Band, Case, Exits, Interval, Setting
from linverify.core.model import LocalModel
from linverify.core.shown import Shown
from linverify.core.verdict import Sense, Status, Verdict
from linverify.drives.seeds import steps

CENTI, KILO, MILLI = Shown("cm", 100.0), Shown("kN", 1e-3), Shown("ms", 1000.0)
WRITTEN = replace(DRIVES, shown={"f": KILO, "x": CENTI}, shown_time=MILLI)


def verdict(one: Case, local: LocalModel | None = None) -> Verdict:
    ready = study(one, local)
    return check(ready, one.checks[0])


def test_figures_drives_and_times_stand_in_the_units_of_the_spec() -> None:
    plain = verdict(case(Band("y", "peak", 0.02)), model(gain=1.1))
    told = verdict(case(Band("y", "peak", 0.02, shown=CENTI), drives=WRITTEN), model(gain=1.1))
    ours, theirs = plain.figures[0], told.figures[0]
    assert (theirs.unit, theirs.time_unit) == ("cm", "ms")
    assert (theirs.worst, theirs.limit, theirs.error, theirs.when) == pytest.approx(
        (100 * ours.worst, 2.0, 100 * ours.error, 1000 * ours.when)
    )
    assert theirs.used_share == pytest.approx(ours.used_share)
    assert (told.status, theirs.drive) == (plain.status, ours.drive)  # words change nothing else
    assert told.evidence[1].text.startswith("f steps to -0.001 kN at ")
    assert told.details["integration"]["error_90"]["peak error of y"]["unit"] == "cm"
    assert "smallest_visible" not in told.details


def test_a_relative_band_is_told_in_per_cent() -> None:
    found = verdict(case(Band("y", "relative", fraction=0.2, shown=None)), model(gain=1.1))
    figure = found.figures[0]
    assert (figure.worst, figure.limit, figure.unit) == (pytest.approx(10.0, rel=1e-3), 20.0, "%")


def test_what_drives_can_see_is_told_in_the_units_of_the_spec() -> None:
    drives = replace(WRITTEN, discerns_gain=0.3, discerns_delay=1.0, shown_delay=MILLI)
    found = verdict(case(Band("y", "peak", 0.02), drives=drives))
    gain, delay = found.figures[1:]
    assert (gain.unit, gain.limit, delay.unit, delay.limit) == ("%", 30.0, "ms", 1000.0)
    visible = found.details["smallest_visible"]
    assert (visible["unit_of_delay"], visible["delay"]) == ("ms", pytest.approx(delay.worst))
    tight = verdict(case(Band("y", "peak", 0.02), drives=replace(drives, discerns_gain=0.001)))
    assert tight.reason.endswith("%, at most 0.1 % is asked for")


def test_an_unpredicted_exit_is_told_in_words() -> None:
    tight = {"x": Interval(-0.4, 0.4), "v": Interval(-10, 10), "f": Interval(-3, 3)}
    drives = replace(WRITTEN, amplitude={"f": Amplitude(-1.2, 1.2)})
    one = case(
        Band("y", "peak", 0.3), envelope=tight, drives=drives, exits=Exits(complete=0.0), shown_limits={"x": CENTI},
        settings=(Setting("exits.mismatch", "fail", "default of the language"),),
    )  # fmt: skip
    found = verdict(one, model(gain=0.7))
    assert found.status is Status.FAIL
    figure = found.figures[-1]
    assert figure.what.startswith("unpredicted exit through x (")
    assert "limit 40 cm)" in figure.what or "limit -40 cm)" in figure.what
    assert (figure.unit, figure.limit, figure.signal, figure.origin) == ("%", 20.0, "", "default of the language")
    assert figure.worst == pytest.approx(30.0, rel=0.2)
    assert " ms: the local model had still 3" in found.reason
    assert found.reason.endswith(" % of the way to go, at most 20 %")


def test_drives_that_leave_the_envelope_show_how_many_stayed() -> None:
    small = {"x": Interval(-0.05, 0.05), "v": Interval(-10, 10), "f": Interval(-3, 3)}
    settings = (Setting("exits.complete", "90 %", "specs/oscillator.yaml:9:5"),)
    found = verdict(case(Band("y", "peak", 0.3), envelope=small, settings=settings))
    assert found.status is Status.UNDECIDED
    (figure,) = (figure for figure in found.figures if figure.sense is Sense.LOWER)
    assert figure.what == "share of random drives that ran their whole horizon"
    assert (figure.limit, figure.unit, figure.origin) == (90.0, "%", "specs/oscillator.yaml:9:5")
    assert 0.0 <= figure.worst < 90.0
    assert figure.status is Status.UNDECIDED
    assert found.details["completed"]["value"] == pytest.approx(figure.worst)


def test_a_plant_that_takes_single_columns_says_why() -> None:
    def single(t, x, u, p):  # type: ignore[no-untyped-def]
        return np.array([float(x[1]), float(-4.0 * x[0] - 0.4 * x[1] + u[0])])

    few = replace(DRIVES, intervals=6, count=3, search=0)
    found = verdict(case(Band("y", "peak", 0.3), plant=replace(OSCILLATOR, dynamics=single), drives=few))
    (note,) = (note for note in found.notes if "one column at a time" in note)
    assert note.startswith("the plant is called one column at a time, which is slow: dynamics: ")
    batched = verdict(case(Band("y", "peak", 0.3), drives=few))
    assert not any("one column" in note for note in batched.notes)


def test_a_replay_tells_the_same_figure_in_the_same_unit() -> None:
    one = case(Band("y", "peak", 0.02, shown=CENTI), drives=WRITTEN)
    ready = study(one, model(gain=1.1))
    from linverify.checks.comparison import comparison

    drive = steps(comparison(ready, "").limits)[0]
    figure = replayed_study(ready, one.checks[0], drive).figures[0]
    assert (figure.unit, figure.limit, figure.time_unit) == ("cm", pytest.approx(2.0), "ms")
