"""What a single scalar means: YAML 1.2's core rules, read strictly, so that nothing means what it does not look like.

Each reader takes the text of a scalar and returns its value, or a `Wrong` that says what is wrong and what was
expected; places are added by the caller. Units are split off here but looked up when the spec is bound.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

_NUMBER = r"[-+]?(?:(?:0|[1-9][0-9]*)(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][-+]?[0-9]+)?"
_ONLY_NUMBER = re.compile(_NUMBER)
# a unit starts with a letter, a degree or per cent sign, or is 1/s and the like
_WITH_UNIT = re.compile(rf"({_NUMBER})\s*((?:[^\W\d_]|[%°])[^:,]*|(?<=\s)1/[^:,]*)")
_SIZE = _NUMBER.removeprefix("[-+]?")
# a real and an imaginary part, the latter with i or j on either side; brackets may keep a unit apart
_COMPLEX = re.compile(
    rf"(?P<open>\()?\s*(?:(?P<real>{_NUMBER})\s*(?P<sign>\+-|[-+])|(?P<alone>\+-|[-+])?)\s*"
    rf"(?:[ij]\s?(?P<behind>{_SIZE})|(?P<before>{_SIZE})?\s?[ij])\s*(?(open)\))(?:\s+(?P<unit>\S.*))?"
)
_CORE_NULL = re.compile(r"|~|null|Null|NULL")
_CORE_TRUTH = re.compile(r"true|True|TRUE|false|False|FALSE")
_CORE_NUMBER = re.compile(
    r"[-+]?[0-9]+|0o[0-7]+|0x[0-9a-fA-F]+|[-+]?(?:\.[0-9]+|[0-9]+(?:\.[0-9]*)?)(?:[eE][-+]?[0-9]+)?"
    r"|[-+]?\.(?:inf|Inf|INF)|\.(?:nan|NaN|NAN)"
)
_LIKE = "a complex number is expected, as in -0.8 + 2.1j"
_LONGEST_SHOWN = 60
_LONGEST_NUMBER = 60

# (what it looks like, what to say): tried in this order on a text that is no number
_TRAPS: tuple[tuple[re.Pattern[str], str], ...] = (
    (re.compile(r"[-+]?\.?(inf|infinity|nan)", re.IGNORECASE), "a finite number is expected"),
    (re.compile(r"[-+]?0[xXoObB][0-9a-fA-F_]+"), "write it as a decimal number"),
    (re.compile(r"[-+]?0[0-9]+(\.[0-9]*)?([eE][-+]?[0-9]+)?(\s.*)?"), "write it without the leading zero"),
    (re.compile(r"[-+]?[0-9][0-9_]*_[0-9_.]*(\s.*)?"), "write it without '_'"),
    (re.compile(r"[0-9]{4}-[0-9]{1,2}-[0-9]{1,2}.*"), "a number is expected, not a date"),
    (re.compile(r"[-+]?[0-9]+(:[0-9]+)+(\.[0-9]*)?"), "a number is expected; write '90 s' or '1.5 min'"),
    (re.compile(r"[-+]?[0-9]+,[0-9]+(\s.*)?"), "write a decimal point, not a comma"),
    (re.compile(r"[\u2010-\u2015\u2212\ufe63\uff0d].*"), "the sign is not the '-' of the keyboard; type it anew"),
    (re.compile(r"true|false|on|off|yes|no", re.IGNORECASE), "a number is expected"),
)
_LOOKS_TRUE = re.compile(r"(true|yes|on|y)|(false|no|off|n)", re.IGNORECASE)


@dataclass(frozen=True, slots=True)
class Wrong:
    """Why a text is not the value that is due."""

    wrong: str
    expected: str = ""


@dataclass(frozen=True, slots=True)
class Amount:
    """A finite number and the unit's text ("" for none)."""

    value: float
    unit: str


def quoted(text: str) -> str:
    """`text` as messages show it: in quotes, unprintable characters escaped, cut where it is long."""
    return repr(text if len(text) <= _LONGEST_SHOWN else text[: _LONGEST_SHOWN - 3] + "...")


def printable(text: str, longest: int = 400) -> str:
    """`text` on one line: unprintable characters escaped, cut where it is very long."""
    shown = "".join(each if each.isprintable() else each.encode("unicode_escape").decode() for each in text[:longest])
    return shown if len(text) <= longest else shown + "..."


