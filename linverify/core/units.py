"""Quantities as engineers write them: named by dimension, converted. Whoever reads them splits number and unit.

A number without a unit (unit "") is in whatever unit is expected at its place. Rules that go beyond arithmetic:

* Angle is a dimension of its own. `deg`, `rad` and `rev` convert into each other, but an angle never passes for a plain
  number: a slope of 3 and an angle of 3 rad are different things, and a plant that means the first says "1".
* A cycle is a dimension of its own, and Hz is one cycle a second: Hz never passes for rad/s or 1/s. The message states
  both numbers, so that the writer can pick the one that is meant. `rpm` is a rate of angle, as tachometers use it.
* A decibel is a dimension of its own; `amplitude_ratio` is the one way from dB to a ratio.
* Temperatures are points on their scale, unless the caller asks for a difference. In a compound unit (`degC/min`,
  `J/(kg K)`) they are always differences.

pint does the arithmetic, with the definitions of `unit_words` instead of its own: they load in a seventh of the time,
and its own Hz would be 1/s. It is imported when the first unit has to be converted, never for plain numbers.
The text of a unit is parsed here, because pint's parser also takes numbers and Python operators.
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from functools import lru_cache
from typing import TYPE_CHECKING, Any

from .errors import LinverifyError
from .shown import number as in_digits
from .signals import nearest
from .unit_words import DEFINITIONS, HABITS, WORDS

if TYPE_CHECKING:
    import pint

_TOKEN = re.compile(r"\s*(?:(?P<name>[A-Za-z_][A-Za-z_0-9]*)|(?P<number>[+-]?\d+(?:\.\d+)?)|(?P<mark>[*/^()]))\s*")
_LONGEST = 60  # characters of a unit; keeps the recursion of the parser shallow
_STEEPEST = 12.0  # largest power of a unit
_SYMBOL = 4  # letters of the longest symbol; longer names are words
_SPELLINGS = (
    ("**", "^"), ("·", "*"), ("⁻¹", "^-1"), ("⁻²", "^-2"), ("²", "^2"), ("³", "^3"),
    ("°C", "degC"), ("°F", "degF"), ("°", "deg"), ("%", "percent"), ("µ", "u"), ("μ", "u"), ("Ω", "ohm"),
)  # fmt: skip
_EXAMPLES = "a unit such as m, kg/m^3 or deg/s is expected"
_PLAIN = ("", "1")

_ZERO = {"degC": 273.15, "degF": 459.67 * 5.0 / 9.0, "kelvin": 0.0}  # kelvin at the zero of each scale
_DELTAS = ("delta_degC", "delta_degF")


class UnitError(LinverifyError, ValueError):
    """A quantity cannot be read or converted: what it is, what was due, the nearest right word."""

    def __init__(self, wrong: str, expected: str = "", hint: str = "") -> None:
        super().__init__("; ".join(part for part in (wrong, expected) if part))
        self.wrong, self.expected, self.hint = wrong, expected, hint


def shown(number: float) -> str:
    """A number as messages show it: at most six significant digits."""
    return in_digits(number)


def told(number: float, unit: str) -> str:
    """A number with its unit as messages show it; a plain number has none."""
    return shown(number) if unit in _PLAIN else f"{shown(number)} {unit}"


def convert(number: float, unit: str, target: str, *, difference: bool = False, text: str = "") -> float:
    """`number` in `unit` as a number in `target`; with unit "" it is in `target` already.

    difference: temperatures are differences (bands, amplitudes, rates, tolerances) and not points of a scale.
    text: the quantity as it was written, for the message. Raises UnitError, naming both dimensions in words.
    """
    if unit in ("", target):
        return number
    text = text or told(number, unit)
    if _dimension(unit) != _dimension(target):
        raise UnitError(f"{text!r} is {_mistaken(number, unit, target)}", f"{kind(target)} is expected", "")
    factor = _factor(unit, target)
    zeros = None if difference else _zeros(unit, target, text)
    if zeros is None:
        return _scaled(number, factor)
    return _scaled(number, factor) + (zeros[0] - zeros[1]) / _factor(target, "K")


def convertible(unit: str, other: str) -> bool:
    """True where both units are known and of one dimension."""
    try:
        return _dimension(unit) == _dimension(other)
    except UnitError:
        return False


def check(unit: str) -> None:
    """Raise UnitError where `unit` is no unit that this module knows; the nearest known name is the hint."""
    _parsed(unit)


def kind(unit: str) -> str:
    """What `unit` measures, in words with an article: "a mass". Raises UnitError for an unknown unit."""
    dimension = _dimension(unit)
    words = _known_dimensions().get(dimension)
    return words or f"a quantity of {_spelled(dimension)}"


def per_time(unit: str, time_unit: str) -> str:
    """The unit of a rate: `rad` and `s` give `rad/s`, `m/s` and `s` give `m/s^2`, a plain number gives `1/s`."""
    if unit in ("", "1"):
        return f"1/{time_unit}"
    if unit.endswith(f"/{time_unit}") and unit.count("/") == 1:
        return f"{unit}^2"
    return f"{unit}/{time_unit}"


def composed(above: Sequence[str], below: Sequence[str]) -> str:
    """The unit of a product over a product, cleared: `rad/s^2` over `m/s` is `rad/(m s)`; "1" where nothing is left.

    Names are kept as they are spelled. Raises UnitError for what is no unit text.
    """
    powers: dict[str, float] = {}
    for units, sign in ((above, 1.0), (below, -1.0)):
        for unit in units:
            try:
                if unit not in _PLAIN:
                    _add_product(_Tokens(unit), powers, sign, closing=False)
            except (_NoUnitError, RecursionError):
                raise UnitError(f"{unit!r} is no unit", _EXAMPLES) from None
    top = [_power(name, power) for name, power in powers.items() if power > 0]
    bottom = [_power(name, -power) for name, power in powers.items() if power < 0]
    if not bottom:
        return " ".join(top) or "1"
    joined = f"({' '.join(bottom)})" if len(bottom) > 1 else bottom[0]
    return f"{' '.join(top) or '1'}/{joined}"


def amplitude_ratio(number: float, unit: str) -> float:
    """A ratio of amplitudes: `6 dB` is 1.995; `2`, `200 %` and `2 pu` are 2. Raises UnitError."""
    if unit == "dB":
        return float(10.0 ** (number / 20.0))
    return convert(number, unit, "1")


@lru_cache(maxsize=1)
def _registry() -> pint.UnitRegistry[float]:
    import pint

    # a cache on disk would make the first run differ from the second one
    return pint.UnitRegistry(_lines(), cache_folder=None, on_redefinition="raise")


def _lines() -> list[str]:
    return [line for line in DEFINITIONS.splitlines() if line]


def _unit_names() -> list[str]:
    words = [word.strip() for line in _lines() if "-" not in line.split()[0] for word in line.split("=")]
    return [word for word in words if re.fullmatch(r"[A-Za-z]\w*", word)]


@lru_cache(maxsize=1024)
def _parsed(unit: str) -> Any:
    """pint's value of a unit text; "" and "1" are the plain number."""
    powers: dict[str, float] = {}
    if unit not in _PLAIN:
        try:
            _add_product(_Tokens(unit), powers, 1.0, closing=False)
        except (_NoUnitError, RecursionError):
            raise UnitError(f"{unit!r} is no unit", _EXAMPLES) from None
    sums: dict[str, float] = {}  # by full name, so that `m` and `meter` add up
    for name, power in powers.items():
        full = _full_name(name)
        if not full:
            raise UnitError(f"{name!r} is no unit", _EXAMPLES, _hint(name))
        sums[full] = sums.get(full, 0.0) + power
    registry = _registry()
    return registry.Unit(registry.UnitsContainer({name: power for name, power in sums.items() if power}))


