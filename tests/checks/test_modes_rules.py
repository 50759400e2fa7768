"""Ready-made limits: their arithmetic on a published aircraft, what they say of their sources, and units of time.

Boeing 747 at 40 000 ft, Mach 0.8: NASA CR-2144 and Etkin, Reid 1996; the longitudinal matrix from public
transcriptions, the lateral one from memory. Limits of MIL-F-8785C from a public transcription of it.
"""

from __future__ import annotations

import math

import pytest
from modal_cases import PLACE, delivered, judged, line, pair, plant, verdict

from linverify.core.rules import RULES, rules_of
from linverify.core.verdict import Status

LONGITUDINAL = [
    [-0.006868, 0.01395, 0.0, -32.2],
    [-0.09055, -0.3151, 773.98, 0.0],
    [0.0001187, -0.001026, -0.4285, 0.0],
    [0.0, 0.0, 1.0, 0.0],
]
LATERAL = [
    [-0.0558, 0.0, -774.0, 32.2],
    [-0.003865, -0.4342, 0.4136, 0.0],
    [0.001086, -0.006112, -0.1458, 0.0],
    [0.0, 1.0, 0.0, 0.0],
]
SHORT, PHUGOID, DUTCH = {"low": 0.5, "high": 2.0}, {"low": 0.01, "high": 0.5}, {"low": 0.6, "high": 2.0}


def ruled(A: list[list[float]], rule: str, **window: float) -> Status:
    found = delivered(A, line(*RULES[rule].bound(PLACE), **window))
    assert any(note.startswith(f"{rule}: {RULES[rule].source}") for note in found.notes)
    assert found.details["rules"][0]["caution"] == RULES[rule].caution
    return found.status


def test_the_longitudinal_modes_are_level_1() -> None:
    """Damping 0.387 of the short period and 0.0489 of the phugoid."""
    for category in "ABC":
        assert ruled(LONGITUDINAL, f"short_period_{category}_level_1", **SHORT) is Status.PASS
    assert ruled(LONGITUDINAL, "phugoid_level_1", **PHUGOID) is Status.PASS


def test_the_dutch_roll_is_worse_than_level_2_by_its_decay_rate() -> None:
    """Damping 0.03485 is above 0.02, damping times frequency 0.0330 is below 0.05."""
    assert ruled(LATERAL, "dutch_roll_B_level_1", **DUTCH) is Status.FAIL
    rule = RULES["dutch_roll_B_level_2"].bound(PLACE)
    found = delivered(LATERAL, line(*rule, **DUTCH))
    assert found.status is Status.FAIL
    broken = [figure.what for figure in found.figures if figure.status is Status.FAIL]
    assert broken == ["decay rate"]
    assert "0.03301 1/s, more than 0.05 1/s is asked for (dutch_roll_B_level_2)" in found.reason
    assert ruled(LATERAL, "dutch_roll_B_level_3", **DUTCH) is Status.PASS


def test_roll_and_spiral() -> None:
    """Roll 1 / 0.56248 = 1.78 s: level 2 of category B; the spiral decays, so that it never doubles."""
    roll = {"low": 0.5, "high": 0.6}
    assert ruled(LATERAL, "roll_class_IV_B_level_1", **roll) is Status.FAIL
    assert ruled(LATERAL, "roll_class_IV_B_level_2", **roll) is Status.PASS
    assert ruled(LATERAL, "spiral_B_level_1", high=0.05) is Status.PASS
    growing = [[math.log(2.0) / 10.0]]
    assert ruled(growing, "spiral_B_level_2") is Status.PASS
    assert ruled(growing, "spiral_B_level_1") is Status.FAIL


@pytest.mark.parametrize("rule", [name for name in rules_of("modes") if "dutch" not in name and "short" not in name])
def test_every_rule_passes_and_fails_one_per_cent_beside_its_limit(rule: str) -> None:
    (limit,) = RULES[rule].bound(PLACE)
    made = {
        "damping": lambda value: pair(1.0, value),
        "time_to_double": lambda value: [[math.log(2.0) / value]],
        "time_constant": lambda value: [[-1.0 / value]],
    }[limit.word]
    bound, good, bad = (limit.low, 1.01, 0.99) if math.isfinite(limit.low) else (limit.high, 0.99, 1.01)
    inside, outside = (bound * good, bound * bad) if bound else (0.01, -0.01)
    assert verdict(made(inside), line(limit)).status is Status.PASS
    assert verdict(made(outside), line(limit)).status is Status.FAIL


