"""The envelope in the plant's units, and the typical sizes of deviations that everything is scaled by."""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

from linverify.core import units
from linverify.core.case import Interval, Setting
from linverify.core.plant import Plant

from .ground import Ground
from .layout import Entry, Limits
from .merge import BY_LANGUAGE


def bind_envelope(
    ground: Ground, lines: tuple[Entry[Limits], ...]
) -> tuple[Mapping[str, Interval], Mapping[str, float]]:
    """Ranges and rate limits by signal. Mistakes go to `ground`; a line with one has no entry."""
    ranges: dict[str, Interval] = {}
    rates: dict[str, float] = {}
    for line in lines:
        if not ground.known(line.name, line.place, ground.signals, "a state, input or output"):
            continue
        interval = _range(ground, line)
        if interval is not None and interval != Interval():
            ranges[line.name] = interval
        if line.value.rate is not None:
            rates[line.name] = ground.rate(line.value.rate, line.name, f"envelope: {line.name}: rate")
    return MappingProxyType(ranges), MappingProxyType(rates)


def _range(ground: Ground, line: Entry[Limits]) -> Interval | None:
    limits, word = line.value, f"envelope: {line.name}"
    low = -math.inf if limits.low is None else ground.signal(limits.low, line.name, word)
    high = math.inf if limits.high is None else ground.signal(limits.high, line.name, word)
    interval = Interval(low, high)
    if interval.low >= interval.high and limits.low is not None and limits.high is not None:
        wrong = f"`{word}`: {limits.low.text} to {limits.high.text} is an empty range"
        ground.report(limits.high.place, wrong, "low below high is expected")
        return None
    domain = ground.domain(line.name)
    meeting = interval.meet(domain)
    if meeting.low > meeting.high:
        told = ground.told_interval(domain, line.name)
        ground.report(limits.place, f"`{word}`: the plant is defined nowhere in this range", f"its domain is {told}")
        return None
    return None if math.isnan(interval.low) or math.isnan(interval.high) else interval


def nominal_sizes(plant: Plant, envelope: Mapping[str, Interval]) -> tuple[Mapping[str, float], tuple[Setting, ...]]:
    """Typical size of a deviation of every signal, and the lines that tell where each comes from.

    The plant's own word, else half the width of the envelope, else 1 in the plant's unit.
    """
    sizes: dict[str, float] = {}
    told: list[Setting] = []
    for name in dict.fromkeys((*plant.states, *plant.inputs, *(plant.outputs or {}))):
        interval = envelope.get(name, Interval())
        if name in plant.nominal:
            sizes[name], origin = float(plant.nominal[name]), "plant"
        elif interval.bounded and (half := 0.5 * interval.high - 0.5 * interval.low) > 0.0:
            sizes[name], origin = half, "half the width of the envelope"
        else:
            sizes[name], origin = 1.0, BY_LANGUAGE
        told.append(Setting(f"nominal.{name}", units.told(sizes[name], plant.unit(name)), origin))
    return MappingProxyType(sizes), tuple(told)
