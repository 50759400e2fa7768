"""Rows and grids: what the compliance table says, and that no name can break a table."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented import EVERY, FOLLOWS, NO_TRIM, ODD, TRIMS, UNDECIDED

from linverify.core.verdict import Figure, Sense, Status
from linverify.report import tables


def test_a_row_shows_limit_worst_headroom_verdict_and_evidence() -> None:
    assert tables.rows_of(FOLLOWS)[0].cells == (
        "KT-2, KT-1",
        "specs/kite/lift.yaml::wind9",
        "follows.fast",
        "peak error of height at most 0.04 m",
        "0.05123 m",
        "-28.1 %",
        "fail",
        "3fa9c1d20b77",
    )


def test_one_limit_of_the_spec_is_one_row_with_the_worst_signal() -> None:
    whats = [(row.figure.what, row.figure.signal) for row in tables.rows_of(TRIMS) if row.figure]
    assert whats == [("scaled residual", "line"), ("departure from expected value", "winch")]


def test_the_failing_signal_stands_for_its_limit() -> None:
    failing = replace(TRIMS.figures[1], status=Status.FAIL)
    shown = tables.limits(replace(TRIMS, figures=(TRIMS.figures[0], failing)))
    assert [figure.signal for figure in shown] == ["climb_rate"]


def test_signals_with_limits_of_their_own_keep_their_rows() -> None:
    figures = tuple(
        Figure("peak error", name, 1.0, 2.0, origin=place) for name, place in (("a", "x:1:1"), ("b", "x:2:1"))
    )
    assert len(tables.rows_of(replace(TRIMS, figures=figures))) == 2
    unplaced = tuple(replace(figure, origin="") for figure in figures)
    assert len(tables.rows_of(replace(TRIMS, figures=unplaced))) == 2


def test_what_is_undecided_never_reads_as_pass() -> None:
    assert [row.status for row in tables.rows_of(UNDECIDED)] == [Status.UNDECIDED]


def test_a_figure_over_its_limit_never_reads_as_pass() -> None:
    over = Figure("peak error", "height", 0.05, 0.04)  # its author forgot the status
    for status in (Status.PASS, Status.FAIL):
        assert tables.rows_of(replace(FOLLOWS, status=status, figures=(over,)))[0].status is Status.FAIL
    assert tables.rows_of(replace(UNDECIDED, figures=(over,)))[0].status is Status.UNDECIDED


def test_a_check_that_failed_otherwise_gets_a_row_of_its_own() -> None:
    rows = tables.rows_of(replace(FOLLOWS, figures=FOLLOWS.figures[1:]))
    assert [(row.status, row.figure is None) for row in rows] == [(Status.PASS, False), (Status.FAIL, True)]
    assert rows[1].cells[3:] == ("-", "-", "-", "fail", "worst 3fa9c1d20b77, simplest 77d0c0ffee12")


def test_what_does_not_pass_comes_first_then_least_headroom() -> None:
    ordered = sorted(EVERY, key=tables.severity)
    assert [verdict.status for verdict in ordered][:3] == [Status.FAIL, Status.FAIL, Status.UNDECIDED]
    assert ordered[0] is NO_TRIM
    shares = [verdict.tightest.used_share for verdict in ordered[3:] if verdict.tightest]
    assert shares == sorted(shares, reverse=True)


def test_numbers_are_read_as_numbers() -> None:
    names = ["kn10", "kn9", "kn9.b", "kn09", "", "7", "a"]
    assert sorted(names, key=tables.human) == ["", "7", "a", "kn09", "kn9", "kn9.b", "kn10"]


@pytest.mark.parametrize(
    ("text", "shown"),
    [
        ("a|b", r"a\|b"),
        (r"a\|b", r"a\\\|b"),
        ("two\nlines\t here", "two lines here"),
        ("<script>", "&lt;script&gt;"),
        ("&lt; R&D", "&amp;lt; R&D"),
        ("fore_flap", "fore_flap"),
        ("_loud_ *stars* `code`", r"\_loud\_ \*stars\* \`code\`"),
        ("[text](address)", r"\[text\](address)"),
        ("# heading", r"\# heading"),
        ("bell\x07 and \x1b[31mred", r"bell and \[31mred"),
        ("", ""),
    ],
)
def test_markdown_is_escaped(text: str, shown: str) -> None:
    assert tables.escaped(text) == shown


@settings(deadline=None, derandomize=True, max_examples=200)
@given(st.lists(st.tuples(st.text(max_size=15), st.text(max_size=15)), min_size=1, max_size=3))
def test_no_text_breaks_a_grid(rows: list[tuple[str, str]]) -> None:
    lines = tables.grid(("one", "two"), rows).split("\n")
    assert len(lines) == 2 + len(rows)
    for line in lines:
        bare = line.replace(r"\\", "").replace(r"\|", "")
        assert bare.count("|") == 3


def test_texts_that_look_like_numbers_stay_as_they_are() -> None:
    grid = tables.grid(("name", "x"), [("007", "1e5"), ("1_000", "-0.0")])
    assert all(word in grid for word in ("007", "1e5", "1_000", "-0.0"))


def test_an_empty_grid_says_so() -> None:
    assert tables.grid(("a", "b"), []) == "None."


def test_bullets_do_not_nest() -> None:
    lines = tables.bullets(["-", "- x", "1. x", "12) y", "-0.9 kN", "plain"]).split("\n")
    assert lines == [r"- \-", r"- \- x", r"- 1\. x", r"- 12\) y", "- -0.9 kN", "- plain"]


@pytest.mark.parametrize(
    "cell", ["=SUM(A1)", "+1", "@x", "\t=1", "\r=1", "\n=1", "-2+cmd|' /C x'!A0", "-x", "--1", "-1(2)"]
)
def test_formulas_are_guarded(cell: str) -> None:
    assert tables.guarded(cell) == f"'{cell}"


@pytest.mark.parametrize("cell", ["-", "-0.5 m/s^2", "-28.1 %", "-1e-8", "-4e9 %", "-infinite", "KT-1", "7", ""])
def test_plain_numbers_are_left_alone(cell: str) -> None:
    assert tables.guarded(cell) == cell


def test_the_csv_holds_the_rows_and_their_numbers() -> None:
    rows = list(csv.reader(io.StringIO(tables.compliance_csv(EVERY))))
    assert rows[0][:8] == list(tables.COMPLIANCE)
    assert len(rows) == 1 + len(tables.compliance(EVERY))
    assert rows[4][8:] == ["0.0512346", "0.04", "m"]
    assert {len(row) for row in rows} == {11}
    assert next(row for row in rows if "007" in row[3])[0] == "'=SUM(A1)"


def test_infinite_and_missing_figures_show_as_such() -> None:
    infinite, zero = tables.rows_of(ODD)
    assert infinite.cells[3:6] == ("gain margin of 007 at least 2", "infinite", "100 %")
    assert zero.cells[3:6] == ("peak error of 1e5 at most 0 m", "0 m", "-")
    told = Figure("yes or no", "", math.nan, sense=Sense.NONE)
    assert tables.rows_of(replace(ODD, figures=(told,)))[0].cells[3:7] == ("-", "-", "-", "pass")
