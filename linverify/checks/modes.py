"""modes: do poles, zeros and static gains of the local model keep the declared limits?

Judged is the model that is verified: a delivered one by its own entries, whose printed digits count as their errors.
Every pole comes with a disc in which it surely lies (`numerics/spectrum`), and a limit passes or fails only where the
whole disc says so.

A pole lies at the origin where the pattern of zeros of the model leaves it no other place, or where its disc holds the
origin and is smaller than 1e-9 of the model's fastest rate. The poles of a chain of k integrators whose entries are
known to eps are spread by eps^(1/k): `at_zero` excuses such a cluster where its discs hold the origin and the k-th
power of their size is below 1e-6 of the fastest rate; without `at_zero` it is undecided where it lies.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from ..core.case import Case, CheckAsk
from ..core.mode import ModeAsk
from ..core.rules import RULES
from ..core.shown import number, with_unit
from ..core.units import UnitError, convert
from ..core.verdict import Figure, Status, Verdict
from ..numerics.modal import Mode, Modes, modes
from ..numerics.traits import TRAITS
from .findings import Findings
from .mode_choice import (
    Choice,
    choice,
    described,
    distance,
    label,
    line_name,
    nearest,
    told_choice,
    told_complex,
    told_pole,
)
from .mode_limits import judge_limits, judge_measures
from .mode_model import judged_model
from .mode_stability import judge_stable
from .mode_zeros import judge_gains, judge_zeros
from .study import Study

TOLD = 6  # findings told in the reason


def check(study: Study, ask: CheckAsk) -> Verdict:
    """The verdict on all lines of `modes` at one operating point."""
    into = Findings(details={"time_unit": study.case.plant.time_unit})
    judged = judged_model(study)
    into.notes += judged.notes
    if judged.model is None:
        into.reasons.append((Status.UNDECIDED, judged.refused))
    else:
        found = modes(judged.model, judged.nominal)
        for line in study.case.modes:
            _line(found, line, judged.fastest, into)
        into.details["modes"] = [_plain(study.case, found, mode) for mode in found.modes]
        _told_rules(study.case, into)
    del into.details["time_unit"]
    return Verdict(
        spec=study.case.spec,
        point=study.case.point,
        check=ask.name,
        status=into.status,
        place=ask.place,
        reason=_reason(into),
        figures=tuple(into.figures),
        notes=tuple(into.notes),
        details=into.details,
    )


def _reason(into: Findings) -> str:
    """The sentences behind the status, at most `TOLD`; every figure stands in the table."""
    told = [text for status, text in into.reasons if status is into.status]
    if into.status is Status.PASS or len(told) <= TOLD:
        return into.reason
    return "; ".join([*told[:TOLD], f"and {len(told) - TOLD} more"])


def _line(found: Modes, ask: ModeAsk, fastest: float, into: Findings) -> None:
    """One line: which modes it is about, whether there are any, and what it asks of them.

    fastest: natural frequency up to which modes are exact.
    """
    judge_zeros(found, ask, into)
    judge_gains(found, ask, into)
    if not (ask.limits or ask.stable or ask.controllable or ask.observable) and ask.chosen.everything:
        return
    chosen = choice(found, ask.chosen)
    if chosen.refused:
        into.reasons.append((Status.UNDECIDED, f"{line_name(ask)}{chosen.refused}"))
        return
    chosen = _exact(ask, chosen, fastest, into)
    _there(found, ask, chosen, into)
    excused = judge_stable(found, ask, chosen.sure, chosen.maybe, into)
    judge_limits(found, ask, chosen.sure, chosen.maybe, excused, into)
    judge_measures(found, ask, chosen.sure, chosen.maybe, into)
    row = {"line": ask.name or str(ask.place), "modes": [label(mode) for mode in chosen.all]}
    into.details.setdefault("mode_lines", []).append(row)


def _exact(ask: ModeAsk, chosen: Choice, fastest: float, into: Findings) -> Choice:
    """The modes below `fastest`; where a line is about faster ones too, what is not judged is told."""
    if math.isinf(fastest):
        return chosen
    kept = [[mode for mode in modes if abs(mode.value) <= fastest] for modes in (chosen.sure, chosen.maybe)]
    if any(abs(mode.value) > fastest for mode in chosen.all):
        limit = with_unit(number(fastest, 3), f"rad/{into.details['time_unit']}")
        words = f"modes beyond {limit} are those of the chain of states that stands for the dead time of a closed loop"
        words += ": choose slower ones with between; stability of that loop itself is for its margins"
        into.reasons.append((Status.UNDECIDED, f"{line_name(ask)}{words}"))
    return Choice(tuple(kept[0]), tuple(kept[1]))


def _there(found: Modes, ask: ModeAsk, chosen: Choice, into: Findings) -> None:
    """Whether a line that chooses modes finds one."""
    near = ask.chosen.near
    if near is not None and (mode := nearest(found, near)) is not None:
        _distance(found, ask, mode, near, into)
    if chosen.sure or ask.may_be_empty or ask.chosen.everything:
        if ask.chosen.everything and not found.modes:
            into.reasons.append((Status.UNDECIDED, f"{line_name(ask)}the local model has no states, so no modes"))
        return
    told = told_choice(ask.chosen, into.details["time_unit"])
    if chosen.maybe:
        words = f"whether a mode lies {told} is within the errors of the local model's entries"
        into.reasons.append((Status.UNDECIDED, f"{line_name(ask)}{words}"))
        return
    words = f"{line_name(ask)}there is no mode {told}"
    if near is not None and (mode := nearest(found, near)) is not None:
        words += f"; the nearest is {described(found, mode, into.details['time_unit'])}"
    into.reasons.append((Status.FAIL, words))


def _distance(found: Modes, ask: ModeAsk, mode: Mode, near: complex, into: Findings) -> None:
    """How far the nearest mode is from where the line wants one."""
    away, limit = distance(mode, near), ask.chosen.within
    status = Status.PASS if away.high <= limit else Status.FAIL if away.low > limit else Status.UNDECIDED
    if ask.may_be_empty:
        return
    into.figures.append(
        Figure(
            f"{line_name(ask)}distance from {told_complex(near)}", label(mode), 100.0 * away.value, 100.0 * limit, "%",
            error=100.0 * away.error, origin=str(ask.place), status=status,
        )
    )  # fmt: skip


def _told_rules(case: Case, into: Findings) -> None:
    """Ready-made limits with where they come from, for the notes and the report."""
    names = dict.fromkeys(limit.rule for ask in case.modes for limit in ask.limits if limit.rule)
    rows = []
    for name in names:
        limit = next(limit for ask in case.modes for limit in ask.limits if limit.rule == name)
        meaning = RULES[name].meaning if name in RULES else ""
        rows.append({"rule": name, "meaning": meaning, "source": limit.source, "caution": limit.caution})
        into.notes.append(f"{name}: {limit.source}; {limit.caution}")
    if rows:
        into.details["rules"] = rows


def _plain(case: Case, found: Modes, mode: Mode) -> dict[str, Any]:
    """A mode for the report; what it does not have is left out."""
    unit = case.plant.time_unit
    row: dict[str, Any] = {}
    if math.isfinite(abs(mode.value)):
        value = told_pole(mode)
        row |= {"real": value.real, "imag": value.imag, "error": mode.pole.radius, "natural_frequency": 0.0}
        if value:  # the origin has neither
            row |= {word: TRAITS[word](mode.pole).value for word in ("natural_frequency", "damping")}
        row["hertz"] = row["natural_frequency"] / (2.0 * math.pi * _seconds(unit))
    if not math.isnan(mode.z.real):
        row |= {"z_real": mode.z.real, "z_imag": mode.z.imag}
    for word in ("time_constant", "time_to_half", "time_to_double", "period"):
        value = TRAITS[word](mode.pole).value
        if math.isfinite(value) and told_pole(mode):
            row[word] = value
    if "period" in row and "time_to_half" in row:
        row["cycles_to_half"] = row["time_to_half"] / row["period"]
    if mode.origin != "no":
        row["at_origin"] = mode.origin
    if mode.together > mode.poles:
        row["told_together"] = mode.together
    if not found.model.anonymous:
        order = np.argsort(-mode.shares, kind="stable")
        row["participation"] = {found.states[at]: float(mode.shares[at]) for at in order}
    return row


def _seconds(unit: str) -> float:
    try:
        return convert(1.0, unit, "s")
    except UnitError:
        return math.nan
