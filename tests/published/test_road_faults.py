"""The published specs with one parameter of the plant changed: what the source prints must then no longer be met."""

from __future__ import annotations

import shutil
from pathlib import Path

import numpy as np
import pytest
from road import HERE

from linverify.checks.judge import judge
from linverify.core.case import Options
from linverify.core.verdict import Status, Verdict
from linverify.spec.bind import load

# spec, operating point, parameter with its unit, right and wrong value, a signal that then trims elsewhere
EXPECTED = [
    ("tanks_minus", "published", "k1", 3.33, 3.50, "cm^3/V/s", "h1"),
    ("tanks_minus", "levels_held", "gamma1", 0.70, 0.66, "", "v1"),
    ("tanks_plus", "published", "gamma2", 0.34, 0.37, "", "h3"),
    ("tanks_plus", "outputs_held", "k2", 3.29, 3.15, "cm^3/V/s", "v2"),
    ("van_de_vusse", "published", "k2", 1.6666666666666667, 1.67, "1/min", "cb"),
    ("van_de_vusse", "best_yield", "k2", 1.6666666666666667, 1.67, "1/min", "cb"),
    ("buck", "published", "load", 10.0, 10.01, "ohm", "current"),
    ("boost", "published", "load", 10.0, 10.01, "ohm", "current"),
    ("buck_boost", "published", "load", 10.0, 10.01, "ohm", "current"),
    ("ball", "cm1", "coil", 1e-4, 1.0001e-4, "N*m^2/A^2", "current"),
    ("pendulum", "aside", "mass", 0.7, 0.700001, "kg", "torque"),
    ("pendulum", "level", "mass", 0.7, 0.700001, "kg", "torque"),
    ("car_understeering", "characteristic", "front", 77840.0, 77000.0, "N/rad", "yaw_rate"),
    ("quadcopter", "hover", "thrust", 2.980e-6, 2.98002e-6, "N*s^2/rad^2", "w3"),
]


@pytest.fixture
def changed(tmp_path: Path):
    """Verdicts of a published operating point, with one line `parameters:` added to its spec."""

    def verdicts(spec: str, point: str, parameter: str, value: float, unit: str) -> dict[str, Verdict]:
        shutil.copytree(HERE.parent / "truth", tmp_path / "truth", dirs_exist_ok=True)
        lines = (HERE / "specs" / f"{spec}.yaml").read_text(encoding="utf-8").splitlines(keepends=True)
        (at,) = (number for number, line in enumerate(lines) if line.startswith("plant:"))
        lines.insert(at + 1, f"parameters: {{{parameter}: {value!r} {unit}}}\n")
        folder = tmp_path / "published" / "specs"
        folder.mkdir(parents=True, exist_ok=True)
        (folder / f"{spec}.yaml").write_text("".join(lines), encoding="utf-8")
        (case,) = (case for case in load(folder / f"{spec}.yaml", tmp_path) if case.point == point)
        assert case.parameters[parameter] == value
        return {ask.name: judge(case, ask, Options()) for ask in case.checks}

    return verdicts


@pytest.mark.parametrize(
    ("spec", "point", "parameter", "right", "wrong", "unit", "signal"),
    EXPECTED,
    ids=[f"{row[0]}-{row[1]}-{row[2]}" for row in EXPECTED],
)
def test_a_changed_parameter_moves_the_trim_out_of_what_is_expected(
    changed, spec: str, point: str, parameter: str, right: float, wrong: float, unit: str, signal: str
) -> None:
    assert changed(spec, point, parameter, right, unit)["trims"].status is Status.PASS
    found = changed(spec, point, parameter, wrong, unit)["trims"]
    assert found.status is Status.FAIL
    failed = {figure.signal for figure in found.figures if figure.status is Status.FAIL}
    assert signal in failed
    assert f"{signal} trims at" in found.reason
    assert all(figure.origin.endswith(".yaml") or ".yaml:" in figure.origin for figure in found.figures[1:])


def _A(verdicts: dict[str, Verdict]) -> np.ndarray:
    found = verdicts["differentiable"]
    assert found.status is Status.PASS, found.reason
    return np.array(found.details["A"])


def _fastest(A: np.ndarray) -> float:
    return float(np.linalg.eigvals(A).real.max())


def _time_constant(A: np.ndarray) -> float:
    return float((-1.0 / np.linalg.eigvals(A[1:, 1:]).real).max())


def _gain(verdicts: dict[str, Verdict]) -> float:
    A, B, C = (np.array(verdicts["differentiable"].details[name]) for name in "ABC")
    return float(-(C @ np.linalg.solve(A, B))[0, 0])


def test_a_heavier_bob_moves_the_pole_of_the_balance_system(changed) -> None:
    """Printed pole 2.68 (from memory), to half a unit of its last digit."""
    right, wrong = (_A(changed("cart", "upright", "bob", mass, "kg")) for mass in (80.0, 82.0))
    assert _fastest(right) == pytest.approx(2.68, abs=5e-3)
    assert _fastest(wrong) != pytest.approx(2.68, abs=5e-3)


def test_another_sway_damping_moves_the_time_constant_of_the_ship(changed) -> None:
    """Printed T1 118.0 s (from memory), to half a unit of its last digit."""
    right, wrong = (_A(changed("mariner", "amidships", "sway_damping", value, "")) for value in (-1160.0, -1163.0))
    assert _time_constant(right) == pytest.approx(118.0, abs=0.05)
    assert _time_constant(wrong) != pytest.approx(118.0, abs=0.05)


def test_softer_front_tyres_lower_the_yaw_gain_of_the_car(changed) -> None:
    """V/(2 L) at the printed characteristic speed of 41.5 m/s (from memory)."""
    right, wrong = (
        changed("car_understeering", "turn-41.5ms", "front", stiffness, "N/rad") for stiffness in (77840.0, 77000.0)
    )
    assert _gain(right) == pytest.approx(41.5 / 5.6, rel=5e-3)
    assert _gain(wrong) != pytest.approx(41.5 / 5.6, rel=5e-3)
    assert right["trims"].status is wrong["trims"].status is Status.PASS
