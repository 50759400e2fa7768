"""Shapes are what their names say."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.drives import shapes

AT = shapes.instants(8, "held")


def test_instants_are_where_a_row_counts() -> None:
    assert AT.tolist() == [0, 1, 2, 3, 4, 5, 6, 7]
    assert shapes.instants(3, "straight").tolist() == [1, 2, 3]


@pytest.mark.parametrize(
    "values, expected",
    [
        (shapes.step(AT, 2), [0, 0, 1, 1, 1, 1, 1, 1]),
        (shapes.pulse(AT, 2, 3), [0, 0, 1, 1, 1, 0, 0, 0]),
        (shapes.doublet(AT, 1, 2), [0, 1, 1, -1, -1, 0, 0, 0]),
        (shapes.ramp(AT, 1, 4), [0, 0, 0.25, 0.5, 0.75, 1, 1, 1]),
        (shapes.square(AT, 1, 4), [0, 1, 1, -1, -1, 1, 1, -1]),
        (shapes.sine(AT, 0, 4), [0, 1, 0, -1, 0, 1, 0, -1]),
        (shapes.walk(AT, [1, 3, 6], [0.5, -1, 0.25]), [0, 0.5, 0.5, -1, -1, -1, 0.25, 0.25]),
    ],
)  # fmt: skip
def test_values(values: np.ndarray, expected: list[float]) -> None:
    assert values == pytest.approx(expected, abs=1e-12)


def test_a_sweep_goes_from_one_period_to_the_other() -> None:
    at = shapes.instants(4001, "held")
    wave = shapes.sweep(at, 0.0, 400.0, 40.0)
    crossings = at[:-1][(wave[:-1] < 0) & (wave[1:] >= 0)]
    periods = np.diff(crossings)
    growth = np.log(10.0) / 4000.0  # the instants of whole turns are ln(1 + growth * 400 * turns) / growth
    whole = np.log1p(growth * 400.0 * np.arange(1, 4)) / growth
    assert crossings[:3] == pytest.approx(whole, abs=1.0)
    assert periods[-1] == pytest.approx(40, abs=2)
    assert shapes.sweep(at, 0.0, 50.0, 50.0) == pytest.approx(shapes.sine(at, 0.0, 50.0), abs=1e-9)


def test_a_multisine_is_scaled_to_one() -> None:
    wave = shapes.multisine(shapes.instants(100, "held"), [10.0, 23.0], [0.0, 1.0])
    assert np.max(np.abs(wave)) == 1.0
    assert not np.any(shapes.multisine(AT, [1.0], [0.0]).round(9))
