"""Published sample sizes as a report states them: 59 random drives without a break bound what breaks to 5 %.

S. S. Wilks, Ann. Math. Statist. 12 (1941) 91-96; sizes for 95 % content and confidence after H. Glaeser, NURETH-14.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from basin_project import BREAKS, DRIVES, PLANT, SPEC
from scipy.stats import binom

from linverify.checks.statistics import statement
from linverify.core.case import Options
from linverify.run import check_paths

ONE_POINT = SPEC.partition("  high:")[0] + DRIVES.replace("search: 10", "search: 1")
HOLDS = ONE_POINT + "error_bands: {level: {peak: 1 cm}}\n"


def _statistics(folder: Path, spec: str) -> list[dict]:
    (folder / "plant.py").write_text(PLANT, encoding="utf-8")
    (folder / "basin.yaml").write_text(spec, encoding="utf-8")
    made = check_paths([folder], Options(reports=folder / "reports"), folder)
    items = made.record["body"]["items"]
    return [item["details"]["statistics"] for item in items if item["id"].endswith("follows")]


def test_59_drives_without_a_break_state_95_95_in_the_report(tmp_path: Path) -> None:
    (found,) = _statistics(tmp_path, HOLDS.replace("count: 60", "count: 59"))
    assert (found["broken"], found["random"], found["confidence"]) == (0, 59, 0.95)
    assert found["bound"] == pytest.approx(1 - 0.05 ** (1 / 59), rel=1e-5)  # 4.95 %
    report = (tmp_path / "reports" / "compliance.md").read_text(encoding="utf-8")
    assert "0 of 59 random drives broke a band or did not complete; with 95 % confidence at most 4.95 % of" in report
    assert "Clopper-Pearson" in report


def test_58_drives_are_one_too_few(tmp_path: Path) -> None:
    (found,) = _statistics(tmp_path, HOLDS.replace("count: 60", "count: 58"))
    assert found["bound"] == pytest.approx(1 - 0.05 ** (1 / 58), rel=1e-5)
    assert found["bound"] > 0.05


def test_a_family_shares_the_risk_of_being_wrong(tmp_path: Path) -> None:
    """Two points: each is stated at 97.5 %, so that both statements hold together with 95 %."""
    both = _statistics(tmp_path, BREAKS.replace("search: 10", "search: 1"))
    assert [found["confidence"] for found in both] == [0.975, 0.975]
    assert sum(found["broken"] > 0 for found in both) == 1
    for found in both:
        # the bound is the probability at which so few breaks or fewer would be as rare as the risk
        rare = binom.cdf(found["broken"], found["random"], found["bound"])
        assert rare == pytest.approx(0.025, rel=1e-3)


# printed: 59 for no break; derived from the same formula: 93, 124 and 153 with one, two and three breaks allowed
@pytest.mark.parametrize(("broken", "count"), [(0, 59), (1, 93), (2, 124), (3, 153)])
def test_sizes_at_which_the_statement_reaches_95_95(broken: int, count: int) -> None:
    assert statement(broken, count, 1)["bound"] <= 0.05
    assert statement(broken, count - 1, 1)["bound"] > 0.05


# the rule of three beside the exact one-sided bound: derived, 1 - 0.05^(1/n)
@pytest.mark.parametrize(("count", "told"), [(30, "9.5 %"), (100, "2.95 %"), (300, "0.994 %")])
def test_the_exact_bound_is_told_and_lies_below_the_rule_of_three(count: int, told: str) -> None:
    found = statement(0, count, 1)
    assert f"at most {told} of draws" in found["text"]
    assert found["bound"] < 3 / count
