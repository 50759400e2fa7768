"""An integrator that chooses its own steps leaps over a short pulse; ours stops at every instant inputs may change."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from linverify.core.case import Options
from linverify.core.drive import Drive
from linverify.core.verdict import Status
from linverify.drives import pinned
from linverify.run import replay

PLANT = """
plant = Plant(
    states={"level": "m"},
    inputs={"inflow": "m/s"},
    dynamics=lambda t, x, u, p: -x + u + 0.5 * u**2,
)
"""
EVERY, COUNT, AT = 0.1, 400, 250  # one pulse of 0.1 s in 40 s
SPEC = f"""
envelope: {{level: [-3 m, 3 m], inflow: [-3 m/s, 3 m/s]}}
operating_points: {{rest: {{hold: {{inflow: 0 m/s}}}}}}
drives: {{horizon: {EVERY * COUNT} s, every: {EVERY} s, amplitude: {{inflow: 1 m/s}}, count: 59, search: 1}}
error_bands: {{level: {{peak: 1 cm}}}}
"""
# the pulse's own surplus of 0.5 m/s, which no linear model knows: 0.5 (1 - exp(-0.1)) at its end
SURPLUS = 0.5 * (1.0 - np.exp(-EVERY))


@pytest.mark.parametrize("course", ["held", "straight"])
def test_one_short_pulse_in_a_long_rest(
    bound, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, record_property: pytest.RecordProperty, course: str
) -> None:
    """scipy 1.17: solve_ivp answers exactly zero to this pulse, and would to one of 10 ms or 1 s."""
    start, end = AT * EVERY, (AT + 1) * EVERY
    theirs = solve_ivp(lambda t, x: -x + 1.5 * (start <= t < end), (0.0, EVERY * COUNT), [0.0])
    record_property("scipy solve_ivp", f"largest response {np.abs(theirs.y).max()}")
    bound(PLANT, SPEC.replace("amplitude:", f"course: {course}, amplitude:"))
    values = np.zeros((COUNT, 1))
    values[AT] = 1.0
    pinned.write(tmp_path, Drive(EVERY, ("inflow",), values, course), {}, "pulse")
    monkeypatch.chdir(tmp_path)
    found = replay(Path("pulse.json"), "plant.yaml::rest::follows", Options())
    assert found.status is Status.FAIL
    (figure,) = found.figures
    if course == "held":
        assert figure.worst == pytest.approx(100 * SURPLUS, rel=1e-4)
        assert figure.when == pytest.approx(end)
    else:
        # 0.5 s^2 on the way up and down a triangle of twice the length, by quadrature
        lag = np.linspace(-EVERY, EVERY, 20001)
        rise = 0.5 * (1.0 - np.abs(lag) / EVERY) ** 2
        when = lag[np.newaxis, :] - lag[::200, np.newaxis]
        level = np.trapezoid(np.where(when <= 0, rise * np.exp(np.minimum(when, 0.0)), 0.0), lag, axis=1)
        assert figure.worst == pytest.approx(100 * level.max(), rel=2e-3)
        assert abs(figure.when - end) <= EVERY
