"""Loops of one operating point as values in the plant's units: signals, cascades, controllers, limits.

Two loops may move the same input: what they give is added up, whether or not both are closed at the same time.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType

from linverify.core.case import TrimAsk
from linverify.core.errors import Place
from linverify.core.loop import Controller, Loop, Moved
from linverify.core.realize import StateSpace
from linverify.core.signals import nearest

from .atoms import Word
from .controller_files import Claimed, ControllerFiles
from .controller_objects import ControllerObjects
from .controllers import Wiring, Written, controller_of
from .ground import Ground, listed, whole_ratio
from .layout import Cell
from .loop_layout import FileAsk, LoopAsk, ObjectAsk
from .require import bind_require
from .scalars import quoted
from .schedules import Known, Tables

SET_POINT = ".set_point."


@dataclass(frozen=True, slots=True)
class BoundLoops:
    """The loops of one operating point by name, in the order written, and the files that they were made from."""

    loops: Mapping[str, Loop]
    files: tuple[Path, ...]


@dataclass(slots=True)
class LoopBinder:
    """Binds loops for one cell after another. Mutable: each file is read once."""

    ground: Ground
    root: Path
    _tables: Tables = field(init=False)
    _files: ControllerFiles = field(init=False)
    _objects: ControllerObjects = field(init=False)

    def __post_init__(self) -> None:
        self._tables = Tables(self.ground)
        self._files = ControllerFiles(self.ground, self.root)
        self._objects = ControllerObjects(self.ground, self.root)

    def of(self, asks: Sequence[LoopAsk], cell: Cell, trim: TrimAsk, parameters: Mapping[str, float]) -> BoundLoops:
        """The loops at `cell`; parameters: all of them. Of a skipped cell only what needs no operating point is judged.

        Mistakes go to the ground; a loop with one is left out.
        """
        sources = (self._tables.files, self._files.files, self._objects.files)
        for files in sources:
            files.clear()
        known = Known(cell.name, known_values(trim, parameters))
        names = _Names(self.ground, asks)
        names.check()
        found: dict[str, Loop] = {}
        for ask in asks:
            loop = self._loop(ask, cell, known, names)
            if loop is not None:
                found[ask.name] = loop
        used = dict.fromkeys(file for files in sources for file in files)
        return BoundLoops(MappingProxyType(found), tuple(used))

    def _loop(self, ask: LoopAsk, cell: Cell, known: Known, names: _Names) -> Loop | None:
        called = f"loops: {ask.name}"
        before = len(self.ground.problems)
        sample = self._sample(ask, called)
        delay = self._delay(ask, called)
        require = bind_require(self.ground, ask.require, sample, called)
        measured, moved = names.measured(ask), names.moved(ask)
        controller = None
        if not cell.skipped and measured is not None and moved is not None:
            units_moved = tuple((str(each), self.ground.plant.unit(each.name)) for each in moved)
            controller = self._controller(ask, cell, Wiring(called, measured, units_moved, sample, known))
        if controller is None or measured is None or moved is None or len(self.ground.problems) > before:
            return None
        return Loop(
            name=ask.name,
            controller=controller,
            measures=tuple(name for name, _ in measured),
            moves=moved,
            within=tuple(word.text for word in ask.within),
            delay=delay,
            leaves=tuple(word.text for word in ask.leaves),
            break_at=ask.break_at,
            require=require,
            confirm=ask.confirm is not None,
            place=ask.place,
        )

    def _sample(self, ask: LoopAsk, called: str) -> float | None:
        """The sample time in the plant's time unit; that of a difference equation is a whole number of its steps."""
        step = self.ground.plant.step
        if ask.sample is None:
            return step
        sample = self.ground.time(ask.sample, f"{called}: sample")
        if step is None or math.isnan(sample):
            return sample
        return self._whole(ask.sample.text, ask.sample.place, f"{called}: sample", sample, step)

    def _delay(self, ask: LoopAsk, called: str) -> float:
        if ask.delay is None:
            return 0.0
        delay, step = self.ground.time(ask.delay, f"{called}: delay"), self.ground.plant.step
        if step is None or delay == 0.0 or math.isnan(delay):
            return delay
        return self._whole(ask.delay.text, ask.delay.place, f"{called}: delay", delay, step)

    def _whole(self, text: str, place: Place, word: str, time: float, step: float) -> float:
        count = whole_ratio(time, step)
        if count is None:
            wrong = f"`{word}`: {text!r} is no whole number of the plant's steps of {self.ground.told_time(step)}"
            self.ground.report(place, wrong, "a multiple of the plant's step is expected")
            return math.nan
        return count * step

    def _controller(self, ask: LoopAsk, cell: Cell, wiring: Wiring) -> Controller | None:
        form, step, text = ask.controller, wiring.sample, ask.text
        found: StateSpace | None = None
        if isinstance(form, FileAsk):
            claim = self._files.claim(form.file, cell.name, wiring.called)
            both = None if claim is None else Claimed(self.ground, claim, wiring).bind()
            found, step = both or (None, step)
            text = text if claim is None else f"{text}: {claim.file}"
        elif isinstance(form, ObjectAsk):
            found, step = self._objects.bind(form.ref, wiring) or (None, step)
        elif form is not None:
            written = Written(self.ground, self._tables, wiring)
            found = written.bind(form)
            text = "; ".join((text, *written.told))
        if found is None:
            return None
        return controller_of(self.ground, found, step, text, ask.controller_place, wiring.called)


