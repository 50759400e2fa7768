"""Quantities as engineers write them: split into number and unit, named by dimension, converted.

A `Quantity` without a unit is a number in whatever unit is expected at its place. Rules that go beyond arithmetic:

* Angle is a dimension of its own. `deg`, `rad` and `rev` convert into each other, but an angle never passes for a plain
  number: a slope of 3 and an angle of 3 rad are different things, and a plant that means the first says "1".
* A cycle is a dimension of its own, and Hz is one cycle a second: Hz never passes for rad/s or 1/s. The message states
  both numbers, so that the writer can pick the one that is meant. `rpm` is a rate of angle, as tachometers use it.
* A decibel is a dimension of its own; `amplitude_ratio` is the one way from dB to a ratio.
* Temperatures are points on their scale, unless the caller asks for a difference. In a compound unit (`degC/min`,
  `J/(kg K)`) they are always differences.

pint does the arithmetic, with the definitions below instead of its own (a tenth of the load time, and its Hz is 1/s).
It is imported when the first unit has to be converted, never for plain numbers or for equal units.
"""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Any

from .errors import LinverifyError
from .signals import nearest

if TYPE_CHECKING:
    import pint

_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?")
_UNIT = re.compile(r"[A-Za-z_0-9%°µμΩ^*/().· +-]{1,60}")
_NAME = re.compile(r"[A-Za-z_][A-Za-z_0-9]*")
_SPELLINGS = (("**", "^"), ("°C", "degC"), ("°F", "degF"), ("°", "deg"), ("%", "percent"), ("µ", "u"), ("μ", "u"), ("Ω", "ohm"), ("·", "*"))

_DEFINITIONS = """
nano- = 1e-9 = n-
micro- = 1e-6 = u-
milli- = 1e-3 = m-
centi- = 1e-2 = c-
deci- = 1e-1 = d-
hecto- = 1e2 = h-
kilo- = 1e3 = k-
mega- = 1e6 = M-
giga- = 1e9 = G-
tera- = 1e12 = T-
meter = [length] = m = metre
kilogram = [mass] = kg
second = [time] = s = sec
ampere = [current] = A
kelvin = [temperature] = K
mole = [substance] = mol
candela = [luminosity] = cd
radian = [angle] = rad
cycle = [cycle]
decibel = [level] = dB
gram = 1e-3 * kilogram = g
tonne = 1e3 * kilogram = t
minute = 60 * second = min
hour = 3600 * second = h = hr
day = 86400 * second = d
degree = 3.14159265358979323846 / 180 * radian = deg
arcminute = degree / 60 = arcmin
revolution = 2 * 3.14159265358979323846 * radian = rev = turn
rpm = revolution / minute
hertz = cycle / second = Hz
percent = 0.01
permille = 0.001
ppm = 1e-6
pu = 1
degC = kelvin
degF = 5 / 9 * kelvin
delta_degC = kelvin
delta_degF = 5 / 9 * kelvin
inch = 0.0254 * meter = in
foot = 0.3048 * meter = ft = feet
yard = 0.9144 * meter = yd
mile = 1609.344 * meter = mi
nautical_mile = 1852 * meter = nmi
knot = 1852 / 3600 * meter / second = kn = kt
kph = kilometer / hour
mph = mile / hour
hectare = 1e4 * meter ** 2 = ha
litre = 1e-3 * meter ** 3 = L = l = liter
gallon = 231 * inch ** 3 = gal
gpm = gallon / minute
pound = 0.45359237 * kilogram = lb
slug = 14.593902937206364 * kilogram
standard_gravity = 9.80665 * meter / second ** 2 = g_0
newton = kilogram * meter / second ** 2 = N
pound_force = 4.4482216152605 * newton = lbf
kilogram_force = 9.80665 * newton = kgf
pascal = newton / meter ** 2 = Pa
bar = 1e5 * pascal
atmosphere = 101325 * pascal = atm
psi = pound_force / inch ** 2
mmHg = 133.322387415 * pascal
joule = newton * meter = J
calorie = 4.184 * joule = cal
BTU = 1055.05585262 * joule
watt = joule / second = W
watt_hour = 3600 * joule = Wh
volt_ampere = watt = VA = var
horsepower = 745.69987158227 * watt = hp
volt = watt / ampere = V
coulomb = ampere * second = C
ampere_hour = 3600 * coulomb = Ah
ohm = volt / ampere
siemens = ampere / volt = S
farad = coulomb / volt = F
henry = volt * second / ampere = H
weber = volt * second = Wb
tesla = weber / meter ** 2 = T
poise = 0.1 * pascal * second = P
"""

