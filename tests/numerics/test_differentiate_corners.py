"""Corners, jumps and infinite slopes: found at the right distance, told from curvature and from noise."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from random_functions import CORNERS, planted, scattered, smooth

from linverify.core.outcome import Outcome
from linverify.numerics.differentiate import Slopes, slopes

DISTANCES = (0.0, 1e-9, 1e-6, 5e-5, 1e-3, 5e-3)


def at(f: Callable[[np.ndarray], np.ndarray], z0: float, low: float = -np.inf) -> Slopes:
    return slopes(f, np.array([z0]), np.ones(1), np.array([low]), np.array([np.inf]))


@pytest.mark.parametrize("side", [1.0, -1.0], ids=["above", "below"])
@pytest.mark.parametrize("distance", DISTANCES)
@pytest.mark.parametrize("kind", CORNERS)
def test_a_corner_is_found_where_it_is(kind: str, distance: float, side: float) -> None:
    place = side * distance
    found = at(lambda z: np.sin(z) + CORNERS[kind](z - place), 0.0)
    (corner,) = found.gaps
    assert corner.kind == ("jump" if kind == "relay" else "kink")
    assert corner.distance == pytest.approx(place, rel=1e-3, abs=1e-12)
    assert corner.near == (distance < 1e-4)
    if kind == "relay":
        assert corner.height == pytest.approx(0.01, rel=1e-3)
    else:
        assert corner.gap == pytest.approx(1.0, rel=1e-2)


@pytest.mark.parametrize("distance", [0.0, 1e-9, 5e-5])
def test_at_a_corner_the_mean_of_both_sides_with_half_the_gap(distance: float) -> None:
    for gap in (1.0, 0.01, 1e-4):
        found = at(lambda z, gap=gap: z + gap * np.maximum(z - distance, 0.0), 0.0)
        assert found.jacobian[0, 0] == pytest.approx(1.0 + gap / 2, abs=1e-4 * gap)
        assert found.error[0, 0] >= gap / 2
        assert found.error[0, 0] <= 0.6 * gap
        assert (found.left[0, 0], found.right[0, 0]) == pytest.approx((1.0, 1.0 + gap), abs=1e-3 * gap)


def test_a_gap_too_small_to_be_chased_is_in_the_error() -> None:
    found = at(lambda z: z + 1e-6 * np.maximum(z, 0.0), 0.0)
    assert found.gaps == ()
    assert 0.5e-6 <= found.error[0, 0] <= 2e-6


def test_a_corner_further_out_leaves_the_slope_alone() -> None:
    found = at(lambda z: np.sin(z) + np.abs(z - 3e-4), 0.0)
    assert found.jacobian[0, 0] == pytest.approx(0.0, abs=1e-9)
    assert found.error[0, 0] < 1e-6
    (corner,) = found.gaps
    assert not corner.near


@pytest.mark.parametrize(
    ("name", "f", "low"),
    [
        ("root on both sides", lambda z: np.sqrt(np.abs(z)), -np.inf),
        ("root of odd order", lambda z: np.sign(z) * np.abs(z) ** (1 / 3), -np.inf),
        ("root at the end of its domain", lambda z: np.sqrt(np.maximum(z, 0.0)), 0.0),
    ],
)
def test_an_infinite_slope_is_told(name: str, f: Callable[[np.ndarray], np.ndarray], low: float) -> None:
    (corner,) = at(lambda z: f(z) + z, 0.0, low).gaps
    assert corner.kind == "steep"
    assert corner.distance == pytest.approx(0.0, abs=1e-8)


def test_a_relay_exactly_on_the_point_is_a_jump() -> None:
    found = at(lambda z: np.sign(z) + z, 0.0)
    (corner,) = found.gaps
    assert corner.kind == "jump"
    assert corner.near


def test_two_corners_about_the_point_do_not_cancel() -> None:
    """A dead zone is odd: slopes of the same step on both sides agree at every step."""
    found = at(lambda z: np.where(np.abs(z) < 5e-5, 0.0, z - np.sign(z) * 5e-5), 0.0)
    assert any(corner.near and corner.gap == pytest.approx(1.0, rel=1e-2) for corner in found.gaps)


def test_a_corner_is_found_beside_a_jump_that_hides_it() -> None:
    found = at(lambda z: z + np.abs(z - 1e-9) + np.where(z > 1.5e-4, 1e-3, 0.0), 0.0)
    assert {(corner.kind, corner.near) for corner in found.gaps} == {("kink", True), ("jump", False)}


def test_tables_trimmed_on_a_knot() -> None:
    knots = np.linspace(-2.0, 2.0, 9)
    curve = np.interp  # slopes change by about 0.25 from knot to knot
    found = at(lambda z: curve(z, knots, 0.25 * knots**2) + 10.0 * z, 0.5)
    (corner,) = found.gaps
    assert corner.gap == pytest.approx(0.25, rel=1e-3)
    assert corner.gap / found.scales[0] == pytest.approx(0.025, rel=0.05)
    assert found.error[0, 0] >= 0.125


def _single(f: Callable[[np.ndarray], np.ndarray]) -> Callable[[np.ndarray], np.ndarray]:
    return lambda z: f(z.astype(np.float32)).astype(np.float64)


def _bisected(z: np.ndarray) -> np.ndarray:
    """w with w + w^3 = z, by bisection to 1e-6."""
    low, high = np.full_like(z, -4.0), np.full_like(z, 4.0)
    for _ in range(23):
        middle = (low + high) / 2
        above = middle + middle**3 > z
        low, high = np.where(above, low, middle), np.where(above, middle, high)
    return low


NOISY = {
    "single precision": (_single(np.sin), np.cos(0.3)),
    "bisection to 1e-6": (_bisected, None),
    "rounded to 1e-6": (lambda z: np.round(np.sin(z), 6), np.cos(0.3)),
    "scattered by 1e-6": (lambda z: np.sin(z) + 1e-6 * scattered(z), np.cos(0.3)),
    "a smooth part and a rounded one": (lambda z: z + np.round(np.sin(z), 7), 1 + np.cos(0.3)),
}


def _exact(name: str) -> float:
    if name.startswith("bisection"):
        w = float(np.real(next(root for root in np.roots([1, 0, 1, -0.3]) if abs(root.imag) < 1e-12)))
        return 1 / (1 + 3 * w * w)
    return float(NOISY[name][1])


@pytest.mark.parametrize("name", NOISY)
def test_noise_is_measured_and_is_no_corner(name: str) -> None:
    found = at(NOISY[name][0], 0.3)
    assert found.outcome is Outcome.DONE
    assert not [corner for corner in found.gaps if corner.near and corner.gap > 0.05]
    assert 1e-9 < found.noise[0] < 1e-5
    assert found.grainy[0]
    assert abs(found.jacobian[0, 0] - _exact(name)) <= found.error[0, 0] < 5e-3
    assert found.unresolved[0, 0] < 0.05


@pytest.mark.parametrize("name", NOISY)
def test_corners_are_found_in_noise(name: str) -> None:
    found = at(lambda z: NOISY[name][0](z) + np.abs(z - 0.3), 0.3)
    (corner, *others) = found.gaps
    assert corner.kind == "kink"
    assert corner.near
    assert corner.gap == pytest.approx(2.0, rel=0.3)
    assert found.error[0, 0] >= 0.9
    assert all(other.maybe_near for other in others)


def test_what_noise_hides_is_left_open() -> None:
    found = at(lambda z: np.sin(z) + 3e-2 * scattered(z), 0.3)
    assert not found.gaps
    assert found.unresolved[0, 0] > 0.05


@pytest.mark.parametrize("seed", range(150))
def test_random_smooth_functions(seed: int) -> None:
    given = smooth(seed)
    open_ = np.full(len(given.z0), np.inf)
    found = slopes(given.f, given.z0, given.nominal, -open_, open_)
    assert found.gaps == ()
    assert np.all(np.abs(found.jacobian - given.jacobian) <= found.error)
    scales = np.maximum(found.scales, 1e-300)[:, np.newaxis]
    assert np.all(found.unresolved * given.nominal / scales < 0.05)


@pytest.mark.parametrize("seed", range(36))
def test_corners_planted_into_random_functions(seed: int) -> None:
    """Every kind at every distance, over the seeds."""
    kind = tuple(CORNERS)[seed % 6]
    for index, distance in enumerate(DISTANCES):
        side = 1.0 if (seed // 6 + index) % 2 else -1.0
        given = planted(1000 + 6 * seed + index, kind, side * distance)
        if given is not None:
            _found_and_nothing_else(given)


def _found_and_nothing_else(given) -> None:
    open_ = np.full(len(given.base.z0), np.inf)
    found = slopes(given.f, given.base.z0, given.base.nominal, -open_, open_)
    (corner,) = found.gaps
    assert (corner.row, corner.column) == (given.row, given.column)
    assert corner.kind == ("jump" if given.kind == "relay" else "kink")
    blur = max(1e-8 + 4 * given.resolution, 1e-3 * abs(given.distance), 3 * corner.blur)
    assert corner.distance == pytest.approx(given.distance, abs=blur)


@pytest.mark.slow
def test_many_random_smooth_functions() -> None:
    """Seeds 1000 to 10999: no corner, and no more than one entry in ten thousand off by more than its error."""
    off = entries = 0
    for seed in range(1000, 11_000):
        given = smooth(seed)
        open_ = np.full(len(given.z0), np.inf)
        found = slopes(given.f, given.z0, given.nominal, -open_, open_)
        assert found.gaps == (), seed
        off += int(np.count_nonzero(np.abs(found.jacobian - given.jacobian) > found.error))
        entries += given.jacobian.size
    assert off <= entries / 10_000


@pytest.mark.slow
@pytest.mark.parametrize("kind", CORNERS)
def test_many_planted_corners(kind: str) -> None:
    """Within 1e-4 every one is found; strong curvature may hide one in a hundred of those further out."""
    missed = dict.fromkeys(DISTANCES, 0)
    for seed in range(500):
        for distance in DISTANCES:
            given = planted(20_000 + seed, kind, distance if seed % 2 else -distance)
            if given is None:
                continue
            open_ = np.full(len(given.base.z0), np.inf)
            found = slopes(given.f, given.base.z0, given.base.nominal, -open_, open_)
            here = [one for one in found.gaps if (one.row, one.column) == (given.row, given.column)]
            missed[distance] += not any(one.near == (distance < 1e-4) for one in here)
    assert all(count == 0 for distance, count in missed.items() if distance < 1e-4)
    assert all(count <= 5 for count in missed.values())


@settings(max_examples=60, derandomize=True, database=None, deadline=None)
@given(
    powers=st.lists(st.integers(-3, 3), min_size=1, max_size=4),
    place=st.integers(-90, 90),
    size=st.integers(-6, 6),
)
def test_polynomials_of_any_scale(powers: list[int], place: int, size: int) -> None:
    unit = 10.0**size
    coefficients = np.array(powers, dtype=float)
    exact = np.polyval(np.polyder(coefficients), place / 30) / unit if len(powers) > 1 else 0.0
    point, open_ = np.array([unit * place / 30]), np.array([np.inf])
    found = slopes(lambda z: np.polyval(coefficients, z / unit), point, np.array([unit]), -open_, open_)
    assert found.gaps == ()
    assert abs(found.jacobian[0, 0] - exact) <= found.error[0, 0]