def is_null(text: str) -> bool:
    """True where YAML 1.2 reads plain `text` as no value."""
    return _CORE_NULL.fullmatch(text) is not None


def is_text(text: str) -> bool:
    """True where YAML 1.2 reads plain `text` as text: `on`, `no`, `1:30` and dates are, `true` and `010` are not."""
    return not (is_null(text) or _CORE_TRUTH.fullmatch(text) or _CORE_NUMBER.fullmatch(text))


def truth(text: str, plain: bool = True) -> bool | Wrong:
    """A truth value: true or false and nothing else."""
    if plain and _CORE_TRUTH.fullmatch(text):
        return text.lower() == "true"
    looks = _LOOKS_TRUE.fullmatch(text)
    hint = f"; write {'true' if looks.group(1) else 'false'}" if looks else ""
    return Wrong(f"{quoted(text)} is no truth value", f"true or false is expected{hint}")


def amount(text: str, plain: bool = True) -> Amount | Wrong:
    """A number, or a number and a unit with or without a space between."""
    text = text.strip()
    if _ONLY_NUMBER.fullmatch(text):
        if not plain:
            return Wrong(f"{quoted(text)} in quotes is text", "write the number without quotes")
        value = _finite(text)
        return value if isinstance(value, Wrong) else Amount(value, "")
    for looks, expected in _TRAPS:
        if looks.fullmatch(text):
            return Wrong(f"{quoted(text)} is no number", expected)
    match = _WITH_UNIT.fullmatch(text)
    if match is None:
        return Wrong(f"{quoted(text)} is no number", "a number is expected, alone or with its unit, as in '12 s'")
    number = _finite(match.group(1))
    if isinstance(number, Wrong):
        return number
    return Amount(number, match.group(2))


def location(text: str, plain: bool = True) -> tuple[complex, str] | Wrong:
    """A complex number and its unit: `-0.8 + 2.1j`, `-0.8+2.1i`, `-0.8 +- 2.1j` (a pair), `j3`, `-4`, `-1 + 2j 1/s`."""
    match = _COMPLEX.fullmatch(text.strip().replace("\u00b1", "+-").replace("+/-", "+-"))
    if match is None:
        read = amount(text, plain)
        if isinstance(read, Amount):
            return complex(read.value), read.unit
        expected = _LIKE if "its unit" in read.expected or not read.expected else read.expected
        return Wrong(read.wrong.replace("is no number", "is no complex number"), expected)
    parts = [_finite(part) for part in (match["real"] or "0", match["behind"] or match["before"] or "1")]
    wrong = next((part for part in parts if isinstance(part, Wrong)), None)
    if wrong is not None:
        return wrong
    real, size = (part for part in parts if not isinstance(part, Wrong))
    below = (match["sign"] or match["alone"]) == "-"
    return complex(real, -size if below else size), match["unit"] or ""


def number(text: str, plain: bool = True) -> float | Wrong:
    """A finite number without a unit."""
    read = amount(text, plain)
    if isinstance(read, Wrong):
        return read
    return Wrong(f"{quoted(text)} has a unit", "a number without a unit is expected") if read.unit else read.value


def whole(text: str, plain: bool = True) -> int | Wrong:
    """A whole number that fits a float without rounding."""
    read = number(text, plain)
    if isinstance(read, Wrong):
        return read
    if read != math.floor(read) or abs(read) > 2**53:
        return Wrong(f"{quoted(text)} is no whole number")
    return int(read)


def fraction(text: str, plain: bool = True) -> float | Wrong:
    """`5 %` or 0.05."""
    read = amount(text, plain)
    if isinstance(read, Wrong):
        return read
    if read.unit not in ("", "%"):
        return Wrong(f"{quoted(text)} has a unit", "per cent or a fraction is expected, as in '5 %' or 0.05")
    return read.value / 100 if read.unit else read.value


def _finite(text: str) -> float | Wrong:
    if len(text) > _LONGEST_NUMBER:
        return Wrong(f"{quoted(text)} has too many digits", f"at most {_LONGEST_NUMBER} characters make a number")
    value = float(text)
    if not math.isfinite(value):
        return Wrong(f"{quoted(text)} is too large for a number", "a finite number is expected")
    if value == 0 and re.search(r"[1-9]", re.split("[eE]", text)[0]):
        return Wrong(f"{quoted(text)} is too small for a number", "it would be read as 0")
    return value
