"""A cart on a spring towed by its winch, with a delivered model beside it that tests make wrong on purpose.

x' = v, v' = (-k x - d v |v|-free damping + g w) / m, w' = (u - w) / lag: three states, one input, two outputs. The
trim at rest and every entry of the local model are known in closed form.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Case, CheckAsk, Interval, Options, TrimAsk
from linverify.core.delivered import AgreeAsk, DeliveredModel, LocalAsk
from linverify.core.errors import Place
from linverify.core.model import LocalModel
from linverify.core.plant import Plant
from linverify.core.verdict import Verdict

PLACE = Place("specs/cart/tow.yaml", 9, 3)
POINT_AT, ENTRIES_AT = Place("specs/cart/tow.yaml", 20, 12), Place("specs/cart/tow.yaml", 21, 14)
FILE = Place("specs/cart/models/tow.json", 1, 1)


def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
    place, speed, winch = x
    force = p["gain"] * winch - p["stiffness"] * place * (1.0 + p["hardening"] * place**2) - p["damping"] * speed
    return np.stack([speed, force / p["mass"], (u[0] - winch) / p["lag"]])


CART = Plant(
    states={"place": "m", "speed": "m/s", "winch": "rad"},
    inputs={"command": "rad"},
    outputs={"place": "m", "pull": "N"},
    parameters={
        "mass": (4.0, "kg"),
        "stiffness": (9.0, "N/m"),
        "hardening": (0.3, "1/m^2"),
        "damping": (1.6, "kg/s"),
        "gain": (5.0, "N/rad"),
        "lag": (0.25, "s"),
    },
    dynamics=dynamics,
    measurement=lambda t, x, u, p: np.stack([1.0 * x[0], p["gain"] * x[2]]),
)


def case(delivered: DeliveredModel | None, agree: AgreeAsk | None = None, **changes: Any) -> Case:
    """The cart held half a metre out."""
    known = {
        "spec": "specs/cart/tow.yaml",
        "point": "out",
        "title": "A cart",
        "plant": CART,
        "place": PLACE,
        "trim": TrimAsk(hold={"place": 0.5}, find=("speed", "winch", "command"), start={"command": 1.0}),
        "parameters": CART.defaults,
        "envelope": {"place": Interval(-2, 2), "speed": Interval(-4, 4), "command": Interval(-6, 6)},
        "nominal": {"place": 0.1, "speed": 0.5, "winch": 0.2, "command": 0.2, "pull": 2.0},
        "checks": (CheckAsk("agrees", PLACE),),
        "local": LocalAsk(delivered=delivered, agree=agree or AgreeAsk(place=POINT_AT)),
    }
    return Case(**{**known, **changes})


def derived(**changes: Any) -> LocalModel:
    """The cart's local model, found by the package."""
    model = Study(case(None, **changes), Options()).linearization().model
    assert model is not None
    return model


def delivered(model: LocalModel | None = None, *, digits: int = 17, **changes: Any) -> DeliveredModel:
    """`model`, by default the right one, as a file would hand it over; printed to `digits` significant digits."""
    model = model or derived()
    blocks = {name: printed(getattr(model, name), digits) for name in "ABCD"}
    given = DeliveredModel(
        FILE.file,
        FILE,
        **blocks,
        states=model.states.names,
        inputs=model.inputs.names,
        outputs=model.outputs.names,
        step=model.step,
        digits=digits,
    )
    return replace(given, **changes)


def printed(entries: np.ndarray, digits: int) -> np.ndarray:
    return np.vectorize(lambda value: float(f"{value:.{digits - 1}e}"), otypes=[float])(entries)


def changed(model: DeliveredModel, matrix: str, entries: Mapping[tuple[int, int], float]) -> DeliveredModel:
    """`model` with some entries of one matrix replaced."""
    block = np.array(getattr(model, matrix))
    for place, value in entries.items():
        block[place] = value
    return replace(model, **{matrix: block})


def verdict(given: DeliveredModel, agree: AgreeAsk | None = None, **changes: Any) -> Verdict:
    """What `agrees` says."""
    return judge_study(Study(case(given, agree, **changes), Options()), CheckAsk("agrees", PLACE))
