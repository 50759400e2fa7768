"""The check as a whole: right models pass, planted faults are caught, known worst errors are told from their limits."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from oscillator import DRIVES, OSCILLATOR, case, largest_response, model, study

from linverify.checks.judge import judge_study
from linverify.core.case import Amplitude, Band, Case, Exits, Interval, Options
from linverify.core.model import LocalModel
from linverify.core.verdict import Status, Verdict
from linverify.report import record

PEAK = Band("y", "peak", 0.02)
RIGHT_BANDS = (
    PEAK,
    Band("y", "rms", 0.01),
    Band("y", "relative", fraction=0.05),
    Band("y", "wider_of", 0.01, 0.05),
    Band("y", "final", 0.02),
    Band("v", "peak", 0.1, start=0.5),
)


def verdict(one: Case, local: LocalModel | None = None, options: Options | None = None) -> Verdict:
    return judge_study(study(one, local, options), one.checks[0])


def test_the_right_model_passes_every_band() -> None:
    found = verdict(case(*RIGHT_BANDS))
    assert found.status is Status.PASS
    assert found.reason == ""
    assert len(found.figures) == len(RIGHT_BANDS)
    for figure in found.figures:
        assert figure.worst + figure.error <= 0.01 * figure.limit
    assert found.details["statistics"]["broken"] == 0
    assert found.details["statistics"]["random"] == 40
    assert found.details["completed"] == {"value": 100.0, "unit": "%"}


FAULTS = {
    "gain": model(gain=1.1),
    "sign": model(gain=-1.0),
    "frequency": model(w=2.2),
    "damping": model(z=0.3),
    "no motion": model(gain=0.0),
    "missing state": model(A=np.array([[-0.2, 0.0], [0.0, -1.0]]), B=np.array([[0.25], [0.0]])),
}


OTHERS = (Band("y", "rms", 0.01), Band("y", "relative", fraction=0.05))
PAIRS = [*((fault, PEAK) for fault in FAULTS), *(("gain", band) for band in OTHERS), ("missing state", OTHERS[1])]


@pytest.mark.parametrize("fault, band", PAIRS, ids=[f"{fault}-{band.kind}" for fault, band in PAIRS])
def test_a_wrong_model_fails(fault: str, band: Band) -> None:
    found = verdict(case(band), FAULTS[fault])
    assert found.status is Status.FAIL
    (figure,) = found.figures
    assert figure.status is Status.FAIL
    assert figure.worst - figure.error > figure.limit
    assert found.reason == f"{figure.what} of y breaks its limit"
    assert found.evidence[0].role == "worst"
    assert "f " in found.evidence[-1].text


@pytest.mark.parametrize("name, size", [("bend", 1.0), ("kink", 0.5), ("dead", 0.2)])
def test_a_plant_that_is_not_linear_fails(name: str, size: float) -> None:
    found = verdict(case(PEAK, parameters={name: size}))
    assert found.status is Status.FAIL


def test_a_small_nonlinearity_passes() -> None:
    assert verdict(case(PEAK, parameters={"bend": 0.02})).status is Status.PASS


@pytest.mark.parametrize("above, status", [(1.02, Status.PASS), (0.98, Status.FAIL)])
def test_a_limit_near_the_known_worst_error_is_told_apart(above: float, status: Status) -> None:
    """A gain error of 5 % makes an error of 5 % of the largest possible response: the L1 norm of the pulse response."""
    worst = 0.05 * largest_response(DRIVES.every, DRIVES.intervals)
    found = verdict(case(Band("y", "peak", above * worst)), model(gain=1.05))
    assert found.status is status
    assert found.figures[0].worst == pytest.approx(worst, rel=1e-3)


@pytest.mark.parametrize("above, status", [(1.02, Status.PASS), (0.98, Status.FAIL)])
def test_the_worst_drive_of_a_wrong_frequency_is_found(above: float, status: Status) -> None:
    """The error of a linear plant and a wrong linear model is linear too; its own L1 norm is the worst."""
    worst = _largest_difference(2.1)
    found = verdict(case(Band("y", "peak", above * worst)), model(w=2.1))
    assert found.status is status
    assert found.figures[0].worst == pytest.approx(worst, rel=5e-3)


def _largest_difference(w: float) -> float:
    fine, every, count = 400, DRIVES.every, DRIVES.intervals
    grid = (np.arange(count * fine) + 0.5) * every / fine

    def pulses(frequency: float) -> np.ndarray:
        damped = frequency * np.sqrt(1 - 0.1**2)
        response = np.exp(-0.1 * frequency * grid) * np.sin(damped * grid) / damped
        return response.reshape(count, fine).sum(axis=1) * every / fine

    return float(np.abs(pulses(2.0) - pulses(w)).sum())


@pytest.mark.parametrize("kind", ["relative", "wider_of"])
def test_a_gain_error_is_its_own_relative_error(kind: str) -> None:
    for fraction, status in ((0.102, Status.PASS), (0.098, Status.FAIL)):
        limit = np.nan if kind == "relative" else 0.005
        found = verdict(case(Band("y", kind, limit, fraction)), model(gain=1.1))  # type: ignore[arg-type]
        assert found.status is status
        if kind == "relative":
            assert found.figures[0].worst == pytest.approx(10.0, rel=1e-3)
            assert found.figures[0].unit == "%"


def test_a_plant_that_does_not_move_while_the_model_does_fails_a_relative_band() -> None:
    found = verdict(case(Band("y", "relative", fraction=0.5), parameters={"dead": 2.0}))
    assert found.status is Status.FAIL
    assert found.figures[0].worst == np.inf
    assert record.loads(record.dumps(found)).figures[0].worst == np.inf


def test_a_band_counts_from_its_start_only() -> None:
    """A wrong damping of a fast mode is gone after a while; the band that begins late does not see it."""
    fast = replace(DRIVES, every=0.1, intervals=40, amplitude={}, offsets={"v": 0.5})
    local = model(z=0.8)
    early = verdict(case(Band("v", "peak", 0.2), drives=fast), local)
    late = verdict(case(Band("v", "peak", 0.6, start=3.9), drives=fast), local)
    assert early.status is Status.FAIL
    assert late.figures[0].when >= 3.9


def test_offsets_alone_are_driven() -> None:
    drives = replace(DRIVES, amplitude={}, offsets={"x": 0.5})
    right = verdict(case(PEAK, drives=drives))
    wrong = verdict(case(PEAK, drives=drives), model(w=2.2))
    assert (right.status, wrong.status) == (Status.PASS, Status.FAIL)
    assert wrong.evidence[-1].text.startswith("x starts ")


def test_drives_that_cannot_see_leave_it_undecided() -> None:
    found = verdict(case(Band("y", "peak", 50.0)))
    assert found.status is Status.UNDECIDED
    assert "no motion at all would pass every drive" in found.reason


def test_drives_too_large_for_the_envelope_leave_it_undecided() -> None:
    small = {"x": Interval(-0.05, 0.05), "v": Interval(-10, 10), "f": Interval(-3, 3)}
    found = verdict(case(PEAK, envelope=small))
    assert found.status is Status.UNDECIDED
    assert "too large for this envelope" in found.reason


def test_a_failure_before_the_envelope_is_left_goes_before_undecided() -> None:
    small = {"x": Interval(-0.05, 0.05), "v": Interval(-10, 10), "f": Interval(-3, 3)}
    found = verdict(case(Band("y", "peak", 0.001), envelope=small), model(gain=1.1))
    assert found.status is Status.FAIL
    assert any("too large for this envelope" in note for note in found.notes)


@pytest.mark.parametrize("gain, status", [(0.85, Status.PASS), (0.7, Status.FAIL)])
def test_an_exit_that_the_model_misses_by_more_than_a_fifth_fails(gain: float, status: Status) -> None:
    """The plant leaves where x reaches 0.4; the model is then at `gain` of the way."""
    tight = {"x": Interval(-0.4, 0.4), "v": Interval(-10, 10), "f": Interval(-3, 3)}
    drives = replace(DRIVES, amplitude={"f": Amplitude(-1.2, 1.2)})
    one = case(Band("y", "peak", 0.3), envelope=tight, drives=drives, exits=Exits(complete=0.0))
    found = verdict(one, model(gain=gain))
    assert found.status is status
    told = verdict(replace(one, exits=Exits(complete=0.0, mismatch="report")), model(gain=gain))
    assert told.status is Status.PASS
    assert any("left the envelope" in note for note in told.notes) is (status is Status.FAIL)


def test_a_plant_that_raises_is_undecided_and_the_drive_is_kept() -> None:
    def breaks(t, x, u, p):  # type: ignore[no-untyped-def]
        if np.any(np.abs(x[0]) > 0.3):
            raise RuntimeError("table left")
        return OSCILLATOR.dynamics(t, x, u, p)

    plant = replace(OSCILLATOR, dynamics=breaks)
    few = replace(DRIVES, intervals=12, count=5, search=0)
    found = verdict(case(PEAK, plant=plant, drives=few, envelope={"x": Interval(-0.29, 5)}, exits=Exits(complete=0.0)))
    assert found.status is Status.UNDECIDED
    assert "could not be followed" in found.reason
    assert "table left" in found.reason
    assert found.evidence[-1].role == "stopped"
    # drives that were stopped are not said to be too large for the envelope
    asked = verdict(case(PEAK, plant=plant, drives=replace(few, count=40), exits=Exits(complete=1.0)))
    assert "table left" in asked.reason
    (note,) = (note for note in asked.notes if "ran their whole horizon" in note)
    assert "too large" not in note


def test_no_room_in_the_envelope_is_undecided() -> None:
    found = verdict(case(PEAK, envelope={"f": Interval(0.0, 0.0)}))
    assert found.status is Status.UNDECIDED
    assert "nothing moves" in found.reason


@pytest.mark.parametrize("gain, status", [(0.3, Status.PASS), (0.01, Status.UNDECIDED)])
def test_discerns_limits_what_may_stay_hidden(gain: float, status: Status) -> None:
    found = verdict(case(PEAK, drives=replace(DRIVES, discerns_gain=gain, discerns_delay=1.0)))
    assert found.status is status
    assert [figure.what for figure in found.figures[1:]] == [
        "smallest gain error that these drives catch",
        "smallest delay that these drives catch",
    ]


def test_the_smallest_visible_gain_error_is_the_band_over_the_largest_response() -> None:
    found = verdict(case(PEAK))
    largest = largest_response(DRIVES.every, DRIVES.intervals)
    assert found.details["smallest_visible"]["gain"] == pytest.approx(PEAK.limit / largest, rel=0.01)


def test_a_quick_profile_says_so_and_draws_less() -> None:
    found = verdict(case(PEAK), options=Options(profile="quick"))
    assert found.details["drives"]["random"] == 8
    assert "quick profile: not for acceptance" in found.notes


def test_cut_amplitudes_are_told() -> None:
    found = verdict(case(PEAK, envelope={"f": Interval(-0.5, 3.0)}))
    assert "amplitude of f cut to the envelope: -0.5 to +1 N" in found.notes


def test_the_same_inputs_give_the_same_bytes() -> None:
    one = case(*RIGHT_BANDS[:2], parameters={"bend": 0.3})
    first, second = verdict(one), verdict(one)
    assert record.dumps(first) == record.dumps(second)
    other = verdict(one, options=Options(seed=1))
    assert record.dumps(other) != record.dumps(first)


def test_a_family_asks_for_more_confidence() -> None:
    alone = verdict(case(PEAK)).details["statistics"]
    many = verdict(case(PEAK, family=10)).details["statistics"]
    assert alone["confidence"] == 0.95
    assert many["confidence"] == pytest.approx(0.995)
    assert many["bound"] > alone["bound"]
    assert alone["bound"] == pytest.approx(1 - 0.05 ** (1 / 40))  # closed form for no event
