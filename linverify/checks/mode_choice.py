"""Which modes a line of `modes` is about, and how modes are called in verdicts."""

from __future__ import annotations

import math
from dataclasses import dataclass

from ..core.mode import Chosen, ModeAsk
from ..core.shown import number, with_unit
from ..numerics.modal import Mode, Modes
from ..numerics.traits import Known, damping, natural_frequency

NOTHING = 1e-2  # of the error of a pole that may lie at the origin: nearer to it, the pole is told as zero


@dataclass(frozen=True, slots=True, eq=False)
class Choice:
    """sure: modes that the line is about; maybe: those whose errors leave that open; refused: why nothing is known."""

    sure: tuple[Mode, ...] = ()
    maybe: tuple[Mode, ...] = ()
    refused: str = ""

    @property
    def all(self) -> tuple[Mode, ...]:
        """Both, in the order of the model."""
        return (*self.sure, *self.maybe)


def choice(found: Modes, chosen: Chosen) -> Choice:
    """The modes that a line is about."""
    if chosen.participates:
        if found.model.anonymous:
            return Choice(refused="the states of the delivered model are anonymous: nobody can say which take part")
        for name, _ in chosen.participates:
            if name not in found.states:
                return Choice(refused=f"the local model has no state {name}")
    sure, maybe = [], []
    for mode in found.modes:
        answers = _answers(found, mode, chosen)
        if all(answer is True for answer in answers):
            sure.append(mode)
        elif not any(answer is False for answer in answers):
            maybe.append(mode)
    return Choice(tuple(sure), tuple(maybe))


def _answers(found: Modes, mode: Mode, chosen: Chosen) -> list[bool | None]:
    answers = [_inside(natural_frequency(mode.pole), chosen.low, chosen.high)]
    answers += [_inside(found.participation(mode, name), least, math.inf) for name, least in chosen.participates]
    if chosen.near is not None:
        answers.append(_inside(distance(mode, chosen.near), -math.inf, chosen.within))
    return answers


def _inside(figure: Known, low: float, high: float) -> bool | None:
    if low <= figure.low and figure.high <= high:
        return True
    return False if figure.high < low or figure.low > high else None


def distance(mode: Mode, near: complex) -> Known:
    """|pole - near| as a share of |near|, of the pair's nearer pole."""
    if not math.isfinite(abs(mode.value)):
        return Known(math.inf, math.inf, math.inf)
    away = min(abs(mode.value - near), abs(mode.value.conjugate() - near)) / abs(near)
    error = mode.pole.radius / abs(near)
    return Known(away, max(away - error, 0.0), away + error)


def nearest(found: Modes, near: complex) -> Mode | None:
    """The mode that lies nearest to a place; None for a model without modes."""
    return min(found.modes, key=lambda mode: distance(mode, near).value, default=None)


def told_choice(chosen: Chosen, time_unit: str) -> str:
    """What a line chooses, in words: between 0.5 and 6 rad/s, with pitch taking part."""
    unit = f"rad/{time_unit}"
    parts = []
    if chosen.near is not None:
        parts.append(f"within {number(100.0 * chosen.within, 4)} % of {told_complex(chosen.near)}")
    if chosen.low > 0.0 and math.isfinite(chosen.high):
        parts.append(f"between {number(chosen.low, 4)} and {with_unit(number(chosen.high, 4), unit)}")
    elif chosen.low > 0.0:
        parts.append(f"from {with_unit(number(chosen.low, 4), unit)} on")
    elif math.isfinite(chosen.high):
        parts.append(f"up to {with_unit(number(chosen.high, 4), unit)}")
    parts += [f"with a share of at least {number(100.0 * least, 3)} % of {name}" for name, least in chosen.participates]
    return " and ".join(parts)


def label(mode: Mode) -> str:
    """What figures call a mode: pole -0.3719 +- 0.8875j."""
    if not math.isfinite(abs(mode.value)):
        return "pole at z = 0" if mode.z == 0 else f"pole at z = {told_complex(mode.z)}"
    return f"pole {told_complex(told_pole(mode), pair=mode.poles == 2)}"


def told_pole(mode: Mode) -> complex:
    """The pole as it is told: zero where it is zero to within its error and not one digit of it means anything."""
    nothing = abs(mode.value) <= NOTHING * mode.pole.radius
    return 0j if mode.origin == "yes" or (mode.origin == "maybe" and nothing) else mode.value


def told_complex(value: complex, *, pair: bool = False) -> str:
    """A complex number to four digits; `pair` stands for it and its conjugate."""
    real, imag = number(value.real + 0.0, 4), number(abs(value.imag), 4)
    if value.imag == 0.0:
        return real
    sign = "+-" if pair else "-" if value.imag < 0.0 else "+"
    return f"{real} {sign} {imag}j"


def described(found: Modes, mode: Mode, time_unit: str) -> str:
    """A mode in words: the pole -0.37 +- 0.89j (0.962 rad/s, damping 0.387; mostly w 50 %, q 50 %)."""
    words = []
    if math.isfinite(abs(mode.value)):
        natural = natural_frequency(mode.pole).value if told_pole(mode) else 0.0
        words.append(with_unit(number(natural, 4), f"rad/{time_unit}"))
        if mode.poles == 2:
            words.append(f"damping {number(damping(mode.pole).value, 4)}")
    told = ", ".join(words)
    if not found.model.anonymous:
        shares = ", ".join(f"{name} {100.0 * share:.0f} %" for name, share in found.dominating(mode))
        told = "; ".join(part for part in (told, f"mostly {shares}") if part)
    if mode.together > mode.poles:
        told += f"; {mode.together} poles there are told together"
    return f"the {label(mode)} ({told})"


def line_name(ask: ModeAsk) -> str:
    """What a line is called where it has a name, with the colon that sets it off."""
    return f"{ask.name}: " if ask.name else ""
