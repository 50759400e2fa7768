"""What a word of the language is: its row, and what may stand behind it."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

FORMAT = 1


class Kind(Enum):
    """What may stand behind a word; the value is how messages and the reference table call it."""

    FORMAT = "the format number"
    TEXT = "text"
    NAME = "a name"
    TRUTH = "true or false"
    PLANT = "FILE:OBJECT or package.module:OBJECT"
    QUANTITY = "a number with or without a unit"
    SIZE = "a size with or without a unit"
    NUMBER = "a number without a unit"
    FRACTION = "per cent or a fraction"
    COUNT = "a whole number"
    CHOICE = "one of a few words"
    NAMES = "a list of names"
    CHOICES = "a list of some of a few words"
    SOURCE = "derive, or a file or folder of models, {point} in its name standing for the operating point"
    PATTERNS = "a list of patterns"
    FILES = "a file pattern or a list of them"
    LIMITS = "[low, high] or a group of min, max, range, rate"
    RANGE = "[low, high]"
    BOUNDS = "{min: low, max: high}, one of the two, or [low, high]"
    LOCATION = "a complex number, as in -0.8 + 2.1j"
    AMPLITUDE = "a size, [low, high] or {until: {signal: size}}"
    EXPECT = "V +- T"
    RATE = "a number with or without a unit, or free"
    RELATIVE = "per cent"
    WIDER_OF = "[size, per cent]"
    SWEPT = "a list of values or {from: , to: , count: }"
    SWEEP = "a group of name: values or {table: FILE}"
    DRIVES = "one set of drives or several by name"
    BANDS = "a group of signal: error band"
    MODES = "a list of groups of words"
    GROUPS = "a group of words or a list of them"
    BLOCK = "a group of words"
    NAMED = "a group of name: value"
    POINTS = "a group of name: operating point"
    FILE = "a file, {point} in its name standing for the operating point"
    GAIN = "a number with or without a unit, or {table: FILE, over: NAME}"
    COEFFICIENTS = "a list of numbers"
    MATRIX = "a list of rows of numbers"
    SETTLING = "a time or {time: , within: }"
    RULES = "a name or a list of names"
    NONE = "nothing in this version"


@dataclass(frozen=True, slots=True)
class Row:
    """One word. of: the words within (BLOCK), or what stands behind each name (NAMED: one row with the word `*`)."""

    word: str
    kind: Kind
    meaning: str
    of: tuple[Row, ...] = ()
    dimension: str = ""  # of a quantity: time, "the signal's", ...; "" where it has none
    default: str = ""
    required: bool = False
    shared: bool = True  # may stand in defaults.yaml
    choices: tuple[str, ...] = ()
    sign: str = ""  # "+": above zero, "0+": zero or above
    most: int | None = None  # of a COUNT: more is most likely a slip, and takes for ever; of a FRACTION that may pass 1
    available: bool = True
    needs: str = ""  # the word without which its default says nothing


def each(kind: Kind, of: tuple[Row, ...] = (), dimension: str = "", sign: str = "") -> tuple[Row, ...]:
    """What stands behind every name of a NAMED word."""
    return (Row("*", kind, "", of, dimension, sign=sign),)


def later(word: str, meaning: str) -> Row:
    """A word of the language whose check this version does not have."""
    return Row(word, Kind.NONE, meaning, available=False)


SIGNAL = "the signal's"


def row_of(rows: tuple[Row, ...], word: str) -> Row | None:
    """The row of `word` among `rows`, or None."""
    return next((row for row in rows if row.word == word), None)


def default_of(rows: tuple[Row, ...], word: str) -> str:
    """The default of `word` as it would be written; "" where it has none."""
    row = row_of(rows, word)
    return row.default if row else ""
