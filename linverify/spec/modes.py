"""Lines of `modes` in the plant's units."""

from __future__ import annotations

import math
from dataclasses import replace

from linverify.core import units
from linverify.core.errors import Place
from linverify.core.loop import Limit
from linverify.core.mode import Chosen, ModeAsk
from linverify.core.rules import RULES
from linverify.core.shown import Shown

from .atoms import Bounds, Entry, Expect, Location, Quantity, Word
from .ground import Ground
from .mode_layout import GainWords, ModeLine
from .written import shown_size

_TIMES = ("time_constant", "time_to_half", "time_to_double", "period")
_SIGNAL = "an output or state"
_DAMPING = "that of a mode lies between -1 and 1"


def bind_modes(ground: Ground, lines: tuple[ModeLine, ...]) -> tuple[ModeAsk, ...]:
    """All lines; mistakes go to `ground`."""
    return tuple(_mode(ground, line) for line in lines)


def _mode(ground: Ground, line: ModeLine) -> ModeAsk:
    limits = [_limit(ground, entry, f"modes: {entry.name}") for entry in line.limits]
    double = None if line.time_to_double is None else line.time_to_double.low
    return ModeAsk(
        place=line.place,
        name=line.name,
        chosen=_chosen(ground, line),
        limits=(*(limit for limit in limits if limit is not None), *_ruled(ground, line.rule)),
        stable=line.stable,
        at_zero=_names(ground, line.at_zero, ground.states, "a state"),
        time_to_double=math.inf if double is None else ground.time(double, "modes: except: time_to_double"),
        may_be_empty=line.may_be_empty,
        controllable=_measures(ground, line.controllable, ground.inputs, "an input"),
        observable=_measures(ground, line.observable, _compared(ground), _SIGNAL),
        minimum_phase=line.minimum_phase,
        inputs=_names(ground, line.inputs, ground.inputs, "an input"),
        outputs=_names(ground, line.outputs, _compared(ground), _SIGNAL),
        zeros=tuple(
            limit for entry in line.zeros if (limit := _limit(ground, entry, f"modes: zeros: {entry.name}")) is not None
        ),
        static_gain=tuple(gain for words in line.static_gain if (gain := _gain(ground, words)) is not None),
    )


def _compared(ground: Ground) -> tuple[str, ...]:
    return tuple(dict.fromkeys((*ground.outputs, *ground.states)))


def _names(ground: Ground, words: tuple[Word, ...], among: tuple[str, ...], what: str) -> tuple[str, ...]:
    return tuple(word.text for word in words if ground.known(word.text, word.place, among, what))


def _chosen(ground: Ground, line: ModeLine) -> Chosen:
    window = None if line.between is None else frequency_range(ground, *line.between, "modes: between")
    low, high = window or (0.0, math.inf)
    shares = [
        (entry.name, entry.value)
        for entry in line.participates
        if ground.known(entry.name, entry.place, ground.states, "a state")
    ]
    near = None if line.near is None else _location(ground, line.near)
    return Chosen(low, high, tuple(shares), near, line.within or 0.0)


def frequency_range(ground: Ground, low: Quantity, high: Quantity, word: str) -> tuple[float, float] | None:
    """Two angular frequencies per time unit of the plant, in one unit and in order; None where they are not."""
    hertz = [units.convertible(each.unit, "Hz") for each in (low, high)]
    if hertz[0] != hertz[1]:
        wrong = f"`{word}`: one end counts cycles, the other one radians: {low.text} to {high.text}"
        ground.report(high.place, wrong, "both in Hz or both in rad/s are expected")
        return None
    below, above = (ground.frequency(each, word) for each in (low, high))
    if math.isnan(below) or math.isnan(above):
        return None
    if below < 0.0 or below >= above:
        wrong = f"`{word}`: {low.text} to {high.text} is no range of frequencies"
        ground.report((low if below < 0.0 else high).place, wrong, "0 <= low < high is expected")
        return None
    return below, above


def _location(ground: Ground, near: Location) -> complex | None:
    """In rad per time unit of the plant, on the upper half of the plane: complex poles come in pairs."""
    time_unit = ground.plant.time_unit
    one = Quantity(1.0, near.unit, near.text, near.place)
    unit = f"1/{time_unit}" if units.convertible(near.unit, f"1/{time_unit}") else f"rad/{time_unit}"
    factor = ground.amount(one, unit, "modes: near")
    if math.isnan(factor):
        return None
    return complex(near.value.real * factor, abs(near.value.imag) * factor)


def _limit(ground: Ground, entry: Entry[Bounds], word: str) -> Limit | None:
    """The limit behind one word, None where a side of it is a mistake."""
    bounds = entry.value
    if entry.name == "natural_frequency" and bounds.low is not None and bounds.high is not None:
        window = frequency_range(ground, bounds.low, bounds.high, word)
        return None if window is None else _limit_of(ground, entry, *window)
    low = -math.inf if bounds.low is None else _figure(ground, entry.name, bounds.low, word)
    high = math.inf if bounds.high is None else _figure(ground, entry.name, bounds.high, word)
    if math.isnan(low) or math.isnan(high):
        return None
    if entry.name == "damping" and (low > 1.0 or high < -1.0):
        side = bounds.low if low > 1.0 else bounds.high
        told = side.text if side else bounds.text
        ground.report(side.place if side else bounds.place, f"`{word}`: no mode has a damping ratio {told}", _DAMPING)
        return None
    if low >= high and bounds.low is not None and bounds.high is not None:
        wrong = f"`{word}`: {bounds.low.text} to {bounds.high.text} is an empty range"
        ground.report(bounds.high.place, wrong, "low below high is expected")
        return None
    return _limit_of(ground, entry, low, high)


