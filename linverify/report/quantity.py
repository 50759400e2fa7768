"""Numbers with units as an engineer reads them; at most six significant digits, never more than is known."""

from __future__ import annotations

import math

from ..core.shown import number as in_digits
from ..core.shown import with_unit
from ..core.verdict import Figure, Sense

ABSENT = "-"
FAR = 100.0  # used share beyond which headroom is told in words


def number(value: float, digits: int = 6) -> str:
    """`value` to so many significant digits: 0.04, 1.5e6, -2e-8, infinite; a dash for NaN."""
    if math.isnan(value):
        return ABSENT
    if math.isinf(value):
        return "infinite" if value > 0 else "-infinite"
    return in_digits(value, digits)


def quantity(value: float, unit: str = "", digits: int = 6) -> str:
    """`value` and its unit; a dash for NaN. Units "" and "1" are not written, nor one of what is infinite."""
    text = number(value, digits)
    return with_unit(text, unit) if math.isfinite(value) else text


def exactly(value: float, unit: str = "") -> str:
    """`value` to its last digit, and its unit as in `quantity`."""
    return with_unit(f"{value!r}", unit)


def percent(share: float) -> str:
    """A share in per cent, to a tenth of a per cent or, where that would read as nothing, to two digits."""
    if not math.isfinite(share):
        return ABSENT
    value = 100.0 * share
    return f"{number(round(value, 1) if abs(value) >= 0.1 else value, 6 if abs(value) >= 0.1 else 2)} %"


def headroom(figure: Figure) -> str:
    """The headroom in per cent; words where a limit is missed by so much that per cent mean nothing; else a dash."""
    if figure.used_share > FAR:
        return f"under 1/{FAR:g} of the limit" if figure.sense is Sense.LOWER else f"over {FAR:g} times the limit"
    return percent(figure.headroom)


def headroom_told(figure: Figure) -> str:
    """The same inside a sentence: headroom 60 %; empty where a share has no meaning."""
    text = headroom(figure)
    if text == ABSENT:
        return ""
    return text if figure.used_share > FAR else f"headroom {text}"


def worst(figure: Figure) -> str:
    """The measured figure: four digits, or six where four would not tell it from its limit."""
    close = any(_close(figure.worst, limit) for limit in (figure.limit, figure.low))
    return quantity(figure.worst, figure.unit, 6 if close else 4)


def _close(value: float, limit: float) -> bool:
    """Whether four digits would not tell a value from a limit that it is not."""
    short = float(f"{value:.4g}")
    return value != limit and (short == float(f"{limit:.4g}") or (short > limit) != (value > limit))


def subject(figure: Figure) -> str:
    """What was measured and on what: peak error of ride_height."""
    return f"{figure.what} of {figure.signal}" if figure.signal else figure.what


def limit(figure: Figure) -> str:
    """The limit with its sense: at most 0.04 m; a dash for a figure that is only told."""
    if figure.sense is Sense.NONE or math.isnan(figure.limit):
        return ABSENT
    if figure.sense is Sense.RANGE:
        return f"{figure.sense.value} {number(figure.low)} to {quantity(figure.limit, figure.unit)}"
    return f"{figure.sense.value} {quantity(figure.limit, figure.unit)}"


def met_at(figure: Figure) -> str:
    """Where the worst was met: t = 3.25 s, 3.2 rad/s, or both; empty where neither has meaning."""
    return ", ".join(part for part in (instant(figure), frequency(figure)) if part)


def worst_met(figure: Figure) -> str:
    """The measured figure and the frequency it was met at: 4.1 dB at 3.2 rad/s."""
    return " at ".join(part for part in (worst(figure), frequency(figure)) if part)


def frequency(figure: Figure) -> str:
    """At which frequency the worst was met: 3.2 rad/s; empty where frequency has no meaning."""
    return "" if math.isnan(figure.at_frequency) else quantity(figure.at_frequency, figure.frequency_unit, 4)


def instant(figure: Figure) -> str:
    """When the worst was met: t = 3.25 s; empty where time has no meaning."""
    return "" if math.isnan(figure.when) else f"t = {quantity(figure.when, figure.time_unit)}"
