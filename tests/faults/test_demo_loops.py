"""Seeded losses of margin in the demo's loops: each fails with the right figures, and the loops as they are pass.

What is right is worked out in `demo_loops` and `loop_algebra`, without the library's numerics.
"""

from __future__ import annotations

import math
import re
import shutil
from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from pathlib import Path as File

import numpy as np
import pytest
from faults.demo_faults import (
    CURRENT,
    DRAINED,
    FAULTS,
    KN24,
    KN24_FILE,
    REGULATOR,
    RIGHT,
    SLOW,
    Edits,
    Made,
    with_entry,
)
from faults.demo_loops import DEMO, Delivered, converter
from faults.loop_algebra import closed_right, unstable_poles

from linverify.checks.judge import judge
from linverify.core.case import Options
from linverify.core.verdict import Sense, Status, Verdict
from linverify.spec.bind import load

SPECS = {"foil_ferry": "autopilot", "juice_pasteurizer": "control", "buoy_converter": "regulator"}
SIX_DB = 10.0 ** (6.0 / 20.0)
# what is no matter of modes and margins, and would have to fit a changed sample time
ELSEWHERE = re.compile(r"^(drives|error_bands|requirements):.*?(?=^\S|\Z)", re.MULTILINE | re.DOTALL)
BASIC = {
    "gain margin (upwards)": (SIX_DB, math.inf),
    "gain margin (downwards)": (SIX_DB, math.inf),
    "phase margin": (math.radians(45.0), math.inf),
}
# what each loop has to keep, in the plant's units
LIMITS: dict[str, dict[str, tuple[float, float]]] = {
    "ride": BASIC | {
        "delay margin": (0.1, math.inf),
        "disk margin": (0.5, math.inf),
        "sensitivity peak": (0.0, SIX_DB),
        "crossover": (1.0, 4.0),
        "overshoot": (0.0, 0.4),
    },
    "water": BASIC,
    "product": BASIC | {"delay margin": (10.0, math.inf), "settling to 5 %": (0.0, 1200.0)},
    "current": BASIC | {"phase margin": (math.radians(40.0), math.inf), "sensitivity peak": (0.0, 2.0)},
    "rail": BASIC | {"disk margin": (0.7, math.inf), "crossover": (40.0 * math.pi, 400.0 * math.pi)},
}  # fmt: skip
UNITS: dict[str, Callable[[float], float]] = {
    "dB": lambda value: 10.0 ** (value / 20.0),
    "deg": math.radians,
    "ms": lambda value: 1e-3 * value,
    "min": lambda value: 60.0 * value,
    "Hz": lambda value: 2.0 * math.pi * value,
    "%": lambda value: 0.01 * value,
}
TIGHT = 1e-6  # relative, of what is known in closed form
LOOSE = 1e-4  # and of what is read off a step response
STEPS = ("overshoot", "settling to 5 %")


def judged(folder: File, demo: str, point: str, checks: Sequence[str], edits: Edits = ()) -> dict[str, Verdict]:
    """Verdicts on a demo spec with some texts replaced."""
    shutil.copytree(DEMO / demo, folder / demo, ignore=shutil.ignore_patterns("__pycache__", "pinned"))
    for name, old, new in edits:
        file = folder / demo / name
        text = file.read_text(encoding="utf-8")
        assert old in text, f"{name} has no {old!r}"
        file.write_text(text.replace(old, new), encoding="utf-8")
    spec = folder / demo / f"{SPECS[demo]}.yaml"
    spec.write_text(ELSEWHERE.sub("", spec.read_text(encoding="utf-8")), encoding="utf-8")
    (case,) = (case for case in load(spec, folder) if case.point == point)
    return {ask.name: judge(case, ask, Options()) for ask in case.checks if ask.name in checks}


def held_to(found: Verdict, loop: str, made: Made) -> list[str]:
    """The names of limits that are lost, after holding every figure of a stable loop to what is worked out."""
    told = made.told()
    assert {figure.what for figure in found.figures} == set(LIMITS[loop])
    lost = []
    for figure in found.figures:
        low, high = LIMITS[loop][figure.what]
        value, known = UNITS.get(figure.unit, float)(figure.worst), told[figure.what]
        if figure.what in STEPS:
            error = UNITS.get(figure.unit, float)(figure.error)
            assert error <= 0.005 * value
            assert value == pytest.approx(known, rel=LOOSE, abs=error), figure.what
        else:
            assert value == pytest.approx(known, rel=TIGHT), figure.what
        kept = low <= known <= high
        assert figure.status is (Status.PASS if kept else Status.FAIL), figure.what
        limits = (figure.low if figure.sense is Sense.RANGE else None, figure.limit)
        ends = [UNITS.get(figure.unit, float)(each) for each in limits if each is not None]
        assert ends == pytest.approx([each for each in (low, high) if 0.0 < each < math.inf])
        if not kept:
            lost.append(figure.what)
    return lost


