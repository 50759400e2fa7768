"""`actuators`: what stands in series with the plant's inputs, as written and in the plant's units."""

from __future__ import annotations

import math
from collections.abc import Mapping
from types import MappingProxyType

from linverify.core.case import Interval
from linverify.core.loop import Actuator

from .atoms import Entry, Quantity
from .ground import Ground
from .kinds import Values
from .mode_layout import ActuatorWords
from .reader import Reader
from .source import Block


def actuator_words(reader: Reader, spec: Block, values: Values) -> tuple[Entry[ActuatorWords], ...]:
    """What the spec says of actuators. values: what was read of the whole spec."""
    node = spec.get("actuators")
    if not isinstance(node, Block) or "actuators" not in values:
        return ()
    found = []
    for entry in values["actuators"]:
        group = node.get(entry.name)
        if not isinstance(group, Block):
            continue  # told
        if group.empty:
            wrong = f"nothing is written after `actuators: {entry.name}`"
            reader.tell(entry.place, wrong, "lag, rate or range is expected")
        read: Values = entry.value
        words = ActuatorWords(read.get("lag"), read.get("rate"), read.get("range"), group.place)
        found.append(Entry(entry.name, entry.place, words))
    return tuple(found)


def bind_actuators(
    ground: Ground, entries: tuple[Entry[ActuatorWords], ...], envelope: Mapping[str, Interval]
) -> Mapping[str, Actuator]:
    """Actuators by input. Mistakes go to `ground`."""
    bound: dict[str, Actuator] = {}
    for entry in entries:
        if not ground.known(entry.name, entry.place, ground.inputs, "an input"):
            continue
        words, called = entry.value, f"actuators: {entry.name}"
        rate = math.inf if words.rate is None else ground.rate(words.rate, entry.name, f"{called}: rate")
        low, high = _range(ground, entry, envelope)
        bound[entry.name] = Actuator(_lag(ground, words.lag, f"{called}: lag"), rate, low, high, entry.place)
    return MappingProxyType(bound)


def _lag(ground: Ground, lag: Quantity | None, called: str) -> float:
    if lag is None:
        return 0.0
    if ground.plant.step is not None:
        wrong = f"`{called}`: the plant is a difference equation, which a continuous lag cannot drive"
        ground.report(lag.place, wrong, "put the lag into the plant, or leave it out")
        return math.nan
    return ground.time(lag, called)


def _range(ground: Ground, entry: Entry[ActuatorWords], envelope: Mapping[str, Interval]) -> tuple[float, float]:
    """Absolute limits of the input; they and the envelope must have room in common."""
    if entry.value.range is None:
        return -math.inf, math.inf
    first, last = entry.value.range
    called = f"actuators: {entry.name}: range"
    low, high = (ground.signal(each, entry.name, called) for each in (first, last))
    if low >= high:
        if first.unit != last.unit:  # else told by the reader, which compares equal units
            wrong = f"`{called}`: {first.text} to {last.text} is an empty range"
            ground.report(last.place, wrong, "low below high is expected")
        return low, high
    allowed = ((envelope.get(entry.name, Interval()), "envelope"), (ground.domain(entry.name), "plant's domain"))
    for interval, what in allowed:
        if interval.low >= high or interval.high <= low:
            told = f"`envelope: {entry.name}` has" if what == "envelope" else "it is"
            wrong = f"`{called}`: {first.text} to {last.text} lies outside the {what}"
            ground.report(first.place, wrong, f"{told} {ground.told_interval(interval, entry.name)}")
            break
    return low, high


def check_trimmed(
    ground: Ground,
    held: Mapping[str, float],
    entries: tuple[Entry[Quantity], ...],
    actuators: Mapping[str, Actuator],
) -> None:
    """Note inputs that are held where their actuator cannot bring them. held: in the plant's units, by name."""
    for entry in entries:
        actuator, value = actuators.get(entry.name), held.get(entry.name, math.nan)
        if actuator is not None and (value < actuator.low or value > actuator.high):
            told = ground.told_interval(Interval(actuator.low, actuator.high), entry.name)
            wrong = f"{entry.value.text!r} is outside the range of the actuator of {entry.name!r}"
            ground.report(entry.value.place, wrong, f"`actuators` gives it {told}")