def _full_name(name: str) -> str:
    """`km` is kilometer; an empty string for what is no unit. Only words may have a plural: `kgs` is refused."""
    readings = _registry().parse_unit_name(name)
    if not readings:
        return ""
    full = "".join(readings[0][:2])
    plural = name.endswith("s") and any("".join(other[:2]) == full for other in _registry().parse_unit_name(name[:-1]))
    return "" if plural and len(name) <= _SYMBOL else full


def _hint(name: str) -> str:
    stem = name.rstrip("23")
    if stem != name and _full_name(stem):
        return f"{stem}^{name[len(stem) :]}"
    cases = (f"{name[:1].swapcase()}{name[1:]}", name.lower(), name.upper(), name.capitalize())
    cased = next((word for word in cases if _full_name(word)), "")
    return HABITS.get(name) or cased or nearest(name, _unit_names())


class _NoUnitError(Exception):
    """The text does not follow the grammar of units; `_parsed` says so with the whole text."""


class _Tokens:
    """The tokens of a unit text, one ahead. Mutable: a parser's place in its text."""

    def __init__(self, unit: str) -> None:
        text = unit
        for spelling, plain in _SPELLINGS:
            text = text.replace(spelling, plain)
        self.left: list[tuple[str, str]] = []
        at = 0
        while at < len(text):
            match = _TOKEN.match(text, at)
            if match is None:
                raise _NoUnitError
            self.left.append((str(match.lastgroup), match[str(match.lastgroup)]))
            at = match.end()
        self.left.reverse()

    @property
    def ahead(self) -> str:
        return self.left[-1][1] if self.left else ""

    def take(self) -> tuple[str, str]:
        if not self.left:
            raise _NoUnitError
        return self.left.pop()


