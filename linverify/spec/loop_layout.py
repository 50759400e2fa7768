"""`loops` as written: frozen values with places, read without knowing the plant."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal, TypeAlias

from linverify.core.errors import Place
from linverify.core.loop import BreakPoint

from .atoms import Bounds, FileWord, Quantity, Word

if TYPE_CHECKING:
    from .layout import PlantRef


@dataclass(frozen=True, slots=True)
class Schedule:
    """`{table: gains.csv, over: speed}`: a number that depends on the operating point.

    column: the one that is meant where the table has several; place: of the group.
    """

    table: FileWord
    over: Word
    column: Word | None
    place: Place


Gain: TypeAlias = Quantity | Schedule


@dataclass(frozen=True, slots=True)
class Line:
    """A list of numbers in the order written."""

    numbers: tuple[Gain, ...]
    place: Place


@dataclass(frozen=True, slots=True)
class Grid:
    """A matrix as written: rows, or one line of numbers (`flat`) whose shape the loop gives, or a single number."""

    rows: tuple[Line, ...]
    flat: bool
    place: Place


@dataclass(frozen=True, slots=True)
class PidAsk:
    """`pid`; a part that is left out is None."""

    kp: Gain | None
    ki: Gain | None
    kd: Gain | None
    filter: Gain | None
    place: Place


@dataclass(frozen=True, slots=True)
class RationalAsk:
    """`num` and `den`, highest power first."""

    num: Line
    den: Line


@dataclass(frozen=True, slots=True)
class MatricesAsk:
    """`A`, `B`, `C` and `D`; A, B and C are None for static gains, D for zero."""

    A: Grid | None
    B: Grid | None
    C: Grid | None
    D: Grid | None
    gain: bool = False  # D was written as `gain`


@dataclass(frozen=True, slots=True)
class FileAsk:
    """`file`; `{point}` in its text stands for the operating point."""

    file: FileWord


@dataclass(frozen=True, slots=True)
class ObjectAsk:
    """`object`: a Python object that is a controller, or makes one for an operating point."""

    ref: PlantRef


ControllerAsk: TypeAlias = PidAsk | RationalAsk | MatricesAsk | FileAsk | ObjectAsk
LimitValue: TypeAlias = Quantity | float | Bounds | tuple[Quantity, Quantity]


@dataclass(frozen=True, slots=True)
class LimitAsk:
    """One word of `require`. text: its value as written; within: of `settling`, a fraction of the final value."""

    word: str
    value: LimitValue
    text: str
    place: Place
    within: float = 0.02


@dataclass(frozen=True, slots=True)
class RequireAsk:
    """`require`: limits in the order written, and the ready-made ones that are named."""

    limits: tuple[LimitAsk, ...]
    rules: tuple[Word, ...]
    place: Place


@dataclass(frozen=True, slots=True)
class LoopAsk:
    """One loop. place: its name; text: the controller as written; require: None where it is not written.

    controller is None where it was refused, and told.
    """

    name: str
    place: Place
    controller: ControllerAsk | None
    controller_place: Place
    text: str
    measures: tuple[Word, ...]
    moves: tuple[Word, ...]
    within: tuple[Word, ...] = ()
    sample: Quantity | None = None
    delay: Quantity | None = None
    leaves: tuple[Word, ...] = ()
    break_at: BreakPoint = "plant_input"
    require: RequireAsk | None = None
    confirm: Literal["nonlinear"] | None = None
