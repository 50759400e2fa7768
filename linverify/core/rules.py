"""Ready-made limits that an engineer names in a spec, each with its public source and what to beware of.

The figures were taken from public transcriptions or written down from memory, never from the standards' own text; every
rule says which. A rule is a convenience: whoever names one in a spec answers for its being the right one.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Literal

from .errors import Place
from .loop import Limit
from .shown import Shown

Kind = Literal["modes", "loops"]

_TIMES = ("time_constant", "time_to_half", "time_to_double", "period", "delay_margin", "settling")
_RATES = {"natural_frequency": "rad/s", "decay_rate": "1/s"}
_RATIOS = ("gain_margin",)
_ANGLES = ("phase_margin",)


@dataclass(frozen=True, slots=True)
class Rule:
    """One named set of limits.

    kind: "modes", a line of `modes`, or "loops", the `require` of a loop; limits: in SI units (seconds, rad/s, 1/s,
    ratios, radians); meaning: one line of what it is for; source: where the figures come from; caution: what a reader
    must know before relying on them.
    """

    name: str
    kind: Kind
    limits: tuple[Limit, ...]
    meaning: str
    source: str
    caution: str

    def bound(self, place: Place, seconds: float = 1.0) -> tuple[Limit, ...]:
        """The limits in the plant's units. place: where the spec names the rule; seconds: of the plant's time unit."""
        return tuple(self._bound(limit, place, seconds) for limit in self.limits)

    def _bound(self, limit: Limit, place: Place, seconds: float) -> Limit:
        scale, shown = 1.0, None
        if limit.word in _TIMES:
            scale, shown = 1.0 / seconds, Shown("s", seconds)
        elif limit.word in _RATES:
            scale, shown = seconds, Shown(_RATES[limit.word], 1.0 / seconds)
        elif limit.word in _RATIOS:
            shown = Shown("dB")
        elif limit.word in _ANGLES:
            shown = Shown("deg", 180.0 / math.pi)
        return replace(
            limit, low=limit.low * scale, high=limit.high * scale, place=place, text=self.name, shown=shown,
            rule=self.name, source=self.source, caution=self.caution,
        )  # fmt: skip


_CHECK_TEXT = "check against the standard's text before relying on it"
_TRANSCRIBED = f"taken from a public transcription of the standard, not from its text: {_CHECK_TEXT}"
_OLDER_ISSUE = f"the frequency is taken from a public page on an older issue of the standard: {_CHECK_TEXT}"
_MEMORY = f"from memory: {_CHECK_TEXT}"
_8785C = "MIL-F-8785C (1980)"
_9490D = "MIL-F-9490D (1975), table III, also SAE AS94900"


def _least(word: str, low: float, *, strict: bool = False) -> Limit:
    return Limit(word, low=low, strict=strict)


def _most(word: str, high: float) -> Limit:
    return Limit(word, high=high)


def _range(word: str, low: float, high: float) -> Limit:
    return Limit(word, low, high)


def _short_period() -> Iterable[Rule]:
    wide = {"A": (0.35, 1.30), "B": (0.30, 2.00), "C": (0.35, 1.30)}
    usable = {"A": (0.25, 2.00), "B": (0.20, 2.00), "C": (0.25, 2.00)}
    for category in "ABC":
        limits = (
            _range("damping", *wide[category]),
            _range("damping", *usable[category]),
            _least("damping", 0.15),
        )
        for level, limit in enumerate(limits, start=1):
            yield Rule(
                f"short_period_{category}_level_{level}",
                "modes",
                (limit,),
                f"damping of the short period, flight phase category {category}, level {level}",
                f"{_8785C}, 3.2.2.1",
                f"{_TRANSCRIBED}; the limits on control anticipation that belong to it are not part of this rule",
            )


def _phugoid() -> Iterable[Rule]:
    limits = (_least("damping", 0.04), _least("damping", 0.0), _least("time_to_double", 55.0))
    for level, limit in enumerate(limits, start=1):
        meaning = f"phugoid, level {level}"
        yield Rule(f"phugoid_level_{level}", "modes", (limit,), meaning, f"{_8785C}, 3.2.1.2", _TRANSCRIBED)


_DUTCH_ROLL = {  # level 1: damping, decay rate (None: no demand), natural frequency
    "A_air_combat": ("category A, air combat and ground attack, class IV", 0.4, None, 1.0, _TRANSCRIBED),
    "A_class_I_IV": ("category A, classes I and IV", 0.19, 0.35, 1.0, _TRANSCRIBED),
    "A_class_II_III": ("category A, classes II and III", 0.19, 0.35, 0.4, _OLDER_ISSUE),
    "B": ("category B, all classes", 0.08, 0.15, 0.4, _TRANSCRIBED),
    "C_class_I_IIC_IV": ("category C, classes I, II carrier-based and IV", 0.08, 0.15, 1.0, _TRANSCRIBED),
    "C_class_IIL_III": ("category C, classes II land-based and III", 0.08, 0.15, 0.4, _OLDER_ISSUE),
}
_DUTCH_ROLL_LEVELS = {2: (0.02, 0.05, 0.4), 3: (0.0, None, 0.4)}  # the same for all categories and classes


def _dutch_roll() -> Iterable[Rule]:
    caution = (
        "where the square of the frequency times the ratio of bank to sideslip exceeds 20, the standard asks for a "
        "larger decay rate than this rule does"
    )
    for name, (words, *first, known) in _DUTCH_ROLL.items():
        for level, figures in {1: tuple(first), **_DUTCH_ROLL_LEVELS}.items():
            named = zip(("damping", "decay_rate", "natural_frequency"), figures, strict=True)
            yield Rule(
                f"dutch_roll_{name}_level_{level}",
                "modes",
                tuple(_least(word, low, strict=True) for word, low in named if low is not None),
                f"Dutch roll, {words}, level {level}",
                f"{_8785C}, 3.3.1.1",
                f"{known if level == 1 else _TRANSCRIBED}; {caution}",
            )


def _roll_and_spiral() -> Iterable[Rule]:
    slowest = {"A": (1.0, 1.4, 10.0), "B": (1.4, 3.0, 10.0), "C": (1.0, 1.4, 10.0)}
    doubling = {"A": (12.0, 8.0, 4.0), "B": (20.0, 8.0, 4.0), "C": (12.0, 8.0, 4.0)}
    older = "an older issue of the standard has other figures for the spiral"
    for category in "ABC":
        for level in (1, 2, 3):
            yield Rule(
                f"roll_class_IV_{category}_level_{level}",
                "modes",
                (_most("time_constant", slowest[category][level - 1]),),
                f"roll mode, class IV, category {category}, level {level}",
                f"{_8785C}, 3.3.1.2",
                _TRANSCRIBED,
            )
            yield Rule(
                f"spiral_{category}_level_{level}",
                "modes",
                (_least("time_to_double", doubling[category][level - 1]),),
                f"spiral, category {category}, level {level}",
                f"{_8785C}, 3.3.1.3",
                f"{_TRANSCRIBED}; {older}",
            )


def _ratio(decibels: float) -> float:
    return float(10.0 ** (decibels / 20.0))


def _margins(decibels: float, degrees: float | None) -> tuple[Limit, ...]:
    gain = _least("gain_margin", _ratio(decibels))
    return (gain,) if degrees is None else (gain, _least("phase_margin", math.radians(degrees)))


_SPEEDS = {  # (dB, deg) for modes below 0.06 Hz, up to the first structural mode, and above it
    "below_minimum_speed": ("below the minimum operating speed", ((6.0, None), (6.0, None), (6.0, None))),
    "operating_speeds": ("at operating speeds", ((4.5, 30.0), (6.0, 45.0), (8.0, 60.0))),
    "limit_speed": ("at the limit speed", ((3.0, 20.0), (4.5, 30.0), (6.0, 45.0))),
    "beyond_limit_speed": ("at 1.15 times the limit speed", ((0.0, 0.0), (0.0, 0.0), (0.0, 0.0))),
}
_BANDS = {
    "slow": "modes below 0.06 Hz",
    "rigid": "modes from 0.06 Hz to the first structural mode",
    "structural": "modes above the first structural mode",
}


def _flight_control() -> Iterable[Rule]:
    caution = (
        f"unverified, {_MEMORY}; only 6 dB with 45 deg and ranges of 4.5 to 6 dB and 30 to 45 deg were seen in public "
        "transcriptions; the margins hold both ways and for one loop at a time with the others closed"
    )
    for speed, (told, figures) in _SPEEDS.items():
        for (band, words), pair in zip(_BANDS.items(), figures, strict=True):
            meaning = f"gain and phase margin of a flight control loop {told}, {words}"
            yield Rule(f"flight_control_{band}_{speed}", "loops", _margins(*pair), meaning, _9490D, caution)


def _practice() -> Iterable[Rule]:
    meaning = "gain margin 6 dB both ways and phase margin 45 deg"
    caution = "these two figures promise nothing by themselves"
    yield Rule("six_db_45_deg", "loops", _margins(6.0, 45.0), meaning, "common practice, no published source", caution)


RULES: Mapping[str, Rule] = MappingProxyType(
    {
        rule.name: rule
        for rules in (_short_period, _phugoid, _dutch_roll, _roll_and_spiral, _flight_control, _practice)
        for rule in rules()
    }
)


def rules_of(kind: Kind) -> tuple[str, ...]:
    """Names of the rules of one kind, in the order of the table."""
    return tuple(name for name, rule in RULES.items() if rule.kind == kind)
