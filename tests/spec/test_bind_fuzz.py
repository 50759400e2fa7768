"""Valid specs with words and values swapped at random: bound or refused with places, never a traceback."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from linverify.core.case import Case
from linverify.core.errors import SpecError
from linverify.core.loop import Limit
from linverify.spec import bind

BAD = Path(__file__).parent / "bad"
GOOD = Path(__file__).parent / "good"
FULL = {name: (GOOD / f"{name}.yaml").read_text(encoding="utf-8") for name in ("tank", "closed")}
TOKEN = re.compile(r"[^\s{}\[\],:\"]+")
SPANS = {
    name: [match.span() for match in TOKEN.finditer(text) if match.start() > text.index("parameters")]
    for name, text in FULL.items()
}
VALUES = (
    "0", "-1", "1e308", "1e-320", "-1e308", "3 kn", "50 Hz", "20 degC", "5 %", "1 m", "1 rpm", "9 kW", "2 l/s", "1 s",
    "7 min", "1e300 h", "3 m^-9", "1 dB", "level", "excess", "share", "pump", "heat", "area", "fast", "free", "held",
    "up", "*", "x", "warm", "true", "-1 + 2j", "nan", "6 dB", "set_point", "warm.set_point.excess", "stable", "modes",
)  # fmt: skip


def numbers(case: Case) -> list[float]:
    """Every number that a check would meet, but for the limits that may be infinite."""
    trim = case.trim
    found = [*trim.hold.values(), *trim.start.values(), *trim.rates.values(), *trim.minimize.values(), trim.accuracy]
    found += [*case.parameters.values(), *case.nominal.values(), *case.rate_limits.values(), case.moment]
    for drives in case.drives:
        found += [drives.every, *drives.rate.values(), *drives.offsets.values()]
        found += [side for size in drives.amplitude.values() for side in (size.low, size.high)]
    found += [expected.tolerance for expected in trim.expect.values()]
    for loop in case.loops.values():
        controller = loop.controller
        found += [loop.delay, *controller.A.flat, *controller.B.flat, *controller.C.flat, *controller.D.flat]
    found += [actuator.lag for actuator in case.actuators.values()]
    found += [side for limit in limits(case) for side in (limit.low, limit.high) if not math.isinf(side)]
    return found + [band.limit if band.kind != "relative" else band.fraction for band in case.bands]


def limits(case: Case) -> Iterator[Limit]:
    """Every limit on modes, zeros, gains and loops."""
    for ask in case.modes:
        yield from (*ask.limits, *ask.zeros, *(limit for *_, limit in ask.static_gain))
    for loop in case.loops.values():
        yield from loop.require


@pytest.mark.parametrize("name", FULL)
@pytest.mark.parametrize("count", [1, 3])
@given(data=st.data())
@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_swapped_words_and_values(
    tmp_path_factory: pytest.TempPathFactory, count: int, name: str, data: st.DataObject
) -> None:
    text = FULL[name].replace("plant.py:tank", str(BAD / "plant.py") + ":tank")
    shift = len(text) - len(FULL[name])
    swapped = sorted(data.draw(st.sets(st.sampled_from(SPANS[name]), min_size=count, max_size=count)), reverse=True)
    for start, end in swapped:
        text = text[: start + shift] + data.draw(st.sampled_from(VALUES)) + text[end + shift :]
    path = tmp_path_factory.getbasetemp() / "fuzzed.yaml"
    path.write_text(text, encoding="utf-8")
    try:
        cases = bind.load(path, path.parent)
    except SpecError as error:
        assert error.problems
        assert all(problem.place.file == "fuzzed.yaml" and problem.wrong for problem in error.problems)
    else:
        assert cases
        assert all(math.isfinite(number) for case in cases for number in numbers(case))
        assert all(size > 0.0 for case in cases for size in case.nominal.values())
        assert all(limit.low <= limit.high for case in cases for limit in limits(case))
