"""Margins of loops from the literature, printed digits and more."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import pytest
from open_loops import product, ratio

from linverify.numerics.margins import guarantee, margins
from linverify.numerics.transfer import Transfer


@dataclass(frozen=True)
class Row:
    """source; digits: as printed there, with the tolerance of the print; exact: computed independently, to 1e-5."""

    source: str
    loop: Transfer
    printed: dict[str, tuple[float, float]]
    exact: dict[str, float]
    places: dict[str, float] = field(default_factory=dict)


BOOK = "S. Skogestad, I. Postlethwaite, Multivariable Feedback Control, ch. 2 (numbers from memory)"
LAGS = ratio([3], product([1, 1], [1, 1], [1, 1]))
INVERSE = ([-6.0, 3.0], product([10, 1], [5, 1]))


def _pi(gain: float, time: float) -> Transfer:
    return ratio(gain * product([time, 1], INVERSE[0]), product([time, 0], INVERSE[1]))


ROWS = {
    "inverse response, PI": Row(
        BOOK + "; gain rounded in the book, so its peaks hold to 0.5 %",
        _pi(1.136, 12.7),
        {
            "gain_up": (1.63, 0.006), "phase_deg": (19.4, 0.05), "delay": (1.44, 0.005),
            "sensitivity": (3.92, 0.02), "complementary": (3.35, 0.017),
        },
        {
            "gain_up": 1.6354881, "phase_deg": 19.441983, "delay": 1.4355977,
            "sensitivity": 3.9116008, "complementary": 3.3422916,
        },
        {"phase": 0.236366},
    ),
    "inverse response, PI by rule": Row(
        BOOK,
        _pi(2.5 / 2.2, (2 * math.pi / math.sqrt(0.17)) / 1.2),
        {"phase_deg": (19.4, 0.05)},
        {"gain_up": 1.6349, "phase_deg": 19.428, "delay": 1.4342, "sensitivity": 3.9142, "complementary": 3.3449},
        {"phase": 0.236423},
    ),
    "unstable plant, PI": Row(
        BOOK,
        ratio(5 * np.array([1.5, 1]) / 1.5, product([1, 0], [1, -1], [0.02, 1], [0.02, 1])),
        {
            "gain_up": (18.7, 0.05), "gain_down": (0.21, 0.005), "phase_deg": (59.5, 0.05),
            "sensitivity": (1.19, 0.005), "complementary": (1.38, 0.005),
        },
        {
            "gain_up": 18.6796, "gain_down": 0.205657, "phase_deg": 59.519, "delay": 0.212125,
            "sensitivity": 1.19421, "complementary": 1.37726,
        },
        {"gain_up": 48.304, "gain_down": 0.845163, "phase": 4.89712},
    ),
    "three poles": Row(
        "P. Seiler, A. Packard, P. Gahinet, An Introduction to Disk Margins, IEEE Control Systems 40(5), 2020, ex. 1",
        ratio([25], [1, 10, 10, 10]),
        {"gain_up": (3.6, 0.005), "phase_deg": (29.1, 0.05), "disk": (0.46, 0.005)},
        {"gain_up": 3.6, "phase_deg": 29.1104, "delay": 0.284724, "disk": 0.458093},
        {"gain_up": math.sqrt(10), "phase": 1.784436, "disk": 1.955027},
    ),
    "three lags": Row(
        "K. J. Astrom, R. M. Murray, Feedback Systems, chapter on robust performance (numbers from memory)",
        LAGS,
        {"gain_up": (2.67, 0.005), "phase_deg": (41.7, 0.05)},
        {"gain_up": 8 / 3, "phase_deg": 41.6903, "sensitivity": 2.2},
        {"gain_up": math.sqrt(3), "phase": 1.039271, "sensitivity": math.sqrt(1.75)},
    ),
    "several crossings": Row(
        "test data of a public control library",
        ratio(8.75 * np.array([4, 0.4, 1]), product([100, 1], [1, 0.22, 1], [0.01, 0.008, 1])),
        {"gain_up": (2.2716, 5e-5), "sensitivity": (1 / 0.5591, 2e-4)},
        {"gain_up": 2.271586, "phase_deg": 97.59398, "sensitivity": 1 / 0.559085},
        {"gain_up": 10.005276, "phase": 0.0850452, "sensitivity": 9.991844},
    ),
}  # fmt: skip


def _told(found: Any, name: str) -> float:
    return math.degrees(found.phase.value) if name == "phase_deg" else float(getattr(found, name).value)


@pytest.mark.parametrize("name", ROWS)
def test_published(name: str) -> None:
    row = ROWS[name]
    found = margins(row.loop)
    assert found.stable
    for figure, (value, within) in row.printed.items():
        assert _told(found, figure) == pytest.approx(value, abs=within), figure
    for figure, value in row.exact.items():
        digits = 1e-5 if value not in (1.6349, 19.428, 1.4342, 3.9142, 3.3449) else 5e-5
        assert _told(found, figure) == pytest.approx(value, rel=digits), figure
    for figure, where in row.places.items():
        assert getattr(found, figure).frequency == pytest.approx(where, rel=1e-5), figure


def test_ultimate_gain_and_period() -> None:
    found = margins(ratio(*INVERSE))
    assert found.gain_up.value == pytest.approx(2.5, rel=1e-12)
    assert found.gain_up.frequency == pytest.approx(math.sqrt(0.17), rel=1e-12)
    assert 2 * math.pi / found.gain_up.frequency == pytest.approx(15.2, abs=0.05)


def test_all_crossings_of_the_resonant_loop() -> None:
    found = margins(ROWS["several crossings"].loop)
    told = [(each.frequency, math.degrees(each.margin)) for each in found.crossovers]
    assert told == [
        (pytest.approx(0.0850452, rel=1e-5), pytest.approx(97.59398, rel=1e-6)),
        (pytest.approx(0.9373, abs=5e-5), pytest.approx(-157.78448, rel=1e-6)),
        (pytest.approx(1.0919, abs=5e-5), pytest.approx(134.73257, rel=1e-6)),
    ]


def test_disk_of_the_three_poles_guarantees_what_is_printed() -> None:
    found = margins(ROWS["three poles"].loop)
    gain, phase = guarantee(found.disk.value)
    assert gain == pytest.approx(1.59, abs=0.005)
    assert 1 / gain == pytest.approx(0.63, abs=0.005)
    assert 20 * math.log10(gain) == pytest.approx(4.05, abs=0.005)
    assert math.degrees(phase) == pytest.approx(25.8, abs=0.05)
    # disks of the other two skews follow from the peaks of S and T
    assert 1 / found.sensitivity.value == pytest.approx(0.402146, rel=1e-5)
    assert 1 / found.complementary.value == pytest.approx(0.486367, rel=1e-5)
    poles = sorted(found.poles, key=lambda pole: (pole.real, pole.imag))
    assert [pole.real for pole in poles] == pytest.approx([-9.330269, -0.334865, -0.334865], abs=1e-6)
    assert [pole.imag for pole in poles] == pytest.approx([0.0, -1.907642, 1.907642], abs=1e-6)