def known_values(trim: TrimAsk, parameters: Mapping[str, float]) -> Mapping[str, float]:
    """Values that are known before the trim: parameters, what is held, and what stays at its start."""
    start = {name: value for name, value in trim.start.items() if name not in trim.find}
    return MappingProxyType({**parameters, **start, **trim.hold})


@dataclass(frozen=True, slots=True)
class _Names:
    """The loops of a point and the names in them."""

    ground: Ground
    asks: Sequence[LoopAsk]

    def check(self) -> None:
        """Tell what is wrong with `with` and `leaves`."""
        for ask in self.asks:
            called = f"loops: {ask.name}"
            for word in ask.within:
                if word.text == ask.name:
                    wrong = f"`{called}: with`: a loop is not closed inside itself"
                    self.ground.report(word.place, wrong, "another loop is expected")
                else:
                    self._loop(word, f"{called}: with")
            for word in ask.leaves:
                self.ground.known(word.text, word.place, self.ground.states, "a state")
        self._cycles()

    def measured(self, ask: LoopAsk) -> tuple[tuple[str, str], ...] | None:
        """Names and units of what a loop measures; None where one is unknown."""
        names = tuple(dict.fromkeys((*self.ground.outputs, *self.ground.states)))
        known = [self.ground.known(word.text, word.place, names, "an output or state") for word in ask.measures]
        if not known or not all(known):
            return None
        return tuple((word.text, self.ground.plant.unit(word.text)) for word in ask.measures)

    def moved(self, ask: LoopAsk) -> tuple[Moved, ...] | None:
        """What a loop moves; None where a name is unknown."""
        found = [self._moved(ask, word) for word in ask.moves]
        moved = tuple(each for each in found if each is not None)
        return moved if moved and len(moved) == len(found) else None

    def _moved(self, ask: LoopAsk, word: Word) -> Moved | None:
        called = f"loops: {ask.name}: moves"
        name, dot, signal = word.text.partition(SET_POINT)
        if not dot:
            return self._input(ask, word, called)
        other = self._loop(Word(name, word.place), called)
        if other is None:
            return None
        if name == ask.name:
            self.ground.report(word.place, f"`{called}`: a loop does not move its own set point", _CASCADE)
            return None
        if name not in (each.text for each in ask.within):
            wrong = f"`{called}`: {quoted(word.text)} is the set point of a loop that is not closed inside this one"
            self.ground.report(word.place, wrong, f"`with: [{name}]` is expected")
            return None
        measures = [each.text for each in other.measures]
        if signal not in measures:
            wrong = f"`{called}`: {quoted(name)} has no set point of {quoted(signal)}"
            self.ground.report(word.place, wrong, f"it measures {listed(measures)}", nearest(signal, measures))
            return None
        return Moved(signal, name) if signal in self.ground.signals else None

    def _input(self, ask: LoopAsk, word: Word, called: str) -> Moved | None:
        loops = [each.name for each in self.asks]
        if word.text in loops and word.text not in self.ground.signals:
            wrong = f"`{called}`: {quoted(word.text)} is a loop"
            self.ground.report(word.place, wrong, f"its set point is {word.text}{SET_POINT}NAME")
            return None
        if word.text not in self.ground.inputs and (points := self._set_points(ask, word.text)):
            wrong = f"`{called}`: {quoted(word.text)} is no input of the plant"
            self.ground.report(word.place, wrong, f"an input is expected, or the set point {' or '.join(points)}")
            return None
        known = self.ground.known(word.text, word.place, self.ground.inputs, "an input")
        return Moved(word.text) if known else None

    def _set_points(self, ask: LoopAsk, text: str) -> list[str]:
        """Set points of other loops that were probably meant by a signal that they measure, or by `LOOP.set_point`."""
        others = [(each.name, word.text) for each in self.asks if each.name != ask.name for word in each.measures]
        return [
            f"{name}{SET_POINT}{signal}"
            for name, signal in others
            if text in (signal, f"{name}{SET_POINT}".removesuffix("."))
        ]

    def _loop(self, word: Word, called: str) -> LoopAsk | None:
        found = next((ask for ask in self.asks if ask.name == word.text), None)
        if found is None and self.ground.complete:
            names = [ask.name for ask in self.asks]
            wrong = f"`{called}`: no loop is called {quoted(word.text)}"
            self.ground.report(word.place, wrong, f"the loops are {listed(names)}", nearest(word.text, names))
        return found

    def _cycles(self) -> None:
        """Loops that are closed inside each other: each circle is told once, at the word that closes it."""
        inside = {ask.name: ask.within for ask in self.asks}
        done: set[str] = set()
        for ask in self.asks:
            for chain, word in _circles(ask.name, inside, (), done):
                wrong = f"`loops: {chain[-1]}: with`: {' inside '.join((word.text, *reversed(chain)))} goes in a circle"
                self.ground.report(word.place, wrong, "loops that are closed one inside the other are expected")


def _circles(
    name: str, inside: Mapping[str, Iterable[Word]], above: tuple[str, ...], done: set[str]
) -> Iterator[tuple[tuple[str, ...], Word]]:
    """Circles below `name`, each as its names from outside to inside with the word that leads back to the first."""
    if name in done:
        return
    chain = (*above, name)
    for word in inside.get(name, ()):
        if word.text in chain and word.text != name:
            yield chain[chain.index(word.text) :], word
        elif word.text != name:
            yield from _circles(word.text, inside, chain, done)
    done.add(name)


_CASCADE = "an input of the plant, or the set point of another loop, is expected"