def _add_product(tokens: _Tokens, powers: dict[str, float], sign: float, *, closing: bool) -> None:
    """product := power (("*" | "/" | "") power)*; a slash divides by the one power that follows it."""
    _add_power(tokens, powers, sign)
    while tokens.ahead and tokens.ahead != ")":
        below = tokens.ahead == "/"
        if tokens.ahead in ("*", "/"):
            tokens.take()
        _add_power(tokens, powers, -sign if below else sign)
    if closing:
        tokens.take()
    elif tokens.ahead:
        raise _NoUnitError


def _add_power(tokens: _Tokens, powers: dict[str, float], sign: float) -> None:
    """power := (name | "1" | "(" product ")") ["^" number | "^" "(" number ")"]."""
    group, text = tokens.take()
    inner = {text: 1.0} if group == "name" else {}
    if text == "(":
        _add_product(tokens, inner, 1.0, closing=True)
    elif group == "mark" or (group == "number" and text != "1"):
        raise _NoUnitError
    exponent = 1.0
    if tokens.ahead == "^":
        tokens.take()
        exponent = _exponent(tokens)
    for name, power in inner.items():
        powers[name] = powers.get(name, 0.0) + sign * exponent * power


def _exponent(tokens: _Tokens) -> float:
    group, text = tokens.take()
    if text == "(":
        exponent = _exponent(tokens)
        if tokens.take()[1] != ")":
            raise _NoUnitError
        return exponent
    if group != "number" or abs(float(text)) > _STEEPEST:
        raise _NoUnitError
    return float(text)


@lru_cache(maxsize=1024)
def _dimension(unit: str) -> tuple[tuple[str, float], ...]:
    powers = _parsed(unit).dimensionality
    return tuple(sorted((str(name).strip("[]"), float(power)) for name, power in powers.items()))


@lru_cache(maxsize=1024)
def _factor(unit: str, other: str) -> float:
    return float(_registry().convert(1.0, _parsed(unit), _parsed(other)))


def _scaled(number: float, factor: float) -> float:
    """number * factor, rounded once where 1/factor is a whole number: 7 ms is 0.007 s to the last bit."""
    whole = round(1.0 / factor) if 1e-15 < factor < 1.0 else 0
    if whole and abs(1.0 / factor - whole) <= 4e-16 * whole:
        return number / whole
    return number * factor


def _zeros(unit: str, target: str, text: str) -> tuple[float, float] | None:
    """Kelvin at the zeros of both scales where both units are scales of temperature, else None."""
    theirs, ours = str(_parsed(unit)), str(_parsed(target))
    if theirs in _DELTAS and ours in ("degC", "degF"):
        raise UnitError(f"{text!r} is a difference of temperatures", f"a temperature in {target} is expected")
    if theirs in _ZERO and ours in _ZERO:
        return _ZERO[theirs], _ZERO[ours]
    return None


@lru_cache(maxsize=1)
def _known_dimensions() -> dict[tuple[tuple[str, float], ...], str]:
    known: dict[tuple[tuple[str, float], ...], str] = {}
    for line in WORDS.strip().splitlines():
        unit, words = line.split(": ")
        known.setdefault(_dimension(unit), words)
    return known


def _spelled(dimension: tuple[tuple[str, float], ...]) -> str:
    """`mass^1 * time^-2` without the ones: `mass/time^2`."""
    above = [_power(name, power) for name, power in dimension if power > 0]
    below = [_power(name, -power) for name, power in dimension if power < 0]
    return "*".join(above or ["1"]) + "".join(f"/{name}" for name in below)


def _power(name: str, power: float) -> str:
    return name if power == 1 else f"{name}^{shown(power)}"


def _mistaken(number: float, unit: str, target: str) -> str:
    """What the quantity is; for cycles against radians also what it would be on the other count."""
    words = kind(unit)
    theirs, ours = dict(_dimension(unit)), dict(_dimension(target))
    for mine, other, ratio in (("cycle", "angle", 2.0 * math.pi), ("angle", "cycle", 0.5 / math.pi)):
        power = theirs.get(mine, 0.0)
        if power and other not in theirs and ours == _swapped(theirs, mine, other):
            value = number * _in_base(unit) / _in_base(target) * ratio**power
            return f"{words}, and {shown(value)} {target} if one cycle counts as 2 pi rad"
    return words


def _swapped(dimension: dict[str, float], mine: str, other: str) -> dict[str, float]:
    return {other if name == mine else name: power for name, power in dimension.items()}


def _in_base(unit: str) -> float:
    return float(_registry().Quantity(1.0, _parsed(unit)).to_base_units().magnitude)
