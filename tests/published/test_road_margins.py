"""Published loops from the spec to the verdict of `margins`: margins, disk margins, closed-loop poles.

Sources, digits and where they come from stand beside the plants in tests/truth.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from road import verdict
from truth import kundur
from truth.loops import CROSSINGS, DERIVED, PUBLISHED, Answer

from linverify.core.verdict import Status, Verdict

LOOPS = [*PUBLISHED]


def judged(spec: str, loop: str, point: str = "rest") -> Verdict:
    return verdict(spec, point, f"margins.{loop}")


def channel(found: Verdict) -> dict[str, Any]:
    """The only channel's margins."""
    (only,) = found.details["margins"]["channels"]
    return dict(only)


def held_to(found: Verdict, answer: Answer) -> None:
    told = channel(found)
    for name in Answer.__dataclass_fields__:
        known = getattr(answer, name)
        if known is None:
            continue
        value = told["crossovers"][0]["frequency"] if name == "crossover" else told[name]["value"]
        assert value == pytest.approx(known[0], abs=known[1]), name


@pytest.mark.parametrize(("spec", "loop"), LOOPS)
def test_published_margins(spec: str, loop: str) -> None:
    """As printed or remembered, and to the digits of an independent script; the limits in the spec hold."""
    found = judged(spec, loop)
    assert found.status is Status.PASS, found.reason
    held_to(found, PUBLISHED[spec, loop])
    held_to(found, DERIVED[spec, loop])


def test_limits_beyond_a_published_margin_fail_with_the_figure() -> None:
    found = judged("loops_inverse_response", "demanding")
    assert found.status is Status.FAIL
    assert "19.44 deg" in found.reason
    assert "4.273 dB" in found.reason  # 1.6355


def test_stability_turns_at_the_ultimate_gain() -> None:
    """From memory: 2.5, exactly, at sqrt(0.17) rad/s (15.24 s)."""
    assert judged("loops_inverse_response", "proportional").status is Status.PASS
    found = judged("loops_inverse_response", "too_much")
    assert found.status is Status.FAIL
    assert "unstable" in found.reason
    told = channel(judged("loops_inverse_response", "proportional"))
    assert told["gain_up"]["value"] == pytest.approx(2.5 / 2.4999, rel=1e-9)
    assert told["gain_up"]["frequency"] == pytest.approx(math.sqrt(0.17), rel=1e-9)


def test_an_unstable_plant_has_a_lower_gain_margin_too() -> None:
    told = channel(judged("loops_unstable", "pi"))
    assert told["gain_up"]["frequency"] == pytest.approx(48.304, abs=5e-4)
    assert told["gain_down"]["frequency"] == pytest.approx(0.845163, abs=5e-7)
    backwards = judged("loops_unstable", "backwards")
    assert backwards.status is Status.FAIL
    assert "opposite sign" in backwards.reason


@pytest.mark.parametrize(
    ("loop", "status", "source"),
    [
        ("common", Status.FAIL, "common practice"),
        ("flying_slow_modes", Status.PASS, "MIL-F-9490D"),  # 4.5 dB and 30 deg
        ("flying_rigid_modes", Status.FAIL, "MIL-F-9490D"),  # 6 dB and 45 deg
    ],
)
def test_ready_made_limits_name_their_source(loop: str, status: Status, source: str) -> None:
    """The table of MIL-F-9490D is from memory, and 6 dB with 45 deg common practice: the verdict has to say so."""
    found = judged("loops_cube", loop)
    assert found.status is status
    assert any(source in note for note in found.notes), found.notes
    if "flying" in loop:
        assert any("from memory" in note and "check against" in note for note in found.notes)
    if status is Status.FAIL:
        assert "phase margin is 41.69 deg" in found.reason
        assert "gain margin" not in found.reason


def test_every_crossing_of_a_loop_with_three() -> None:
    """Printed: 97.5941, -157.7844, 134.7359 deg at 0.0850, 0.9373, 1.0919 rad/s (the last misprinted in the third digit
    behind the point: derived 134.73257)."""
    told = channel(judged("loops_several_crossings", "direct"))["crossovers"]
    assert len(told) == 3
    for each, (frequency, phase) in zip(told, CROSSINGS, strict=True):
        assert each["frequency"] == pytest.approx(frequency, abs=5e-5)
        assert each["phase"] == pytest.approx(phase, abs=6e-6)


