"""What `margins` tells of the way between a loop and its plant: lags and dead times that its figures contain."""

from __future__ import annotations

import numpy as np
from looping import PLACE, gain, judged, linear_plant, loop

from linverify.core.delivered import Delays
from linverify.core.loop import Actuator, Moved
from linverify.core.verdict import Status

LAG = linear_plant([[-1.0]], [[1.0]], [[1.0]])
TWO = linear_plant(-np.eye(2), np.eye(2), np.eye(2))


def seconds(value: float) -> dict[str, object]:
    return {"value": value, "unit": "s"}


def test_a_loop_tells_the_lag_and_the_dead_times_on_its_way() -> None:
    found = judged(
        LAG, loop(gain([[0.5]])), actuators={"u1": Actuator(lag=0.1, place=PLACE)},
        delays=Delays({"u1": 0.2}, {"y1": 0.3}),
    )  # fmt: skip
    assert found.status is Status.PASS
    told = found.details["margins"]
    assert told["lags"] == {"u1": seconds(0.1)}
    assert told["late"] == {"u1": seconds(0.2)}
    assert told["old"] == {"y1": seconds(0.3)}


def test_what_is_not_on_the_way_is_not_told() -> None:
    actuators = {"u2": Actuator(lag=0.1, place=PLACE), "u1": Actuator(rate=1.0, place=PLACE)}
    found = judged(TWO, loop(gain([[0.5]])), actuators=actuators, delays=Delays({"u2": 0.2}, {"y2": 0.3}))
    told = found.details["margins"]
    assert told["channels"]
    assert not {"lags", "late", "old"} & set(told)


def test_the_way_of_a_loop_inside_counts() -> None:
    inner = loop(gain([[2.0]]), name="inner", measures=("y2",), moves=(Moved("u2"),))
    outer = loop(gain([[0.5]]), moves=(Moved("y2", "inner"),), within=("inner",))
    told = judged(TWO, outer, inner, actuators={"u2": Actuator(lag=0.1, place=PLACE)}).details["margins"]
    assert told["lags"] == {"u2": seconds(0.1)}