def _limit_of(ground: Ground, entry: Entry[Bounds], low: float, high: float) -> Limit:
    bounds = entry.value
    written = next(each for each in (bounds.low, bounds.high) if each is not None)
    shown = _shown(ground, entry.name, written)
    return Limit(entry.name, low, high, bounds.place, bounds.text, shown)


def _figure(ground: Ground, name: str, quantity: Quantity, word: str) -> float:
    """One side of a limit in the plant's units, NaN where it is a mistake."""
    if name == "damping":
        return ground.amount(quantity, "1", word)
    if name == "natural_frequency":
        return ground.frequency(quantity, word)
    if name in _TIMES:
        return ground.time(quantity, word)
    return ground.amount(quantity, _per_time(ground, quantity), word)


def _per_time(ground: Ground, quantity: Quantity) -> str:
    """The unit of a real part: an engineer writes it in 1/s or in rad/s."""
    time_unit = ground.plant.time_unit
    return f"rad/{time_unit}" if units.convertible(quantity.unit, f"rad/{time_unit}") else f"1/{time_unit}"


def _shown(ground: Ground, name: str, quantity: Quantity) -> Shown:
    """The unit that a figure is told in: that of its limit."""
    time_unit = ground.plant.time_unit
    if name == "damping":
        return shown_size(quantity, "1")
    if name in _TIMES:
        return shown_size(quantity, time_unit)
    if name == "natural_frequency":
        return frequency_shown(ground, quantity)
    return shown_size(quantity, _per_time(ground, quantity))


def frequency_shown(ground: Ground, quantity: Quantity) -> Shown:
    """The unit of a frequency as written: Hz counts turns."""
    time_unit = ground.plant.time_unit
    if not units.convertible(quantity.unit, "Hz"):
        return shown_size(quantity, f"rad/{time_unit}")
    per_cycle = shown_size(quantity, f"cycle/{time_unit}")
    return replace(per_cycle, scale=per_cycle.scale / (2.0 * math.pi))


def _ruled(ground: Ground, rule: Word | None) -> tuple[Limit, ...]:
    if rule is None or not units.convertible(ground.plant.time_unit, "s"):
        return ()
    return RULES[rule.text].bound(rule.place, units.convert(1.0, ground.plant.time_unit, "s"))


def _measures(
    ground: Ground, entries: tuple[Entry[float], ...], among: tuple[str, ...], what: str
) -> tuple[tuple[str, Limit], ...]:
    return tuple(
        (entry.name, Limit("measure", low=entry.value, place=entry.place, text=units.shown(entry.value)))
        for entry in entries
        if ground.known(entry.name, entry.place, among, what)
    )


def _gain(ground: Ground, words: GainWords) -> tuple[str, str, Limit] | None:
    """The gain from an input to an output, in the output's unit over the input's."""
    source = ground.known(words.source.text, words.source.place, ground.inputs, "an input")
    target = ground.known(words.target.text, words.target.place, _compared(ground), _SIGNAL)
    if not (source and target):
        return None
    unit = gain_unit(ground, words.source.text, words.target.text)
    word = f"modes: static_gain: {words.source.text} to {words.target.text}"
    if unit is None:
        return None
    if words.value is not None:
        low, high = _tolerated(ground, words.value, unit, word)
        written, text, place = words.value.value, words.value.text, words.value.place
    else:
        sides = [each for each in (words.low, words.high) if each is not None]
        if not sides:
            return None  # told
        low = -math.inf if words.low is None else ground.amount(words.low, unit, word, difference=True)
        high = math.inf if words.high is None else ground.amount(words.high, unit, word, difference=True)
        written, text, place = sides[0], " to ".join(each.text for each in sides), sides[0].place
    if math.isnan(low) or math.isnan(high):
        return None
    if low >= high:
        ground.report(place, f"`{word}`: {text} is an empty range", "low below high is expected")
        return None
    limit = Limit("static_gain", low, high, place, text, shown_size(written, unit))
    return words.source.text, words.target.text, limit


def gain_unit(ground: Ground, source: str, target: str) -> str | None:
    """The unit of a gain, cleared; None, and told, where the plant's units are none."""
    try:
        return units.composed([ground.plant.unit(target)], [ground.plant.unit(source)])
    except units.UnitError as error:
        ground.report(ground.named, f"the plant: {error.wrong}", error.expected, error.hint)
        return None


def _tolerated(ground: Ground, ask: Expect, unit: str, word: str) -> tuple[float, float]:
    value = ground.amount(ask.value, unit, word, difference=True)
    if ask.tolerance.per_cent:
        tolerance = abs(value) * ask.tolerance.value / 100.0
    else:
        tolerance = ground.amount(ask.tolerance, unit, word, difference=True)
    return value - tolerance, value + tolerance


def place_of_modes(lines: tuple[ModeLine, ...], word: Place | None) -> Place | None:
    """Where the check of modes stands: at the word, else at its first line."""
    return word or (lines[0].place if lines else None)
