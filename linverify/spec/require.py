"""Limits that a loop must keep, in the plant's units, own words and ready-made rules together.

Ratios (gain margins, peaks) are kept as ratios and told in decibels where they are written so. Where a rule and an own
word, or two rules, limit the same figure, the stricter one holds and the text of the limit tells both.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import replace

from linverify.core import units
from linverify.core.loop import Limit
from linverify.core.rules import RULES, rules_of
from linverify.core.shown import Shown
from linverify.core.signals import nearest

from .atoms import Bounds, Quantity, Word
from .ground import Ground
from .loop_layout import LimitAsk, RequireAsk
from .scalars import quoted
from .written import shown_size

_MOST_DECIBELS = 400.0  # a ratio of 1e20


def bind_require(ground: Ground, ask: RequireAsk | None, sample: float | None, called: str) -> tuple[Limit, ...]:
    """The limits of one loop, one a figure; mistakes go to `ground` and leave their limit out."""
    if ask is None:
        return ()
    limits = [limit for each in ask.limits if (limit := _limit(ground, each, sample, f"{called}: require")) is not None]
    for word in ask.rules:
        limits += _rule(ground, word, f"{called}: require: rule")
    merged: dict[str, Limit] = {}
    for limit in limits:
        before = merged.get(limit.word)
        merged[limit.word] = limit if before is None else stricter(before, limit)
    return tuple(merged.values())


def stricter(first: Limit, second: Limit) -> Limit:
    """Both limits on one figure: the stricter side of each; where they are equal, the one with a source.

    The text tells both. Rule, source and caution are those of the limit that holds, so that no figure is put down to a
    standard that does not have it.
    """
    base, other = (first, second) if _holds(first, second) else (second, first)
    text = f"{told(base)}, and {told(other)}" + (f" ({other.source})" if other.source else "")
    return replace(base, low=max(first.low, second.low), high=min(first.high, second.high), text=text)


def _holds(first: Limit, second: Limit) -> bool:
    """True where `first` is the stricter of two limits, or the one with a rule of two equal ones."""
    if (first.low, first.high) == (second.low, second.high):
        return bool(first.rule) or not second.rule
    return first.low >= second.low and first.high <= second.high


def told(limit: Limit) -> str:
    """A limit with the rule that it comes from: `6 dB by six_db_45_deg`."""
    if not limit.rule or limit.text != limit.rule:
        return limit.text
    shown = limit.shown or Shown()
    sides = [shown.told_ratio(side) for side in (limit.low, limit.high) if math.isfinite(side)]
    return f"{' to '.join(sides)} by {limit.rule}"


def _rule(ground: Ground, word: Word, called: str) -> tuple[Limit, ...]:
    names = rules_of("loops")
    rule = RULES.get(word.text)
    if rule is None or rule.kind != "loops":
        wrong = f"`{called}`: " + (
            f"{quoted(word.text)} is a rule for modes" if rule else f"no rule {quoted(word.text)}"
        )
        hint = "" if rule else nearest(word.text, names)
        ground.report(word.place, wrong, "" if hint else f"one of {', '.join(names)} is expected", hint)
        return ()
    time_unit = ground.plant.time_unit
    seconds = units.convert(1.0, time_unit, "s") if units.convertible(time_unit, "s") else 1.0
    return rule.bound(word.place, seconds)


def _limit(ground: Ground, ask: LimitAsk, sample: float | None, called: str) -> Limit | None:
    """One word of `require`, or None after telling what is wrong with it."""
    word = f"{called}: {ask.word}"
    if ask.word == "crossover":
        return _crossover(ground, ask, sample, word)
    if ask.word == "damping":
        return _damping(ground, ask, word)
    value = ask.value
    if isinstance(value, Quantity):
        return _BOUND[ask.word](ground, ask, value, word)
    if not isinstance(value, float):
        return None
    if ask.word == "disk_margin":
        return _disk(ground, ask, value, word)
    shown = Shown("%", 100.0) if ask.text.rstrip().endswith("%") else None
    return Limit(ask.word, high=value, place=ask.place, text=ask.text, shown=shown)  # overshoot


def _ratio(ground: Ground, quantity: Quantity, word: str) -> float | None:
    """A ratio of amplitudes; None after telling why it is none."""
    if quantity.unit == "dB" and abs(quantity.value) > _MOST_DECIBELS:
        wrong = f"`{word}`: {quoted(quantity.text)} is too large for a ratio"
        ground.report(quantity.place, wrong, f"at most {_MOST_DECIBELS:g} dB are expected")
        return None
    try:
        return units.amplitude_ratio(quantity.value, quantity.unit)
    except units.UnitError as error:
        expected = f"`{word}` takes decibels or a ratio, as in 6 dB"
        ground.report(quantity.place, error.wrong, expected, error.hint)
        return None


def _in_ratio(quantity: Quantity) -> Shown:
    return Shown("dB") if quantity.unit == "dB" else Shown("1")


def _gain_margin(ground: Ground, ask: LimitAsk, quantity: Quantity, word: str) -> Limit | None:
    ratio = _ratio(ground, quantity, word)
    if ratio is None:
        return None
    if ratio <= 1.0:
        wrong = f"`{word}`: {quoted(quantity.text)} asks for nothing"
        ground.report(quantity.place, wrong, "more than 0 dB, a ratio above 1, is expected")
        return None
    return Limit(ask.word, low=ratio, place=ask.place, text=ask.text, shown=_in_ratio(quantity))


def _peak(ground: Ground, ask: LimitAsk, quantity: Quantity, word: str) -> Limit | None:
    ratio = _ratio(ground, quantity, word)
    if ratio is None:
        return None
    lowest = 1.0 if ask.word == "sensitivity_peak" else 0.0
    if ratio < lowest or ratio <= 0.0:
        least = "0 dB, a ratio of 1, or more" if lowest else "a ratio above 0"
        wrong = f"`{word}`: {quoted(quantity.text)} is less than any loop can keep"
        ground.report(quantity.place, wrong, f"{least} is expected")
        return None
    return Limit(ask.word, high=ratio, place=ask.place, text=ask.text, shown=_in_ratio(quantity))


def _phase_margin(ground: Ground, ask: LimitAsk, quantity: Quantity, word: str) -> Limit | None:
    if not quantity.unit:
        wrong = f"`{word}`: {quoted(quantity.text)} has no unit"
        ground.report(quantity.place, wrong, "an angle with its unit is expected, as in 45 deg")
        return None
    angle = ground.amount(quantity, "rad", word)
    if math.isnan(angle):
        return None
    if not 0.0 < angle <= math.pi * (1.0 + 1e-12):
        wrong = f"`{word}`: {quoted(quantity.text)} is no phase margin"
        ground.report(quantity.place, wrong, "more than 0 deg and at most 180 deg is expected")
        return None
    return Limit(ask.word, low=angle, place=ask.place, text=ask.text, shown=shown_size(quantity, "rad"))


def _delay_margin(ground: Ground, ask: LimitAsk, quantity: Quantity, word: str) -> Limit | None:
    time = ground.time(quantity, word)
    if math.isnan(time):
        return None
    shown = shown_size(quantity, ground.plant.time_unit)
    return Limit(ask.word, low=time, place=ask.place, text=ask.text, shown=shown)


def _settling(ground: Ground, ask: LimitAsk, quantity: Quantity, word: str) -> Limit | None:
    limit = _delay_margin(ground, ask, quantity, word)
    return None if limit is None else replace(limit, low=-math.inf, high=limit.low, within=ask.within)


def _disk(ground: Ground, ask: LimitAsk, value: float, word: str) -> Limit | None:
    if value > 2.0:
        wrong = f"`{word}`: {quoted(ask.text)} is more than any loop has that falls off at high frequencies"
        ground.report(ask.place, wrong, "at most 2 is expected; 0.4 covers 3.5 dB and 22.6 deg")
        return None
    return Limit(ask.word, low=value, place=ask.place, text=ask.text)


def _crossover(ground: Ground, ask: LimitAsk, sample: float | None, word: str) -> Limit | None:
    if not isinstance(ask.value, tuple):
        return None
    written = ask.value
    low, high = (ground.frequency(each, word) for each in written)
    if math.isnan(low) or math.isnan(high):
        return None
    if low <= 0.0 or low >= high:
        wrong = f"`{word}`: {written[0].text} to {written[1].text} is no range of frequencies"
        ground.report(written[1].place, wrong, "0 < low < high is expected")
        return None
    if sample is not None and high * sample > math.pi * (1.0 + 1e-9):
        half = units.told(math.pi / sample, f"rad/{ground.plant.time_unit}")
        wrong = f"`{word}`: {written[1].text} is beyond half the sampling frequency"
        ground.report(written[1].place, wrong, f"at most {half} is expected")
        return None
    first = written[0]
    shown = Shown(first.unit, first.value / low) if first.unit else Shown(f"rad/{ground.plant.time_unit}")
    return Limit(ask.word, low, high, ask.place, ask.text, shown)


def _damping(ground: Ground, ask: LimitAsk, word: str) -> Limit | None:
    if not isinstance(ask.value, Bounds):
        return None
    sides = (ask.value.low, ask.value.high)
    ratios = [None if side is None else ground.amount(side, "1", word) for side in sides]
    for side, ratio in zip(sides, ratios, strict=True):
        if side is not None and ratio is not None and not -1.0 <= ratio <= 1.0:
            if not math.isnan(ratio):
                wrong = f"`{word}`: {quoted(side.text)} is no damping ratio"
                ground.report(side.place, wrong, "a number from -1 to 1 is expected")
            return None
    low, high = ratios
    return Limit(
        ask.word,
        -math.inf if low is None else low,
        math.inf if high is None else high,
        ask.place,
        ask.text,
    )


_BOUND: Mapping[str, Callable[[Ground, LimitAsk, Quantity, str], Limit | None]] = {
    "gain_margin": _gain_margin,
    "phase_margin": _phase_margin,
    "delay_margin": _delay_margin,
    "sensitivity_peak": _peak,
    "complementary_peak": _peak,
    "settling": _settling,
}
