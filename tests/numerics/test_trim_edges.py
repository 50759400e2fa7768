"""Solutions beside a jump are no equilibria, and a dead zone is a family, however narrow it is."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pytest

from linverify.core.bound import BoundPlant
from linverify.core.case import Interval, TrimAsk
from linverify.core.outcome import Outcome
from linverify.core.plant import Plant
from linverify.numerics.trim import TrimResult, trim

ENVELOPE = {"position": Interval(-2.0, 2.0), "speed": Interval(-1.0, 1.0), "push": Interval(-50.0, 50.0)}
SIZES = {"position": 2.0, "speed": 1.0, "push": 50.0}


def _trimmed(
    dynamics: Callable[..., Any],
    states: Mapping[str, str],
    hold: Mapping[str, float],
    find: tuple[str, ...],
    start: Mapping[str, float] | None = None,
) -> TrimResult:
    bound = BoundPlant(Plant(states=states, inputs={"push": "N"}, dynamics=dynamics))
    return trim(bound, TrimAsk(hold, find, start=start or {}), ENVELOPE, SIZES, 0.0)


TWO = {"position": "m", "speed": "m/s"}


def _rubbed(t: float, x: Any, u: Any, p: Any) -> Any:
    """A spring and dry friction."""
    return np.stack([x[1], u[0] - 0.3 * np.sign(x[1]) - x[0] - 0.1 * x[1] ** 3])


@pytest.mark.parametrize("start", [None, {"position": 0.7, "speed": 0.01}, {"position": 0.7, "speed": 1e-9}])
def test_dry_friction_leaves_no_equilibrium_that_moves(start: Mapping[str, float] | None) -> None:
    found = _trimmed(_rubbed, TWO, {"push": 1.0}, ("position", "speed"), start)
    assert found.outcome is Outcome.NOT_EQUILIBRIUM
    assert found.point is None
    assert "the rate of speed jumps" in found.message
    assert "hold speed, or smooth the jump" in found.message


def test_what_is_held_at_the_jump_is_taken_at_its_word() -> None:
    found = _trimmed(_rubbed, TWO, {"push": 1.0, "speed": 0.0}, ("position",))
    assert found.outcome is Outcome.DONE
    assert found.point is not None
    assert found.point.value("position") == pytest.approx(1.0)


def test_an_end_beside_a_jump_is_left_out_where_a_sound_one_is_there() -> None:
    """The jump is 1e-10 away from the balance at position 0.7; the rest at 1 is as near to it."""

    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        jump = np.where(np.abs(x[0] - 0.5) < 1e-10, 0.0, 0.2 * np.sign(x[0] - 0.5))
        return np.stack([jump * (1.0 - x[0])])

    found = _trimmed(dynamics, {"position": "m"}, {"push": 0.0}, ("position",), {"position": 0.6})
    assert found.outcome is Outcome.DONE
    assert found.point is not None
    assert found.point.value("position") == pytest.approx(1.0)
    assert found.others == ()


@pytest.mark.parametrize("power", [1, 3, 5])
def test_steep_and_flat_roots_stand(power: int) -> None:
    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([-np.sign(x[0] - 0.3) * np.abs(1e3 * (x[0] - 0.3)) ** power])

    found = _trimmed(dynamics, {"position": "m"}, {"push": 0.0}, ("position",))
    assert found.outcome is Outcome.DONE, found.message


def _dead(width: float) -> Callable[..., Any]:
    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        force = np.where(np.abs(u[0]) > width, u[0] - width * np.sign(u[0]), 0.0)
        return np.stack([x[1], force - x[0] - x[1]])

    return dynamics


@pytest.mark.parametrize("width", [0.2, 5.0])
@pytest.mark.parametrize("start", [None, {"push": 0.01}, {"push": 6.0}])
def test_a_dead_zone_is_a_family(width: float, start: Mapping[str, float] | None) -> None:
    found = _trimmed(_dead(width), TWO, {"position": 0.0}, ("speed", "push"), start)
    assert found.outcome is Outcome.FAMILY
    assert found.free_names == ("push",)


def test_outside_the_dead_zone_there_is_one_equilibrium() -> None:
    found = _trimmed(_dead(0.2), TWO, {"position": 0.5}, ("speed", "push"))
    assert found.outcome is Outcome.DONE
    assert found.point is not None
    assert found.point.value("push") == pytest.approx(0.7)
