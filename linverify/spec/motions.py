"""Sets of drives and error bands in the plant's units."""

from __future__ import annotations

import glob
import math
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType

from linverify.core.case import NO_LOOPS, Amplitude, Band, DriveSet
from linverify.core.loop import Loop
from linverify.core.shown import Shown
from linverify.core.signals import nearest

from .ground import Ground, whole_ratio
from .layout import AmplitudeAsk, BandAsk, DriveAsk, Entry, FileWord
from .written import moves_shown, shown_size, time_shown

NO_UNITS: Mapping[str, Shown] = MappingProxyType({})
NOTHING_MOVED: Mapping[str, tuple[str, ...]] = MappingProxyType({})
MOST_INTERVALS = 100_000  # a drive of more has most likely a wrong unit, and would not fit into memory


def bind_drives(
    ground: Ground,
    ask: DriveAsk,
    rate_limits: Mapping[str, float],
    limits: Mapping[str, Shown] = NO_UNITS,
    loops: Mapping[str, Loop] = NO_LOOPS,
) -> DriveSet:
    """One set of drives.

    rate_limits: by signal, from the envelope, for inputs without a `rate` in this set; limits: the envelope's units;
    loops: those of the point, by name.
    """
    word = f"drives: {ask.name}" if ask.name else "drives"
    every, intervals = _clock(ground, ask, word)
    driven = _Driven.of(ground, ask, loops)
    amplitude = _amplitudes(ground, ask, driven, word)
    delay = None if ask.discerns_delay is None else ground.time(ask.discerns_delay, f"{word}: discerns: delay")
    return DriveSet(
        name=ask.name,
        every=every,
        intervals=intervals,
        amplitude=MappingProxyType(amplitude),
        course=ask.course,
        rate=MappingProxyType(_rates(ground, ask, driven, amplitude, rate_limits, word)),
        offsets=MappingProxyType(_offsets(ground, ask, word)),
        shapes=ask.shapes,
        count=ask.count,
        search=ask.search,
        pinned=_pinned(ground, ask.pinned),
        discerns_gain=ask.discerns_gain,
        discerns_delay=delay,
        place=ask.place,
        shown=moves_shown(ground, ask, limits),
        shown_time=time_shown(ground, ask),
        shown_delay=None if ask.discerns_delay is None else shown_size(ask.discerns_delay, ground.plant.time_unit),
        loop=ask.loop.text if ask.loop else "",
        at=ask.at,
    )


@dataclass(frozen=True, slots=True)
class _Driven:
    """What a set of drives may move, and how messages call it."""

    names: tuple[str, ...]
    what: str
    measured: tuple[str, ...] = ()

    @classmethod
    def of(cls, ground: Ground, ask: DriveAsk, loops: Mapping[str, Loop]) -> _Driven | None:
        """Plant inputs, and at a set point what its loop measures; None where that loop is not known, which is told."""
        if ask.loop is None or ask.at == "input":
            return cls(ground.inputs, "an input")
        loop = loops.get(ask.loop.text)
        what = f"an input, or a signal that the loop {ask.loop.text!r} measures,"
        return None if loop is None else cls((*loop.measures, *ground.inputs), what, loop.measures)


def bind_band(
    ground: Ground, ask: BandAsk, sets: tuple[DriveSet, ...], moved: Mapping[str, tuple[str, ...]] = NOTHING_MOVED
) -> Band | None:
    """One error band, or None where its signal is a mistake.

    sets: the drives of the point; moved: by set, the inputs that loops move in it.
    """
    comparable = tuple(dict.fromkeys((*ground.outputs, *ground.states)))
    if ask.signal in ground.inputs:
        if not any(ask.signal in moved.get(each.name, ()) for each in sets if ask.drives in (None, each.name)):
            _input_band(ground, ask, sets)
            return None
    elif not ground.known(ask.signal, ask.signal_place, comparable, "an output or state"):
        return None
    word = f"error_bands: {ask.signal}: {ask.kind}"
    limit = math.nan
    if ask.limit is not None:
        limit = ground.deviation(ask.limit, ask.signal, word)
    return Band(
        signal=ask.signal,
        kind=ask.kind,
        limit=limit,
        fraction=math.nan if ask.fraction is None else ask.fraction,
        start=_start(ground, ask, sets),
        drives=ask.drives,
        place=ask.place,
        shown=None if ask.limit is None else shown_size(ask.limit, ground.plant.unit(ask.signal)),
    )


def _input_band(ground: Ground, ask: BandAsk, sets: tuple[DriveSet, ...]) -> None:
    """Tell of a band on an input that no loop moves."""
    wrong = f"{ask.signal!r} is an input, and both models are driven with the same inputs"
    loops = dict.fromkeys(each.loop for each in sets if each.loop and ask.drives in (None, each.name))
    moving = f", or an input that the loop {' or '.join(map(repr, loops))} moves," if loops else ""
    ground.report(ask.signal_place, wrong, f"an output or state{moving} is expected")


