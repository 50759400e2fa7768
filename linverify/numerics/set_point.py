"""What a loop measures after a step of its own set point: overshoot and settling time, channel by channel.

A dead time around a continuous loop is stood for by a chain of all-passes; what that costs is seen by taking one of
twice as many. Between the instants of a sampled loop the plant goes on, and what it does there counts: the exact
response is looked at several times a sample.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from .closing import Opened, Setup, followed
from .held_loop import whole
from .interconnect import Block, solved
from .loop_margins import Stepped, closed_matrix
from .margins import Found
from .step_figures import StepFigures, step_figures
from .transfer import Transfer
from .unmoved import split

LOOKS = 16  # a sample, an even number
SECTIONS = (6, 12)  # all-passes of second order in place of a dead time: for the figure, and for its error
TWICE = 2.0  # of a difference: the error that it stands for
NONE = Found(math.nan, math.nan, math.nan)


def stepped(setup: Setup, name: str, opened: Opened, within: float) -> tuple[Stepped, ...]:
    """The step of every set point of the loop `name`, which must be stable. Raises as `closing.opened` does."""
    loop = setup.loops[name]
    if loop.sample is not None:
        return _sampled(setup, name, loop.sample, within)
    outer = split(opened.plant_output, opened.states_out).moved
    made = []
    for i, channel in enumerate(loop.measures):
        if outer.delay:
            rough, fine = (_figures(_set_point(_chained(outer, sections)), i, within) for sections in SECTIONS)
            made.append(_told(channel, within, fine, rough))
        else:
            made.append(_told(channel, within, _figures(_set_point(outer), i, within)))
    return tuple(made)


def _set_point(loop: Transfer) -> Transfer:
    """(1 + L)^-1 L of a loop without dead time."""
    E = solved(loop.D, np.eye(len(loop.D)))
    return replace(loop, A=closed_matrix(loop), B=loop.B @ E, C=E @ loop.C, D=E @ loop.D)


def _chained(loop: Transfer, sections: int) -> Transfer:
    """With (s^2 - 6 r s + 12 r^2) / (s^2 + 6 r s + 12 r^2), r = sections / delay, so often for the dead time."""
    rate = sections / loop.delay
    a, p, r = np.eye(len(loop.D)), 6.0 * rate, 12.0 * rate**2
    A, B, C, D = loop.A, loop.B, loop.C, loop.D
    for _ in range(sections):
        n = len(A)
        below = np.block([[0.0 * a, a], [-r * a, -p * a]])
        A = np.block([[A, np.zeros((n, len(below)))], [np.vstack([0.0 * C, C]), below]])
        B = np.vstack([B, 0.0 * D, D])
        C = np.hstack([C, 0.0 * a, -2.0 * p * a])
    return Transfer(A, B, C, D, 0.0, None, loop.inputs, loop.outputs)


def _figures(closed: Transfer, i: int, within: float) -> StepFigures | None:
    one = Transfer(closed.A, closed.B[:, [i]], closed.C[[i]], closed.D[[i]][:, [i]], 0.0, closed.step)
    try:
        return step_figures(one, within)
    except ValueError:
        return None


def _told(channel: str, within: float, fine: StepFigures | None, rough: StepFigures | None = None) -> Stepped:
    if fine is None:
        return Stepped(channel, within, math.nan, NONE, NONE)
    overshoot, settling = fine.overshoot, fine.settling
    if rough is not None:
        overshoot, settling = _wider(overshoot, rough.overshoot), _wider(settling, rough.settling)
    return Stepped(channel, within, fine.final, overshoot, settling)


def _wider(one: Found, other: Found) -> Found:
    return replace(one, error=one.error + TWICE * abs(one.value - other.value))


def _sampled(setup: Setup, name: str, sample: float, within: float) -> tuple[Stepped, ...]:
    looks = _looks(setup, sample)
    block = followed(setup, name, looks)
    reads = setup.loops[name].measures
    exact = setup.model.step is not None
    return tuple(_between(block, reads, i, looks, sample, within, exact) for i in range(len(reads)))


def _looks(setup: Setup, sample: float) -> tuple[float, ...]:
    """When a sample is looked at; of a difference equation at its steps, where alone it means anything."""
    tick = setup.model.step
    count = LOOKS if tick is None else whole(sample / tick) or 1
    return tuple(k * sample / count for k in range(count))


def _between(
    block: Block, reads: Sequence[str], i: int, looks: Sequence[float], sample: float, within: float, exact: bool
) -> Stepped:
    """Each look is a response of its own, at the samples; the worst of them counts."""
    q, found = len(reads), []
    for k in range(len(looks)):
        row = q * (k + 1) + i
        one = Transfer(block.A, block.B, block.C[[row]], block.D[[row]], 0.0, sample)
        parts = split(replace(one, B=block.B[:, [i]], D=block.D[[row]][:, [i]]), block.states).moved
        figures = _figures(parts, 0, within)
        if figures is None or math.isnan(figures.overshoot.value):
            return Stepped(reads[i], within, math.nan, NONE, NONE)
        found.append(figures)
    apart = sample / len(looks)
    # a look tells the first sample from which it stays inside; seen at all looks, it was outside until one look before
    settled = [
        Found(one.settling.value + look - sample + apart, math.nan, one.settling.error)
        if one.settling.value
        else one.settling
        for one, look in zip(found, looks, strict=True)
    ]
    late = max(settled, key=lambda each: each.value)
    fine, rough = (max((one.overshoot for one in some), key=lambda each: each.value) for some in (found, found[::2]))
    if exact:  # there is nothing between
        return Stepped(reads[i], within, found[0].final, fine, late)
    if late.value:
        late = replace(late, value=late.value - 0.5 * apart, error=late.error + 0.5 * apart)
    return Stepped(reads[i], within, found[0].final, _wider(fine, rough), late)
