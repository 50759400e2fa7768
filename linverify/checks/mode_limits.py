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

MEASURES = {
    "controllability from": "controllability is the cosine of the angle between a mode's left eigenvector and the "
    "input's column of B, states in nominal sizes: 0 is out of reach, 1 is straight into the mode",
    "observability at": "observability is the cosine of the angle between a mode's right eigenvector and the output's "
    "row of C, states in nominal sizes: 0 is out of sight, 1 shows nothing else",
}
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


def status_of(known: Known, limit: Limit) -> Status:
    """pass: surely inside; fail: surely outside; else undecided."""
    low, high = limit.low, limit.high
    keeps, breaks = known.low >= low and known.high <= high, known.high < low or known.low > high
    if limit.strict:  # an end that is not there is met by what is infinite
        keeps = keeps and not (known.low == low > -math.inf or known.high == high < math.inf)
        breaks = breaks or known.high == low or known.low == high < math.inf
    if keeps:
        return Status.PASS
    return Status.FAIL if breaks else Status.UNDECIDED


def figure(what: str, signal: str, known: Known, limit: Limit, shown: Shown, *, sure: bool = True) -> Figure:
    """One figure against a limit. sure: False for a mode that may not be meant: it cannot fail."""
    status = status_of(known, limit)
    if status is Status.FAIL and not sure:
        status = Status.UNDECIDED
    low, high = math.isfinite(limit.low), math.isfinite(limit.high)
    sense = Sense.RANGE if low and high else Sense.LOWER if low else Sense.UPPER
    return Figure(
        what, signal, shown.size(known.value), shown.size(limit.high if high else limit.low), shown.unit, sense,
        error=abs(shown.size(known.error)), origin=f"{limit.rule}, {limit.place}" if limit.rule else str(limit.place),
        status=status, low=shown.size(limit.low) if low and high else math.nan,
    )  # fmt: skip


def judge_limits(
    found: Modes, ask: ModeAsk, sure: Sequence[Mode], maybe: Sequence[Mode], excused: Sequence[Mode], into: Findings
) -> None:
    """All limits of a line on the modes that it chooses. excused: those that its `at_zero` lets lie at the origin."""
    time_unit = into.details["time_unit"]
    for limit in ask.limits:
        shown = limit.shown or own_unit(limit.word, time_unit)
        what = f"{line_name(ask)}{WORDED[limit.word]}"
        if limit.word == "damping" and 1.0 <= limit.high < math.inf:
            _overdamped(found, limit, (sure, maybe), (what, shown), into)
            continue
        for mode, meant in _each(sure, maybe):
            if limit.word == "damping" and mode in excused:
                continue  # the origin has no damping ratio
            one = figure(what, label(mode), TRAITS[limit.word](mode.pole), limit, shown, sure=meant)
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
    value = with_unit(number(one.worst, 4), one.unit) if math.isfinite(one.worst) else "infinite"
    strict = {Sense.LOWER: "more than", Sense.UPPER: "less than"}
    told = strict.get(one.sense, one.sense.value) if limit.strict else one.sense.value
    low = f"{number(one.low, 4)} to " if one.sense is Sense.RANGE else ""
    rule = f" ({limit.rule})" if limit.rule else ""
    return f"{value}, {told} {low}{with_unit(number(one.limit, 4), one.unit)} is asked for{rule}"


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
    """Damping with an upper limit of one or more: two real poles are one factor, whose damping may be above one."""
    (sure, maybe), (what, shown) = modes, told
    real = [mode for mode, _ in _each(sure, maybe) if mode.poles == 1]
    for mode, meant in _each(sure, maybe):
        if mode not in real:
            one = figure(what, label(mode), TRAITS["damping"](mode.pole), limit, shown, sure=meant)
            _tell(found, mode, one, limit, meant, into)
    growing = [mode for mode in real if mode.stable is False]
    for mode in growing:
        one = figure(what, label(mode), TRAITS["damping"](mode.pole), limit, shown, sure=mode in sure)
        _tell(found, mode, one, limit, mode in sure, into)
    real = [mode for mode in real if mode not in growing]  # a growing pole is no half of such a factor
    if not real:
        return
    if len(real) != 2 or any(mode in maybe for mode in real):
        names = ", ".join(label(mode) for mode in real)
        words = "two real poles as one factor have a damping ratio above 1; choose just two of them"
        into.reasons.append((Status.UNDECIDED, f"{what} of {names}: {words}"))
        return
    one = figure(what, " and ".join(map(label, real)), pair_damping(real[0].pole, real[1].pole), limit, shown)
    into.figures.append(one)
    if one.status is not Status.PASS:
        into.reasons.append((one.status, f"{what} of {one.signal} together is {sentence(one, limit)}"))


def judge_measures(found: Modes, ask: ModeAsk, sure: Sequence[Mode], maybe: Sequence[Mode], into: Findings) -> None:
    """Least controllability and observability of the chosen modes."""
    kinds = (("controllability from", ask.controllable), ("observability at", ask.observable))
    into.notes += [MEASURES[kind] for kind, limits in kinds if limits and MEASURES[kind] not in into.notes]
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
                one = figure(what, label(mode), known, limit, Shown(), sure=meant)
                _tell(found, mode, one, limit, meant, into)
