"""Everything that is measured on one loop, broken open: stability, and the margins of its channels one by one and all
at once. Poles that the loop cannot move are set apart first, so that none of them can pass for the loop's own.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from ..core.model import Array
from ..core.outcome import Outcome
from .closing import Opened
from .interconnect import IllPosedError, solved
from .loop_stability import Poles, in_discs, of_matrix
from .margins import Found, Margins, margins
from .multiloop import both_sides, multiloop
from .peak_gain import Peak
from .structured import Bounded
from .transfer import Transfer
from .unmoved import Unmoved, split

CLEAR = 1e-9  # relative: poles that are known less well are looked at together with their neighbours
ALONE = (
    "for one channel alone, the dead time of the others would lie inside a closed loop; disk_margin, sensitivity_peak "
    "and complementary_peak, of all channels at once, can be asked for"
)


@dataclass(frozen=True, slots=True, eq=False)
class Channel:
    """One channel of the break with the others closed. moves: False where it has no effect on itself at all."""

    name: str
    loop: Transfer
    margins: Margins
    moves: bool = True


@dataclass(frozen=True, slots=True, eq=False)
class Joint:
    """All channels at once, at the break (here: its disk margin); disk margins at the plant's two ends and at both."""

    sensitivity: Found
    complementary: Found
    here: Bounded
    at_input: Bounded | None = None
    at_output: Bounded | None = None
    at_both: Bounded | None = None


@dataclass(frozen=True, slots=True)
class Stepped:
    """What a step of a set point does to the signal that it is for.

    channel: the signal; final: where it goes for a unit step; overshoot: a fraction of that; settling: time units until
    it stays within `within`, a fraction of that.
    """

    channel: str
    within: float
    final: float
    overshoot: Found
    settling: Found


@dataclass(frozen=True, slots=True, eq=False)
class LoopMargins:
    """What was measured.

    outcome, why: the reason where margins could not be found; loop: the loop transfer function without what it does not
    move; trivial: the loop moves nothing. poles: of the closed loop, where it has no dead time; delayed: those that
    were found where it has. unstable: those, in s per time unit (sampled: in z), that are surely unstable; edge: those
    of which rounding leaves that open; opposite: closed with the opposite sign it would be stable. channels, joint: of
    a stable loop; joint: only of several channels; at_input: where it is broken; steps: of set points, where asked for;
    alone: why there are no margins of single channels, empty where there are.
    """

    loop: Transfer
    unmoved: tuple[Unmoved, ...] = ()
    outcome: Outcome = Outcome.DONE
    why: str = ""
    trivial: bool = False
    stable: bool = False
    poles: Poles | None = None
    unstable: tuple[complex, ...] = ()
    edge: tuple[complex, ...] = ()
    opposite: bool = False
    channels: tuple[Channel, ...] = ()
    joint: Joint | None = None
    at_input: bool = True
    delayed: tuple[complex, ...] = ()
    steps: tuple[Stepped, ...] = ()
    alone: str = ""


def measured(opened: Opened, at_input: bool, *, brief: bool = False) -> LoopMargins:
    """Measure a loop, broken at the plant's input or at its output; brief: without disk margins elsewhere."""
    whole, states = (opened.plant_input, opened.states_in) if at_input else (opened.plant_output, opened.states_out)
    parts = split(whole, states)
    loop = parts.moved
    if not len(loop.A) and not loop.D.any():
        return LoopMargins(loop, parts.unmoved, trivial=True)
    if len(loop.D) == 1:
        return replace(_single(loop, parts.unmoved), at_input=at_input)
    return replace(_several(opened, loop, parts.unmoved, at_input, brief), at_input=at_input)


def _single(loop: Transfer, unmoved: tuple[Unmoved, ...]) -> LoopMargins:
    found = margins(loop)
    channel = Channel(loop.inputs[0], loop, found)
    delayed = tuple(complex(value) for value in found.poles) if loop.delay else ()
    return LoopMargins(
        loop, unmoved, found.outcome, found.why, False, found.stable, closed_poles(loop), found.unstable, (),
        found.opposite_stable, (channel,) if found.stable else (), delayed=delayed,
    )  # fmt: skip


