"""From requirements to checks: nothing is lost on the way."""

from __future__ import annotations

from dataclasses import replace

import pytest
from invented import FOLLOWS, NO_TRIM, ODD, POINTS, TRIMS, UNDECIDED

from linverify.core.verdict import Status
from linverify.report import trace

ALL = (TRIMS, FOLLOWS, UNDECIDED, NO_TRIM, ODD)


def test_requirements_come_in_order_with_their_checks() -> None:
    traced = trace.requirements(POINTS, ALL)
    assert [one.name for one in traced] == ["KT-1", "KT-2", "KT-10", "=SUM(A1)"]
    assert trace.summary_rows(traced)[0] == ("KT-1", "The kite flies.", "Invented 1", "fail", "2 fail, 1 pass")


def test_a_requirement_without_a_check_is_not_run() -> None:
    one = trace.requirements(POINTS, ALL)[2]
    assert (one.status, one.tally) == (Status.NOT_RUN, "no check answers it in this run")
    assert trace.trace_rows([one]) == [
        ("KT-10", "Nothing answers this.", "Invented 2", "-", "-", "-", "-", "-", "not run", "-")
    ]


def test_a_requirement_that_only_a_verdict_names_is_traced() -> None:
    assert trace.summary_rows(trace.requirements([], [ODD])) == [("=SUM(A1)", "-", "-", "pass", "1 pass")]


def test_every_row_is_as_wide_as_its_header() -> None:
    traced = trace.requirements(POINTS, ALL)
    assert {len(row) for row in trace.trace_rows(traced)} == {len(trace.TRACE)}
    assert {len(row) for row in trace.summary_rows(traced)} == {len(trace.REQUIREMENTS)}


@pytest.mark.parametrize(
    ("statuses", "whole"),
    [
        ((Status.PASS, Status.PASS), Status.PASS),
        ((Status.PASS, Status.SKIPPED), Status.PASS),
        ((Status.SKIPPED,), Status.SKIPPED),
        ((Status.PASS, Status.NOT_RUN), Status.NOT_RUN),
        ((Status.PASS, Status.UNDECIDED, Status.NOT_RUN), Status.UNDECIDED),
        ((Status.PASS, Status.UNDECIDED, Status.FAIL), Status.FAIL),
    ],
)
def test_a_requirement_is_as_good_as_its_worst_check(statuses: tuple[Status, ...], whole: Status) -> None:
    verdicts = [replace(TRIMS, point=f"p{index}", status=status) for index, status in enumerate(statuses)]
    assert trace.requirements([], verdicts)[0].status is whole


def test_the_same_name_in_two_specs_is_two_requirements() -> None:
    other = replace(TRIMS, spec="specs/other.yaml")
    assert [one.spec for one in trace.requirements([], [TRIMS, other])] == [TRIMS.spec, other.spec]
