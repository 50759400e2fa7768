"""Single values as they were written, each with its place; nothing here knows the plant."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Generic, TypeVar

from linverify.core.errors import Place

T = TypeVar("T")


@dataclass(frozen=True, slots=True)
class Word:
    """A piece of text (a name, a pattern) and where it stands."""

    text: str
    place: Place


@dataclass(frozen=True, slots=True)
class Quantity:
    """A finite number with the unit as written.

    unit is "" for a plain number (the plant's own unit), "%" for per cent, else the unit's text, not yet looked at by
    anybody: it may be no unit at all. text is the whole value as written ("30 kn"); place is that of the value.
    """

    value: float
    unit: str
    text: str
    place: Place

    @property
    def per_cent(self) -> bool:
        """True for `V %`."""
        return self.unit == "%"


@dataclass(frozen=True, slots=True)
class Entry(Generic[T]):
    """`name: value` with the place of the name; the value brings its own place where it needs one."""

    name: str
    place: Place
    value: T


@dataclass(frozen=True, slots=True)
class FileWord:
    """Text that names a file or a glob, relative to `folder` (that of the file it is written in)."""

    text: str
    folder: Path
    place: Place


@dataclass(frozen=True, slots=True)
class Limits:
    """One line of the envelope; a missing side is None. rate: largest |change| per time, of an input or state."""

    low: Quantity | None
    high: Quantity | None
    rate: Quantity | None
    place: Place


@dataclass(frozen=True, slots=True)
class Bounds:
    """`{min: low, max: high}` or `[low, high]`; a missing side is None. text: the whole of it as written."""

    low: Quantity | None
    high: Quantity | None
    text: str
    place: Place


@dataclass(frozen=True, slots=True)
class Expect:
    """`V +- T`: tolerance is a difference in V's dimension, or per cent of V (tolerance.per_cent)."""

    value: Quantity
    tolerance: Quantity
    text: str
    place: Place


@dataclass(frozen=True, slots=True)
class Location:
    """A complex number with the unit as written: "" for none (rad per time unit of the plant)."""

    value: complex
    unit: str
    text: str
    place: Place
