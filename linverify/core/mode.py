"""Limits on the poles, zeros and static gains of a local model: one `ModeAsk` a line of the spec's `modes`."""

from __future__ import annotations

import math
from dataclasses import dataclass, field

from .errors import Place
from .loop import Limit


@dataclass(frozen=True, slots=True)
class Chosen:
    """Which modes a line is about; what is not given does not restrict. Several restrictions add up (and).

    low, high: natural frequency |pole|, rad per time unit; participates: state -> least share (0 to 1) of its
    participation in the mode; near, within: a location and the relative distance |pole - near| / |near| up to which a
    mode counts as this one.
    """

    low: float = 0.0
    high: float = math.inf
    participates: tuple[tuple[str, float], ...] = ()
    near: complex | None = None
    within: float = 0.0

    @property
    def everything(self) -> bool:
        """True where nothing is restricted."""
        return self.low <= 0.0 and math.isinf(self.high) and not self.participates and self.near is None


@dataclass(frozen=True, slots=True)
class ModeAsk:
    """One line of `modes`.

    name: of the line, for reports; limits: on damping, natural_frequency, decay_rate (-Re, which is damping times
    natural frequency), time_constant, time_to_half, time_to_double, period of every chosen mode; ready-made ones carry
    the name of their `rule`. stable: every chosen mode must be stable but for `at_zero` (as many poles at the origin as
    it names states) and unstable ones whose time to double is at least `time_to_double`. controllable, observable:
    input or output -> least scaled measure for every chosen mode. minimum_phase: no zero right of the axis from
    `inputs` to `outputs` (all where empty); zeros: limits on them. static_gain: (input, output) with limit.
    """

    place: Place
    name: str = ""
    chosen: Chosen = field(default_factory=Chosen)
    limits: tuple[Limit, ...] = ()
    stable: bool = False
    at_zero: tuple[str, ...] = ()
    time_to_double: float = math.inf
    may_be_empty: bool = False
    controllable: tuple[tuple[str, Limit], ...] = ()
    observable: tuple[tuple[str, Limit], ...] = ()
    minimum_phase: bool = False
    inputs: tuple[str, ...] = ()
    outputs: tuple[str, ...] = ()
    zeros: tuple[Limit, ...] = ()
    static_gain: tuple[tuple[str, str, Limit], ...] = ()
