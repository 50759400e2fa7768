"""What a loop measures after a step of its own set point: overshoot and settling time, channel by channel.

A dead time around a continuous loop is stood for by an all-pass of high order; what that costs is seen by taking a
lower one. Between the instants of a sampled loop the plant goes on, and what it does there counts: the exact
response is looked at several times a sample.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from ..core.model import Array
from .allpass import all_pass
from .closing import Opened, Setup, followed
from .held_loop import whole
from .interconnect import Block, solved
from .loop_margins import Stepped, closed_matrix
from .margins import Found
from .step_figures import StepFigures, step_figures
from .transfer import Transfer
from .unmoved import split

LOOKS = 16  # a sample at most, an even number
NEAR = 0.05  # rad, or time constants, of the fastest mode from one look to the next
# orders of the all-pass in place of a dead time, for the error of a figure and for the figure, by how many rad it
# turns the fastest closed-loop mode at most: a high order in place of a short one only slows the response down
ORDERS = ((1e-3, (1, 2)), (0.1, (2, 4)), (math.inf, (6, 8)))
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
            rough, fine = (_figures(_set_point(_chained(outer, order)), i, within) for order in _orders(outer))
            made.append(_told(channel, within, fine, rough))
        else:
            made.append(_told(channel, within, _figures(_set_point(outer), i, within)))
    return tuple(made)


def _set_point(loop: Transfer) -> Transfer:
    """(1 + L)^-1 L of a loop without dead time."""
    E = solved(loop.D, np.eye(len(loop.D)))
    return replace(loop, A=closed_matrix(loop), B=loop.B @ E, C=E @ loop.C, D=E @ loop.D)


def _orders(loop: Transfer) -> tuple[int, int]:
    fastest = float(np.abs(np.linalg.eigvals(closed_matrix(loop))).max(initial=0.0))
    return next(orders for most, orders in ORDERS if loop.delay * fastest <= most)


def _chained(loop: Transfer, order: int) -> Transfer:
    """With an all-pass of this order at every output in place of the dead time."""
    a, b, c, d = all_pass(loop.delay, order)
    n, k = len(loop.A), len(loop.D)
    each = np.eye(k)
    below = np.hstack([np.kron(each, b[:, np.newaxis]) @ loop.C, np.kron(each, a)])
    return Transfer(
        np.vstack([np.hstack([loop.A, np.zeros((n, k * order))]), below]),
        np.vstack([loop.B, np.kron(each, b[:, np.newaxis]) @ loop.D]),
        np.hstack([d * loop.C, np.kron(each, c[np.newaxis])]),
        d * loop.D, 0.0, None, loop.inputs, loop.outputs,
    )  # fmt: skip


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
    reads, exact = setup.loops[name].measures, setup.model.step is not None
    block = followed(setup, name)
    pace = _pace(block.A)
    if not exact and 2.0 * pace <= NEAR:
        many = int(NEAR / pace) if pace > 0.0 else 1
        return tuple(_seldom(block, i, many, sample, within, name=reads[i]) for i in range(len(reads)))
    looks = _looks(setup, sample, pace)
    block = followed(setup, name, looks)
    return tuple(_between(block, reads, i, looks, sample, within, exact) for i in range(len(reads)))


def _pace(A: Array) -> float:
    """Rad, or time constants, that the fastest mode of x+ = A x goes through in one step; infinite for a dead beat."""
    values = np.linalg.eigvals(A)
    if not len(values):
        return 0.0
    with np.errstate(divide="ignore"):
        return float(np.abs(np.log(values.astype(np.complex128))).max())


def _looks(setup: Setup, sample: float, pace: float) -> tuple[float, ...]:
    """When a sample is looked at; of a difference equation at its steps, where alone it means anything."""
    tick = setup.model.step
    count = LOOKS if math.isinf(pace) else min(LOOKS, max(2, 2 * math.ceil(pace / NEAR)))
    count = count if tick is None else whole(sample / tick) or 1
    return tuple(k * sample / count for k in range(count))


def _seldom(block: Block, i: int, many: int, sample: float, within: float, name: str) -> Stepped:
    """Where nothing happens within a sample: every `many` samples are enough, and half as often gives the error."""
    row = Transfer(block.A, block.B[:, [i]], block.C[[i]], block.D[[i]][:, [i]], 0.0, sample)
    moved = split(row, block.states).moved
    fine, rough = (_figures(_every(moved, count), 0, within) for count in (many, 2 * many))
    told = _told(name, within, fine)
    if fine is None or rough is None or not told.settling.value:
        return told
    half = 0.5 * many * sample  # it came inside between the look that is told and the one before
    settling = replace(told.settling, value=told.settling.value - half, error=told.settling.error + half)
    return replace(told, overshoot=_wider(told.overshoot, rough.overshoot), settling=settling)


def _every(loop: Transfer, many: int) -> Transfer:
    """The same at every `many`-th sample, for an input that does not change."""
    n = len(loop.A)
    whole_step = np.block([[loop.A, loop.B], [np.zeros((1, n)), np.eye(1)]])
    power = np.linalg.matrix_power(whole_step, many)
    return replace(loop, A=power[:n, :n], B=power[:n, n:], step=many * (loop.step or 1.0))


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
            return Stepped(reads[i], within, math.nan if figures is None else figures.final, NONE, NONE)
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