def _clock(ground: Ground, ask: DriveAsk, word: str) -> tuple[float, int]:
    """`every` and the number of intervals; both times fit whole numbers of times, also into the plant's step."""
    every, horizon = ground.time(ask.every, f"{word}: every"), ground.time(ask.horizon, f"{word}: horizon")
    if math.isnan(every) or math.isnan(horizon):
        return math.nan, 1
    intervals = whole_ratio(horizon, every)
    told = every > horizon and ask.every.unit == ask.horizon.unit  # by the reader, which compares equal units
    if intervals is None and not told:
        wrong = f"a horizon of {ask.horizon.text!r} is no whole number of {ask.every.text!r}"
        ground.report(ask.horizon.place, wrong, "a multiple of `every` is expected")
    elif intervals is not None and intervals > MOST_INTERVALS:
        wrong = f"a horizon of {ask.horizon.text!r} is {intervals} times {ask.every.text!r}"
        ground.report(ask.horizon.place, wrong, f"at most {MOST_INTERVALS} intervals are expected")
    step = ground.plant.step
    if step is not None and whole_ratio(every, step) is None:
        wrong = f"{ask.every.text!r} is no whole number of the plant's steps of {ground.told_time(step)}"
        ground.report(ask.every.place, wrong, "a multiple of the plant's step is expected")
    return every, intervals or 1


def _amplitudes(ground: Ground, ask: DriveAsk, driven: _Driven | None, word: str) -> dict[str, Amplitude]:
    amplitudes: dict[str, Amplitude] = {}
    for entry in ask.amplitude if driven else ():
        if driven and ground.known(entry.name, entry.place, driven.names, driven.what):
            amplitudes[entry.name] = _amplitude(ground, entry, f"{word}: amplitude: {entry.name}")
    if driven and driven.measured and amplitudes and not set(driven.measured) & set(amplitudes):
        wrong = f"`{word}`: `at: set_point`, and no amplitude moves a set point"
        ground.report(ask.place, wrong, f"an amplitude of {' or '.join(driven.measured)} is expected")
    return amplitudes


def _amplitude(ground: Ground, entry: Entry[AmplitudeAsk], word: str) -> Amplitude:
    ask = entry.value
    if ask.until is not None:
        signal = ask.until
        word = f"{word}: until: {signal.name}"
        names = tuple(dict.fromkeys((*ground.outputs, *ground.states)))
        if not ground.known(signal.name, signal.place, names, "an output or state"):
            return Amplitude()
        return Amplitude(until=(signal.name, ground.deviation(signal.value, signal.name, word)))
    high = math.inf if ask.high is None else ground.deviation(ask.high, entry.name, word)
    return Amplitude(-high if ask.low is None else ground.deviation(ask.low, entry.name, word), high)


def _rates(
    ground: Ground,
    ask: DriveAsk,
    driven: _Driven | None,
    amplitude: Mapping[str, Amplitude],
    limits: Mapping[str, float],
    word: str,
) -> dict[str, float]:
    rates = {name: limits[name] for name in amplitude if name in limits and name in ground.inputs}
    for entry in ask.rate if driven else ():
        if driven is None or not ground.known(entry.name, entry.place, driven.names, driven.what):
            continue
        if entry.name not in amplitude:
            wrong = f"no amplitude moves {entry.name!r}, so there is nothing to limit"
            ground.report(entry.place, wrong, "a rate of an input with an amplitude is expected")
        rates[entry.name] = ground.rate(entry.value, entry.name, f"{word}: rate: {entry.name}")
    return rates


def _offsets(ground: Ground, ask: DriveAsk, word: str) -> dict[str, float]:
    offsets: dict[str, float] = {}
    for entry in ask.offsets:
        if ground.known(entry.name, entry.place, ground.states, "a state"):
            offsets[entry.name] = ground.deviation(entry.value, entry.name, f"{word}: offsets: {entry.name}")
    return offsets


def _pinned(ground: Ground, patterns: tuple[FileWord, ...]) -> tuple[Path, ...]:
    """The files that match, in order of name; a pattern without a match is fine, a file that is not there is none."""
    found: dict[Path, None] = {}
    for pattern in patterns:
        if not glob.has_magic(pattern.text) and not (pattern.folder / pattern.text).is_file():
            near = nearest(pattern.text, _drive_files(pattern))
            told = "a path relative to this file, or a pattern as in pinned/*.json, is expected"
            ground.report(pattern.place, f"there is no file {pattern.text!r}", told, near)
        for name in sorted(glob.glob(pattern.text, root_dir=pattern.folder, recursive=True)):
            if (path := pattern.folder / name).is_file():
                found[path] = None
    return tuple(found)


def _drive_files(pattern: FileWord) -> list[str]:
    folder = Path(pattern.text).parent
    return [(folder / path.name).as_posix() for path in sorted((pattern.folder / folder).glob("*.json"))]


def _start(ground: Ground, ask: BandAsk, sets: tuple[DriveSet, ...]) -> float:
    if ask.start is None:
        return 0.0
    word = f"error_bands: {ask.signal}: from"
    start = ground.time(ask.start, word)
    for drives in sets:
        if ask.drives in (None, drives.name) and start >= drives.horizon:
            name = f"drives {drives.name!r}" if drives.name else "the drives"
            wrong = f"`from` {ask.start.text!r} leaves nothing to judge of {name}"
            told = f"a time before their horizon of {drives.horizon:.6g} {ground.plant.time_unit} is expected"
            ground.report(ask.start.place, wrong, told)
    return start
