"""Peaks between samples."""

from __future__ import annotations

import math

import numpy as np
import pytest

from linverify.numerics.peaks import refined_peak


def nodes(K: int, S: int, every: float = 1.0) -> np.ndarray:
    return every * (np.arange(K)[:, None] + np.arange(S + 1)[None, :] / S)


def test_parabola_is_met_exactly_wherever_its_top_lies() -> None:
    times = nodes(2, 4)
    for top in np.linspace(0.05, 1.95, 39):
        peak, when = refined_peak(times, 3.0 - (times - top)[:, :, None] ** 2)
        assert peak[0] == pytest.approx(3.0, abs=1e-12)
        assert when[0] == pytest.approx(top, abs=1e-12)


def test_sign_does_not_matter() -> None:
    times = nodes(1, 4)
    values = np.stack([3.0 - (times - 0.4) ** 2, (times - 0.4) ** 2 - 3.0], axis=-1)
    assert refined_peak(times, values)[0] == pytest.approx([3.0, 3.0], abs=1e-12)


def test_sine_between_samples_is_met_to_fourth_order() -> None:
    misses = []
    for S in (8, 16, 32):
        times = nodes(1, S)
        worst = 0.0
        for shift in np.linspace(0, 1, 37):
            peak, _ = refined_peak(times, np.sin(2 * math.pi * (times + shift))[:, :, None])
            worst = max(worst, abs(float(peak[0]) - 1.0))
        misses.append(worst)
    assert misses[0] < 0.008  # samples alone miss 7.6 %
    assert math.log2(misses[1] / misses[2]) > 2.5


def test_never_below_the_samples_and_never_across_a_jump() -> None:
    times = nodes(3, 4)
    values = np.zeros((3, 5, 1))
    values[1, 0], values[2] = 2.0, -0.5
    peak, when = refined_peak(times, values)
    assert peak[0] == 2.0
    assert when[0] == 1.0
    generator = np.random.default_rng(0)
    noise = generator.normal(size=(3, 5, 50))
    peak, _ = refined_peak(times, noise)
    assert (peak >= np.abs(noise).max(axis=(0, 1))).all()
    assert (peak <= 1.3 * np.abs(noise).max(axis=(0, 1))).all()


def test_samples_that_do_not_count_are_passed_over() -> None:
    times = nodes(2, 4)
    values = np.ones((2, 5, 2))
    values[1] = np.nan
    values[0, 3:, 0] = np.nan
    values[0, :, 1] = np.nan
    peak, when = refined_peak(times, values)
    assert peak.tolist() == [1.0, 0.0]
    assert when[0] == 0.0


def test_samples_of_a_difference_equation_stand_for_themselves() -> None:
    times = nodes(3, 1)
    values = np.array([[1.0, -4.0], [-4.0, 2.0], [2.0, 0.0]])[:, :, None]
    peak, when = refined_peak(times, values)
    assert (peak[0], when[0]) == (4.0, 1.0)
