"""What a file of local models says, before anybody has looked at the plant: matrices, names, units, a point.

Every format is read into the same `Claim`, so that names, shapes and units are judged in one place.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType

import numpy as np

from linverify.core.errors import Place
from linverify.core.model import Array
from linverify.core.signals import nearest

from . import scalars
from .layout import Entry, Word
from .reader import Reader
from .scalars import Wrong, quoted
from .source import Scalar

MATRICES = ("A", "B", "C", "D")
NAMES = ("states", "inputs", "outputs")
POINTS = ("x0", "u0", "y0")
ANY = "point"  # values by name alone, whichever of x0, u0 and y0 they belong to
ROWS_OF = MappingProxyType({"A": "states", "B": "states", "C": "outputs", "D": "outputs"})
COLUMNS_OF = MappingProxyType({"A": "states", "B": "inputs", "C": "states", "D": "inputs"})
# the words of a model, the same in every format that has words
KEYS = (*MATRICES, "dt", *NAMES, "units", *POINTS, "time_unit", "hold", "point", "note")
KIND_OF = MappingProxyType({"x0": "states", "u0": "inputs", "y0": "outputs"})
ONE = MappingProxyType({"states": "state", "inputs": "input", "outputs": "output"})
EXACT = 17  # significant digits that make any float
_SHORTEST = 4  # digits; a matrix that shows fewer holds round numbers, not rounded ones


@dataclass(frozen=True, slots=True, eq=False)
class Matrix:
    """Finite numbers as written: a table, a line of numbers or one number.

    rounding: half a unit of the last digit of each, same shape; None where they are exact.
    """

    values: Array
    place: Place
    rounding: Array | None = None


@dataclass(frozen=True, slots=True)
class Number:
    """A finite number and where it stands."""

    value: float
    place: Place


@dataclass(frozen=True, slots=True)
class Listed:
    """A list of names with the place of the list."""

    words: tuple[Word, ...]
    place: Place


@dataclass(frozen=True, slots=True)
class Claimed:
    """One part of the operating point that a model claims: by name, or in the order of its names."""

    named: tuple[Entry[Number], ...]
    ordered: tuple[Number, ...] | None
    place: Place


@dataclass(frozen=True, slots=True, eq=False)
class Claim:
    """One model as its file has it. file: as messages show it; place: where the model begins.

    names: by "states", "inputs", "outputs", those that the file gives; at: by "x0", "u0", "y0" or `ANY`.
    digits: significant digits of the matrix that shows fewest; 17 where they are exact.
    """

    file: str
    place: Place
    matrices: Mapping[str, Matrix]
    names: Mapping[str, Listed]
    units: tuple[Entry[Word], ...] = ()
    at: Mapping[str, Claimed] = field(default_factory=lambda: MappingProxyType({}))
    step: Number | None = None
    time_unit: Word | None = None
    hold: Word | None = None
    point: Word | None = None
    digits: int = EXACT


def finite(reader: Reader, scalar: Scalar, called: str) -> Number | None:
    """The number that a scalar is, or None after telling why it is none."""
    read = scalars.number(scalar.text, scalar.plain)
    if isinstance(read, Wrong):
        expected = "a finite number is expected" if "unit" in read.expected else read.expected
        read = Wrong(read.wrong, expected)
    value = reader.judged(read, scalar.place, called)
    return None if value is None else Number(value, scalar.place)


def unknown(reader: Reader, word: Word, words: Sequence[str], called: str = "") -> None:
    """Tell of a word that no model has."""
    hint = nearest(word.text, words)
    expected = "" if hint else f"one of {', '.join(words)} is expected"
    reader.tell(word.place, f"unknown word {quoted(called + word.text)}", expected, hint)


def shown_digits(text: str) -> int:
    """Significant digits of a number as written: 3 for `0.0120`, 1 for `100`, whose zeros may only give its size."""
    mantissa = re.split("[eE]", text.strip().lstrip("+-"))[0]
    digits = mantissa.replace(".", "").lstrip("0")
    return len(digits if "." in mantissa else digits.rstrip("0"))


def fewest_digits(matrices: Iterable[Iterable[str]]) -> int:
    """Digits of the matrix that shows fewest, where each is printed with as many digits as its longest number has.

    A matrix of short numbers alone (0, 1, 0.25) is taken as exact: nobody could tell it from a rounded one, and
    rounding to three digits is an error that should be seen.
    """
    most = [max((shown_digits(text) for text in texts), default=0) for texts in matrices]
    return min((min(digits, EXACT) for digits in most if digits >= _SHORTEST), default=EXACT)


def half_units(values: Array, texts: Sequence[str]) -> Array | None:
    """Half a unit of the last printed digit of every number, shape of `values`; None where they are exact.

    Numbers that all show equally many decimals were printed to that many; others to as many significant digits as the
    longest of them has, with zeros at the end left out.
    """
    digits = fewest_digits([texts])
    if digits >= EXACT:
        return None
    decimals = {len(text.partition(".")[2]) if "e" not in text.lower() else -1 for text in texts}
    if len(texts) > 1 and len(decimals) == 1 and (count := decimals.pop()) > 0:
        return np.full(values.shape, 0.5 * 10.0**-count)
    size = np.abs(values)
    decade = np.floor(np.log10(np.where(size > 0.0, size, 1.0)))
    return np.where(size > 0.0, 0.5 * 10.0 ** (decade + 1 - digits), 0.0)
