"""A bound spec in numbers: what one operating point is asked to prove. Knows no YAML and no solver.

Every quantity is in the plant's own unit. Mappings go from a signal's name to its value; they are read-only.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Literal

from .delivered import NOTHING as NOTHING
from .delivered import Course as Course
from .delivered import Delays, LocalAsk
from .errors import Place
from .loop import NO_ACTUATORS as NO_ACTUATORS
from .loop import NO_LOOPS as NO_LOOPS
from .loop import Actuator, Loop
from .mode import ModeAsk
from .plant import Plant
from .shown import Shown

BandKind = Literal["peak", "rms", "relative", "wider_of", "final"]


@dataclass(frozen=True, slots=True)
class Interval:
    """A closed range; a missing side is infinite."""

    low: float = -math.inf
    high: float = math.inf

    def __contains__(self, value: float) -> bool:
        return self.low <= value <= self.high

    def meet(self, other: Interval) -> Interval:
        """What both ranges allow."""
        return Interval(max(self.low, other.low), min(self.high, other.high))

    @property
    def bounded(self) -> bool:
        """True where both sides are finite."""
        return math.isfinite(self.low) and math.isfinite(self.high)


@dataclass(frozen=True, slots=True)
class Expected:
    """A trimmed value that must not wander: |value - trimmed| <= tolerance."""

    value: float
    tolerance: float
    place: Place
    shown: Shown | None = None  # as the spec writes it; None: in the plant's unit


@dataclass(frozen=True, slots=True)
class TrimAsk:
    """The equilibrium that is asked for.

    hold: required values of states, inputs or outputs; find: the unknowns, in plant order (states, then inputs);
    start: first guesses, and the values of what is neither held nor found; rates: prescribed rates of states, per time
    unit (of a difference equation: the change a step); free: states whose rate may be anything; minimize: weights;
    accuracy: largest scaled residual of any equation, in the same counting of time; accuracy_told: as the spec has it.
    """

    hold: Mapping[str, float]
    find: tuple[str, ...]
    start: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    rates: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    free: tuple[str, ...] = ()
    minimize: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    expect: Mapping[str, Expected] = field(default_factory=lambda: MappingProxyType({}))
    accuracy: float = 1e-8
    accuracy_told: str = ""


@dataclass(frozen=True, slots=True)
class SlopeAsk:
    """Largest allowed gap of one-sided slopes (a fraction of the row's scale), and sides for one-sided signals."""

    slope_gap: float = 0.05
    side: Mapping[str, Literal["up", "down"]] = field(default_factory=lambda: MappingProxyType({}))


@dataclass(frozen=True, slots=True)
class Amplitude:
    """How far a drive may move an input about its trimmed value.

    low <= 0 <= high. With `until` the size is what moves the local model's `until[0]` by `until[1]`, found at run time.
    """

    low: float = 0.0
    high: float = 0.0
    until: tuple[str, float] | None = None


@dataclass(frozen=True, slots=True)
class DriveSet:
    """The input sequences that both models are driven with; `name` is empty for the one unnamed set.

    every: time between the instants at which inputs may change; intervals: how many of them make the horizon.
    rate: largest |change| of an input per time unit; offsets: largest initial deviation of a state, both signs.
    shown, shown_time, shown_delay: the units in which amplitudes and offsets, times and `discerns_delay` are written;
    where there is none, the plant's. loop: both models run with this loop closed (empty: none); at: drives add to what
    the loops move, or to its set point, whose signals are then named in `amplitude` beside plant inputs.
    """

    name: str
    every: float
    intervals: int
    amplitude: Mapping[str, Amplitude]
    course: Course = "held"
    rate: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    offsets: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    shapes: tuple[str, ...] = ("step", "pulse", "doublet", "ramp", "sine", "sweep", "multisine", "walk")
    count: int = 300
    search: int = 150
    pinned: tuple[Path, ...] = ()
    discerns_gain: float | None = None
    discerns_delay: float | None = None
    place: Place = field(default_factory=lambda: Place("<python>"))
    shown: Mapping[str, Shown] = field(default_factory=lambda: MappingProxyType({}))
    shown_time: Shown | None = None
    shown_delay: Shown | None = None
    loop: str = ""
    at: Literal["input", "set_point"] = "input"

    @property
    def horizon(self) -> float:
        """Length of a drive in time units."""
        return self.every * self.intervals


@dataclass(frozen=True, slots=True)
class Band:
    """One error band on plant minus local model.

    limit: absolute limit in the signal's unit (NaN for `relative`); fraction: of the plant's own peak deviation
    (`relative`, `wider_of`); start: time before which nothing counts; drives: name of the one set it is for, or None;
    shown: the unit that the limit is written in, None for the plant's.
    """

    signal: str
    kind: BandKind
    limit: float = math.nan
    fraction: float = math.nan
    start: float = 0.0
    drives: str | None = None
    place: Place = field(default_factory=lambda: Place("<python>"))
    shown: Shown | None = None


@dataclass(frozen=True, slots=True)
class Exits:
    """Leaving the envelope: share of random drives that must complete; unpredicted exits fail or are told."""

    complete: float = 0.9
    mismatch: Literal["fail", "report"] = "fail"


@dataclass(frozen=True, slots=True)
class CheckAsk:
    """One check of one operating point: `trims`, `modes`, `follows` of a set of drives, `margins` of a loop."""

    kind: str
    place: Place
    drives: str = ""
    loop: str = ""

    @property
    def name(self) -> str:
        """The check's name as ids show it: `follows.fast`, `margins.ride`."""
        of = self.drives or self.loop
        return f"{self.kind}.{of}" if of else self.kind


@dataclass(frozen=True, slots=True)
class Requirement:
    """A requirement that checks of this point answer."""

    name: str
    text: str
    source: str
    checks: tuple[str, ...]  # names of checks of this point


@dataclass(frozen=True, slots=True)
class Setting:
    """One line of the effective spec: which word, its value as written, and the place that it comes from."""

    word: str
    text: str
    origin: str


@dataclass(frozen=True, slots=True, eq=False)
class Relative:
    """Another operating point of the same spec, as far as it takes to derive its local model."""

    point: str
    trim: TrimAsk
    parameters: Mapping[str, float]
    loops: Mapping[str, Loop] | None = None  # None: those of the point that it is beside


@dataclass(frozen=True, slots=True, eq=False)
class Case:
    """One operating point of one spec, bound to its plant. spec: path as ids show it; place: the point's own line."""

    spec: str
    point: str
    title: str
    plant: Plant
    place: Place
    trim: TrimAsk
    parameters: Mapping[str, float]  # all of them, defaults included
    envelope: Mapping[str, Interval]
    nominal: Mapping[str, float]  # typical size of a deviation of every state, input and output
    checks: tuple[CheckAsk, ...]
    time: float | None = None  # t of the trim; None: nobody said, which will do for a plant that does not depend on t
    rate_limits: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    slopes: SlopeAsk = field(default_factory=SlopeAsk)
    drives: tuple[DriveSet, ...] = ()
    bands: tuple[Band, ...] = ()
    exits: Exits = field(default_factory=Exits)
    local: LocalAsk = field(default_factory=LocalAsk)
    delays: Delays = field(default_factory=Delays)
    wraps: tuple[str, ...] = ()  # angles that are compared modulo a turn
    modes: tuple[ModeAsk, ...] = ()
    loops: Mapping[str, Loop] = field(default_factory=lambda: NO_LOOPS)  # all that are declared, by name
    actuators: Mapping[str, Actuator] = field(default_factory=lambda: NO_ACTUATORS)  # by plant input
    requirements: tuple[Requirement, ...] = ()
    settings: tuple[Setting, ...] = ()
    files: tuple[Path, ...] = ()  # spec, defaults, plant, tables: hashed into the provenance
    skipped: str = ""  # reason, for a swept cell listed under `skip`
    relatives: tuple[Relative, ...] = ()  # the spec's other points: a model may have been handed over for one of them
    shown: Mapping[str, Shown] = field(
        default_factory=lambda: MappingProxyType({})
    )  # signals as this point writes them
    shown_limits: Mapping[str, Shown] = field(default_factory=lambda: MappingProxyType({}))  # as the envelope does
    family: int = 1  # operating points that one statement of confidence covers: each is stated at 1 - 0.05 / family

    @property
    def moment(self) -> float:
        """The t of the trim, zero where nobody said."""
        return 0.0 if self.time is None else self.time

    def drive_set(self, name: str) -> DriveSet:
        """The set of drives called `name`; raises KeyError."""
        for drives in self.drives:
            if drives.name == name:
                return drives
        raise KeyError(name)

    def shown_as(self, name: str) -> Shown:
        """The unit in which values of a signal are told. Raises KeyError for a name that the plant does not have."""
        return self.shown.get(name) or Shown(self.plant.unit(name))

    def shown_limit(self, name: str) -> Shown:
        """The unit in which limits of a signal are told: the envelope's, else as for its values."""
        return self.shown_limits.get(name) or self.shown_as(name)

    def shown_band(self, band: Band) -> Shown:
        """The unit in which errors of a band's signal are told: the band's own, where it has one."""
        return band.shown or Shown(self.plant.unit(band.signal))

    def shown_moves(self, drives: DriveSet) -> dict[str, Shown]:
        """The units in which inputs and states move in drives: as the set writes them, else as for their values."""
        names = (*self.plant.states, *self.plant.inputs)
        return {name: drives.shown.get(name) or Shown(self.plant.unit(name)) for name in names}

    def shown_time(self, drives: DriveSet | None = None) -> Shown:
        """The unit in which times are told, those of a set of drives as it writes them."""
        return (drives.shown_time if drives else None) or Shown(self.plant.time_unit)

    def origin(self, word: str) -> str:
        """Where the effective value of a word of the spec comes from; empty where nobody has told."""
        return next((item.origin for item in self.settings if item.word == word), "")

    def bands_for(self, name: str) -> tuple[Band, ...]:
        """The error bands that hold for the set of drives called `name`."""
        return tuple(band for band in self.bands if band.drives in (None, name))


@dataclass(frozen=True, slots=True)
class Options:
    """What the caller decides, the same for every check of a run: seed, profile, where evidence is written."""

    seed: int = 0
    profile: Literal["full", "quick"] = "full"
    reports: Path | None = None  # None: nothing is written