@pytest.mark.parametrize("name", FAULTS)
def test_a_lost_margin_fails_with_the_right_figures(tmp_path: File, name: str) -> None:
    fault = FAULTS[name]
    check = f"margins.{fault.loop}"
    found = judged(tmp_path, fault.demo, fault.point, [check], fault.edits)[check]
    assert found.status is Status.FAIL, found.reason
    if fault.lost:
        assert closed_right(fault.made.loop()) == 0
        assert sorted(held_to(found, fault.loop, fault.made)) == sorted(fault.lost)
        assert all(f"{what} is " in found.reason for what in fault.lost)
        return
    poles = unstable_poles(fault.made.loop())
    assert poles
    assert not found.figures
    listed = [complex(pole["real"], pole["imag"]) for pole in found.details["margins"]["closed_loop_poles"]]
    told = [complex(float(a), float(b or 0.0)) for a, b in re.findall(r"pole (\S+)(?: \+- (\S+)j)? per", found.reason)]
    for pole in poles:
        assert min(abs(each - pole) for each in listed) <= TIGHT * abs(pole)
        assert min(abs(each - pole) for each in told) <= 1e-3 * abs(pole)
    assert len(told) == len(poles)
    flipped = "sign flipped" in name and "inner" not in name
    assert ("with the opposite sign it would be stable" in found.reason) == flipped


@pytest.mark.parametrize("name", RIGHT)
def test_the_loops_as_they_are_pass_with_the_right_figures(tmp_path: File, name: str) -> None:
    right = RIGHT[name]
    check = f"margins.{right.loop}"
    found = judged(tmp_path, right.demo, right.point, [check])[check]
    assert found.status is Status.PASS, found.reason
    assert closed_right(right.made.loop()) == 0
    assert held_to(found, right.loop, right.made) == []


def damping(model: Delivered, low: float, high: float) -> float:
    """The smallest damping ratio of the modes whose natural frequency lies in between."""
    poles = np.linalg.eigvals(model.A)
    return min(-pole.real / abs(pole) for pole in poles if low < abs(pole) < high)


def slowest(model: Delivered) -> float:
    return float(-1.0 / np.linalg.eigvals(model.A).real.max())


def doubling(model: Delivered) -> float:
    return math.log(2.0) / float(np.linalg.eigvals(model.A).real.max())


@dataclass(frozen=True)
class Lost:
    """A fault that `modes` finds. what: the figure begins with that; value, limit: in its unit."""

    demo: str
    point: str
    edits: Edits
    what: str
    value: float
    limit: float


LOSSLESS = dict.fromkeys(("battery_resistance", "coil_resistance", "switch_resistance", "capacitor_resistance"), 1e-3)
PARAMETERS = ", ".join(f"{name}: {value} ohm" for name, value in LOSSLESS.items())
DERIVED = [
    (REGULATOR, 'local_models: {source: "models/{point}.json"}', "local_models: {source: derive}"),
    (REGULATOR, "\nenvelope:", f"parameters: {{{PARAMETERS}}}\n\nenvelope:"),
]
RINGING = converter(LOSSLESS, 24.0, 11.2, 1.5)
FILTER = (300.0 * 2.0 * math.pi, 1000.0 * 2.0 * math.pi)
MODES = {
    "filter, resistance in the delivered model": Lost(
        "buoy_converter", "drained", [("models/drained.json", "-1189.04", "-237.8")], "filter: damping ratio",
        damping(with_entry(DRAINED, "coil_current", "coil_current", -237.8), *FILTER), 0.05,
    ),
    "filter, resistances of the plant": Lost(
        "buoy_converter", "drained", DERIVED, "filter: damping ratio", damping(RINGING, *FILTER), 0.05,
    ),
    "warm-up, heat lost by the water": Lost(
        "juice_pasteurizer", "slow", [("models.csv", "slow,A,water,water,-0.0183009", "slow,A,water,water,-0.0173009")],
        "warm-up: time constant", slowest(with_entry(SLOW, "water", "water", -0.0173009)) / 60.0, 5.0,
    ),
    "ferry, pitch driven instead of damped": Lost(
        "foil_ferry", "kn24", [(KN24_FILE, "-13.5294", "13.5294")], "time to double",
        doubling(with_entry(KN24, "pitch_rate", "pitch_rate", 13.5294)), 5.0,
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", MODES)
def test_lost_damping_fails_with_the_right_figure(tmp_path: File, name: str) -> None:
    lost = MODES[name]
    found = judged(tmp_path, lost.demo, lost.point, ["modes"], lost.edits)["modes"]
    assert found.status is Status.FAIL, found.reason
    figure = min(
        (each for each in found.figures if each.what.startswith(lost.what) and each.status is Status.FAIL),
        key=lambda each: each.headroom,
    )
    assert figure.worst == pytest.approx(lost.value, rel=1e-5)
    assert figure.limit == lost.limit
    assert (lost.value < lost.limit) == (figure.sense is Sense.LOWER)


def test_modes_as_they_are_pass_with_the_right_figures(tmp_path: File) -> None:
    found = judged(tmp_path / "a", "buoy_converter", "drained", ["modes"])["modes"]
    assert found.status is Status.PASS
    assert found.figures[0].worst == pytest.approx(damping(DRAINED, *FILTER), rel=1e-6)
    found = judged(tmp_path / "b", "juice_pasteurizer", "slow", ["modes"])["modes"]
    assert found.status is Status.PASS
    (figure,) = (each for each in found.figures if each.what.startswith("warm-up"))
    assert figure.worst == pytest.approx(slowest(SLOW) / 60.0, rel=1e-5)


def test_a_loop_around_a_plant_that_has_lost_its_damping(tmp_path: File) -> None:
    """Slopes are derived from the changed plant; the current loop gives the filter its damping back, and passes."""
    found = judged(tmp_path, "buoy_converter", "drained", ["margins.current"], DERIVED)["margins.current"]
    made = replace(CURRENT, model=RINGING)
    assert found.status is Status.PASS, found.reason
    assert closed_right(made.loop()) == 0
    assert held_to(found, "current", made) == []
