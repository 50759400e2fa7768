"""The limits of a loop's `require` against what was measured: one figure for each, in the unit that the spec wrote."""

from __future__ import annotations

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace

from ..core.case import Case
from ..core.loop import Limit, Loop
from ..core.shown import Shown, number
from ..core.verdict import Figure, Sense, Status
from ..numerics.loop_margins import LoopMargins
from ..numerics.margins import Found
from ..numerics.structured import Bounded
from .margin_poles import dampings
from .margin_spread import ENDLESS, matched, widened

PER_NEPER = 20.0 / math.log(10.0)


@dataclass(frozen=True, slots=True)
class Ask:
    """One figure that a limit asks for.

    sense: which side of `bound` is good; value: what was measured, in the plant's units; ratio: told in dB where the
    limit is written so; low: the lower end of a range.
    """

    what: str
    channel: str
    value: Found
    bound: float
    sense: Sense
    unit: str = ""
    ratio: bool = False
    low: float = math.nan


def figures(
    case: Case, loop: Loop, found: LoopMargins, others: Sequence[LoopMargins] = ()
) -> tuple[list[Figure], list[str]]:
    """A figure for every limit, channel by channel where that is how it is meant; words that no figure answers.

    others: the same loop on models that are wrong by as much as this one may be.
    """
    made: list[Figure] = []
    silent = []
    for limit in loop.require:
        varied = [{(ask.what, ask.channel): ask.value for ask in asked(case, limit, other)} for other in others]
        asks = [
            replace(ask, value=widened(ask.value, matched((ask.what, ask.channel), varied)))
            for ask in asked(case, limit, found)
        ]
        # a loop without a crossover is told apart, but only one with channels that could have crossed
        if not asks and not (limit.word == "crossover" and found.channels):
            silent.append(limit.word)
        made += [_figure(case, limit, ask) for ask in asks]
    return made, silent


def asked(case: Case, limit: Limit, found: LoopMargins) -> Iterator[Ask]:
    """What one word asks for."""
    several = len(found.channels) > 1
    for channel in (each for each in found.channels if each.moves):
        one, name = channel.margins, channel.name if several else ""
        if limit.word == "gain_margin":
            yield Ask("gain margin (upwards)", name, one.gain_up, limit.low, Sense.LOWER, ratio=True)
            yield Ask("gain margin (downwards)", name, _inverse(one.gain_down), limit.low, Sense.LOWER, ratio=True)
        elif limit.word == "phase_margin":
            yield Ask("phase margin", name, one.phase, limit.low, Sense.LOWER, "rad")
        elif limit.word == "delay_margin":
            yield Ask("delay margin", name, one.delay, limit.low, Sense.LOWER, case.plant.time_unit)
        elif limit.word == "crossover":
            yield from _crossovers(case, name, limit, [Found(e.frequency, math.nan, e.shift) for e in one.crossovers])
    if limit.word in ("disk_margin", "sensitivity_peak", "complementary_peak"):
        yield _joint(limit, found)
    elif limit.word in ("overshoot", "settling"):
        yield from _steps(case, limit, found)
    elif limit.word == "damping":
        yield from _dampings(limit, found)


def _joint(limit: Limit, found: LoopMargins) -> Ask:
    """What is meant for all channels at once."""
    if found.joint is None:
        one = found.channels[0].margins
        disk, sensitivity, complementary = one.disk, one.sensitivity, one.complementary
    else:
        bounds = found.joint.here
        disk = between(bounds, limit.low)
        sensitivity, complementary = found.joint.sensitivity, found.joint.complementary
    if limit.word == "disk_margin":
        return Ask("disk margin", "", disk, limit.low, Sense.LOWER)
    peak = sensitivity if limit.word == "sensitivity_peak" else complementary
    return Ask(limit.word.replace("_", " "), "", peak, limit.high, Sense.UPPER, ratio=True)


def between(bounds: Bounded, asked: float) -> Found:
    """A disk margin between bounds, as a figure; one that is only known from below is as good as that, or unknown."""
    if math.isfinite(bounds.high):
        half = 0.5 * (bounds.high - bounds.low)
        return Found(bounds.low + half, bounds.frequency, half)
    if math.isinf(bounds.low):
        return Found(math.inf)  # nothing that is moved comes back
    return Found(bounds.low, bounds.frequency) if bounds.low > asked else Found(math.nan)


