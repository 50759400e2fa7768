"""An invented run with one verdict of every kind, for the tests of what is written."""

from __future__ import annotations

import math
from typing import Any

from linverify.core.errors import Place
from linverify.core.verdict import Evidence, Figure, Sense, Status, Verdict

SPEC = "specs/kite/lift.yaml"
PLACE = Place(SPEC, 12, 3)

TRIMS = Verdict(
    SPEC,
    "wind9",
    "trims",
    Status.PASS,
    PLACE,
    figures=(
        Figure("scaled residual", "line", 3.21e-11, 1e-8, origin="default"),
        Figure("scaled residual", "climb_rate", 1.5e-12, 1e-8, origin="default"),
        Figure("departure from expected value", "winch", 0.031415926, 1.0, "kN", origin=f"{SPEC}:14:30"),
    ),
    notes=("one equilibrium was found from 12 starts",),
    requirements=("KT-1",),
    details={
        "states": {"line": 120.0, "climb_rate": -0.0},
        "inputs": {"winch": 4.0314159},
        "outputs": {"height": {"value": 88.125, "unit": "m"}},
    },
)
DIFFERENTIABLE = Verdict(
    SPEC,
    "wind9",
    "differentiable",
    Status.PASS,
    PLACE,
    figures=(Figure("gap of one-sided slopes", "climb_rate by winch", 0.0012, 0.05, origin="default"),),
    details={
        "poles": [
            {
                "real": -0.8,
                "imag": 2.1,
                "natural_frequency": 2.24722,
                "hertz": 0.357656,
                "damping": 0.355995,
                "time_constant": 1.25,
            },
            {
                "real": -0.8,
                "imag": -2.1,
                "natural_frequency": 2.24722,
                "hertz": 0.357656,
                "damping": 0.355995,
                "time_constant": 1.25,
            },
        ],
        "A": [[0.0, 1.0], [-5.05, -1.6]],
        "B": [[0.0], [0.25]],
        "C": [[0.75, 0.0]],
        "D": [[0.0]],
        "error_of_A": [[0.0, 1e-12], [2e-11, 3e-11]],
        "corners": ["a table corner of climb_rate lies 0.004 nominal sizes away in winch"],
        "jacobian_source": "central differences",
    },
)
FOLLOWS = Verdict(
    SPEC,
    "wind9",
    "follows.fast",
    Status.FAIL,
    Place(SPEC, 31, 3),
    reason="height leaves its error band",
    figures=(
        Figure("peak error", "height", 0.0512345678, 0.04, "m", error=1.2e-5, when=3.25, time_unit="s",
               drive="3fa9c1d20b77", origin=f"{SPEC}:40:18", status=Status.FAIL),
        Figure("rms error", "height", 0.011, 0.015, "m", error=2e-6, drive="91be00aa4c21", origin=f"{SPEC}:40:30"),
        Figure("largest change of winch", "", 0.9, unit="kN", sense=Sense.NONE),
    ),
    notes=("amplitude of winch is cut to 0.9 kN by the envelope",),
    requirements=("KT-2", "KT-1"),
    evidence=(
        Evidence("worst", "3fa9c1d20b77", "winch changes 8 times between -0.9 and +0.9 kN from 0.5 s on"),
        Evidence("simplest", "77d0c0ffee12", "winch steps to +0.9 kN at 1 s"),
    ),
    details={
        "statistics": {
            "text": "1 of 300 random drives broke a band; with 95 % confidence at most 1.57 % of draws do",
            "sampler": "independent draws",
            "bound": 0.0157,
        },
        "smallest_visible": {"gain": 0.075, "delay": math.inf, "signals": {"height": {"gain": 0.075, "delay": 0.2}}},
        "drives": {"all": 300, "random": 300},
        "completed": 0.99,
        "exits": [{"signal": "line", "side": "high", "count": 3}],
    },
)  # fmt: skip
UNDECIDED = Verdict(
    SPEC,
    "wind10",
    "follows.fast",
    Status.UNDECIDED,
    Place(SPEC, 31, 3),
    reason="a model that predicts no motion at all passes every drive of this set",
    figures=(Figure("peak error", "height", 0.001, 0.04, "m", origin=f"{SPEC}:40:18"),),
    requirements=("KT-2",),
)
NO_TRIM = Verdict(
    SPEC,
    "wind10",
    "trims",
    Status.FAIL,
    PLACE,
    reason="no equilibrium was found inside the envelope: climb_rate cannot vanish",
    figures=(Figure("scaled residual", "climb_rate", 0.4, 1e-8, origin="default", status=Status.FAIL),),
    requirements=("KT-1",),
)
ODD = Verdict(
    "specs/odd|name.yaml",
    "p+1.5",
    "trims",
    Status.PASS,
    Place("specs/odd|name.yaml", 3, 1),
    figures=(
        Figure("gain margin", "007", math.inf, 2.0, "", Sense.LOWER),
        Figure("peak error", "1e5", 0.0, 0.0, "m"),
        Figure("told", "a|b", math.nan, sense=Sense.NONE),
    ),
    requirements=("=SUM(A1)",),
    details={"wanted": [1, True, None, "x|y"], "far": math.inf, "none": math.nan, "nested": {"deep": {"er": [1.5]}}},
)
EVERY = (TRIMS, DIFFERENTIABLE, FOLLOWS, UNDECIDED, NO_TRIM, ODD)
SKIPPED_ID = f"{SPEC}::wind30::trims"
NOT_RUN_ID = f"{SPEC}::wind10::differentiable"
PLANNED = (*(verdict.id for verdict in EVERY), NOT_RUN_ID)


def described(point: str, *, skipped: str = "") -> dict[str, Any]:
    """What `record.describe` gives for a point of the invented spec."""
    return {
        "spec": SPEC,
        "point": point,
        "title": "Lift of a tethered kite",
        "signals": {
            "states": [["line", "m"], ["climb_rate", "m/s"]],
            "inputs": [["winch", "kN"]],
            "outputs": [["height", "m"]],
        },
        "time_unit": "s",
        "step": None,
        "checks": ["trims", "differentiable", "follows.fast"] if not skipped else ["trims"],
        "places": {"trims": str(PLACE), "differentiable": str(PLACE), "follows.fast": f"{SPEC}:31:3"},
        "requirements": [
            {"name": "KT-1", "text": "The kite flies.", "source": "Invented 1", "checks": ["trims", "follows.fast"]},
            {"name": "KT-2", "text": "Height is predicted | 4 cm.", "source": "", "checks": ["follows.fast"]},
            {"name": "KT-10", "text": "Nothing answers this.", "source": "Invented 2", "checks": []},
        ],
        "settings": [
            {"word": "error_bands.height.peak", "text": "4 cm", "origin": f"{SPEC}:40:18"},
            {"word": "operating_points.hold.wind", "text": f"{point[4:]} m/s", "origin": f"{SPEC}:12:20"},
        ],
        "skipped": skipped,
    }


POINTS = (described("wind9"), described("wind10"), described("wind30", skipped="the tether would part"))
PROVENANCE = {
    "git": {"commit": "0" * 40, "dirty": False},
    "sha256": {SPEC: "a" * 64},
    "versions": {"python": "CPython 3.x", "numpy": "2.x"},
    "seed": 7,
    "time": "2001-02-03 04:05:06 UTC",
}
