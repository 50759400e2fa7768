"""What a spec is bound against: one plant, its names and units, and the list that mistakes go to.

Values that are refused come back as NaN. Comparisons with NaN are written so that one mistake is told once, and no NaN
ever reaches a `Case`, since any mistake stops the binding.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType

from linverify.core import units
from linverify.core.case import Interval
from linverify.core.errors import Place, Problem
from linverify.core.plant import Plant
from linverify.core.signals import nearest

from .layout import Entry, Quantity

MOST_UNITS = 6  # of a plant that are told as none
WHOLE = 1e-9  # relative; a ratio of two times nearer than this to a whole number is that number


@dataclass(slots=True)
class Ground:
    """A plant and the mistakes found so far. Mutable: `problems` grows, nothing else changes.

    complete: False where parts of the spec could not be read; what is not there may then be among them. named: where
    the spec names the plant, the place of mistakes of the plant itself. more_states, more_inputs, more_outputs: what
    closed loops add to those of the plant, with units.
    """

    plant: Plant
    complete: bool = True
    named: Place = field(default_factory=lambda: Place("<python>"))
    problems: list[Problem] = field(default_factory=list)
    more_states: Mapping[str, str] = field(default_factory=lambda: MappingProxyType({}))
    more_inputs: Mapping[str, str] = field(default_factory=lambda: MappingProxyType({}))
    more_outputs: Mapping[str, str] = field(default_factory=lambda: MappingProxyType({}))

    @property
    def states(self) -> tuple[str, ...]:
        """Names of the states."""
        return (*self.plant.states, *self.more_states)

    @property
    def inputs(self) -> tuple[str, ...]:
        """Names of the inputs."""
        return (*self.plant.inputs, *self.more_inputs)

    @property
    def outputs(self) -> tuple[str, ...]:
        """Names of the outputs, those that are states among them."""
        return tuple(dict.fromkeys((*(self.plant.outputs or {}), *self.more_outputs)))

    @property
    def signals(self) -> tuple[str, ...]:
        """Names of states, inputs and outputs, each once."""
        return tuple(dict.fromkeys((*self.states, *self.inputs, *self.outputs)))

    def unit(self, name: str) -> str:
        """Unit of a state, input, output or parameter; raises KeyError."""
        for more in (self.more_states, self.more_inputs, self.more_outputs):
            if name in more:
                return more[name]
        return self.plant.unit(name)

    def report(self, place: Place, wrong: str, expected: str = "", hint: str = "") -> None:
        """Note one mistake."""
        self.problems.append(Problem(place, wrong, expected, hint))

    def known(self, name: str, place: Place, among: Sequence[str], what: str) -> bool:
        """True where `name` is one of `among` (states, inputs, ...); else the mistake is noted, `what` being due."""
        if name in among:
            return True
        kinds = (("state", self.states), ("input", self.inputs), ("output", self.outputs))
        kind = next((kind for kind, names in kinds if name in names), "")
        if not kind and name in self.plant.parameters:
            kind = "parameter"
        wrong = f"{name!r} is {_article(kind)} of the plant" if kind else f"the plant has no {name!r}"
        self.report(place, wrong, f"{what} is expected: {listed(among)}", "" if kind else nearest(name, among))
        return False

    def amount(self, quantity: Quantity, unit: str, word: str, *, difference: bool = False) -> float:
        """The quantity in `unit`, or NaN where that is a mistake; word: what takes it, as the spec calls it."""
        if math.isnan(quantity.value):  # refused when it was read
            return math.nan
        try:
            value = units.convert(quantity.value, quantity.unit, unit, difference=difference, text=quantity.text)
        except units.UnitError as error:
            if not self._blames_plant(unit):
                self.report(quantity.place, *self._told(error, quantity, unit, word))
            return math.nan
        if not math.isfinite(value):
            self.report(quantity.place, f"{quantity.text!r} is too large for a number in {unit}")
            return math.nan
        return value

    def _blames_plant(self, unit: str) -> bool:
        """True, and told once for all that need it, where the plant's `unit` is none that anything converts into."""
        try:
            units.check(unit)
        except units.UnitError:
            if told := _told_units(self.plant):  # else it is the time unit, which is judged anyway
                self.report(self.named, *told)
            return True
        return False

    def _told(self, error: units.UnitError, quantity: Quantity, unit: str, word: str) -> tuple[str, str, str]:
        if error.hint or error.wrong.endswith("is no unit"):
            return f"{error.wrong} (in {quantity.text!r})", f"`{word}` is in {unit or '1'}", error.hint
        expected = error.expected.removesuffix(" is expected")
        return error.wrong, f"`{word}` takes {expected}, in the plant's unit {unit or '1'}", ""

    def signal(self, quantity: Quantity, name: str, word: str) -> float:
        """A point of the scale of signal or parameter `name`, which is known to exist."""
        return self.amount(quantity, self.unit(name), word)

    def deviation(self, quantity: Quantity, name: str, word: str) -> float:
        """A deviation of signal `name`, which is known to exist."""
        return self.amount(quantity, self.unit(name), word, difference=True)

    def rate(self, quantity: Quantity, name: str, word: str) -> float:
        """A rate of signal `name` per time unit of the plant."""
        unit = units.per_time(self.unit(name), self.plant.time_unit)
        return self.amount(quantity, unit, word, difference=True)

    def time(self, quantity: Quantity, word: str) -> float:
        """A time in the plant's time unit."""
        return self.amount(quantity, self.plant.time_unit, word, difference=True)

    def told_time(self, time: float) -> str:
        """A time in the plant's time unit, as messages show it."""
        return units.told(time, self.plant.time_unit)

    def frequency(self, quantity: Quantity, word: str) -> float:
        """An angular frequency per time unit of the plant; Hz counts turns of 2 pi."""
        time_unit = self.plant.time_unit
        if units.convertible(quantity.unit, "Hz"):
            return 2.0 * math.pi * self.amount(quantity, f"cycle/{time_unit}", word)
        return self.amount(quantity, f"rad/{time_unit}", word)

    def domain(self, name: str) -> Interval:
        """Where the plant's functions are defined at all."""
        low, high = self.plant.domain.get(name, (None, None))
        return Interval(-math.inf if low is None else low, math.inf if high is None else high)

    def inside(self, value: float, entry: Entry[Quantity], word: str, envelope: Mapping[str, Interval]) -> None:
        """Note a value of a signal that lies outside the envelope or the plant's domain."""
        allowed = (
            (envelope.get(entry.name, Interval()), "the envelope"),
            (self.domain(entry.name), "the plant's domain"),
        )
        for interval, what in allowed:
            if value < interval.low or value > interval.high:
                told = self.told_interval(interval, entry.name)
                self.report(entry.value.place, f"{entry.value.text!r} is outside {what}", f"`{word}` takes {told}")
                return

    def told_interval(self, interval: Interval, name: str) -> str:
        """`9.26 to 21.6067 m/s`, `at least 0.1 m/s`."""
        unit = self.plant.unit(name)
        low, high = units.told(interval.low, unit), units.told(interval.high, unit)
        if interval.bounded:
            return f"{units.shown(interval.low)} to {high}"
        return f"at most {high}" if math.isinf(interval.low) else f"at least {low}"