def _crossovers(case: Case, name: str, limit: Limit, crossings: list[Found]) -> Iterator[Ask]:
    """Every crossover must lie in the range; the one that is furthest from its middle is told."""
    unit = f"rad/{case.plant.time_unit}"
    if not crossings:
        return
    if not math.isfinite(limit.high):
        yield Ask("lowest crossover", name, min(crossings, key=lambda e: e.value), limit.low, Sense.LOWER, unit)
    elif not limit.low > 0.0:
        yield Ask("highest crossover", name, max(crossings, key=lambda e: e.value), limit.high, Sense.UPPER, unit)
    else:
        middle = 0.5 * (limit.low + limit.high)
        worst = max(crossings, key=lambda each: abs(each.value - middle))
        yield Ask("crossover", name, worst, limit.high, Sense.RANGE, unit, low=limit.low)


def _inverse(factor: Found) -> Found:
    if factor.value + factor.error < 1.0 / ENDLESS:
        return Found(math.inf)
    return Found(1.0 / factor.value, factor.frequency, factor.error / factor.value**2)


def _steps(case: Case, limit: Limit, found: LoopMargins) -> Iterator[Ask]:
    several = len(found.steps) > 1
    for step in (each for each in found.steps if each.final != 0.0):
        channel = step.channel if several else ""
        if limit.word == "overshoot":
            yield Ask("overshoot", channel, step.overshoot, limit.high, Sense.UPPER)
        else:
            what = f"settling to {number(100.0 * step.within)} %"
            yield Ask(what, channel, step.settling, limit.high, Sense.UPPER, case.plant.time_unit)


def _dampings(limit: Limit, found: LoopMargins) -> Iterator[Ask]:
    if found.poles is None and not found.delayed:
        return
    met = dampings(found) or [Found(1.0)]  # no pole oscillates: as good as critically damped
    if math.isfinite(limit.low):
        yield Ask("closed-loop damping ratio", "", min(met, key=lambda e: e.value), limit.low, Sense.LOWER)
    if math.isfinite(limit.high):
        yield Ask("largest damping ratio", "", max(met, key=lambda e: e.value), limit.high, Sense.UPPER)


def _figure(case: Case, limit: Limit, ask: Ask) -> Figure:
    shown = limit.shown or Shown(ask.unit)
    worst, bound, error = _in_unit(shown, ask)
    return Figure(
        ask.what, ask.channel, worst, bound, shown.unit, ask.sense, error, origin=_origin(limit),
        status=status_of(ask.value, ask.bound, ask.sense, limit.strict, ask.low), at_frequency=ask.value.frequency,
        frequency_unit="" if math.isnan(ask.value.frequency) else f"rad/{case.plant.time_unit}",
        low=shown.size(ask.low),
    )  # fmt: skip


def _in_unit(shown: Shown, ask: Ask) -> tuple[float, float, float]:
    value, error = ask.value.value, ask.value.error
    if not ask.ratio:
        return shown.size(value), shown.size(ask.bound), shown.size(error)
    if shown.unit == "dB":
        error = PER_NEPER * error / value if value > 0.0 and math.isfinite(value) else 0.0
        return shown.ratio(value), shown.ratio(ask.bound), error
    return shown.ratio(value), shown.ratio(ask.bound), shown.size(error)


def _origin(limit: Limit) -> str:
    return ", ".join(part for part in (str(limit.place), limit.rule and f"rule {limit.rule}") if part)


def status_of(found: Found, bound: float, sense: Sense, strict: bool = False, low: float = math.nan) -> Status:
    """Inside beyond the error, outside beyond the error, or neither."""
    if math.isnan(found.value) or math.isnan(found.error):
        return Status.UNDECIDED
    if math.isinf(found.value):
        inside = math.inf if (found.value > 0) == (sense is Sense.LOWER) else -math.inf
    elif sense is Sense.RANGE:
        inside = min(found.value - low, bound - found.value)
    else:
        inside = found.value - bound if sense is Sense.LOWER else bound - found.value
    if inside < -found.error or (strict and inside <= 0.0 == found.error):
        return Status.FAIL
    if inside - found.error > 0.0 or (not strict and inside - found.error >= 0.0):
        return Status.PASS
    return Status.UNDECIDED