# the first unit of a dimension found here lends its words to it
_WORDS = """
1: a plain number
m: a length
m^2: an area
m^3: a volume
kg: a mass
s: a time
rad: an angle
1/s: a rate in 1/s
Hz: a frequency in cycles
Hz/s: a rate of frequency
cycle: a number of cycles
dB: a level in decibels
dB/s: a rate of a level
m/s: a speed
m/s^2: an acceleration
m/s^3: a jerk
rad/s: an angular rate
rad/s^2: an angular acceleration
N: a force
N/s: a rate of force
J: an energy or torque
W: a power
W/s: a rate of power
Pa: a pressure
Pa/s: a rate of pressure
kg/s: a mass flow
kg/s^2: a stiffness
mol/s: a molar flow
m^3/s: a volume flow
m^2/s: a diffusivity
kg/m^3: a density
m^3/kg: a specific volume
J/kg: a specific energy
kg*m^2: a moment of inertia
kg*m/s: a momentum
K: a temperature
K/s: a rate of temperature
J/K: a heat capacity
J/kg/K: a specific heat
W/K: a heat conductance
W/m^2: a heat flux
W/m^2/K: a heat transfer coefficient
W/m/K: a heat conductivity
Pa*s: a viscosity
A: an electric current
A/s: a rate of current
V: a voltage
V/s: a rate of voltage
C: an electric charge
ohm: a resistance
S: a conductance
F: a capacitance
H: an inductance
Wb: a magnetic flux
T: a flux density
mol: an amount of substance
mol/m^3: a concentration
mol/m^3/s: a rate of concentration
N*m/rad: a torsional stiffness
cd: a luminous intensity
"""

_ZERO = {"degC": 273.15, "degF": 459.67 * 5.0 / 9.0, "kelvin": 0.0}  # kelvin at the zero of each scale
_DELTAS = ("delta_degC", "delta_degF")


class UnitError(LinverifyError, ValueError):
    """A quantity cannot be read or converted; `wrong` says what it is, `expected` what was due, `hint` the nearest word."""

    def __init__(self, wrong: str, expected: str = "", hint: str = "") -> None:
        super().__init__("; ".join(part for part in (wrong, expected) if part))
        self.wrong, self.expected, self.hint = wrong, expected, hint


@dataclass(frozen=True, slots=True)
class Quantity:
    """A finite number with the unit that was written beside it; unit "" stands for the unit expected at its place."""

    number: float
    unit: str = ""

    def __str__(self) -> str:
        return f"{shown(self.number)} {self.unit}".strip()


def shown(number: float) -> str:
    """A number as messages show it: at most six significant digits."""
    return f"{number:.6g}"


def parse(text: str) -> Quantity:
    """Split `30 kn`, `-1.5e3 N*m`, `5%` or `12` into number and unit.

    Only the number and the characters of the unit are looked at; `check` or a conversion decides whether the unit
    exists. Raises UnitError.
    """
    words = text.strip()
    match = _NUMBER.match(words)
    if match is None:
        raise UnitError(f"{text!r} does not begin with a number", "a number, or a number with a unit, is expected")
    number, unit = float(match.group()), words[match.end() :].strip()
    if not math.isfinite(number):
        raise UnitError(f"{text!r} is too large for a number", "a finite number is expected")
    if unit and unit[0] in ",:_":
        raise UnitError(f"{text!r} is no number", "digits with a decimal point, then a unit, are expected")
    if unit and not _UNIT.fullmatch(unit):
        raise UnitError(f"{unit!r} in {text!r} is no unit", "a unit such as m, kg/m^3 or deg/s is expected")
    return Quantity(number, unit)


