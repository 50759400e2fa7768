"""Limits on chosen modes: figures with errors, and sentences that name the mode where one is not kept.

What a mode lacks takes infinitely long (`numerics/traits`): a real pole has an infinite period, a mode that does not
decay an infinite time constant and time to half, one that does not grow an infinite time to double. So "at least" holds
there and "at most" does not. An upper limit on damping of 1 or more is about two real poles as one factor: it is judged
where the line chooses exactly two real poles, and undecided where real ones are chosen in another number.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence

from ..core.loop import Limit
from ..core.mode import ModeAsk
from ..core.shown import Shown, number, with_unit
from ..core.verdict import Figure, Sense, Status
from ..numerics.modal import Mode, Modes
from ..numerics.traits import TRAITS, Known, pair_damping
from .findings import Findings
from .mode_choice import described, label, line_name

WORDED = {
    "damping": "damping ratio",
    "natural_frequency": "natural frequency",
    "decay_rate": "decay rate",
    "time_constant": "time constant",
    "time_to_half": "time to half",
    "time_to_double": "time to double",
    "period": "period",
    "real": "real part",
}


def own_unit(word: str, time_unit: str) -> Shown:
    """The plant's unit of a figure, for limits that do not say how they are told."""
    if word == "natural_frequency":
        return Shown(f"rad/{time_unit}")
    if word in ("decay_rate", "real"):
        return Shown(f"1/{time_unit}")
    return Shown("" if word in ("damping", "measure") else time_unit)


def status_of(known: Known, limit: Limit, side: Sense) -> Status:
    """pass: surely inside; fail: surely outside; else undecided."""
    if side is Sense.LOWER:
        keeps = known.low > limit.low if limit.strict else known.low >= limit.low
        breaks = known.high <= limit.low if limit.strict else known.high < limit.low
    else:
        keeps = known.high < limit.high if limit.strict else known.high <= limit.high
        breaks = known.low >= limit.high if limit.strict else known.low > limit.high
    if keeps:
        return Status.PASS
    return Status.FAIL if breaks else Status.UNDECIDED


def sides(limit: Limit) -> tuple[Sense, ...]:
    """The sides on which a limit is one."""
    low = (Sense.LOWER,) if math.isfinite(limit.low) else ()
    return (*low, Sense.UPPER) if math.isfinite(limit.high) else low


def figure(
    what: str, signal: str, known: Known, limit: Limit, side: Sense, shown: Shown, *, sure: bool = True
) -> Figure:
    """One figure against one side of a limit. sure: False for a mode that may not be meant: it cannot fail."""
    status = status_of(known, limit, side)
    if status is Status.FAIL and not sure:
        status = Status.UNDECIDED
    bound = limit.low if side is Sense.LOWER else limit.high
    return Figure(
        what, signal, shown.size(known.value), shown.size(bound), shown.unit, side, error=abs(shown.size(known.error)),
        origin=f"{limit.rule}, {limit.place}" if limit.rule else str(limit.place), status=status,
    )  # fmt: skip


def judge_limits(found: Modes, ask: ModeAsk, sure: Sequence[Mode], maybe: Sequence[Mode], into: Findings) -> None:
    """All limits of a line on the modes that it chooses."""
    time_unit = into.details["time_unit"]
    for limit in ask.limits:
        shown = limit.shown or own_unit(limit.word, time_unit)
        what = f"{line_name(ask)}{WORDED[limit.word]}"
        for side in sides(limit):
            if side is Sense.UPPER and limit.word == "damping" and limit.high >= 1.0:
                _overdamped(found, limit, (sure, maybe), (what, shown), into)
                continue
            for mode, meant in _each(sure, maybe):
                known = TRAITS[limit.word](mode.pole)
                one = figure(what, label(mode), known, limit, side, shown, sure=meant)
                _tell(found, mode, one, limit, meant, into)