def _several(opened: Opened, loop: Transfer, unmoved: tuple[Unmoved, ...], at_input: bool, brief: bool) -> LoopMargins:
    if loop.delay:
        return _several_late(opened, loop, unmoved, at_input, brief)
    poles = closed_poles(loop)
    if poles is None:
        return LoopMargins(loop, unmoved, Outcome.ILL_POSED)
    if not poles.stable:
        opposite = closed_poles(loop, -1.0)
        unstable = tuple(complex(value) for value in poles.values[poles.unstable])
        edge = tuple(complex(value) for value in poles.values[poles.undecided])
        outcome = Outcome.DONE if unstable else Outcome.ON_THE_EDGE
        return LoopMargins(
            loop, unmoved, outcome, "", False, False, poles, unstable, edge, opposite is not None and opposite.stable
        )
    here = multiloop(loop)
    if not here.outcome.done or not here.stable:
        outcome = Outcome.ON_THE_EDGE if here.outcome.done else here.outcome
        return LoopMargins(loop, unmoved, outcome, "", False, False, poles)
    channels = tuple(_channel(loop, j) for j in range(len(loop.inputs)))
    joint = Joint(_peak(here.sensitivity), _peak(here.complementary), here.disk)
    if not brief:
        joint = _everywhere(opened, joint, at_input)
    outcomes = [(one.margins.outcome, one.margins.why) for one in channels if not one.margins.outcome.done]
    outcome, why = outcomes[0] if outcomes else (Outcome.DONE, "")
    return LoopMargins(loop, unmoved, outcome, why, False, True, poles, (), (), False, channels, joint)


def _several_late(
    opened: Opened, loop: Transfer, unmoved: tuple[Unmoved, ...], at_input: bool, brief: bool
) -> LoopMargins:
    """With a dead time that all channels share: what holds for all at once is known, of one alone nothing is."""
    here = multiloop(loop)
    if not here.outcome.done or not here.stable:
        return LoopMargins(loop, unmoved, here.outcome, unstable=here.unstable)
    joint = Joint(_peak(here.sensitivity), _peak(here.complementary), here.disk)
    joint = joint if brief else _everywhere(opened, joint, at_input)
    return LoopMargins(loop, unmoved, stable=True, joint=joint, alone=ALONE)


def _everywhere(opened: Opened, joint: Joint, at_input: bool) -> Joint:
    """With the disk margins at the other break and at both."""
    whole, states = (opened.plant_output, opened.states_out) if at_input else (opened.plant_input, opened.states_in)
    other = multiloop(split(whole, states).moved).disk
    at_in, at_out = (joint.here, other) if at_input else (other, joint.here)
    return replace(joint, at_input=at_in, at_output=at_out, at_both=both_sides(opened.plant, opened.controller))


def _peak(peak: Peak) -> Found:
    return Found(peak.value, peak.frequency, peak.error if peak.outcome.done else math.nan)


def _channel(loop: Transfer, j: int) -> Channel:
    try:
        alone = split(one_channel(loop, j), [str(k) for k in range(len(loop.A))]).moved
    except IllPosedError:
        return Channel(loop.inputs[j], loop, Margins(Outcome.ILL_POSED))
    if not len(alone.A) and not alone.D.any():
        return Channel(loop.inputs[j], alone, Margins(Outcome.DONE, stable=True), False)
    return Channel(loop.inputs[j], alone, margins(alone))


def one_channel(loop: Transfer, j: int) -> Transfer:
    """The loop transfer function of channel `j` with the other channels closed by u = -y. Raises IllPosedError."""
    rest = [k for k in range(len(loop.inputs)) if k != j]
    B, C, D = loop.B[:, rest], loop.C[rest], loop.D[np.ix_(rest, rest)]
    inside = solved(D, np.hstack([C, loop.D[rest][:, [j]]]))  # what the closed channels give, for states and input
    states, fed = inside[:, :-1], inside[:, -1:]
    return Transfer(
        loop.A - B @ states,
        loop.B[:, [j]] - B @ fed,
        loop.C[[j]] - loop.D[[j]][:, rest] @ states,
        loop.D[[j]][:, [j]] - loop.D[[j]][:, rest] @ fed,
        loop.delay, loop.step, (loop.inputs[j],), (loop.outputs[j],),
    )  # fmt: skip


def closed_poles(loop: Transfer, sign: float = 1.0) -> Poles | None:
    """Poles of the loop closed by u = -sign y, without its dead time; None where it is ill-posed or has one."""
    if loop.delay:
        return None
    try:
        A = closed_matrix(loop, sign)
    except IllPosedError:
        return None
    F = A if loop.step is None else A - np.eye(len(A))
    known = of_matrix(F, loop.step)
    if (known.error <= CLEAR * np.abs(known.values)).all():
        return known
    return in_discs(F, loop.step)


def closed_matrix(loop: Transfer, sign: float = 1.0) -> Array:
    """A of the loop closed by u = -sign y. Raises IllPosedError."""
    return np.asarray(loop.A - sign * loop.B @ solved(sign * loop.D, loop.C))


def in_s(value: complex, step: float | None) -> complex:
    """A pole per time unit: log(z) / step of a sampled one; minus infinity for z = 0."""
    if step is None:
        return value
    if value == 0:
        return complex(-math.inf)
    return complex(math.log(abs(value)) / step, math.atan2(value.imag, value.real) / step)
