"""A local model as somebody handed it over, brought into the plant's units and time unit; names are kept as delivered.

It is compared with the plant by name and never by position. Its states may be anonymous: then only inputs and outputs
carry meaning, and the model is compared by what its outputs do.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Literal

from .errors import Place
from .model import Array

Course = Literal["held", "straight"]
NOTHING: Mapping[str, float] = MappingProxyType({})


@dataclass(frozen=True, slots=True, eq=False)
class DeliveredModel:
    """x' = A x + B u, y = C x + D u, or the next state where `step` is given, in deviations from an operating point.

    A (n, n), B (n, m), C (k, n), D (k, m) in the plant's units and per its time unit; states: names in order, None when
    anonymous; inputs, outputs: names in order. step: sample time in the plant's time unit; course: how a discrete model
    takes its inputs between samples. x0, u0, y0: the operating point it claims, by name, as far as it claims one.
    digits: significant digits of the longest entry, of the matrix that shows fewest; 17 where entries are exact, also
    where all are short, as 0, 1 and 0.25 are. rounding: by "A", "B", "C", "D", half a unit of the last printed digit of
    every entry, in the plant's units; a matrix without is exact.
    """

    file: str
    place: Place
    A: Array
    B: Array
    C: Array
    D: Array
    states: tuple[str, ...] | None
    inputs: tuple[str, ...]
    outputs: tuple[str, ...]
    step: float | None = None
    course: Course = "held"
    x0: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    u0: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    y0: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    point: str = ""
    digits: int = 17
    rounding: Mapping[str, Array] = field(default_factory=lambda: MappingProxyType({}))


@dataclass(frozen=True, slots=True)
class ResponseAsk:
    """Frequency response: |difference| at most `within` of |G|, or of `floor` times its peak, whichever is larger.

    low, high: angular frequencies, per time unit of the plant.
    """

    within: float
    low: float
    high: float
    floor: float
    place: Place


@dataclass(frozen=True, slots=True)
class GainsAsk:
    """Static gains: singular values within a fraction, relative gains within a difference, sign of the determinant."""

    place: Place
    singular_values: float | None = None
    relative_gain: float | None = None
    determinant_sign: Literal["same"] | None = None


@dataclass(frozen=True, slots=True)
class AgreeAsk:
    """Delivered against derived.

    point: claimed trim against ours, in nominal sizes; entries: |difference| x nominal size of the column, as a share
    of the largest term of the row; None: not asked for.
    """

    point: float = 0.01
    entries: float | None = None
    response: ResponseAsk | None = None
    gains: GainsAsk | None = None
    place: Place = field(default_factory=lambda: Place("<python>"))
    entries_place: Place | None = None
    point_place: Place | None = None


@dataclass(frozen=True, slots=True)
class Keep:
    """A reduced model: what it keeps, by name, and what becomes of the states that it leaves out."""

    states: tuple[str, ...]
    inputs: tuple[str, ...]
    outputs: tuple[str, ...]
    others: Literal["freeze", "settle"]
    place: Place


@dataclass(frozen=True, slots=True, eq=False)
class LocalAsk:
    """What is being verified: a model derived here and now (`delivered` is None) or one that was handed over.

    closed: names of the loops that are closed inside the model, and stay closed in every comparison.
    """

    delivered: DeliveredModel | None = None
    keep: Keep | None = None
    agree: AgreeAsk = field(default_factory=AgreeAsk)
    closed: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Delays:
    """Dead times outside the plant function, in time units, exact in both models, by name of input and output."""

    inputs: Mapping[str, float] = field(default_factory=lambda: NOTHING)
    outputs: Mapping[str, float] = field(default_factory=lambda: NOTHING)
