"""The units that a spec is written in, so that findings come back in them instead of in the plant's.

The first quantity that gives a value of a signal decides; one without a unit is in the plant's own, and stays in it.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from linverify.core import units
from linverify.core.shown import Shown

from .ground import Ground
from .layout import AmplitudeAsk, Cell, DriveAsk, Entry, Limits, Point, Quantity

EXACT_DIGITS = 4  # of a time in words: instants that need more are told in a finer unit


def shown_value(quantity: Quantity, unit: str) -> Shown:
    """How values in the plant's `unit` are told that are written like `quantity`; as they are where that is a mistake.

    Temperatures are points of their scale.
    """
    written = quantity.unit
    try:
        if written in ("", unit) or not units.convertible(written, unit):
            return Shown(unit)
        scale = units.convert(1.0, unit, written, difference=True)
        return Shown(written, scale, units.convert(0.0, unit, written))
    except units.UnitError:  # a difference of temperatures where a temperature is due, which is told elsewhere
        return Shown(unit)


def shown_size(quantity: Quantity, unit: str) -> Shown:
    """As `shown_value`, for errors, deviations and tolerances: temperatures are differences."""
    written = quantity.unit
    if written in ("", unit) or not units.convertible(written, unit):
        return Shown(unit)
    return Shown(written, units.convert(1.0, unit, written, difference=True))


def limits_shown(ground: Ground, envelope: tuple[Entry[Limits], ...]) -> Mapping[str, Shown]:
    """The units of the envelope, by signal."""
    found: dict[str, Shown] = {}
    for line in envelope:
        quantity = line.value.high or line.value.low
        if quantity is not None:
            _add(ground, found, line.name, quantity)
    return MappingProxyType(found)


def signals_shown(ground: Ground, point: Point, cell: Cell, limits: Mapping[str, Shown]) -> Mapping[str, Shown]:
    """The units of the values of signals at `cell`: as held, else of the envelope, else as expected or started from."""
    found: dict[str, Shown] = {}
    for entry in (*cell.swept, *point.hold):
        _add(ground, found, entry.name, entry.value)
    found = {**limits, **found}
    for expect in point.expect:
        _add(ground, found, expect.name, expect.value.value)
    for entry in point.start:
        _add(ground, found, entry.name, entry.value)
    return MappingProxyType(found)


def moves_shown(ground: Ground, ask: DriveAsk, limits: Mapping[str, Shown]) -> Mapping[str, Shown]:
    """The units of amplitudes, offsets and the signals of `until`, else those of the envelope."""
    found: dict[str, Shown] = {}
    for entry in ask.amplitude:
        if (size := _size_of(entry.value)) is not None:
            _add_size(ground, found, entry.name, size)
        if entry.value.until is not None:
            _add_size(ground, found, entry.value.until.name, entry.value.until.value)
    for offset in ask.offsets:
        _add_size(ground, found, offset.name, offset.value)
    return MappingProxyType({**limits, **found})


def time_shown(ground: Ground, ask: DriveAsk) -> Shown:
    """The unit of `horizon`, or that of `every` where only it shows every instant exactly."""
    horizon, every = (shown_size(time, ground.plant.time_unit) for time in (ask.horizon, ask.every))
    step = ask.every.value / every.scale  # in the plant's unit
    exact = [one for one in (horizon, every) if _in_few_digits(one.size(step))]
    return (exact or [horizon])[0]


def _in_few_digits(value: float) -> bool:
    return abs(float(f"{value:.{EXACT_DIGITS - 1}g}") - value) <= 1e-9 * abs(value)


def _size_of(ask: AmplitudeAsk) -> Quantity | None:
    return ask.high if ask.high is not None and (ask.high.unit or ask.low is None) else ask.low or ask.high


def _add(ground: Ground, found: dict[str, Shown], name: str, quantity: Quantity) -> None:
    if name in ground.signals:
        found.setdefault(name, shown_value(quantity, ground.plant.unit(name)))


def _add_size(ground: Ground, found: dict[str, Shown], name: str, quantity: Quantity) -> None:
    if name in ground.signals:
        found.setdefault(name, shown_size(quantity, ground.plant.unit(name)))
