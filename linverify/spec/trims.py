"""What one cell asks of the trim: holds, unknowns, rates, guesses and expectations, counted against each other."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from types import MappingProxyType

from linverify.core import units
from linverify.core.case import Expected, Interval, Setting, TrimAsk
from linverify.core.errors import Place

from .ground import Ground
from .layout import Cell, Entry, Expect, Point
from .written import shown_value

_OFFSET_SCALES = ("degC", "degF", "°C", "°F")


def bind_trim(
    ground: Ground,
    point: Point,
    cell: Cell,
    envelope: Mapping[str, Interval],
    accuracy: float,
    accuracy_told: str = "",
) -> TrimAsk:
    """The trim of `cell`. accuracy: largest scaled residual, as `bind_accuracy` has it; accuracy_told: as written.

    Mistakes go to `ground`. Limits are not checked for a skipped cell, which is known to have no trim.
    """
    hold = _hold(ground, point, cell, envelope)
    start = _start(ground, point, envelope)
    find = _find(ground, point, hold)
    rates, free = _rates(ground, point)
    minimize = _minimize(ground, point, find, start, envelope)
    if ground.complete and _all_known(ground, point, cell):
        _count(ground, point, hold, find, free)
        _settle(ground, point, hold, find, start)
    return TrimAsk(
        hold=MappingProxyType(hold),
        find=find,
        start=MappingProxyType(start),
        rates=MappingProxyType(rates),
        free=free,
        minimize=MappingProxyType(minimize),
        expect=MappingProxyType(_expect(ground, point, cell, envelope)),
        accuracy=accuracy,
        accuracy_told=accuracy_told,
    )


def bind_parameters(ground: Ground, point: Point, cell: Cell) -> Mapping[str, float]:
    """All parameters of `cell`: the plant's defaults, what the spec and the point say, and what is swept."""
    values = ground.plant.defaults
    swept = [entry for entry in cell.swept if entry.name in ground.plant.parameters]
    for entry in (*point.parameters, *swept):
        if ground.known(entry.name, entry.place, tuple(values), "a parameter"):
            values[entry.name] = ground.signal(entry.value, entry.name, f"parameters: {entry.name}")
    return MappingProxyType(values)


def _hold(ground: Ground, point: Point, cell: Cell, envelope: Mapping[str, Interval]) -> dict[str, float]:
    swept = [entry for entry in cell.swept if entry.name not in ground.plant.parameters]
    held: dict[str, float] = {}
    for word, entries in (("hold", point.hold), ("sweep", swept)):
        what, names = "a state, input or output", ground.signals
        if word == "sweep":
            what, names = "a state, input, output or parameter", (*names, *ground.plant.parameters)
        for entry in entries:
            if not ground.known(entry.name, entry.place, names, what):
                continue
            held[entry.name] = ground.signal(entry.value, entry.name, f"{word}: {entry.name}")
            if not cell.skipped:
                ground.inside(held[entry.name], entry, f"{word}: {entry.name}", envelope)
    return held


def _start(ground: Ground, point: Point, envelope: Mapping[str, Interval]) -> dict[str, float]:
    start: dict[str, float] = {}
    for entry in point.start:
        word = f"start: {entry.name}"
        if ground.known(entry.name, entry.place, (*ground.states, *ground.inputs), "a state or input"):
            start[entry.name] = ground.signal(entry.value, entry.name, word)
            ground.inside(start[entry.name], entry, word, envelope)
    return start


def _find(ground: Ground, point: Point, hold: Mapping[str, float]) -> tuple[str, ...]:
    """The unknowns in plant order: those under `find`, or every state and input that is not held."""
    names = (*ground.states, *ground.inputs)
    if point.find is None:
        return tuple(name for name in names if name not in hold)
    found: set[str] = set()
    for word in point.find:
        if ground.known(word.text, word.place, names, "a state or input"):
            found.add(word.text)
    return tuple(name for name in names if name in found)


def _rates(ground: Ground, point: Point) -> tuple[dict[str, float], tuple[str, ...]]:
    """Prescribed rates (of a difference equation: the change a step) and the states whose rate is free."""
    rates: dict[str, float] = {}
    a_step = 1.0 if ground.plant.step is None else ground.plant.step
    for entry in point.rates:
        if ground.known(entry.name, entry.place, ground.states, "a state"):
            rates[entry.name] = a_step * ground.rate(entry.value, entry.name, f"rates: {entry.name}")
    known = {word.text for word in point.free if ground.known(word.text, word.place, ground.states, "a state")}
    return rates, tuple(name for name in ground.states if name in known)


def _minimize(
    ground: Ground,
    point: Point,
    find: Iterable[str],
    start: Mapping[str, float],
    envelope: Mapping[str, Interval],
) -> dict[str, float]:
    """Weights by unknown. Distances are taken from `start`, without one from the middle of the envelope."""
    unknowns = tuple(find)
    weights: dict[str, float] = {}
    for entry in point.minimize:
        if not ground.known(entry.name, entry.place, (*ground.states, *ground.inputs), "an unknown"):
            continue
        if entry.name not in unknowns:
            told = f"`minimize` weighs unknowns: {', '.join(unknowns)}"
            ground.report(entry.place, f"{entry.name!r} is no unknown of {point.name}", told)
        elif entry.name not in start and not _limits(ground, entry.name, envelope).bounded:
            wrong = f"{entry.name!r} has no `start` to take its distance from"
            ground.report(entry.place, wrong, "a `start`, or limits on both sides in the envelope, is expected")
        weights[entry.name] = entry.value
    return weights


