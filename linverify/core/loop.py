"""Controllers closed around a local model, and the limits that a loop must keep: values only, in the plant's units.

Sign: a controller takes set point minus measurement, and what it gives is added to the trimmed value of what it moves.
So a loop is u = K (r - y), its loop transfer function is L = K G (broken at the plant's input), and 1 + L = 0 holds at
the poles of the closed loop.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Literal

from .errors import Place
from .model import Array
from .shown import Shown

BreakPoint = Literal["plant_input", "plant_output"]


@dataclass(frozen=True, slots=True, eq=False)
class Controller:
    """x' = A x + B e, v = C x + D e in deviations, or the next state where `step` is given.

    A (n, n), B (n, k), C (m, n), D (m, k): e (k,) are the loop's measured signals (set point minus measurement) in the
    order of `measures`, v (m,) what is added to the trimmed values of `moves`; units of the plant, per its time unit.
    step: sample time in time units of a difference equation, None when continuous; text: as the spec writes it.
    """

    A: Array
    B: Array
    C: Array
    D: Array
    step: float | None = None
    text: str = ""


@dataclass(frozen=True, slots=True)
class Moved:
    """What one output of a controller is added to: a plant input (`loop` empty), or a set point of another loop."""

    name: str
    loop: str = ""

    def __str__(self) -> str:
        return f"{self.loop}.set_point.{self.name}" if self.loop else self.name


@dataclass(frozen=True, slots=True)
class Limit:
    """What one word asks for: low <= figure <= high, in the plant's units (ratios, radians, time units; no dB, no %).

    text: as written; shown: the unit of messages and reports ("dB" for a ratio told in decibels: its `Shown` has that
    unit and is told by `told_ratio`), None for the plant's; within: band of `settling`, a fraction of the final value;
    source, caution: of a ready-made limit, whose text a reviewer must see; strict: the limit itself is not allowed.
    """

    word: str
    low: float = -math.inf
    high: float = math.inf
    place: Place = field(default_factory=lambda: Place("<python>"))
    text: str = ""
    shown: Shown | None = None
    within: float = 0.02
    strict: bool = False
    rule: str = ""
    source: str = ""
    caution: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Loop:
    """One declared loop at one operating point.

    measures: outputs or states, in the order of the controller's inputs; moves: in the order of its outputs;
    within: names of the loops that are closed inside this one (`with`); delay: dead time in time units, once around the
    loop; leaves: states whose modes this loop does not move and need not stabilize; break_at: where margins are taken;
    require: limits, one a word; confirm: gain margins are tried on the nonlinear plant.
    """

    name: str
    controller: Controller
    measures: tuple[str, ...]
    moves: tuple[Moved, ...]
    within: tuple[str, ...] = ()
    delay: float = 0.0
    leaves: tuple[str, ...] = ()
    break_at: BreakPoint = "plant_input"
    require: tuple[Limit, ...] = ()
    confirm: bool = False
    place: Place = field(default_factory=lambda: Place("<python>"))

    @property
    def sample(self) -> float | None:
        """Sample time of the controller, None when continuous."""
        return self.controller.step


@dataclass(frozen=True, slots=True)
class Actuator:
    """In series with a plant input: a lag, exact in both models; limits that act on the plant only.

    lag: time constant of 1 / (lag s + 1), zero for none; rate: largest |change| per time unit; low, high: absolute
    range of the input.
    """

    lag: float = 0.0
    rate: float = math.inf
    low: float = -math.inf
    high: float = math.inf
    place: Place = field(default_factory=lambda: Place("<python>"))


NO_ACTUATORS: Mapping[str, Actuator] = MappingProxyType({})
NO_LOOPS: Mapping[str, Loop] = MappingProxyType({})
