"""The whole job at one operating point against a hand-written script, as ratios in one run.

    pytest tests/benchmarks --benchmark-only

Serial only: pytest-benchmark is switched off under xdist.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from linverify.numerics.simulate import Fidelity, Rig, run
from tests.benchmarks import whole_job
from tests.truth.engine_plants import KINDS

ROUNDS = {"pend": 3, "tank": 3, "body": 1, "reactor": 2}


@pytest.mark.parametrize("name", KINDS)
def test_script(name: str, benchmark: Any) -> None:
    benchmark.group = name
    kind = KINDS[name]()
    drives = kind.drives(whole_job.DRIVES, whole_job.INTERVALS)
    worst = benchmark.pedantic(whole_job.script, args=(name, kind, drives), rounds=ROUNDS[name])
    assert worst > 0.0


@pytest.mark.parametrize("name", KINDS)
def test_ours(name: str, benchmark: Any) -> None:
    benchmark.group = name
    kind = KINDS[name]()
    drives = kind.drives(whole_job.DRIVES, whole_job.INTERVALS)
    worst = benchmark.pedantic(whole_job.ours, args=(name, kind, drives), rounds=5, warmup_rounds=1)
    assert worst > 0.0


@pytest.mark.parametrize("name", KINDS)
def test_both_do_the_same_job(name: str) -> None:
    """Not timed: the largest difference agrees, so that the ratio compares like with like."""
    kind = KINDS[name]()
    drives = kind.drives(4, whole_job.INTERVALS)
    assert whole_job.ours(name, kind, drives) == pytest.approx(whole_job.script(name, kind, drives), rel=2e-2)


@pytest.mark.parametrize("name", KINDS)
def test_both_sides_reach_the_accuracy(name: str) -> None:
    """Not timed: against a run a hundred times finer, both keep the accuracy that the table of tolerances is for."""
    kind = KINDS[name]()
    drives = kind.drives(2, whole_job.INTERVALS)
    rig = Rig(kind.plant, kind.point, kind.model, kind.plant.states.names, {}, kind.excursion)
    exact = run(rig, drives, Fidelity(16, 1e-10 if name != "reactor" else 1e-8)).plant[:, :, -1, :]
    ours = run(rig, drives, Fidelity(4, whole_job.TOLERANCES[name].ours)).plant[:, :, -1, :]
    times = np.arange(1, whole_job.INTERVALS + 1) * kind.every
    course = kind.point.x[:, np.newaxis] + kind.point.drift[:, np.newaxis] * times
    for column, drive in enumerate(drives):
        states = whole_job._script_plant(kind, kind.point.x, kind.point.u, drive, whole_job.TOLERANCES[name])
        script = states[:, 1:] - course
        for found in (ours[:, :, column], script):
            error = np.abs(found - exact[:, :, column]).max(axis=1) / kind.excursion
            assert error.max() < whole_job.REACHED