def whole_ratio(length: float, part: float) -> int | None:
    """How many times `part` fits into `length`; None where that is no whole number of times, or not once."""
    ratio = length / part if part > 0.0 else math.inf
    count = round(ratio) if math.isfinite(ratio) else 0
    return count if count >= 1 and abs(ratio - count) <= WHOLE * count else None


def _told_units(plant: Plant) -> tuple[str, ...]:
    """What is wrong with the units of the plant: all that are none, and the nearest to the first of them."""
    outputs = plant.outputs or {}
    names = dict.fromkeys((*plant.states, *plant.inputs, *outputs, *plant.parameters))
    wrong: list[str] = []
    hint = ""
    for name in names:
        try:
            units.check(plant.unit(name))
        except units.UnitError as error:
            wrong.append(f"{plant.unit(name)!r} of {name}")
            hint = hint or error.hint
    if not wrong:
        return ()
    expected = "correct the plant, or write plain numbers for what is in these units"
    return f"the plant has units that are none: {', '.join(wrong[:MOST_UNITS])}", expected, hint


def _article(kind: str) -> str:
    return f"an {kind}" if kind[0] in "aeiou" else f"a {kind}"


def listed(names: Iterable[str], most: int = 12) -> str:
    """Names for a message; a long list is cut."""
    words = list(names)
    if not words:
        return "the plant has none"
    return ", ".join(words[:most]) + (f" and {len(words) - most} more" if len(words) > most else "")