def convert(quantity: Quantity, unit: str, *, difference: bool = False) -> float:
    """The number of `quantity` in `unit`. A quantity without a unit is already in it.

    difference: temperatures are differences (bands, amplitudes, rates, tolerances) and not points of a scale.
    Raises UnitError, naming both dimensions in words.
    """
    if quantity.unit in ("", unit):
        return quantity.number
    theirs, ours = _dimension(quantity.unit), _dimension(unit)
    if theirs != ours:
        raise UnitError(f"{str(quantity)!r} is {_mismatch(quantity, unit)}", f"{kind(unit)} in {unit or '1'} is expected")
    factor = _factor(quantity.unit, unit)
    zero = None if difference else _zeros(quantity, unit)
    if zero is None:
        return _scaled(quantity.number, factor)
    kelvin_a_degree = _factor(unit, "K")
    return _scaled(quantity.number, factor) + (zero[0] - zero[1]) / kelvin_a_degree


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


def amplitude_ratio(quantity: Quantity) -> float:
    """A ratio of amplitudes: `6 dB` is 1.995; `2`, `200 %` and `2 pu` are 2. Raises UnitError."""
    if quantity.unit == "dB":
        return float(10.0 ** (quantity.number / 20.0))
    return convert(quantity, "1")


@lru_cache(maxsize=1)
def _registry() -> pint.UnitRegistry[float]:
    import pint

    # a cache on disk would make the first run differ from the second one
    return pint.UnitRegistry(_lines(), cache_folder=None, on_redefinition="raise")


def _lines() -> list[str]:
    return [line for line in _DEFINITIONS.splitlines() if line]


def _unit_names() -> Iterator[str]:
    for line in _lines():
        for word in line.split("="):
            if not line.split()[0].endswith("-") and re.fullmatch(r"[A-Za-z_0]+", word.strip()):
                yield word.strip()


@lru_cache(maxsize=1024)
def _parsed(unit: str) -> Any:
    """pint's value of a unit text; "" and "1" are the plain number."""
    import pint

    text = unit
    for spelling, plain in _SPELLINGS:
        text = text.replace(spelling, plain)
    if text in ("", "1"):
        text = "dimensionless"
    for name in _NAME.findall(text):
        if name != "dimensionless" and name not in _registry():
            hint = nearest(name, _unit_names())
            raise UnitError(f"{name!r} is no unit", "a unit such as m, kg/m^3 or deg/s is expected", hint)
    try:
        if not _UNIT.fullmatch(unit or "1"):
            raise ValueError(unit)
        return _registry().parse_units(text)
    except (pint.errors.PintError, ValueError, TypeError, SyntaxError, ArithmeticError, AttributeError, RecursionError):
        raise UnitError(f"{unit!r} is no unit", "a unit such as m, kg/m^3 or deg/s is expected") from None


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


def _zeros(quantity: Quantity, unit: str) -> tuple[float, float] | None:
    """Kelvin at the zeros of both scales where both units are scales of temperature, else None."""
    theirs, ours = str(_parsed(quantity.unit)), str(_parsed(unit))
    if theirs in _DELTAS and ours in ("degC", "degF"):
        raise UnitError(f"{str(quantity)!r} is a difference of temperatures", f"a temperature in {unit} is expected")
    if theirs in _ZERO and ours in _ZERO:
        return _ZERO[theirs], _ZERO[ours]
    return None


@lru_cache(maxsize=1)
def _known_dimensions() -> dict[tuple[tuple[str, float], ...], str]:
    known: dict[tuple[tuple[str, float], ...], str] = {}
    for line in _WORDS.strip().splitlines():
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


def _mismatch(quantity: Quantity, unit: str) -> str:
    """What the quantity is; for cycles against radians also what it would be on the other count."""
    words = kind(quantity.unit)
    theirs, ours = dict(_dimension(quantity.unit)), dict(_dimension(unit))
    for mine, other, factor in (("cycle", "angle", 2.0 * math.pi), ("angle", "cycle", 0.5 / math.pi)):
        power = theirs.get(mine, 0.0)
        if power and theirs.get(other, 0.0) == 0.0 and ours == _swapped(theirs, mine, other):
            base = _in_base(quantity) * factor**power
            ratio = base / _in_base(Quantity(1.0, unit))
            return f"{words}, and would be {shown(ratio)} {unit} if one cycle is 2 pi rad"
    return words


def _swapped(dimension: dict[str, float], mine: str, other: str) -> dict[str, float]:
    return {other if name == mine else name: power for name, power in dimension.items()}


def _in_base(quantity: Quantity) -> float:
    unit = _parsed(quantity.unit)
    return float(_registry().get_base_units(unit)[0]) * quantity.number
