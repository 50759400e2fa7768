"""What a plant does wrong inside a closed loop is caught and named, and the matrices of a loop are its diagram."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from cart import CART, case, controller, dynamics, loop, pd, sampled_pd

from linverify.checks.closed import ClosedStudy
from linverify.checks.study import Study
from linverify.core.case import Case, Options
from linverify.core.errors import PlantError
from linverify.core.loop import Actuator, Loop, Moved

FAR = 10.0  # of q: beyond what is tried before loops are closed


def closed(one: Case) -> ClosedStudy:
    study = Study(one, Options()).closed("")
    assert isinstance(study, ClosedStudy)
    return study


def around(**functions: Any) -> ClosedStudy:
    """The cart with other functions, known to answer batches by what it does near rest."""
    study = closed(case(plant=replace(CART, **functions), envelope={}))
    assert study.bound.batched
    return study


def writes(t: float, x: Any, u: Any, p: Any) -> Any:
    rates = dynamics(t, x, u, p)
    if np.any(x[0] > FAR):
        x[0] = 0.0
    return rates


def raises(t: float, x: Any, u: Any, p: Any) -> Any:
    if np.any(x[0] > FAR):
        raise ValueError("off the rails")
    return dynamics(t, x, u, p)


def blows(t: float, x: Any, u: Any, p: Any) -> Any:
    return dynamics(t, x, u, p) + np.where(x[0] > FAR, np.nan, 0.0)


def shrinks(t: float, x: Any, u: Any, p: Any) -> Any:
    rates = dynamics(t, x, u, p)
    return rates[:1] if np.any(x[0] > FAR) else rates


def reads_badly(t: float, x: Any, u: Any, p: Any) -> Any:
    if np.any(x[0] > FAR):
        x[0] = 0.0
    return np.stack([1.0 * x[0]])


WRONG = [
    ({"dynamics": writes}, r"dynamics raised ValueError.*must not write into x or u"),
    (
        {"dynamics": raises},
        r"dynamics raised ValueError: off the rails .*called with t = 0 s(, q = 11 m, v = 0| and 8 columns)",
    ),
    ({"dynamics": blows}, r"dynamics returned nan for q when called with .*q = 11 m"),
    ({"dynamics": shrinks}, r"dynamics returned an array of shape \(1,"),
    ({"measurement": reads_badly}, r"measurement raised ValueError.*must not write into x or u"),
]


@pytest.mark.parametrize("functions, text", WRONG)
@pytest.mark.parametrize("width", [None, 1, 8])
def test_what_the_plant_does_wrong_is_named_by_its_own_call(
    functions: dict[str, Any], text: str, width: int | None
) -> None:
    bound = around(**functions).bound
    x, u = np.array([11.0, 0.0, 0.0]), np.zeros(1)
    if width is not None:
        x, u = np.repeat(x[:, np.newaxis], width, axis=1), np.zeros((1, width))
    with pytest.raises(PlantError, match=text) as found:
        bound.rates(0.0, x, u)
    assert "hold.1" not in str(found.value)  # it is the user's own plant that is named, not what was put around it


def test_only_the_column_that_fails_is_lost() -> None:
    bound = around(dynamics=writes).bound
    x = np.zeros((3, 8))
    x[0, 5] = 11.0
    before = x.copy()
    found = bound.rates_or_nan(0.0, x, np.zeros((1, 8)))
    assert np.flatnonzero(np.isnan(found).any(axis=0)).tolist() == [5]
    assert np.array_equal(x, before)
    assert bound.last_error is not None


def test_an_answer_in_one_and_the_same_array_does_no_harm() -> None:
    kept: dict[int, np.ndarray] = {}

    def reused(function: Callable[..., Any]) -> Callable[..., Any]:
        def answer(t: float, x: Any, u: Any, p: Any) -> Any:
            found = function(t, x, u, p)
            buffer = kept.setdefault(found.size, np.empty(found.size)).reshape(found.shape)
            buffer[...] = found
            return buffer

        return answer

    assert CART.measurement is not None
    plain = closed(case(envelope={})).bound
    one = closed(
        case(plant=replace(CART, dynamics=reused(dynamics), measurement=reused(CART.measurement)), envelope={})
    ).bound
    rng = np.random.default_rng(7)
    x, u = rng.normal(size=(3, 8)), rng.normal(size=(1, 8))
    first, second = one.rates(0.0, x, u), one.measure(0.0, x, u)
    one.rates(0.0, -x, u)
    assert np.array_equal(first, plain.rates(0.0, x, u))
    assert np.array_equal(second, plain.measure(0.0, x, u))


def _two(sample: float | None) -> tuple[Loop, Loop]:
    """An outer loop over an inner one, dead times in both."""
    outer = sampled_pd(2.0, 0.5, sample) if sample else pd(2.0, 0.5)
    gain = controller(np.zeros((0, 0)), np.zeros((0, 1)), np.zeros((1, 0)), [[6.0]], sample)
    return (
        loop(outer, name="outer", moves=(Moved("v", "inner"),), within=("inner",), delay=0.04),
        loop(gain, name="inner", measures=("v",), delay=0.02),
    )


@pytest.mark.parametrize("sample", [None, 0.1])
@pytest.mark.parametrize(
    "actuator", [None, Actuator(low=-3.0, high=2.0), Actuator(lag=0.05, rate=8.0, low=-3.0, high=2.0)]
)
def test_one_product_is_the_walk_through_the_diagram(sample: float | None, actuator: Actuator | None) -> None:
    limits = {} if actuator is None else {"f": actuator}
    driven = case().drives[0]
    one = case(*_two(sample), driven=replace(driven, loop="outer"), actuators=limits, envelope={})
    study = closed(one)
    wiring = study._wiring(one.plant.input_signals.names, True, ())
    rng = np.random.default_rng(11)
    x, w = 1.5 * rng.normal(size=(2 + len(wiring.added), 16)), 1.5 * rng.normal(size=(1, 16))
    a, y = x[2:], np.stack([x[("q", "v").index({"y": "q"}.get(name, name))] for name in wiring.measured])
    flow = wiring.flow(a, w, y)
    expected = np.concatenate([dynamics(0.0, x[:2], flow.inputs, one.parameters), wiring.added_rates(a, y, flow)])
    assert study.bound.rates(0.0, x, w) == pytest.approx(expected, rel=1e-13, abs=1e-12)
    assert study.bound.measure(0.0, x, w)[1] == pytest.approx(flow.inputs[0], rel=1e-13, abs=1e-13)
    if actuator is not None:
        assert (flow.commands != flow.wanted).any()


def test_a_jump_is_what_the_controllers_do_in_order() -> None:
    """Read, outer, inner: each event by itself on the diagram."""
    one = case(*_two(0.1), driven=replace(case().drives[0], loop="outer"), envelope={})
    study = closed(one)
    wiring = study._wiring(one.plant.input_signals.names, True, ())
    rng = np.random.default_rng(13)
    x, w = rng.normal(size=(2 + len(wiring.added), 16)), rng.normal(size=(1, 16))
    y = np.stack([x[("q", "v").index({"y": "q"}.get(name, name))] for name in wiring.measured])
    for update in study.updates:
        phase, expected = update.instants.phase, x[2:].copy()
        for kind in ("read", "sample", "hold"):
            for at, each in enumerate(wiring.controlled):
                for event in each.events():
                    if event.kind != kind or not event.instants.due(phase):
                        continue
                    now = expected.copy()
                    if kind == "hold":
                        each.hold(now, event.channel, expected)
                    elif kind == "read":
                        each.read(now, y, event.channel, expected)
                    else:
                        each.sample(now, wiring.flow(now, w, y).errors[at], expected)
        found = update.jump(0.0, x, w)
        assert np.array_equal(found[:2], x[:2])
        assert found[2:] == pytest.approx(expected, rel=1e-13, abs=1e-13)
