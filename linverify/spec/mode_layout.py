"""Lines of `modes` and of `actuators` as they were written."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from linverify.core.errors import Place

from .atoms import Bounds, Entry, Expect, Location, Quantity, Word


@dataclass(frozen=True, slots=True)
class GainWords:
    """One line of `static_gain`: the gain from an input to an output, as `is` or between `min` and `max`."""

    source: Word
    target: Word
    value: Expect | None
    low: Quantity | None
    high: Quantity | None
    place: Place


@dataclass(frozen=True, slots=True)
class ModeLine:
    """One line of `modes`; what is not written is None, empty or False. place: of the line.

    limits, zeros: by word. places: of the words that are written, by their names (`except.at_zero` for inner ones).
    """

    place: Place
    name: str = ""
    between: tuple[Quantity, Quantity] | None = None
    participates: tuple[Entry[float], ...] = ()
    near: Location | None = None
    within: float | None = None
    limits: tuple[Entry[Bounds], ...] = ()
    stable: bool = False
    at_zero: tuple[Word, ...] = ()
    time_to_double: Bounds | None = None
    may_be_empty: bool = False
    controllable: tuple[Entry[float], ...] = ()
    observable: tuple[Entry[float], ...] = ()
    minimum_phase: bool = False
    inputs: tuple[Word, ...] = ()
    outputs: tuple[Word, ...] = ()
    zeros: tuple[Entry[Bounds], ...] = ()
    static_gain: tuple[GainWords, ...] = ()
    rule: Word | None = None
    places: Mapping[str, Place] = field(default_factory=lambda: MappingProxyType({}))


@dataclass(frozen=True, slots=True)
class ActuatorWords:
    """What stands in series with one plant input. place: of the group behind the input's name."""

    lag: Quantity | None
    rate: Quantity | None
    range: tuple[Quantity, Quantity] | None
    place: Place
