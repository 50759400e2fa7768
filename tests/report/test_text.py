"""What the terminal shows of one verdict and of a run."""

from __future__ import annotations

from dataclasses import replace

import pytest
from invented import EVERY, FOLLOWS, NO_TRIM, SPEC, TRIMS, UNDECIDED

from linverify.core.verdict import Evidence, Figure, Sense, Status
from linverify.report import tables, text

FAILURE = f"""\
{SPEC}::wind9::follows.fast: fail
  asked at        {SPEC}:31:3
  answers         KT-2, KT-1
  reason          height leaves its error band
  required        peak error of height at most 0.04 m (from {SPEC}:40:18)
  found           0.05123 m (known to 1.2e-5 m) on height at t = 3.25 s; headroom -28.1 %
  worst drive     winch changes 8 times between -0.9 and +0.9 kN from 0.5 s on [3fa9c1d20b77]
  simplest drive  winch steps to +0.9 kN at 1 s [77d0c0ffee12]
  also            rms error of height 0.011 m, at most 0.015 m, headroom 26.7 %: pass
  also            largest change of winch 0.9 kN
  note            amplitude of winch is cut to 0.9 kN by the envelope
  replay          python -m linverify replay {SPEC}::wind9::follows.fast reports/evidence/77d0c0ffee12.json
  pin             python -m linverify pin {SPEC}::wind9::follows.fast reports/evidence/77d0c0ffee12.json"""


def test_a_failure_says_all_that_is_needed_to_act() -> None:
    assert text.failure(FOLLOWS) == FAILURE


def test_the_failing_figure_stands_first_however_they_arrive() -> None:
    turned = replace(FOLLOWS, figures=FOLLOWS.figures[::-1])
    assert text.failure(turned) == FAILURE


def test_an_undecided_check_says_why() -> None:
    lines = text.failure(UNDECIDED).splitlines()
    assert lines[0] == f"{SPEC}::wind10::follows.fast: undecided"
    assert "  reason          a model that predicts no motion at all passes every drive of this set" in lines
    assert not any(line.startswith(("  replay", "  pin")) for line in lines)


def test_a_passing_check_needs_no_next_step() -> None:
    assert text.next_steps(replace(FOLLOWS, status=Status.PASS)) == []
    assert text.next_steps(TRIMS) == []


def test_the_worst_drive_is_replayed_where_none_is_simplest() -> None:
    alone = replace(FOLLOWS, evidence=FOLLOWS.evidence[:1])
    assert text.next_steps(alone, "out/evidence")[0].endswith("out/evidence/3fa9c1d20b77.json")


def test_a_margin_that_was_tried_on_the_plant_is_replayed_and_has_nothing_to_pin() -> None:
    (step,) = text.next_steps(replace(FOLLOWS, check="margins.level"))
    assert step.startswith("  replay ")


def test_a_stopped_drive_is_replayed_where_nothing_failed() -> None:
    stopped = (*FOLLOWS.evidence[:1], Evidence("stopped", "aaaaaaaaaaaa", "pitch steps"))
    undecided = replace(FOLLOWS, status=Status.UNDECIDED, evidence=stopped)
    assert text.next_steps(undecided)[0].endswith("/aaaaaaaaaaaa.json")
    assert text.next_steps(replace(undecided, status=Status.FAIL))[0].endswith("/3fa9c1d20b77.json")


def test_commands_are_quoted_for_a_shell() -> None:
    steps = text.next_steps(replace(FOLLOWS, spec="my specs/a.yaml"), "the reports/evidence")
    assert steps[0].endswith("replay 'my specs/a.yaml::wind9::follows.fast' 'the reports/evidence/77d0c0ffee12.json'")


def test_long_texts_are_wrapped_and_commands_are_not() -> None:
    wordy = replace(NO_TRIM, reason="word " * 60 + "end\nsecond line", notes=("",))
    lines = text.failure(wordy).splitlines()
    assert max(map(len, lines)) <= text.WIDTH
    assert any(line.strip() == "second line" for line in lines)
    assert text.failure(replace(FOLLOWS, point="p" * 150)).splitlines()[-1].startswith("  pin")


