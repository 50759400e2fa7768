"""A loop of 12 states, well damped or with light modes, by the library and by python-control on its default grid."""

from __future__ import annotations

import math
import warnings
from dataclasses import dataclass
from functools import cache
from typing import Any

import numpy as np

from linverify.numerics.margins import margins
from linverify.numerics.transfer import Transfer
from tests.margins.oracle import Truth, truth
from tests.margins.response import Loop

FIGURES = ("gain_up", "phase", "delay", "sensitivity", "disk")
DAMPINGS = {"damped": 0.4, "light": 1e-3}


@dataclass(frozen=True)
class Answer:
    """Ratios, rad, s."""

    gain_up: float
    phase: float
    delay: float
    sensitivity: float
    disk: float


@cache
def loop(name: str) -> Loop:
    """An integrator behind an actuator's lag, and five modes from 3 to 60 rad/s that reach 0.65 at resonance."""
    damping = DAMPINGS[name]
    rates = np.geomspace(3.0, 60.0, 5)
    A = np.zeros((12, 12))
    B, C = np.zeros(12), np.zeros(12)
    for i, (w, sign) in enumerate(zip(rates, (1.0, -1.0, 1.0, 1.0, -1.0), strict=True)):
        A[2 * i : 2 * i + 2, 2 * i : 2 * i + 2] = [[0.0, w], [-w, -2.0 * damping * w]]
        B[2 * i + 1] = 1.0
        C[2 * i] = sign * 2.0 * damping * w * 0.65
    A[10, 11], A[11, 11] = 1.0, -25.0  # integrator behind the lag
    C[10], B[11] = 0.9, 25.0
    return Loop(A, B, C, 0.0)


@cache
def exact(name: str) -> Truth:
    return truth(loop(name))


def ours(name: str) -> Answer:
    it = loop(name)
    found = margins(Transfer(it.A, it.B[:, None], it.C[None, :], np.array([[it.D]])))
    return Answer(*(getattr(found, figure).value for figure in FIGURES))


@cache
def system(name: str) -> Any:
    import control

    it = loop(name)
    return control.ss(it.A, it.B[:, None], it.C[None, :], it.D)


def theirs(name: str) -> Answer:
    """python-control: margins and disk margin of the response on the grid that it chooses by itself."""
    import control

    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        response = control.frequency_response(system(name))
        grid = response.frequency
        there = np.asarray(response.magnitude).ravel() * np.exp(1j * np.asarray(response.phase).ravel())
        gain, phase, nearest, _, crossover, _ = control.stability_margins(
            (np.abs(there), np.degrees(np.unwrap(np.angle(there))), grid)
        )
        disk = float(control.disk_margins(system(name), grid)[0])
    lag = math.radians(phase)
    return Answer(float(gain), lag, lag / float(crossover), 1.0 / float(nearest), disk)


def polynomials(name: str) -> Answer:
    """python-control by the roots of polynomials, its way for this loop: neither stability nor a disk margin."""
    import control

    gain, phase, nearest, _, crossover, _ = control.stability_margins(system(name))
    lag = math.radians(phase)
    return Answer(float(gain), lag, lag / float(crossover), 1.0 / float(nearest), math.nan)


def errors(name: str, answer: Answer) -> dict[str, float]:
    """Relative, by figure."""
    known = exact(name)
    return {
        figure: abs(getattr(answer, figure) - getattr(known, figure)) / abs(getattr(known, figure))
        for figure in FIGURES
    }
