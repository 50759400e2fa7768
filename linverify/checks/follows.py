"""follows: no drive found breaks an error band while the plant is inside the envelope.

Drives are gathered and run (`campaign`), the worst of each band is settled alone and a failure confirmed by a second
integrator (`confirm`), and a pass is withheld where it would say nothing: drives that leave the envelope, that cannot
be followed, or that a model without any motion would have passed as well (`sight`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from ..core.case import CheckAsk
from ..core.shown import number, with_unit
from ..core.verdict import Evidence, Figure, Sense, Status, Verdict, merged
from . import fitting
from .campaign import KINDS, Campaign, Pins, campaign, read_pins
from .comparison import Comparison, comparison
from .confirm import Word, random_breaks, simplest, words
from .evidence import saved, text_of
from .figures import break_told, figure_of, name_of
from .sight import Sight, sees_motion, sight
from .split import sentences, splits
from .statistics import statement
from .study import Study

QUICK_NOTE = "quick profile: not for acceptance"


@dataclass(slots=True)
class _Findings:
    """What speaks against a pass, and what a reviewer must see besides (not frozen: it is filled step by step)."""

    open: list[str] = field(default_factory=list)  # reasons to be undecided
    notes: list[str] = field(default_factory=list)
    figures: list[Figure] = field(default_factory=list)
    evidence: list[Evidence] = field(default_factory=list)


def check(study: Study, ask: CheckAsk) -> Verdict:
    """The verdict on one set of drives. Raises KeyError for a set that the case does not have, OSError from saving."""
    found, study = _Findings(), study.closed(ask.drives)
    if reasons := fitting.misfits(study, ask.drives):
        found.open += reasons
        return _verdict(study, ask, found, [], {})
    compared = comparison(study, ask.drives)
    found.notes += fitting.told(study, ask.drives)
    if study.options.profile == "quick":
        found.notes.append(QUICK_NOTE)
    found.notes += compared.limits.told
    if study.bound.why_single:
        found.notes.append(f"the plant is called one column at a time, which is slow: {study.bound.why_single}")
    if reason := _nothing_to_do(compared):
        found.open.append(reason)
        return _verdict(study, ask, found, [], {})
    pins = read_pins(compared)
    found.open += pins.misfits
    found.notes += pins.told
    run = campaign(compared, study.options, pins.drives)
    settled = words(compared, run)[: None if compared.exits else -1]
    _judge(study, compared, run, settled, found)
    # a failure shows that the drives can see; where the plant breaks down the question does not arise
    blind = any(word.status is Status.FAIL for word in settled) or any(run.wrong)
    seen = None if blind else _look(compared, run, found)
    details = _details(study, compared, run, pins, seen)
    if parts := splits(study, compared, settled):
        details["error_split"] = [part.to_data() for part in parts]
        found.notes += sentences(compared, parts)
    return _verdict(study, ask, found, settled, details)


def _nothing_to_do(compared: Comparison) -> str:
    limits = compared.limits
    if not compared.bands:
        return "no error band holds for this set of drives"
    moves = np.any(limits.high > 0.0) or np.any(limits.low < 0.0)
    if not moves and not np.any(limits.offset_high > 0.0) and not np.any(limits.offset_low < 0.0):
        return "the envelope leaves these drives no room at this operating point: nothing moves"
    return ""


def _judge(study: Study, compared: Comparison, run: Campaign, settled: Sequence[Word], found: _Findings) -> None:
    """Figures, evidence and reasons from what each band came to."""
    for word in settled:
        if word.examined is not None:
            figure = figure_of(compared, word)
            if figure is not None:
                found.figures.append(figure)
        if word.status is Status.UNDECIDED:
            found.open.append(f"{_row_name(compared, word.row)}: {word.reason}")
    worst = _tightest(settled)
    if worst is not None and worst.examined is not None:
        _save(study, compared, found, "worst", worst)
        if worst.status is Status.FAIL and (one := simplest(compared, run, worst)) is not None:
            _save(study, compared, found, "simplest", Word(worst.row, worst.status, "", one))
    _save_cited(study, compared, found, settled)
    if not run.settled:
        found.open.append("the fixed batch of drives did not reach an accuracy of 1 % of every band")
    _failures(study, compared, run, found)
    _completion(compared, run, found)


def _tightest(settled: Sequence[Word]) -> Word | None:
    """The word that is shown with its drive: a failure before all others, then the largest share."""
    ran = [word for word in settled if word.examined is not None]
    return max(ran, key=lambda word: (word.status is Status.FAIL, _share(word), -word.row), default=None)


def _share(word: Word) -> float:
    return float(word.examined.share[word.row]) if word.examined is not None else 0.0


def _save(study: Study, compared: Comparison, found: _Findings, role: str, word: Word) -> None:
    one = word.examined
    if one is not None:
        figure = figure_of(compared, word)
        figures = (figure,) if figure is not None else ()
        found.evidence.append(saved(compared, study.options, role, one.drive, one.runs, one.fidelity, figures))


def _save_cited(study: Study, compared: Comparison, found: _Findings, settled: Sequence[Word]) -> None:
    """Save the drives of the other figures too: a report names the drive of each, and a reader looks for its file."""
    there = {item.drive for item in found.evidence}
    for word in settled:
        one, figure = word.examined, figure_of(compared, word)
        if one is not None and figure is not None and figure.drive not in there:
            saved(compared, study.options, "worst of one figure", one.drive, one.runs, one.fidelity, (figure,))
            there.add(figure.drive)


def _completion(compared: Comparison, run: Campaign, found: _Findings) -> None:
    columns = run.of("random")
    if not columns:
        return
    share = float(np.mean(run.figures.completed[columns]))
    asked = compared.case.exits.complete
    if share < asked:
        told = f"{number(100.0 * share, 3)} % of the random drives ran their whole horizon, "
        told += f"{number(100.0 * asked, 3)} % are asked for"
        # drives that could not be followed did not complete either, and say nothing about the envelope
        stopped = sum(1 for column in columns if run.wrong[column]) / len(columns)
        blame = share + stopped < asked
        found.open.append(told + (": the drives are too large for this envelope" if blame else ""))
        what, origin = "share of random drives that ran their whole horizon", compared.case.origin("exits.complete")
        share, asked = 100.0 * share, 100.0 * asked
        found.figures.append(Figure(what, "", share, asked, "%", Sense.LOWER, origin=origin, status=Status.UNDECIDED))
    if not compared.exits and (missed := int(np.count_nonzero(run.figures.share[-1] > 1.0))):
        found.notes.append(f"{missed} drives left the envelope where the local model was still well inside")


def _failures(study: Study, compared: Comparison, run: Campaign, found: _Findings) -> None:
    """Drives that could not be followed: the first is named and saved."""
    failed = [column for column, reason in enumerate(run.wrong) if reason]
    if not failed:
        return
    first = run.drives[failed[0]]
    found.open.append(
        f"{len(failed)} of {len(run.drives)} drives could not be followed; the first ({text_of(compared, first)}): "
        f"{run.wrong[failed[0]]}"
    )
    _, runs = compared.alone(first, run.fidelity)
    found.evidence.append(saved(compared, study.options, "stopped", first, runs, run.fidelity, ()))


def _look(compared: Comparison, run: Campaign, found: _Findings) -> Sight:
    """Whether these drives can see at all, and how small an error they would catch."""
    noise = run.noise.at(run.fidelity)
    if not sees_motion(run.still, compared, noise):
        found.open.append(
            "a local model that predicts no motion at all would pass every drive that was run: larger drives, longer "
            "horizons or tighter bands are needed"
        )
    seen = sight(compared, run.drives, run.still, run.fidelity, noise)
    drives, delay = compared.drives, compared.drives.shown_delay or compared.case.shown_time()
    late = None if drives.discerns_delay is None else delay.size(drives.discerns_delay)
    gain = None if drives.discerns_gain is None else 100.0 * drives.discerns_gain
    asked = (
        ("smallest gain error that these drives catch", 100.0 * seen.gain, gain, "%"),
        ("smallest delay that these drives catch", delay.size(seen.delay), late, delay.unit),
    )
    for what, value, limit, unit in asked:
        if limit is not None:
            status = Status.PASS if value <= limit else Status.UNDECIDED
            found.figures.append(
                Figure(what, "", value, limit, unit, Sense.UPPER, origin=f"{drives.place} discerns", status=status)
            )
            if status is Status.UNDECIDED:
                value_told, limit_told = (with_unit(number(each, 4), unit) for each in (value, limit))
                found.open.append(f"{what} is {value_told}, at most {limit_told} is asked for")
    for name, (gain, _) in seen.signals.items():
        if np.isinf(gain):
            found.notes.append(f"no gain error of {name} alone would break its bands on these drives")
    return seen


def _row_name(compared: Comparison, row: int) -> str:
    if row >= len(compared.bands):
        return "unpredicted exit"
    return name_of(compared.bands[row])


def _details(study: Study, compared: Comparison, run: Campaign, pins: Pins, seen: Sight | None) -> dict[str, Any]:
    rows = len(compared.bands) + (1 if compared.exits else 0)
    broken, count = random_breaks(run, rows)
    columns = run.of("random")
    details: dict[str, Any] = {
        "drives": {**{kind: len(run.of(kind)) for kind in KINDS}, "all": len(run.drives)},
        "statistics": statement(broken, count, compared.case.family),
        "integration": {
            "method": run.method,
            "nodes": run.fidelity.nodes,
            "tolerance": run.fidelity.tolerance,
            "error_90": _errors(compared, run),
        },
        "amplitudes": list(compared.limits.told),
        "seed": study.options.seed,
        "profile": study.options.profile,
        "pinned_elsewhere": list(pins.told),
    }
    time = compared.case.shown_time(compared.drives)
    if seen is not None:
        details["smallest_visible"] = {
            "gain": seen.gain,
            "delay": time.size(seen.delay),
            "unit_of_delay": time.unit,
            "signals": {name: {"gain": gain, "delay": time.size(late)} for name, (gain, late) in seen.signals.items()},
        }
    if columns:
        details["completed"] = {"value": 100.0 * float(np.mean(run.figures.completed[columns])), "unit": "%"}
    return details


def _errors(compared: Comparison, run: Campaign) -> dict[str, Any]:
    """90th percentile of our own error of each band, in its unit (of a share: in the unit of its signal)."""
    errors = run.noise.at(run.fidelity)
    told = {}
    for row, band in enumerate(compared.bands):
        shown = compared.case.shown_band(band)
        told[name_of(band)] = {"value": float(f"{shown.size(float(errors[row])):.3g}"), "unit": shown.unit}
    return told


def _verdict(
    study: Study, ask: CheckAsk, found: _Findings, settled: Sequence[Word], details: dict[str, Any]
) -> Verdict:
    statuses = [Status.PASS, *(word.status for word in settled), *(Status.UNDECIDED for _ in found.open)]
    status = merged(statuses)
    notes = list(found.notes)
    reason = found.open[0] if status is Status.UNDECIDED else ""
    if status is Status.FAIL:
        broken = [figure for figure in found.figures if figure.status is Status.FAIL]
        reason = "; ".join(break_told(figure) for figure in broken)
        notes += [f"also undecided: {line}" for line in found.open]
    else:
        notes += [f"also: {line}" for line in found.open[1:]]
    return Verdict(
        study.case.spec, study.case.point, ask.name, status, ask.place, reason, tuple(found.figures), tuple(notes),
        (), tuple(found.evidence), details,
    )  # fmt: skip
