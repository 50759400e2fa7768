"""A spec as it was written: frozen values with places, read without knowing the plant.

`read.read` makes a `Spec`, `bind` turns it into `Case`s. Everything that can be judged without the plant was judged
before a `Spec` exists: words, shapes of values, plain numbers, missing and doubled words, names of sets of drives,
names of swept points, patterns. What is left to bind: names of states, inputs, outputs and parameters, units, what
needs a unit to be judged (empty ranges in mixed units, horizon against `every`), and the plant object itself.

`defaults.yaml` and `every_point` are merged already, so every `Point` is complete in itself: its parameters, drives
and error bands are those that hold for it. Each value keeps the place where it was written, in whichever file.

Order: tables keep the order of writing (words of the spec first, then those that only `defaults.yaml` has).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any, Literal

from linverify.core.case import BandKind, Course, Setting
from linverify.core.errors import Place

from .atoms import Bounds as Bounds
from .atoms import Entry as Entry
from .atoms import Expect as Expect
from .atoms import FileWord as FileWord
from .atoms import Limits as Limits
from .atoms import Location as Location
from .atoms import Quantity as Quantity
from .atoms import Word as Word
from .loop_layout import LoopAsk as LoopAsk
from .mode_layout import ActuatorWords as ActuatorWords
from .mode_layout import ModeLine as ModeLine


@dataclass(frozen=True, slots=True)
class PlantRef:
    """Where the plant is. Exactly one of file (FILE:OBJECT) and module (package.module:OBJECT) is not empty.

    file is relative to folder. It is not known here whether either exists. OBJECT may be dotted (`box.ferry`).
    """

    file: str
    module: str
    object: str
    folder: Path
    text: str
    place: Place


@dataclass(frozen=True, slots=True)
class AmplitudeAsk:
    """How far a drive may move an input about trim.

    Three forms: `a` -> high only (both sides, +-a); `[a, b]` -> low and high; `{until: {signal: size}}` -> until only.
    """

    low: Quantity | None
    high: Quantity | None
    until: Entry[Quantity] | None
    place: Place


@dataclass(frozen=True, slots=True)
class DriveAsk:
    """A set of drives; name is "" for the one unnamed set. place: the set's name, or the word `drives`.

    horizon, every: times. discerns_gain: a fraction. count >= 1, search >= 0, shapes in the order written.
    """

    name: str
    place: Place
    horizon: Quantity
    every: Quantity
    amplitude: tuple[Entry[AmplitudeAsk], ...]
    course: Course
    rate: tuple[Entry[Quantity], ...]
    offsets: tuple[Entry[Quantity], ...]
    shapes: tuple[str, ...]
    count: int
    search: int
    pinned: tuple[FileWord, ...]
    discerns_gain: float | None
    discerns_delay: Quantity | None
    loop: Word | None = None  # names a loop of the point
    at: Literal["input", "set_point"] = "input"


@dataclass(frozen=True, slots=True)
class BandAsk:
    """One error band. place: the value; signal_place: the signal's name.

    limit: for peak, rms, final, wider_of (never per cent). fraction: for relative, wider_of (0.2 for 20 %).
    start: `from`, a time, or None. drives: the one set it is for, or None for all sets; the name is known to exist.
    """

    signal: str
    signal_place: Place
    kind: BandKind
    limit: Quantity | None
    fraction: float | None
    start: Quantity | None
    drives: str | None
    place: Place


@dataclass(frozen=True, slots=True)
class Cell:
    """One operating point to be judged: a point without sweep has one cell, a swept point one a combination.

    name: unique in the spec, made of allowed characters. swept: name -> value of states, inputs, outputs or
    parameters, to be held (or set) on top of `Point.hold` and `Point.parameters`; the value's text is as written.
    skipped: the pattern under `skip` that matched, None for none. place: of the point's name (of the row for a table).
    """

    name: str
    swept: tuple[Entry[Quantity], ...]
    skipped: Word | None
    place: Place


@dataclass(frozen=True, slots=True)
class Point:
    """One entry of `operating_points`, merged with `every_point` and with what the whole spec says.

    find is None where it is not written (then: every state and input that is not held). rates: prescribed ones;
    free: states under `rates: {name: free}`. minimize: weights > 0. drives and bands: those that hold at this point.
    start is () where no `start` is written; start_place is then None.
    """

    name: str
    place: Place
    hold: tuple[Entry[Quantity], ...]
    find: tuple[Word, ...] | None
    start: tuple[Entry[Quantity], ...]
    start_place: Place | None
    rates: tuple[Entry[Quantity], ...]
    free: tuple[Word, ...]
    minimize: tuple[Entry[float], ...]
    expect: tuple[Entry[Expect], ...]
    parameters: tuple[Entry[Quantity], ...]
    drives: tuple[DriveAsk, ...]
    bands: tuple[BandAsk, ...]
    cells: tuple[Cell, ...]
    settings: tuple[Setting, ...]  # the effective words of this point, defaults of the language included
    modes: tuple[ModeLine, ...] = ()
    modes_place: Place | None = None  # of the word `modes` where it is written
    loops: tuple[LoopAsk, ...] = ()


@dataclass(frozen=True, slots=True)
class KeepWords:
    """What a reduced model keeps; None where a kind is not written (then: all of it). place: the word `keep`."""

    states: tuple[Word, ...] | None
    inputs: tuple[Word, ...] | None
    outputs: tuple[Word, ...] | None
    place: Place


@dataclass(frozen=True, slots=True)
class ResponseWords:
    """Limits on the frequency response: fractions, and two frequencies."""

    within: float
    low: Quantity
    high: Quantity
    floor: float
    place: Place


@dataclass(frozen=True, slots=True)
class LocalWords:
    """`local_models`. source: None for models that are derived here and now; text may hold `{point}`.

    point, entries: fractions, None where not written. places: of the words that are written, by their names.
    gains: the words under `gains` with their values; None where it is not written. closed: the loops behind `with`.
    """

    source: FileWord | None = None
    keep: KeepWords | None = None
    others: Literal["freeze", "settle"] | None = None
    point: float | None = None
    entries: float | None = None
    response: ResponseWords | None = None
    gains: Mapping[str, Any] | None = None
    closed: tuple[Word, ...] = ()
    places: Mapping[str, Place] = field(default_factory=lambda: MappingProxyType({}))


@dataclass(frozen=True, slots=True)
class RequirementAsk:
    """One line of `requirements`; each pattern matches at least one check (see `matches` and `Spec.check_names`)."""

    name: str
    text: str
    source: str
    checks: tuple[Word, ...]
    place: Place


@dataclass(frozen=True, slots=True)
class Spec:
    """A whole spec. shown: its path as reports show it; path: where it lies; files: itself and its defaults.yaml files.

    accuracy, complete, slope_gap: plain numbers (0.9 for 90 %), defaults filled in; accuracy_place: None for the
    default. side: signal -> "up" or "down".
    settings: the effective words that no point can change, with the place each came from.
    """

    shown: str
    path: Path
    files: tuple[Path, ...]
    title: str
    plant: PlantRef
    time: Quantity | None
    envelope: tuple[Entry[Limits], ...]
    complete: float
    mismatch: Literal["fail", "report"]
    accuracy: float
    accuracy_place: Place | None
    slope_gap: float
    side: tuple[Entry[Literal["up", "down"]], ...]
    points: tuple[Point, ...]
    requirements: tuple[RequirementAsk, ...]
    settings: tuple[Setting, ...]
    local: LocalWords = field(default_factory=LocalWords)
    wraps: tuple[Word, ...] = ()
    delays: Mapping[str, tuple[Entry[Quantity], ...]] = field(default_factory=lambda: MappingProxyType({}))
    actuators: tuple[Entry[ActuatorWords], ...] = ()

    def check_names(self, point: Point) -> tuple[str, ...]:
        """Names of the checks of each cell of `point`: trims, ..., follows.SET ..., modes, margins.LOOP ..."""
        sets = tuple("follows" + (f".{drives.name}" if drives.name else "") for drives in point.drives)
        modes = ("modes",) if point.modes else ()
        margins = tuple(f"margins.{loop.name}" for loop in point.loops)
        return (*always_checked(delivered=self.local.source is not None), *sets, *modes, *margins)


def always_checked(*, delivered: bool) -> tuple[str, ...]:
    """The checks that no word asks for: every point has them, `agrees` where its model was handed over."""
    return ("trims", "differentiable", *(("agrees",) if delivered else ()))


def matches(pattern: str, name: str) -> bool:
    """True where `name` (as `kn30.follows.fast`) fits `pattern`; `*` stands for any run of characters, even none."""
    head, *rest = pattern.split("*")
    if not rest:
        return name == pattern
    *middle, tail = rest
    if not name.startswith(head) or not name.endswith(tail) or len(name) < len(head) + len(tail):
        return False
    inner = name[len(head) : len(name) - len(tail)]
    for part in middle:
        at = inner.find(part)
        if at < 0:
            return False
        inner = inner[at + len(part) :]
    return True
