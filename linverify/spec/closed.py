"""What closed loops ask of drives and error bands: bands on what they move, instants that fit their sample times."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType

from linverify.core import units
from linverify.core.case import Band, DriveSet
from linverify.core.delivered import Delays, Keep
from linverify.core.loop import Actuator, Loop
from linverify.core.signals import nearest

from .atoms import Word
from .ground import Ground, listed, whole_ratio
from .layout import DriveAsk
from .scalars import quoted


def inside(loops: Mapping[str, Loop], names: Iterable[str]) -> tuple[Loop, ...]:
    """The named loops and all that are closed inside them, each once; names that are not there are passed over."""
    found: dict[str, Loop] = {}
    left = list(names)
    while left:
        name = left.pop(0)
        if name in loops and name not in found:
            found[name] = loops[name]
            left += loops[name].within
    return tuple(found.values())


def moved(loops: Mapping[str, Loop], names: Iterable[str]) -> tuple[str, ...]:
    """The plant inputs that the named loops move, with those inside them."""
    return tuple(dict.fromkeys(each.name for loop in inside(loops, names) for each in loop.moves if not each.loop))


def moved_by_set(loops: Mapping[str, Loop], drives: DriveSet, closed: Sequence[str]) -> tuple[str, ...]:
    """The plant inputs that are moved by loops while `drives` run: by its own loop, and by those inside the model."""
    return moved(loops, (*((drives.loop,) if drives.loop else ()), *closed))


@dataclass(frozen=True, slots=True)
class Around:
    """What loops that are closed inside a local model add to its signals, with units.

    closed: names of the loops; moved: plant inputs that they move; kept: what holds and queues of sampled controllers
    may add to the states besides.
    """

    closed: tuple[str, ...]
    states: Mapping[str, str]
    inputs: Mapping[str, str]
    moved: Mapping[str, str]
    waiting: Mapping[str, str]

    @property
    def optional(self) -> tuple[str, ...]:
        """Names that a delivered model need not have."""
        return (*self.inputs, *self.moved, *self.waiting)

    def kept(self, keep: Keep | None) -> Keep | None:
        """`keep` says what is left of the plant; what loops add is left beside it."""
        if keep is None:
            return None
        states, inputs = (*keep.states, *self.states, *self.waiting), (*keep.inputs, *self.inputs)
        return replace(keep, states=states, inputs=inputs)


_NONE: Mapping[str, str] = MappingProxyType({})
OPEN = Around((), _NONE, _NONE, _NONE, _NONE)


def around_loops(
    ground: Ground,
    loops: Mapping[str, Loop],
    closed: tuple[str, ...],
    actuators: Mapping[str, Actuator],
    delays: Delays,
) -> Around:
    """The names of a local model in which the loops `closed` are closed: `level.1`, `level.set_point.top_level`."""
    names = moved(loops, closed)
    states = {f"{name}.lag": ground.unit(name) for name in names if name in actuators and actuators[name].lag > 0.0}
    inputs: dict[str, str] = {}
    waiting: dict[str, str] = {}
    for loop in inside(loops, closed):
        states |= {f"{loop.name}.{number}": "" for number in range(1, len(loop.controller.A) + 1)}
        inputs |= {f"{loop.name}.set_point.{name}": ground.unit(name) for name in loop.measures}
        if loop.sample is not None:
            waiting |= {f"{loop.name}.held.{number}": "" for number in range(1, len(loop.moves) + 1)}
            waiting |= {f"{loop.name}.delay.{number}": "" for number in range(1, _queued(loop, delays) + 1)}
    of_moved = {name: ground.unit(name) for name in names}
    tables = (MappingProxyType(table) for table in (states, inputs, of_moved, waiting))
    return Around(closed, *tables)


def _queued(loop: Loop, delays: Delays) -> int:
    """How many values a sampled loop keeps at most for its dead times."""
    late = [delays.outputs.get(name, 0.0) for name in loop.measures]
    late += [loop.delay + (0.0 if each.loop else delays.inputs.get(each.name, 0.0)) for each in loop.moves]
    samples = [one / loop.sample for one in late if loop.sample is not None and one > 0.0]
    return sum(math.ceil(one) + 1 for one in samples if math.isfinite(one))


def check_closed(
    ground: Ground, asks: Sequence[DriveAsk], sets: Sequence[DriveSet], loops: Mapping[str, Loop], closed: Sequence[str]
) -> None:
    """Note sets of drives whose loop is closed already, or whose instants do not fit a sampled loop."""
    within = {loop.name for loop in inside(loops, closed)}
    for ask, drives in zip(asks, sets, strict=True):
        if ask.loop is not None and ask.loop.text in within and ask.at == "input":
            wrong = f"the loop {quoted(ask.loop.text)} is closed inside the local model already"
            expected = "leave `loop` out, or leave the loop out of `local_models: with`, or drive `at: set_point`"
            ground.report(ask.loop.place, wrong, expected)
        for loop in inside(loops, (*((drives.loop,) if drives.loop else ()), *closed)):
            if loop.sample is not None and not _fit(drives.every, loop.sample):
                told = units.told(loop.sample, ground.plant.time_unit)
                wrong = f"{ask.every.text!r} does not fit the sample time of the loop {loop.name!r}, {told}"
                ground.report(ask.every.place, wrong, "a multiple of it, or it divided by a whole number, is expected")


def _fit(every: float, sample: float) -> bool:
    """True where one is a whole number of times the other; also where one is no number, which was told."""
    if not (every > 0.0 and sample > 0.0):
        return True
    return whole_ratio(every, sample) is not None or whole_ratio(sample, every) is not None


def check_bands(
    ground: Ground, sets: Sequence[DriveSet], bands: Sequence[Band], loops: Mapping[str, Loop], given: Sequence[str]
) -> None:
    """Note sets of drives with a loop that moves inputs which no error band is for.

    In closed loop an error of the local model shows less in what is measured than in what the loop does about it.
    given: loops that are closed inside a delivered model, which need not tell what they move.
    """
    within = {loop.name for loop in inside(loops, given)}
    for drives in sets:
        names = moved(loops, [drives.loop]) if drives.loop and drives.loop not in within else ()
        banded = {band.signal for band in bands if band.drives in (None, drives.name)}
        missing = [name for name in names if name not in banded]
        if missing and ground.complete:
            called = f"the drives {quoted(drives.name)}" if drives.name else "these drives"
            wrong = f"no error band is for {listed(missing)}, which the loop {quoted(drives.loop)} moves in {called}"
            expected = "closed loops hide errors in what they measure: a band on each input that they move is expected"
            ground.report(drives.place, wrong, expected)


def by_set(
    band: Band, sets: Sequence[DriveSet], moved_in: Mapping[str, Sequence[str]], inputs: Sequence[str]
) -> tuple[Band, ...]:
    """`band`, or one band for each set in which a loop moves its input, where that is not so in all of them.

    moved_in: by set, the inputs that loops move in it.
    """
    if band.drives is not None or band.signal not in inputs:
        return (band,)
    moving = [drives for drives in sets if band.signal in moved_in[drives.name]]
    return (band,) if len(moving) == len(sets) else tuple(replace(band, drives=drives.name) for drives in moving)


def known_loops(ground: Ground, words: Sequence[Word], declared: Sequence[str], called: str) -> tuple[str, ...]:
    """The names behind `words` that are names of loops; the others are noted."""
    found = []
    for word in words:
        if word.text in declared:
            found.append(word.text)
            continue
        expected = f"one of {listed(declared)} is expected" if declared else "this spec declares no `loops`"
        wrong = f"`{called}`: no loop is called {quoted(word.text)}"
        ground.report(word.place, wrong, expected, nearest(word.text, declared))
    return tuple(found)