@pytest.mark.parametrize("rule", [name for name in rules_of("modes") if "dutch" in name])
def test_dutch_roll_limits_are_strict_and_all_must_hold(rule: str) -> None:
    limits = {limit.word: limit for limit in RULES[rule].bound(PLACE)}
    assert all(limit.strict for limit in limits.values())
    natural, damping = limits["natural_frequency"].low, limits["damping"].low
    decay = limits["decay_rate"].low if "decay_rate" in limits else 0.0
    ask = line(*limits.values())
    enough = max(damping, decay / (1.05 * natural))
    assert verdict(pair(1.05 * natural, 1.01 * enough + 1e-3), ask).status is Status.PASS
    assert verdict(pair(1.05 * natural, 0.99 * enough - 1e-3), ask).status is Status.FAIL
    assert verdict(pair(0.99 * natural, 0.9), ask).status is Status.FAIL
    fast = 10.0 * max(natural, decay / max(damping, 0.01))
    assert verdict(pair(fast, 1.01 * damping + 1e-3), ask).status is Status.PASS
    assert verdict(pair(fast, 0.99 * damping - 1e-3), ask).status is Status.FAIL


def test_short_period_limits_hold_at_both_ends() -> None:
    for name in ("short_period_A_level_1", "short_period_B_level_1", "short_period_C_level_2"):
        (limit,) = RULES[name].bound(PLACE)
        for damping, expected in ((1.01 * limit.low, Status.PASS), (0.99 * limit.low, Status.FAIL)):
            assert verdict(pair(2.0, damping), line(limit)).status is expected
        for damping, expected in ((0.99 * limit.high, Status.PASS), (1.01 * limit.high, Status.FAIL)):
            assert verdict(pair(2.0, damping), line(limit)).status is expected  # two real poles


def test_limits_are_bound_to_the_time_unit_of_the_plant() -> None:
    """A roll of 1 s is 1/60 min; 0.4 rad/s are 24 rad/min; told in seconds all the same."""
    (roll,) = RULES["roll_class_IV_A_level_1"].bound(PLACE, 60.0)
    assert roll.high == pytest.approx(1.0 / 60.0)
    for minutes, expected in ((0.99 / 60.0, Status.PASS), (1.01 / 60.0, Status.FAIL)):
        found = judged(plant([[-1.0 / minutes]], time_unit="min"), line(roll))
        assert found.status is expected
        assert found.figures[0].unit == "s"
        assert found.figures[0].limit == pytest.approx(1.0)
    dutch = {limit.word: limit for limit in RULES["dutch_roll_B_level_1"].bound(PLACE, 60.0)}
    assert dutch["natural_frequency"].low == pytest.approx(24.0)
    assert dutch["decay_rate"].low == pytest.approx(9.0)


def test_every_rule_says_where_it_comes_from_and_what_to_beware_of() -> None:
    for name, rule in RULES.items():
        assert rule.name == name
        assert rule.source
        assert rule.meaning
        assert "no published source" in rule.source or "check against the standard's text" in rule.caution
        assert all(limit.low > -math.inf or limit.high < math.inf for limit in rule.limits)
    for name in rules_of("loops"):
        margins = {limit.word: limit for limit in RULES[name].bound(PLACE)}
        assert margins["gain_margin"].shown is not None
        assert margins["gain_margin"].shown.told_ratio(margins["gain_margin"].low).endswith("dB")
    six = {limit.word: limit.low for limit in RULES["six_db_45_deg"].limits}
    assert six == {"gain_margin": pytest.approx(10.0**0.3), "phase_margin": pytest.approx(math.pi / 4)}
    assert RULES["six_db_45_deg"].source == "common practice, no published source"
    assert "source" not in RULES["six_db_45_deg"].caution  # once is enough
    assert all("from memory" in RULES[name].caution for name in rules_of("loops") if name.startswith("flight"))
