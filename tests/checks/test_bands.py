"""Every kind of band at its edge, on trajectories that are written down by hand."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.checks.bands import MISMATCH, judged, shares
from linverify.core.case import Band
from linverify.core.outcome import Outcome
from linverify.numerics.simulate import Exit, Runs

K, S = 4, 4
TIMES = np.arange(K)[:, np.newaxis] + np.arange(S + 1) / S


def runs(plant: object, model: object, ended: float = 4.0, left: Exit | None = None) -> Runs:
    """One drive of one signal over four time units."""
    shape = (1, K, S + 1, 1)
    true = np.broadcast_to(np.asarray(plant, dtype=float), (K, S + 1)).reshape(shape).copy()
    true[:, TIMES[:, :, np.newaxis] > ended] = np.nan
    local = np.broadcast_to(np.asarray(model, dtype=float), (K, S + 1)).reshape(shape)
    return Runs(("y",), TIMES, true, local, np.array([ended]), (left,), (Outcome.DONE,), ("",))


@pytest.mark.parametrize(
    "band, worst, limit, when",
    [
        # plant 2 t / 4, model 0: the error grows to 2
        (Band("y", "peak", 1.5), 2.0, 1.5, 4.0),
        (Band("y", "rms", 1.5), 2.0 / np.sqrt(3.0), 1.5, np.nan),
        (Band("y", "relative", fraction=0.5), 2.0, 1.0, 4.0),
        (Band("y", "wider_of", 0.1, 0.5), 2.0, 1.0, 4.0),
        (Band("y", "wider_of", 3.0, 0.5), 2.0, 3.0, 4.0),
        (Band("y", "final", 1.5), 2.0, 1.5, 4.0),
    ],
)
def test_each_kind(band: Band, worst: float, limit: float, when: float) -> None:
    found = judged(runs(TIMES / 2, 0.0), [band])
    assert found.worst[0, 0] == pytest.approx(worst, rel=5e-3)
    assert found.limit[0, 0] == pytest.approx(limit)
    assert found.when[0, 0] == pytest.approx(when, nan_ok=True)
    assert found.peak[0, 0] == 2.0


def test_what_comes_before_the_start_does_not_count() -> None:
    falling = judged(runs(4.0 - TIMES, 0.0), [Band("y", "peak", 1, start=2.5), Band("y", "rms", 1, start=3.0)])
    assert falling.worst[0, 0] == 1.5
    assert falling.when[0, 0] == 2.5
    assert falling.worst[1, 0] == pytest.approx(1.0 / np.sqrt(3.0), rel=2e-2)
    assert falling.peak[0, 0] == 4.0


def test_what_comes_after_the_exit_does_not_count_and_final_needs_the_whole_horizon() -> None:
    left = Exit("y", "high", 2.5, 9.0, 0.95)
    bands = [Band("y", "peak", 1), Band("y", "final", 1), Band("y", "relative", fraction=0.5)]
    found = judged(runs(TIMES, 0.0, 2.5, left), bands)
    assert found.worst[:3, 0].tolist() == [2.5, 0.0, 2.5]
    assert found.limit[2, 0] == 1.25
    assert not found.completed[0]
    assert found.ok[0]
    assert found.worst[3, 0] == pytest.approx(0.05)
    assert found.limit[3, 0] == MISMATCH
    assert found.when[3, 0] == 2.5


def test_a_model_that_had_passed_the_limit_missed_nothing() -> None:
    assert judged(runs(TIMES, 0.0, 2.5, Exit("y", "high", 2.5, 9.0, 1.3)), []).worst[0, 0] == 0.0
    assert judged(runs(TIMES, 0.0), []).worst[0, 0] == 0.0


def test_both_sides_of_a_jump_are_seen() -> None:
    plant = np.zeros((K, S + 1))
    plant[1, -1] = 3.0  # left of the instant at 2 only
    found = judged(runs(plant, 0.0), [Band("y", "peak", 1)])
    assert (found.worst[0, 0], found.when[0, 0]) == (3.0, 2.0)


def test_another_model_can_be_put_in_place() -> None:
    one = runs(TIMES, TIMES)
    assert judged(one, [Band("y", "peak", 1)]).worst[0, 0] == 0.0
    assert judged(one, [Band("y", "peak", 1)], model=1.1 * one.model).worst[0, 0] == pytest.approx(0.4)


def test_shares_with_nothing_allowed() -> None:
    share = shares(np.array([0.0, 1.0, 1.0]), np.array([0.0, 0.0, 2.0]))
    assert share.tolist() == [0.0, np.inf, 0.5]