@pytest.mark.parametrize("verdict", EVERY, ids=lambda verdict: f"{verdict.point}-{verdict.check}")
def test_every_verdict_has_a_text(verdict: object) -> None:
    shown = text.failure(verdict)  # type: ignore[arg-type]
    assert shown.isascii()
    assert "nan" not in shown.replace("found  ", "")
    assert all(line == line.rstrip() for line in shown.splitlines())


def test_the_summary_shows_what_does_not_pass_first_then_least_headroom() -> None:
    lines = text.summary(EVERY[::-1], report="reports/compliance.md")
    assert [line.split()[0] for line in lines[2:8]] == ["fail", "fail", "undecided", "pass", "pass", "pass"]
    assert lines[2].split()[-1] == NO_TRIM.id
    assert lines[8:] == ["6 checks: 2 fail, 1 undecided, 3 pass", "report: reports/compliance.md"]


def test_the_summary_is_capped_and_says_what_it_hides() -> None:
    lines = text.summary(EVERY, cap=1, report="reports/compliance.md")
    assert len(lines) == 6
    assert lines[3] == "... and 5 more: 1 fail, 1 undecided, 3 pass; all of them in reports/compliance.md"


def test_an_undecided_row_gives_its_reason() -> None:
    row = text.summary([UNDECIDED])[2]
    assert "a model that predicts no motion" in row
    assert "97.5 %" not in row


def test_a_failure_without_a_failing_figure_gives_its_reason() -> None:
    row = text.summary([replace(FOLLOWS, figures=FOLLOWS.figures[1:])])[2]
    assert "height leaves its error band" in row


def test_a_failure_with_neither_figure_nor_reason_still_has_a_row() -> None:
    row = text.summary([replace(FOLLOWS, figures=(), reason="")])[2]
    assert row.split() == ["fail", "-", "-", "-", FOLLOWS.id]


def test_quick_and_partial_runs_are_marked() -> None:
    lines = text.summary(EVERY, profile="quick", partial=True)
    assert lines[-2:] == [text.QUICK, text.PARTIAL]
    assert "not for acceptance" in text.QUICK


def test_nothing_run_is_said() -> None:
    assert text.summary([]) == ["no check was run"]


def test_control_characters_do_not_reach_the_terminal() -> None:
    loud = replace(NO_TRIM, reason="\x1b[31mred\x1b[0m\x07 alarm", figures=())
    for shown in (text.failure(loud), *text.summary([loud])):
        assert shown.replace("\n", "").isprintable()


def test_equal_headroom_is_ordered_by_name() -> None:
    figure = Figure("peak error", "height", 1.0, 2.0)
    verdicts = [replace(TRIMS, point=name, figures=(figure,)) for name in ("kn10", "kn9", "kn30")]
    shown = [line.split("::")[1] for line in text.summary(verdicts)[2:5]]
    assert shown == ["kn9", "kn10", "kn30"]


def test_an_open_check_shows_no_headroom_of_figures_that_do_not_matter() -> None:
    told = text.failure(UNDECIDED)
    assert "headroom" not in told
    assert "also            peak error of height 0.001 m, at most 0.04 m" in told
    assert [row.cells[5] for row in tables.rows_of(UNDECIDED)] == ["-"]


def test_a_check_that_is_open_for_a_figure_shows_its_headroom() -> None:
    share = Figure("share of drives", "", 85.0, 90.0, "%", Sense.LOWER, origin="x:1:1", status=Status.UNDECIDED)
    told = text.failure(replace(UNDECIDED, figures=(*UNDECIDED.figures, share)))
    assert "required        share of drives at least 90 % (from x:1:1)" in told
    assert "found           85 %; headroom -5.9 %" in told


def test_numbers_have_one_form_in_every_text() -> None:
    odd = replace(UNDECIDED, reason="9.3e+04 % and 1e-08 of state_e-05x, 2e+10")
    assert "9.3e4 % and 1e-8 of state_e-05x, 2e10" in text.failure(odd)
