"""Figures and their errors against limits: what is settled, what stays open, and who has to confirm a failure."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from oscillator import DRIVES, OSCILLATOR, case, model, study

from linverify.checks import confirm
from linverify.checks.accuracy import LARGEST, Noise, State, examine, states, within
from linverify.checks.campaign import noise_of
from linverify.checks.comparison import comparison
from linverify.checks.judge import judge_study
from linverify.core.case import Band
from linverify.core.verdict import Status
from linverify.numerics.simulate import Fidelity, Runs

PEAK = Band("y", "peak", 0.02)


def test_one_state_for_every_place_of_a_figure() -> None:
    worst, limit = np.array([0.8, 0.95, 1.05, 1.2, 0.05, np.nan]), np.ones(6)
    quiet = np.array([False, False, False, False, True, False])
    found = states(worst, np.where(quiet, 0.0, limit), np.full(6, 0.1), quiet)
    assert found == [State.GOOD, State.UNCLEAR, State.UNCLEAR, State.BAD, State.GOOD, State.UNCLEAR]


def test_an_error_at_the_limit_itself_is_neither() -> None:
    assert states(np.array([0.9]), np.ones(1), np.array([0.1]), np.zeros(1, bool)) == [State.GOOD]
    assert states(np.array([1.1]), np.ones(1), np.array([0.1 + 1e-12]), np.zeros(1, bool)) == [State.UNCLEAR]


def test_quiet_needs_a_relative_band_and_a_small_error_of_ours() -> None:
    compared = comparison(study(case(PEAK, Band("y", "relative", fraction=0.1))), "")
    worst, allowed = np.array([1e-9, 1e-9, 1e-9]), np.array([1e-3, 1e-3, np.inf])
    assert within(compared, worst, np.full(3, 1e-8), allowed).tolist() == [False, True, False]
    assert within(compared, worst, np.full(3, 1e-2), allowed).tolist() == [False, False, False]


def test_the_fixed_batch_has_64_drives_and_settles_within_one_per_cent() -> None:
    compared = comparison(study(case(PEAK, parameters={"bend": 0.2})), "")
    noise = noise_of(compared)
    fidelity, settled = noise.settled(compared.start)
    assert len(noise.batch) == 64
    assert settled
    assert noise.at(fidelity)[0] <= LARGEST * PEAK.limit


def test_accuracy_is_raised_until_it_suffices() -> None:
    """A limit a millionth above the known figure needs more than the first grid gives."""
    one = case(PEAK, parameters={"bend": 0.2})
    compared = comparison(study(one), "")
    noise = noise_of(compared)
    drive = noise.batch[0]
    exact, _ = compared.alone(drive, Fidelity(32, 1e-8))
    near = replace(PEAK, limit=float(exact.worst[0, 0]) * (1 + 1e-6))
    close = comparison(study(replace(one, bands=(near,))), "")
    found = examine(close, drive, close.start, noise_of(close), 0)
    assert found.fidelity.tolerance < close.start.tolerance
    assert found.states[0] is not State.BAD


def test_the_error_estimate_covers_the_true_error() -> None:
    """The true error of bent and kinked trajectories, against a run many times as accurate."""
    compared = comparison(study(case(PEAK, parameters={"bend": 1.0, "kink": 0.3})), "")
    noise = noise_of(compared)
    for drive in noise.batch[:10]:
        quoted = examine(compared, drive, compared.start, noise, 0)
        exact, _ = compared.alone(drive, Fidelity(32, 1e-8))
        assert abs(quoted.worst[0] - exact.worst[0, 0]) <= quoted.error[0]


def test_a_failure_that_the_second_integrator_does_not_see_is_undecided(monkeypatch: pytest.MonkeyPatch) -> None:
    def blind(rig: Any, drive: Any, fidelity: Fidelity) -> Runs:
        runs = confirm_original(rig, drive, fidelity)
        return replace(runs, plant=runs.model.copy())

    confirm_original = confirm.run_independent
    monkeypatch.setattr(confirm, "run_independent", blind)
    one = case(PEAK)
    found = judge_study(study(one, model(gain=1.2)), one.checks[0])
    assert found.status is Status.UNDECIDED
    assert "second integrator does not confirm" in found.reason


def test_a_figure_on_its_limit_is_undecided(monkeypatch: pytest.MonkeyPatch) -> None:
    """However accurate, a figure whose error estimate reaches over the limit is neither pass nor fail."""
    monkeypatch.setattr(Noise, "at", lambda self, fidelity: np.full(2, 0.009 * PEAK.limit))
    one = case(PEAK)
    probe = judge_study(study(one, model(gain=1.02)), one.checks[0])
    level = replace(PEAK, limit=probe.figures[0].worst)
    at_it = replace(one, bands=(level,))
    found = judge_study(study(at_it, model(gain=1.02)), one.checks[0])
    assert found.status is Status.UNDECIDED
    assert "nearer to its limit than our own error" in found.reason


def test_accuracy_that_is_never_reached_is_undecided(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(Noise, "at", lambda self, fidelity: np.full(2, 0.05 * PEAK.limit))
    one = case(PEAK)
    found = judge_study(study(one), one.checks[0])
    assert found.status is Status.UNDECIDED
    assert "1 % of the band" in found.reason


@pytest.mark.parametrize("gain, status", [(1.0, Status.PASS), (1.2, Status.FAIL)])
def test_difference_equations(gain: float, status: Status) -> None:
    step = 0.05

    def stepped(t: float, x: Any, u: Any, p: Any) -> Any:
        return x + step * OSCILLATOR.dynamics(t, x, u, p)

    plant = replace(OSCILLATOR, dynamics=stepped, step=step)
    right = model(plant)
    local = replace(right, A=np.eye(2) + step * right.A, B=step * gain * right.B)
    one = case(PEAK, Band("y", "relative", fraction=0.1), plant=plant)
    found = judge_study(study(one, local), one.checks[0])
    assert found.status is status
    assert all(figure.error < 1e-9 for figure in found.figures)


@pytest.mark.parametrize("gain, status", [(1.0, Status.PASS), (1.2, Status.FAIL)])
def test_straight_courses(gain: float, status: Status) -> None:
    one = case(PEAK, drives=replace(DRIVES, course="straight", rate={"f": 4.0}))
    assert judge_study(study(one, model(gain=gain)), one.checks[0]).status is status
