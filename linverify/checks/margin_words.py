"""Sentences on loops: what is unstable, what the loop does not move, which limit is broken."""

from __future__ import annotations

import cmath
import math
from collections.abc import Sequence

from ..core.case import Case
from ..core.loop import Loop
from ..core.shown import number, with_unit
from ..core.verdict import Figure, Sense, Status
from ..numerics.loop_margins import LoopMargins, in_s
from ..numerics.margins import guarantee
from ..numerics.unmoved import Unmoved

LEAVE = "where that is meant, name the state under `leaves`"
ROUNDING = 1e-12  # of the largest pole
POLES = "the poles of several channels closed with a dead time are counted, and not found one by one"
_ALONE = ("gain_margin", "phase_margin", "delay_margin", "crossover")
WRONG_WAY = "the loop is closed the wrong way round: unstable; with the opposite sign it would be stable"


def undecided(one: LoopMargins) -> str:
    """Why a loop has no margins that could be told."""
    return f"{one.outcome.value}: {one.why}" if one.why else one.outcome.value


def unstable(one: LoopMargins, time_unit: str) -> str:
    """The closed loop is unstable: pole 0.31 +- 2.1j per s, time to double 2.24 s."""
    known = [value for value in one.unstable if not cmath.isnan(value)]
    told = _poles([in_s(value, one.loop.step) for value in known], time_unit)
    if len(known) < len(one.unstable):
        told.append(f"{len(one.unstable) - len(known)} more that were counted and not found")
    if one.why:
        told.append(one.why)
    poles = "; ".join(told)
    return f"{WRONG_WAY}; {poles}" if one.opposite else f"the closed loop is unstable: {poles}"


def unmoved(poles: Sequence[Unmoved], step: float | None, size: float = 0.0) -> str:
    """Poles that nobody stabilizes. size: of the largest pole around, beside which rounding is told as zero."""
    told = []
    for pole in poles:
        value = in_s(pole.value, step)
        value = 0j if abs(value) <= ROUNDING * size else value
        states = " and ".join(name for name, share in pole.shares[:2] if share >= 0.1)
        told.append(f"{complex_told(value)}{f' of {states}' if states else ''}")
    told = list(dict.fromkeys(told))
    which, they = ("pole", "it is") if len(told) == 1 else ("poles", "they are")
    return f"the loop does not move the {which} {', '.join(told)}, and {they} not stable; {LEAVE}"


def complex_told(value: complex) -> str:
    """0.31 +- 2.1j for a pair, 0.31 for a real pole."""
    real = number(value.real, 4)
    return real if value.imag == 0 else f"{real} +- {number(abs(value.imag), 4)}j"


def _poles(values: Sequence[complex], time_unit: str) -> list[str]:
    told = []
    for value in values:
        text = f"pole {complex_told(value)} per {time_unit}"
        if value.real > 0:
            text += f", time to double {with_unit(number(math.log(2.0) / value.real, 4), time_unit)}"
        told.append(text)
    return list(dict.fromkeys(told))


def silent(words: Sequence[str], one: LoopMargins) -> list[str]:
    """What is asked for and could not be found; what has one reason is told in one sentence."""
    reasons: dict[str, list[str]] = {}
    for word in words:
        why = "" if not one.alone else one.alone if word in _ALONE else POLES if word == "damping" else ""
        reasons.setdefault(why, []).append(word.replace("_", " "))
    told = []
    for why, named in reasons.items():
        subject = ", ".join(named[:-1]) + f" and {named[-1]}" if len(named) > 1 else named[0]
        told.append(f"{subject} could not be found" + (f": {why}" if why else ""))
    return told


def without_crossover(case: Case, loop: Loop, one: LoopMargins) -> list[tuple[Status, str]]:
    """Channels whose gain never crosses one though `crossover` asks where."""
    if not any(limit.word == "crossover" for limit in loop.require):
        return []
    silent = [channel for channel in one.channels if channel.moves and not channel.margins.crossovers]
    several = len(one.channels) > 1
    return [
        (Status.FAIL, f"{f'{each.name}: ' if several else ''}the gain of the loop never crosses one") for each in silent
    ]


def notes(loop: Loop, one: LoopMargins) -> list[str]:
    """What a disk margin promises, and where ready-made limits come from."""
    told = []
    if any(limit.word == "disk_margin" for limit in loop.require):
        alpha = one.channels[0].margins.disk.value if one.joint is None else one.joint.here.low
        told.append(promise(alpha, len(one.loop.inputs)))
    if gone := [step.channel for step in one.steps if step.final == 0.0]:
        told.append(f"{' and '.join(gone)} goes back to zero after a step of its set point: no step of it is judged")
    ruled: dict[tuple[str, str, str], list[str]] = {}
    for limit in loop.require:
        if limit.rule:
            ruled.setdefault((limit.rule, limit.source, limit.caution), []).append(limit.word.replace("_", " "))
    for (rule, source, caution), words in ruled.items():
        named = f"{' and '.join(words)} by the rule {rule}" + (f" ({source})" if source else "")
        told.append(f"{named}: {caution}" if caution else named)
    return told


def promise(alpha: float, channels: int) -> str:
    """What a disk margin guarantees, in words."""
    up, phase = guarantee(alpha)
    gains = f"factors {number(1.0 / up, 4)} to {number(up, 4)} (+-{number(20.0 * math.log10(up), 4)} dB)"
    if math.isinf(up):
        gains = "any factor above zero"
    every = ", in every channel at once" if channels > 1 else ""
    told = f"the disk margin {number(alpha, 4)} guarantees stability for gains off by {gains} alone"
    return f"{told}, or phases by {number(math.degrees(phase), 4)} deg alone{every}"


def figure(figure: Figure) -> str:
    """phase margin of fore_flap is 31 deg at 3.2 rad/s, at least 45 deg are asked for."""
    subject = f"{figure.what} of {figure.signal}" if figure.signal else figure.what
    if math.isnan(figure.worst):
        return f"{subject} could not be found"
    where = "" if math.isnan(figure.at_frequency) else f" at {_told(figure.at_frequency, figure.frequency_unit)}"
    text = f"{subject} is {_told(figure.worst, figure.unit)}{where}"
    if figure.status is Status.UNDECIDED:
        known = f"known to {_told(figure.error, figure.unit, 2)}"
        text += ", to an unknown error" if math.isnan(figure.error) else f", {known}"
    if figure.sense is Sense.RANGE:
        return f"{text}; {number(figure.low, 4)} to {_told(figure.limit, figure.unit)} is asked for"
    return f"{text}; {figure.sense.value} {_told(figure.limit, figure.unit)} is asked for"


def _told(value: float, unit: str, digits: int = 4) -> str:
    text = "infinite" if math.isinf(value) else number(value, digits)
    return with_unit(text, "" if math.isinf(value) else unit)
