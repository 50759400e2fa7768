"""The dead time that sampled loops bear, against the eigenvalues of the delayed loop at many dead times."""

from __future__ import annotations

import math

import numpy as np
import pytest
from margins.sampled_delay import Sampled, random_loop

from linverify.numerics.delay_margin import sampled_delay_margin
from linverify.numerics.transfer import Transfer

SHORT, LONG = range(30), range(400)
CLOSE = 1e-6
MOST = 30  # samples of dead time that are followed


def asked(loop: Sampled, declared: float = 0.0) -> tuple[float, float]:
    """Margin and the frequency where it is met, by the library."""
    zero = np.zeros((1, 1))
    plant = Transfer(loop.A, loop.B[:, None], loop.C[None, :], zero)
    controller = Transfer(loop.F, loop.G[:, None], loop.H[None, :], np.array([[loop.K]]), step=loop.step)
    found = sampled_delay_margin(plant, controller, declared)
    return found.value, found.frequency


def wrong(loop: Sampled, declared: float = 0.0) -> str:
    """What brute force says against the library's margin; empty where nothing."""
    margin, frequency = asked(loop, declared)
    known = math.isfinite(margin) and math.isfinite(frequency) and margin < MOST * loop.step
    end = min(margin, MOST * loop.step)
    below = [0.0, *(end * np.linspace(0.0, 1.0 - 10.0 * CLOSE, 60)[1:])]
    lost = [each for each in below if not loop.stable(declared + each)]
    if lost:
        return f"margin {margin}, but unstable at {lost[0]}"
    if known and loop.stable(declared + margin * (1.0 + 10.0 * CLOSE)):
        return f"margin {margin}, but stable beyond"
    return ""


def counted(seeds: range) -> tuple[int, int, list[str]]:
    loops = {seed: loop for seed in seeds if (loop := random_loop(seed)) is not None}
    told = {seed: wrong(loop) for seed, loop in loops.items()}
    finite = sum(math.isfinite(asked(loop)[0]) for loop in loops.values())
    return len(loops), finite, [f"seed {seed}: {text}" for seed, text in told.items() if text]


def test_random_sampled_loops() -> None:
    loops, finite, wrongs = counted(SHORT)
    assert not wrongs
    assert finite > 0.5 * loops > 10


@pytest.mark.slow
def test_many_random_sampled_loops() -> None:
    loops, finite, wrongs = counted(LONG)
    print(f"{loops} sampled loops, {finite} with a finite delay margin, {len(wrongs)} wrong")
    assert not wrongs


@pytest.mark.parametrize("gain", [0.2, 0.7, 1.2])
def test_an_integrator_under_a_gain_in_closed_form(gain: float) -> None:
    """x+ = x - g ((1 - m) x[k-l] + m x[k-l-1]) at unit steps: for l = 0 unstable from m = 1/g on, where m < 1."""
    loop = Sampled(np.zeros((1, 1)), np.ones(1), np.ones(1), np.zeros((0, 0)), np.zeros(0), np.zeros(0), gain, 1.0)
    margin, _ = asked(loop)
    if gain > 1.0:
        assert margin == pytest.approx(1.0 / gain, rel=1e-9)
    assert not wrong(loop)


@pytest.mark.parametrize("declared", [0.3, 1.0, 2.7])
def test_beyond_a_dead_time_that_is_declared(declared: float) -> None:
    """What is left is what there is in all, less what is used up."""
    loop = Sampled(np.zeros((1, 1)), np.ones(1), np.ones(1), np.zeros((0, 0)), np.zeros(0), np.zeros(0), 0.2, 1.0)
    whole, left = asked(loop)[0], asked(loop, declared)[0]
    assert left == pytest.approx(whole - declared, rel=1e-6)
    assert not wrong(loop, declared)