def _limits(ground: Ground, name: str, envelope: Mapping[str, Interval]) -> Interval:
    return envelope.get(name, Interval()).meet(ground.domain(name))


def _all_known(ground: Ground, point: Point, cell: Cell) -> bool:
    """Whether the plant has all names that are counted; one that is misspelt has been told, and would be told again."""
    names = [*point.hold, *point.start, *point.rates, *cell.swept]
    words = [*(point.find or ()), *point.free]
    known = (*ground.signals, *ground.plant.parameters)
    return all(name in known for name in (*(entry.name for entry in names), *(word.text for word in words)))


def _count(
    ground: Ground, point: Point, hold: Mapping[str, float], find: tuple[str, ...], free: tuple[str, ...]
) -> None:
    """Compare the number of unknowns with that of equations: rates that are not free, and held outputs."""
    rates = [name for name in ground.states if name not in free]
    held = [name for name in hold if name not in ground.states and name not in ground.inputs]
    more = len(find) - len(rates) - len(held)
    if more == 0 or (more > 0 and point.minimize):
        return
    equations = " and ".join(part for part in (_group("rates of", rates), _group("held outputs", held)) if part)
    wrong = (
        f"{point.name} has {_counted(len(find), 'unknown')} ({', '.join(find) or 'none'}) "
        f"for {_counted(len(rates) + len(held), 'equation')} ({equations or 'none'})"
    )
    ground.report(point.place, wrong, _remedy(more, point.find is not None))


def _remedy(more: int, listed: bool) -> str:
    """What helps where there are `more` unknowns than equations, or fewer; listed: whether `find` names them."""
    if more > 0:
        fewer = f"find {more} fewer" if listed else "name the unknowns under `find`"
        return f"hold {more} more, {fewer}, or weigh them under `minimize`"
    free = f"let {-more} {'rate' if more == -1 else 'rates'} be free"
    return f"hold {-more} fewer, find {-more} more, or {free}" if listed else f"hold {-more} fewer, or {free}"


def told_middles(ground: Ground, ask: TrimAsk, envelope: Mapping[str, Interval]) -> tuple[Setting, ...]:
    """Where the distances of `minimize` are taken from, for unknowns without a `start`."""
    told = []
    for name in ask.minimize:
        limits = _limits(ground, name, envelope)
        if name not in ask.start and limits.bounded:
            middle = units.told(0.5 * (limits.low + limits.high), ground.plant.unit(name))
            told.append(Setting(f"start.{name}", middle, "middle of the envelope"))
    return tuple(told)


def _group(what: str, names: list[str]) -> str:
    return f"{what} {', '.join(names)}" if names else ""


def _counted(count: int, noun: str) -> str:
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def _settle(
    ground: Ground, point: Point, hold: Mapping[str, float], find: tuple[str, ...], start: Mapping[str, float]
) -> None:
    """With `find` given, what is neither held nor found stays at its `start`, and needs one."""
    if point.find is None:
        return
    for name in (*ground.states, *ground.inputs):
        if name not in hold and name not in find and name not in start:
            wrong = f"{name!r} is neither held nor found at {point.name}, and has no `start` to stay at"
            ground.report(point.place, wrong, "a `hold`, a `start` or a place under `find` is expected")


def _expect(ground: Ground, point: Point, cell: Cell, envelope: Mapping[str, Interval]) -> dict[str, Expected]:
    expected: dict[str, Expected] = {}
    for entry in point.expect:
        if not ground.known(entry.name, entry.place, ground.signals, "a state, input or output"):
            continue
        word = f"expect: {entry.name}"
        value = ground.signal(entry.value.value, entry.name, word)
        if not cell.skipped:
            ground.inside(value, Entry(entry.name, entry.place, entry.value.value), word, envelope)
        tolerance = _tolerance(ground, entry, value, word)
        shown = shown_value(entry.value.value, ground.plant.unit(entry.name))
        expected[entry.name] = Expected(value, tolerance, entry.value.place, shown)
    return expected


def _tolerance(ground: Ground, entry: Entry[Expect], value: float, word: str) -> float:
    asked, tolerance = entry.value.value, entry.value.tolerance
    unit = asked.unit or ground.plant.unit(entry.name)
    if tolerance.per_cent and asked.unit == "%":
        wrong = f"{entry.value.text!r} may mean {tolerance.text} of the value, or {tolerance.value:g} points"
        ground.report(entry.value.place, wrong, "plain numbers in the plant's unit are expected")
        return 0.0
    if tolerance.per_cent:
        if unit in _OFFSET_SCALES:
            wrong = f"{tolerance.text!r} of a temperature in {unit} depends on where the scale has its zero"
            ground.report(tolerance.place, wrong, "a difference of temperatures is expected")
            return 0.0
        size = abs(value) * (tolerance.value / 100.0)
        if math.isinf(size):
            ground.report(tolerance.place, f"{entry.value.text!r} is too large for a number")
        return size
    if bool(asked.unit) != bool(tolerance.unit):
        wrong = f"{entry.value.text!r} has a unit on one side only"
        ground.report(entry.value.place, wrong, "units on the value and on the tolerance, or on neither, are expected")
        return 0.0
    return ground.deviation(tolerance, entry.name, word)


def bind_accuracy(ground: Ground, accuracy: float, place: Place) -> float:
    """Accuracy a time unit of the plant, from accuracy a second; of a difference equation: a step."""
    unit = ground.plant.time_unit
    if ground.plant.step is None and units.convertible(unit, "s"):
        accuracy *= units.convert(1.0, unit, "s")
    if not math.isfinite(accuracy):
        ground.report(place, "`trims: accuracy` is too large for a number")
    return accuracy