def test_disk_margin_of_seiler_and_his_guarantee() -> None:
    """Printed: gain 0.63 to 1.59 or 4.05 dB, phase 25.8 deg; poles -9.33, -0.33 +- j1.91."""
    found = judged("loops_three_lags", "gain")
    promise = channel(found)["disk"]["guaranteed"]
    assert (promise["gain_down"], promise["gain_up"]) == pytest.approx((0.627278, 1.594189), abs=1e-6)
    assert 20.0 * math.log10(promise["gain_up"]) == pytest.approx(4.05, abs=5e-3)
    assert promise["phase"] == pytest.approx(25.8017, abs=1e-4)
    assert channel(found)["disk"]["frequency"] == pytest.approx(1.955027, abs=1e-5)
    assert any("4.051 dB" in note and "25.8 deg" in note for note in found.notes)
    np.testing.assert_allclose(closed(found), [-9.330269, -0.334865 - 1.907642j, -0.334865 + 1.907642j], atol=1e-6)


def closed(found: Verdict) -> np.ndarray:
    listed = [complex(pole["real"], pole["imag"]) for pole in found.details["margins"]["closed_loop_poles"]]
    return np.array(sorted(listed, key=lambda value: (round(value.real, 9), value.imag)))


@pytest.mark.parametrize(("point", "a"), [("a10", 10.0), ("a3", 3.0)])
def test_the_rotating_body_in_closed_form(point: str, a: float) -> None:
    """One loop at a time nothing is ever lost; both at once 1/sqrt(1 + a^2) is enough. Closed forms, derived."""
    found = judged("loops_rotating", "both", point)
    told = found.details["margins"]
    for one in told["channels"]:
        assert one["gain_up"]["value"] == math.inf
        assert one["gain_down"]["value"] == 0.0
        assert one["phase"]["value"] == pytest.approx(90.0, abs=1e-6)
    disk = told["all_channels"]["disk"]
    exact = 2.0 / (a + math.hypot(1.0, a))
    assert disk["input"]["value"] == pytest.approx(exact, rel=1e-6)
    assert disk["output"]["value"] == pytest.approx(exact, rel=1e-6)
    assert disk["input"]["guaranteed"]["phase"] == pytest.approx(math.degrees(math.atan(1.0 / a)), rel=1e-6)
    peaks = told["all_channels"]
    assert peaks["sensitivity_peak"]["value"] == pytest.approx(math.hypot(1.0, a), rel=1e-6)
    assert peaks["complementary_peak"]["value"] == pytest.approx(math.hypot(1.0, a), rel=1e-6)
    np.testing.assert_allclose(closed(found), [-1.0, -1.0], atol=1e-9)
    assert found.status is (Status.FAIL if a == 10.0 else Status.PASS)  # a disk margin of 0.2 is asked for
    raised = judged("loops_rotating", "raised", point).status
    assert raised is (Status.FAIL if 1.0 / math.hypot(1.0, a) < 0.1 else Status.PASS)


@pytest.mark.parametrize(
    ("loop", "known", "stable"), [("regulator", kundur.REGULATED, False), ("stabilizer", kundur.STABILIZED, True)]
)
def test_the_machine_with_its_controllers(loop: str, known: tuple[complex, ...], stable: bool) -> None:
    """Eigenvalues from memory. The regulator alone loses stability, and the stabilizer around it brings it back."""
    found = judged("kundur", loop, "full_load")
    assert found.status is (Status.PASS if stable else Status.FAIL)
    listed = [complex(value) for value in known]
    listed += [value.conjugate() for value in listed if value.imag]
    exact = np.array(sorted(listed, key=lambda value: (round(value.real, 9), value.imag)))
    poles = closed(found)
    assert poles.shape == exact.shape
    assert (np.abs(poles - exact) <= 2e-3 + 1e-4 * np.abs(exact)).all()
