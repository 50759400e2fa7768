"""Robertson's kinetics from the spec to the verdict: stiff, and with a conserved sum that makes its Jacobian singular.

H. H. Robertson 1966; printed output of the SUNDIALS cvRoberts example: at 0.4 s 9.8517e-1, 3.3864e-5, 1.4794e-2 (seen).
"""

from __future__ import annotations

from functools import cache

import numpy as np
import pytest
import road

from linverify.checks.replay import replayed
from linverify.core.case import Options
from linverify.core.drive import Drive
from linverify.core.verdict import Status

TABLE = (9.8517e-1, 3.3864e-5, 1.4794e-2)
DERIVED = (9.85172114e-1, 3.38639538e-5, 1.47940222e-2)  # Radau at a relative tolerance of 1e-10
END = 0.4
verdict = cache(road.verdict)


def test_the_largest_error_is_the_printed_concentration() -> None:
    """About the empty vessel the local model makes no c at all: its error is the plant's c, whatever the start."""
    found = verdict("robertson", "empty", "follows.tight")
    assert found.status is Status.FAIL
    c, a = found.figures
    assert (c.signal, c.when) == ("c", pytest.approx(END))
    assert c.worst == pytest.approx(TABLE[2], rel=5e-4)
    assert c.worst == pytest.approx(DERIVED[2], rel=1e-6)
    # the model lets a decay alone, the plant forms some of it back
    assert a.worst == pytest.approx(DERIVED[0] - np.exp(-0.04 * END), rel=2e-5)
    assert (c.status, a.status) == (Status.FAIL, Status.PASS)
    assert found.details["statistics"]["broken"] > 0


def test_a_band_wider_than_the_printed_concentration_is_kept() -> None:
    found = verdict("robertson", "empty", "follows.loose")
    assert found.status is Status.PASS
    assert found.figures[0].worst == pytest.approx(TABLE[2], rel=5e-4)
    assert found.figures[0].headroom == pytest.approx(1 - TABLE[2] / 0.02, abs=1e-3)


def test_the_drive_of_the_table_alone_gives_the_figure_that_the_run_quotes() -> None:
    case = road.cases("robertson")["empty"]
    (ask,) = (ask for ask in case.checks if ask.name == "follows.tight")
    drive = Drive(0.1, (), np.zeros((4, 0)), "held", {"a": 1.0})
    found = replayed(case, ask, Options(), drive)
    assert found.status is Status.FAIL
    assert found.figures[0].worst == verdict("robertson", "empty", "follows.tight").figures[0].worst


def test_poles_of_the_spent_mixture() -> None:
    """0, 0 and -10000.04 (derived): two of them are exact zeros of a singular Jacobian, and the trim stands there."""
    assert verdict("robertson", "spent").status is Status.PASS
    found = verdict("robertson", "spent", "differentiable")
    assert found.status is Status.PASS
    real = sorted(pole["real"] for pole in found.details["poles"])
    assert real == pytest.approx([-10000.04, 0.0, 0.0], abs=2e-3)
    A = np.array(found.details["A"])
    np.testing.assert_allclose(A, [[-0.04, 1e4, 0.0], [0.04, -1e4, 0.0], [0.0, 0.0, 0.0]], rtol=1e-6, atol=2e-3)


def test_the_spent_mixture_is_driven_with_the_stiff_method() -> None:
    found = verdict("robertson", "spent", "follows.tight")
    assert found.details["integration"]["method"] == "Rosenbrock 4(3)"
    assert found.status is Status.FAIL
    assert verdict("robertson", "spent", "follows.loose").status is Status.PASS


def test_what_is_conserved_leaves_a_family_of_equilibria() -> None:
    found = verdict("robertson", "anywhere")
    assert found.status is Status.UNDECIDED
    assert "a family in which c may change" in found.reason
    for check in ("differentiable", "follows.loose", "follows.tight"):
        later = verdict("robertson", "anywhere", check)
        assert later.status is Status.UNDECIDED
        assert "no operating point to work from" in later.reason


def test_an_empty_vessel_is_known_to_be_empty() -> None:
    """Its trim stands on the lower limit of the envelope, and `expect` is decided there."""
    found = verdict("robertson", "empty")
    assert found.status is Status.PASS, found.reason
    assert found.details["states"]["a"] == {"value": 0.0, "unit": "1"}


# c at the end of each horizon: printed (from memory), derived (Radau at a relative tolerance of 1e-10), verdict
ROWS = [
    ("s4", 9.4452e-2, 9.44589167e-2, Status.PASS),
    pytest.param("s40", 2.8417e-1, 2.84163746e-1, Status.FAIL, marks=pytest.mark.slow),
    ("s4000", 8.1680e-1, 8.16796848e-1, Status.PASS),
]


@pytest.mark.parametrize(("drives", "printed", "derived", "status"), ROWS)
def test_further_rows_of_the_table(drives: str, printed: float, derived: float, status: Status) -> None:
    """Stiff only away from the operating point: explicit steps are given up where they grow too many."""
    found = verdict("robertson_long", "empty", f"follows.{drives}")
    assert found.status is status, found.reason
    c = found.figures[0]
    assert (c.signal, c.status) == ("c", status)
    assert c.worst == pytest.approx(printed, rel=5e-4)
    assert c.worst == pytest.approx(derived, rel=1e-6)
    if drives == "s4000":
        assert found.details["integration"]["method"] == "Rosenbrock 4(3)"
