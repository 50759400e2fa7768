"""What must hold of the margins of any loop, whatever they are: with Hypothesis choosing among the random loops.

Nothing here compares with brute force figure by figure; where a closed loop has to be judged, its own count does it.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, reject, settings
from hypothesis import strategies as st
from margins.bench import FIGURES, transfer
from margins.loops import drawn
from margins.oracle import TooFineError, encirclements, growth, refined_roots
from margins.response import Loop

from linverify.core.outcome import Outcome
from linverify.numerics.margins import Margins, guarantee, margins

SEEDS = st.integers(0, 1999)
SOME = settings(max_examples=40, deadline=None, derandomize=True, database=None)
PLAY = 1e-6


def loop_of(seed: int, *, dead_time: bool = True) -> Loop:
    loop = drawn(seed).loop
    return loop if dead_time else replace(loop, delay=0.0)


def answered(loop: Loop) -> Margins:
    """Of a stable loop that is not on the edge."""
    answer = margins(transfer(loop))
    assume(answer.outcome is Outcome.DONE and answer.stable)
    assume(answer.disk.value > 1e-5)
    return answer


def stable(loop: Loop) -> bool:
    """By brute force: refined eigenvalues, with a dead time a count of turns."""
    if loop.delay:
        try:
            return encirclements(loop) == 0
        except TooFineError:
            reject()
    return bool(growth(loop, refined_roots(loop)).max(initial=-math.inf) < 0.0)


def same(one: Margins, other: Margins) -> None:
    assert one.stable == other.stable
    for name in FIGURES:
        first, second = getattr(one, name), getattr(other, name)
        play = first.error + second.error + PLAY * abs(first.value) if math.isfinite(first.value) else 0.0
        if max(first.value, second.value) < 1e12 or name != "gain_up":  # beyond: rounding errors
            equal = first.value == second.value or (math.isnan(first.value) and math.isnan(second.value))
            assert equal or abs(first.value - second.value) <= play, name
    assert len(one.crossovers) == len(other.crossovers)


@SOME
@given(SEEDS, st.data())
def test_scaling_and_reordering_of_states_change_nothing(seed: int, data: st.DataObject) -> None:
    loop = loop_of(seed)
    order = np.array(data.draw(st.permutations(range(loop.n))))
    scale = 10.0 ** np.array(data.draw(st.lists(st.integers(-6, 6), min_size=loop.n, max_size=loop.n)), float)
    A = loop.A * scale[:, None] / scale[None, :]
    other = replace(loop, A=A[np.ix_(order, order)], B=(loop.B * scale)[order], C=(loop.C / scale)[order])
    same(answered(loop), margins(transfer(other)))


@SOME
@given(SEEDS)
def test_another_unit_of_time_scales_frequencies_and_delays_only(seed: int) -> None:
    loop = loop_of(seed)
    assume(loop.step is None)
    one = answered(loop)
    other = margins(transfer(replace(loop, A=60.0 * loop.A, B=60.0 * loop.B, delay=loop.delay / 60.0)))  # per minute
    assert other.stable
    for name in ("gain_up", "gain_down", "phase", "disk", "sensitivity", "complementary"):
        assert getattr(other, name).value == pytest.approx(getattr(one, name).value, rel=PLAY), name
    assert 60.0 * other.delay.value == pytest.approx(one.delay.value, rel=PLAY)
    turned = [60.0 * each.frequency for each in one.crossovers]
    assert [each.frequency for each in other.crossovers] == pytest.approx(turned, rel=PLAY)


@SOME
@given(SEEDS)
def test_a_disk_margin_never_promises_more_than_gain_and_phase_margins_allow(seed: int) -> None:
    answer = answered(loop_of(seed))
    factor, phase = guarantee(answer.disk.value - answer.disk.error)
    assert factor <= (answer.gain_up.value + answer.gain_up.error) * (1.0 + PLAY)
    assert 1.0 / factor >= (answer.gain_down.value - answer.gain_down.error) * (1.0 - PLAY)
    assert phase <= answer.phase.value + answer.phase.error + PLAY


@SOME
@given(SEEDS)
def test_peaks_bound_gain_and_phase_margins(seed: int) -> None:
    """1 + L is at least 1/Ms away from zero, where L is real and where |L| = 1; T likewise."""
    answer = answered(loop_of(seed))
    Ms, Mt = answer.sensitivity.value * (1.0 + PLAY), answer.complementary.value * (1.0 + PLAY)
    up = answer.gain_up.value * (1.0 + PLAY) + answer.gain_up.error
    down = answer.gain_down.value * (1.0 - PLAY) - answer.gain_down.error
    phase = answer.phase.value + answer.phase.error + PLAY
    if Ms > 1.0:
        assert up >= Ms / (Ms - 1.0)
    assert down <= Ms / (Ms + 1.0)
    assert up >= 1.0 + 1.0 / Mt
    assert phase >= 2.0 * math.asin(min(1.0, 0.5 / Ms))
    assert phase >= 2.0 * math.asin(min(1.0, 0.5 / Mt))
    assert abs(Mt - Ms) <= 1.0 + PLAY * Ms  # S + T = 1
    half = 1.0 / answer.disk.value
    assert abs(half - Ms) <= 0.5 + PLAY * Ms  # (S - T) / 2 = S - 1/2


@SOME
@given(SEEDS)
def test_the_gain_margin_is_where_stability_is_lost(seed: int) -> None:
    loop = loop_of(seed)
    answer = answered(loop)
    edges = [answer.gain_up.value, answer.gain_down.value]
    for edge in edges:
        if edge == 0.0 or edge > 1e9 or abs(edge * loop.D) > 0.99:
            continue  # none; or lost at infinite frequency, where no root crosses the axis at a finite place
        inward = -1.0 if edge > 1.0 else 1.0
        if abs(edge - 1.0) < 3e-3:
            continue
        assert stable(times(loop, edge * (1.0 + inward * 1e-3)))
        assert not stable(times(loop, edge * (1.0 - inward * 1e-3)))


def times(loop: Loop, gain: float) -> Loop:
    return replace(loop, C=gain * loop.C, D=gain * loop.D)


@SOME
@given(SEEDS)
def test_the_delay_margin_is_where_stability_is_lost(seed: int) -> None:
    loop = loop_of(seed)
    assume(loop.step is None and abs(loop.D) < 1.0)
    answer = answered(loop)
    assume(math.isfinite(answer.delay.value))
    assume(answer.delay.value > 1e-3 * loop.delay)  # else rounding decides
    for share in (0.5, 0.99):
        assert stable(replace(loop, delay=loop.delay + share * answer.delay.value))
    assert not stable(replace(loop, delay=loop.delay + 1.01 * answer.delay.value))


@SOME
@given(SEEDS)
def test_the_phase_margin_is_where_stability_is_lost(seed: int) -> None:
    """A turn of L by the margin, either way, puts -1 on the locus: |1 + L e^(j turn)| is zero at a crossing."""
    loop = loop_of(seed)
    answer = answered(loop)
    assume(math.isfinite(answer.phase.value))
    at = loop.exact(np.array([answer.phase.frequency]))[0][0]
    nearest = min(abs(1.0 + at * np.exp(1j * sign * answer.phase.value)) for sign in (-1.0, 1.0))
    assert float(nearest) <= 1e-6 * max(1.0, answer.phase.value) + answer.phase.error


@SOME
@given(SEEDS)
def test_what_is_quoted_is_met_at_its_frequency(seed: int) -> None:
    loop = loop_of(seed)
    answer = answered(loop)
    for name, of in (("sensitivity", lambda L: 1 / abs(1 + L)), ("complementary", lambda L: abs(L / (1 + L)))):
        found = getattr(answer, name)
        if math.isfinite(found.frequency) and found.frequency > 0.0:
            at = loop.exact(np.array([found.frequency]))[0][0]
            assert float(of(at)) == pytest.approx(found.value, rel=PLAY, abs=found.error)
