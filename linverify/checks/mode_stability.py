"""`stable: true` with its exceptions: poles at the origin by count, slow growth by its time to double."""

from __future__ import annotations

import math
from collections.abc import Sequence

from ..core.loop import Limit
from ..core.mode import ModeAsk
from ..core.shown import Shown, number, with_unit
from ..core.verdict import Figure, Status
from ..numerics.modal import Mode, Modes, excusable
from ..numerics.traits import decay_rate, time_to_double
from .findings import Findings
from .mode_choice import described, label, line_name
from .mode_limits import figure


def judge_stable(
    found: Modes, ask: ModeAsk, sure: Sequence[Mode], maybe: Sequence[Mode], into: Findings
) -> Sequence[Mode]:
    """Every chosen mode must decay but for those that are excused; returns those that `at_zero` excuses."""
    if not ask.stable:
        return ()
    chosen = [mode for mode in found.modes if mode in sure or mode in maybe]
    excused = _at_zero(found, ask, chosen, into)
    rest = [mode for mode in chosen if mode not in excused]
    open_ones = [mode for mode in rest if mode.stable is not True]
    for mode in open_ones:
        _loose(found, ask, mode, mode in sure, into)
    steady = [mode for mode in rest if mode.stable is True]
    if steady:
        slowest = max(steady, key=lambda mode: -decay_rate(mode.pole).low)
        into.figures.append(_real_part(ask, slowest, Status.PASS, into))
    return excused


def _real_part(ask: ModeAsk, mode: Mode, status: Status, into: Findings) -> Figure:
    rate, unit = decay_rate(mode.pole), f"1/{into.details['time_unit']}"
    return Figure(
        f"{line_name(ask)}real part (below zero)", label(mode), -rate.value + 0.0, 0.0, unit,
        error=rate.error, origin=str(ask.place), status=status,
    )  # fmt: skip


def _at_zero(found: Modes, ask: ModeAsk, chosen: Sequence[Mode], into: Findings) -> list[Mode]:
    """The modes that `at_zero` excuses: as many poles as it names states, surely vanishing ones of its states first."""
    left = len(ask.at_zero)
    there = [mode for mode in chosen if excusable(mode, found.speed)]
    there.sort(key=lambda mode: (mode.origin != "yes", -_share(found, ask, mode), abs(mode.value)))
    excused = []
    for mode in there:
        if mode.poles <= left:
            left -= mode.poles
            excused.append(mode)
    for mode in excused:
        _note(found, ask, mode, into)
    return excused


def _share(found: Modes, ask: ModeAsk, mode: Mode) -> float:
    """Share of the named states in a mode, zero where states are anonymous."""
    if found.model.anonymous:
        return 0.0
    return round(sum(found.participation(mode, name).value for name in ask.at_zero if name in found.states), 6)


def _note(found: Modes, ask: ModeAsk, mode: Mode, into: Findings) -> None:
    """How well the pole is known to lie at the origin, and which state it belongs to where that is another one."""
    words = f"at_zero excuses {described(found, mode, into.details['time_unit'])}"
    if mode.origin == "maybe":
        away = with_unit(number(abs(mode.value) + mode.pole.radius, 2), f"1/{into.details['time_unit']}")
        lie = "pole lies" if mode.cluster == 1 else "poles lie"
        words += f": {mode.cluster} {lie} at the origin to within {away}, as far as the entries are known"
    named = [name for name in ask.at_zero if name in found.states]
    if named and not found.model.anonymous and _share(found, ask, mode) < 0.1:
        words += f"; {', '.join(named)} {'has' if len(named) == 1 else 'have'} hardly a part in it"
    if words not in into.notes:
        into.notes.append(words)


def _loose(found: Modes, ask: ModeAsk, mode: Mode, meant: bool, into: Findings) -> None:
    """A mode that is not surely stable, and that `at_zero` does not excuse."""
    double = time_to_double(mode.pole)
    chained = mode.origin != "no" and mode.together > 1  # a chain at the origin grows like a power of time
    unit = into.details["time_unit"]
    if math.isfinite(ask.time_to_double) and not chained:
        limit = Limit("time_to_double", low=ask.time_to_double, place=ask.place)
        what = f"{line_name(ask)}time to double"
        one = figure(what, label(mode), double, limit, Shown(unit), sure=meant)
        into.figures.append(one)
        if one.status is not Status.PASS:
            told = with_unit(number(double.value, 4), unit)
            least = with_unit(number(ask.time_to_double, 4), unit)
            words = f"{described(found, mode, unit)} is unstable: it doubles in {told}, at least {least} is excused"
            into.reasons.append((one.status, words))
        return
    status = Status.FAIL if mode.stable is False and meant else Status.UNDECIDED
    into.figures.append(_real_part(ask, mode, status, into))
    reason = status, f"{line_name(ask)}{described(found, mode, unit)} {_words(mode, double.value, unit)}"
    if reason not in into.reasons:  # poles that repeat are told once
        into.reasons.append(reason)


def _words(mode: Mode, double: float, unit: str) -> str:
    if mode.origin == "yes":
        return "lies at the origin, which is not stable unless `at_zero` excuses it"
    known = "nothing is known of it" if math.isinf(mode.pole.radius) else (
        f"it is known to within {with_unit(number(mode.pole.radius, 2), f'1/{unit}')}"
    )  # fmt: skip
    if mode.origin == "maybe":
        return f"may lie at the origin or on either side of it: {known}"
    if mode.stable is None:
        return f"may be stable or not: {known}"
    return f"is unstable: it doubles in {with_unit(number(double, 4), unit)}"