def _each(sure: Sequence[Mode], maybe: Sequence[Mode]) -> Iterable[tuple[Mode, bool]]:
    return [*((mode, True) for mode in sure), *((mode, False) for mode in maybe)]


def _tell(found: Modes, mode: Mode, one: Figure, limit: Limit, meant: bool, into: Findings) -> None:
    into.figures.append(one)
    if one.status is not Status.PASS:
        who = described(found, mode, into.details["time_unit"])
        into.reasons.append((one.status, f"{one.what} of {who} is {sentence(one, limit)}{_doubt(one, meant)}"))


def sentence(one: Figure, limit: Limit) -> str:
    """The figure against its limit: 0.02 s, at least 0.05 s is asked for, by the rule ..."""
    value = f"{with_unit(number(one.worst, 4), one.unit)}" if math.isfinite(one.worst) else "infinite"
    told = "more than" if one.sense is Sense.LOWER else "less than"
    asked = told if limit.strict else one.sense.value
    rule = f" ({limit.rule})" if limit.rule else ""
    return f"{value}, {asked} {with_unit(number(one.limit, 4), one.unit)} is asked for{rule}"


def _doubt(one: Figure, meant: bool) -> str:
    if one.status is not Status.UNDECIDED:
        return ""
    if not meant:
        return "; whether this mode is meant is within its error"
    known = "not at all" if math.isinf(one.error) else f"to within {with_unit(number(one.error, 2), one.unit)}"
    return f"; it is known {known}"


def _overdamped(
    found: Modes, limit: Limit, modes: tuple[Sequence[Mode], Sequence[Mode]], told: tuple[str, Shown], into: Findings
) -> None:
    """An upper limit on damping of one or more: pairs keep it anyway, two real poles are one factor."""
    (sure, maybe), (what, shown) = modes, told
    for mode, meant in _each(sure, maybe):
        if not mode.pole.real and mode.poles == 2:
            one = figure(what, label(mode), TRAITS["damping"](mode.pole), limit, Sense.UPPER, shown, sure=meant)
            _tell(found, mode, one, limit, meant, into)
    real = [mode for mode, _ in _each(sure, maybe) if mode.poles == 1]
    if not real:
        return
    if len(real) != 2 or any(mode in maybe for mode in real):
        names = ", ".join(label(mode) for mode in real)
        reason = "two real poles as one factor have a damping ratio above 1; chosen are "
        into.reasons.append((Status.UNDECIDED, f"{what}: {reason}{names}: choose the two with near, between"
                             f" or participates"))  # fmt: skip
        return
    known = pair_damping(real[0].pole, real[1].pole)
    one = figure(what, " and ".join(label(mode) for mode in real), known, limit, Sense.UPPER, shown)
    into.figures.append(one)
    if one.status is not Status.PASS:
        into.reasons.append((one.status, f"{what} of {one.signal} together is {sentence(one, limit)}"))


def judge_measures(found: Modes, ask: ModeAsk, sure: Sequence[Mode], maybe: Sequence[Mode], into: Findings) -> None:
    """Least controllability and observability of the chosen modes."""
    kinds = (("controllability from", ask.controllable), ("observability at", ask.observable))
    for kind, limits in kinds:
        for name, limit in limits:
            what = f"{line_name(ask)}{kind} {name}"
            if found.model.anonymous:
                into.reasons.append((Status.UNDECIDED, f"{what}: the states of the delivered model are anonymous, so "
                                     f"that nobody can say in what they are scaled"))  # fmt: skip
                continue
            for mode, meant in _each(sure, maybe):
                try:
                    reach = found.controllability if kind.startswith("control") else found.observability
                    known = reach(mode, name)
                except ValueError:
                    into.reasons.append((Status.UNDECIDED, f"{what}: the local model has no {name}"))
                    break
                one = figure(what, label(mode), known, limit, Sense.LOWER, Shown(), sure=meant)
                _tell(found, mode, one, limit, meant, into)
