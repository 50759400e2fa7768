"""The compliance report and its rows against golden files, figures by tolerance."""

from __future__ import annotations

import math
import re
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from invented import EVERY, PLANNED, POINTS, PROVENANCE, TRIMS

from linverify.core.case import Options
from linverify.provenance import gathered
from linverify.report import markdown, record, tables, text

GOLD = Path(__file__).parents[1] / "gold"
NUMBER = re.compile(r"(?<![\w.])-?\d+(?:\.\d+)?(?:e-?\d+)?(?![\w.])")


def run(**changes: Any) -> dict[str, Any]:
    return record.build(
        EVERY, **{"planned": PLANNED, "points": POINTS, "provenance": PROVENANCE, "profile": "quick", **changes}
    )


def scrubbed(page: str) -> str:
    """A page with the values of its provenance blanked: they differ from machine to machine."""
    head, mark, tail = page.partition("## Provenance")
    return head + mark + re.sub(r"^(\| [a-z].*?) \|.*\|$", r"\1 | ... |", tail, flags=re.MULTILINE)


def lines_of(told: str) -> list[str]:
    """Lines with the padding of tables taken out, which depends on the widest number."""
    return [re.sub(r"[:-]{3,}", "---", re.sub(r" +", " ", line)) for line in told.splitlines()]


def same(told: str, gold: str) -> bool:
    """Equal texts; equal numbers to a part in a hundred thousand."""
    if NUMBER.sub("#", told) != NUMBER.sub("#", gold):
        return False
    pairs = zip(NUMBER.findall(told), NUMBER.findall(gold), strict=True)
    return all(math.isclose(float(one), float(other), rel_tol=1e-5, abs_tol=1e-12) for one, other in pairs)


def compare(told: str, name: str) -> None:
    """Hold `told` against the golden file; what was told is left beside it where they differ."""
    gold, actual = GOLD / name, GOLD / "actual" / name
    shown, kept = lines_of(told), lines_of(gold.read_text(encoding="utf-8")) if gold.exists() else []
    different = [pair for pair in zip(shown, kept, strict=False) if not same(*pair)]
    if different or len(shown) != len(kept):
        actual.parent.mkdir(exist_ok=True)
        actual.write_text(told, encoding="utf-8")
        first = different[0] if different else (f"{len(shown)} lines", f"{len(kept)} lines")
        pytest.fail(f"{name}: {first[0]!r} where the golden file has {first[1]!r}; all of it in {actual}")
    actual.unlink(missing_ok=True)


def test_the_compliance_report(tmp_path: Path) -> None:
    spec = tmp_path / "lift.yaml"
    spec.write_text("linverify: 1\n", encoding="utf-8")
    provenance = gathered([spec], tmp_path, Options(seed=7, profile="quick"), tolerances={"trim residual": 1e-8})
    compare(scrubbed(markdown.page(run(provenance=provenance))), "compliance.md")


def test_the_rows_as_csv() -> None:
    compare(tables.compliance_csv(record.verdicts_of(run())), "compliance.csv")


def test_the_record() -> None:
    compare(record.canonical(run()), "linverify.json")


@pytest.mark.parametrize(
    ("told", "gold", "equal"),
    [
        ("peak 0.0512346 m", "peak 0.0512347 m", True),
        ("peak 0.0512346 m", "peak 0.0513 m", False),
        ("peak 0.05 m", "peak 0.05 cm", False),
        ("kn9 1e-8", "kn9 1e-8", True),
        ("kn9", "kn10", False),
        ("-1", "1", False),
    ],
)
def test_the_comparison_sees_what_matters(told: str, gold: str, equal: bool) -> None:
    assert same(told, gold) is equal


def test_a_difference_is_told_and_kept(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(compare.__globals__, "GOLD", tmp_path)
    (tmp_path / "x.md").write_text("peak 1 m\n", encoding="utf-8")
    with pytest.raises(pytest.fail.Exception, match="peak 2 m"):
        compare("peak 2 m\n", "x.md")
    assert (tmp_path / "actual" / "x.md").read_text(encoding="utf-8") == "peak 2 m\n"
    compare("peak 1 m\n", "x.md")
    assert not (tmp_path / "actual" / "x.md").exists()


def test_the_report_made_at_once_is_the_report_made_from_the_file() -> None:
    made = run()
    assert markdown.page(made) == markdown.page(record.parse(record.canonical(made)))


@pytest.mark.parametrize(
    ("changes", "shown"),
    [
        ({"profile": "quick"}, (True, False)),
        ({"profile": "full"}, (False, False)),
        ({"profile": "full", "partial": True}, (False, True)),
    ],
)
def test_marks_of_quick_and_partial_runs(changes: dict[str, Any], shown: tuple[bool, bool]) -> None:
    page = markdown.page(run(**changes))
    assert (text.QUICK in page, text.PARTIAL in page) == shown
    assert text.CAUTION in page


def test_a_run_that_holds_says_so() -> None:
    page = markdown.page(record.build(EVERY[:2], points=POINTS[:1]))
    assert "## What does not hold\n\nNothing.\n" in page


def test_lines_that_stand_among_the_notes_are_not_told_twice() -> None:
    page = markdown.page(
        record.build([replace(TRIMS, notes=("cut",), details={"amplitudes": ["cut"], "other": ["x"]})])
    )
    assert "amplitudes" not in page
    assert "other" in page


@pytest.mark.parametrize("word", ["rules", "limits"])
def test_a_ready_made_limit_tells_its_source_and_caution_once(word: str) -> None:
    row = {"rule": "six", "source": "common practice", "caution": "they promise nothing"}
    own = {"rules": [row]} if word == "rules" else {"margins": {"limits": [{"word": "gain_margin", **row}]}}
    note = "gain margin by the rule six (common practice): they promise nothing"
    page = markdown.page(record.build([replace(TRIMS, notes=(note, "another"), details=own)]))
    assert page.count("they promise nothing") == 1
    assert "- another" in page


def test_an_empty_run_has_a_report() -> None:
    page = markdown.page(record.build([]))
    assert "No check was run." in page
    assert "The specs name none." in page


def _tables(page: str) -> list[list[str]]:
    blocks = [block.splitlines() for block in page.split("\n\n")]
    return [block for block in blocks if block[0].startswith("|")]


def test_every_table_is_rectangular() -> None:
    count: Callable[[str], int] = lambda line: line.replace(r"\|", "").count("|")  # noqa: E731
    for table in _tables(markdown.page(run())):
        assert len({count(line) for line in table}) == 1


def test_a_large_family_is_rendered_quickly() -> None:
    verdicts = [replace(verdict, point=f"p{index}") for index in range(100) for verdict in EVERY[:3]]
    points = [{**POINTS[0], "point": f"p{index}"} for index in range(100)]
    made = record.build(verdicts, points=points)
    begin = time.perf_counter()
    page = markdown.page(made)
    assert page.count("#### trims") == 100
    assert time.perf_counter() - begin < 20.0
