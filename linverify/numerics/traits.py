"""What engineers ask of a mode, with the range in which it surely lies: damping ratio, frequencies, times.

What a mode never does takes infinitely long: a mode that does not decay has an infinite time constant and time to half,
one that does not grow an infinite time to double, one that does not oscillate an infinite period. So "at least" holds
for such a mode and "at most" does not.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

ROUNDING = 2.0**-50  # relative: of the few operations between a pole and its figure
LN2 = math.log(2.0)


@dataclass(frozen=True, slots=True)
class Known:
    """A figure and the range in which it surely lies."""

    value: float
    low: float
    high: float

    @property
    def error(self) -> float:
        """The larger distance to an end of the range."""
        # infinite ends that are met have no error, although infinity less infinity is no number
        below = 0.0 if self.value == self.low else self.value - self.low
        above = 0.0 if self.value == self.high else self.high - self.value
        return max(below, above)


@dataclass(frozen=True, slots=True)
class Pole:
    """A pole in s, per time unit, in a disc. real: it is real for sure; then its imaginary part has no error.

    along: bound of the error of the real part alone. beyond: least decay rate and largest |Im| of a discrete pole so
    near to z = 0 that nothing else is known of it.
    """

    value: complex
    radius: float
    real: bool = False
    beyond: tuple[float, float] | None = None
    along: float = math.inf


def decay_rate(pole: Pole) -> Known:
    """-Re, which is damping ratio times natural frequency."""
    if pole.beyond:
        return Known(math.inf, pole.beyond[0], math.inf)
    rate = -pole.value.real
    error = min(pole.radius, pole.along) + ROUNDING * abs(pole.value)
    return Known(rate, rate - error, rate + error)


def natural_frequency(pole: Pole) -> Known:
    """|pole| in rad per time unit."""
    if pole.beyond:
        return Known(math.inf, max(pole.beyond[0], 0.0), math.inf)
    size, radius = abs(pole.value), _widened(pole)
    return Known(size, max(size - radius, 0.0), size + radius)


def damping(pole: Pole) -> Known:
    """-Re / |pole|, from -1 to 1: 1 and -1 for real poles; anything where the pole may lie at the origin."""
    if pole.beyond:
        least, turn = pole.beyond
        return Known(1.0, 1.0 if math.isinf(least) else least / math.hypot(least, turn), 1.0)
    size, radius = abs(pole.value), _widened(pole)
    if not radius < size:
        return Known(0.0 if size == 0.0 else -pole.value.real / size, -1.0, 1.0)
    value = max(-1.0, min(1.0, -pole.value.real / size))
    if pole.real and pole.value.imag == 0.0:
        return Known(value, value, value)
    angle, spread = math.acos(value), math.asin(radius / size)
    low, high = math.cos(min(angle + spread, math.pi)), math.cos(max(angle - spread, 0.0))
    rate = decay_rate(pole)
    ratios = [end / length for end in (rate.low, rate.high) for length in (size - radius, size + radius)]
    # by the angle and by real part over length: whichever is known better
    return Known(value, min(max(low, min(ratios)), value), max(min(high, max(ratios)), value))


def time_constant(pole: Pole) -> Known:
    """1 / decay rate; infinite for a mode that does not decay."""
    return _reciprocal(decay_rate(pole), 1.0)


def time_to_half(pole: Pole) -> Known:
    """Time in which the amplitude halves; infinite for a mode that does not decay."""
    return _reciprocal(decay_rate(pole), LN2)


def time_to_double(pole: Pole) -> Known:
    """Time in which the amplitude doubles; infinite for a mode that does not grow."""
    rate = decay_rate(pole)
    return _reciprocal(Known(-rate.value, -rate.high, -rate.low), LN2)


def period(pole: Pole) -> Known:
    """2 pi / |Im|; infinite for a mode that does not oscillate."""
    if pole.beyond:
        return Known(math.inf, 2.0 * math.pi / pole.beyond[1], math.inf)
    turn, radius = abs(pole.value.imag), _widened(pole)
    if pole.real:
        radius = 0.0
    return _reciprocal(Known(turn, turn - radius, turn + radius), 2.0 * math.pi)


TRAITS: dict[str, Callable[[Pole], Known]] = {
    "damping": damping,
    "natural_frequency": natural_frequency,
    "decay_rate": decay_rate,
    "time_constant": time_constant,
    "time_to_half": time_to_half,
    "time_to_double": time_to_double,
    "period": period,
}


def pair_damping(first: Pole, second: Pole) -> Known:
    """Damping ratio, 1 or more, of the second-order factor that two decaying real poles make up: (a + b) / 2 sqrt(ab).

    Unknown (0 to infinity) where one of them may not decay.
    """
    slow, fast = sorted((decay_rate(first), decay_rate(second)), key=lambda rate: rate.value)
    if slow.low <= 0.0 or fast.low <= 0.0 or math.isinf(fast.value):
        return Known(math.nan, 0.0, math.inf)
    return Known(
        _equivalent(fast.value / slow.value),
        _equivalent(max(fast.low / slow.high, 1.0)),
        _equivalent(fast.high / slow.low),
    )


def _equivalent(ratio: float) -> float:
    return 0.5 * (math.sqrt(ratio) + 1.0 / math.sqrt(ratio))


def _widened(pole: Pole) -> float:
    """The radius with what rounding adds on the way to a figure."""
    return pole.radius + ROUNDING * abs(pole.value)


def _reciprocal(rate: Known, top: float) -> Known:
    """top / rate with zero and negative rates taking infinitely long."""
    return Known(*(_time(value, top) for value in (rate.value, rate.high, rate.low)))


def _time(rate: float, top: float) -> float:
    if not rate > 0.0:
        return math.inf
    return top / rate if rate > top / 1.7e308 else math.inf
