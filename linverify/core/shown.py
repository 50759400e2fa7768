"""Numbers as readers see them, in the unit that the engineer wrote instead of the plant's.

Everything is computed in the plant's own units. A `Shown` goes along with what the spec wrote in another unit, and is
used at the very end, where a number becomes part of a verdict.
"""

from __future__ import annotations

import math
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Shown:
    """The unit that a quantity is told in: number told = scale * number in the plant's unit + offset.

    offset: that of the zeros of two temperature scales; it does not enter sizes (errors, deviations, tolerances).
    """

    unit: str = ""
    scale: float = 1.0
    offset: float = 0.0

    def value(self, value: float) -> float:
        """A value of the plant's unit in this one."""
        return value * self.scale + self.offset

    def size(self, size: float) -> float:
        """A difference of two values of the plant's unit in this one."""
        return size * self.scale

    def told(self, value: float, digits: int = 6) -> str:
        """A value of the plant's unit as text: `12.3 kn`."""
        return with_unit(number(self.value(value), digits), self.unit)

    def told_size(self, size: float, digits: int = 6) -> str:
        """A difference of two values of the plant's unit as text: `0.3 deg`."""
        return with_unit(number(self.size(size), digits), self.unit)

    def ratio(self, value: float) -> float:
        """A ratio in decibels where this unit is dB, else as `size`; zero is -infinite dB, NaN for a negative one."""
        if self.unit != "dB":
            return self.size(value)
        return decibels(value)

    def told_ratio(self, value: float, digits: int = 6) -> str:
        """A ratio as text: `6 dB` where this unit is dB, else the number itself."""
        return with_unit(number(self.ratio(value), digits), self.unit)

    def told_change(self, size: float, digits: int = 6) -> str:
        """As `told_size`, with its sign: `+0.3 deg`."""
        return with_unit(self._signed(size, digits), self.unit)

    def told_range(self, low: float, high: float, between: str = "to", digits: int = 6) -> str:
        """Two differences with their signs and one unit: `-0.3 to +0.5 deg`."""
        return f"{self._signed(low, digits)} {between} {self.told_change(high, digits)}"

    def _signed(self, size: float, digits: int) -> str:
        return f"{'+' if self.size(size) > 0.0 else ''}{number(self.size(size), digits)}"


def decibels(ratio: float) -> float:
    """A ratio of amplitudes in decibels: zero is -infinite, NaN for a negative one."""
    if ratio == 0.0:
        return -math.inf
    return 20.0 * math.log10(ratio) if ratio > 0.0 else math.nan


def number(value: float, digits: int = 6) -> str:
    """`value` to so many significant digits, in the one form of all messages and reports: 0.04, 1.5e6, -2e-8."""
    if not math.isfinite(value):
        return f"{value}"
    mantissa, _, exponent = f"{value + 0.0:.{digits}g}".partition("e")
    return f"{mantissa}e{int(exponent)}" if exponent else mantissa


def with_unit(text: str, unit: str) -> str:
    """A number's text and its unit; plain numbers have none."""
    return text if unit in ("", "1") else f"{text} {unit}"
