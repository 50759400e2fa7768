"""Linear plants at rest with limits on their modes: the plant is its own local model, known in closed form."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Case, CheckAsk, Interval, Options, TrimAsk
from linverify.core.delivered import DeliveredModel, LocalAsk
from linverify.core.errors import Place
from linverify.core.loop import Limit
from linverify.core.mode import Chosen, ModeAsk
from linverify.core.plant import Plant
from linverify.core.verdict import Figure, Status, Verdict

PLACE = Place("specs/linear.yaml", 5, 3)
ASK = CheckAsk("modes", PLACE)


def plant(A: Any, B: Any = None, C: Any = None, *, time_unit: str = "s", names: Sequence[str] = ()) -> Plant:
    """x' = A x + B u, y = C x; states x0, x1, ... or `names`, inputs u0, ..., outputs y0, ..."""
    A = np.array(A, dtype=float)
    B = np.zeros((len(A), 1)) if B is None else np.array(B, dtype=float).reshape(len(A), -1)
    C = np.zeros((1, len(A))) if C is None else np.array(C, dtype=float).reshape(-1, len(A))
    states = tuple(names) or tuple(f"x{at}" for at in range(len(A)))
    return Plant(
        states=dict.fromkeys(states, "1"),
        inputs={f"u{at}": "1" for at in range(B.shape[1])},
        outputs={f"y{at}": "1" for at in range(len(C))},
        dynamics=lambda t, x, u, p: A @ x + B @ u,
        measurement=lambda t, x, u, p: C @ x,
        time_unit=time_unit,
    )


def case(plant: Plant, *lines: ModeAsk, nominal: dict[str, float] | None = None, **changes: Any) -> Case:
    """The plant at the origin."""
    names = (*plant.states, *plant.inputs, *(plant.outputs or {}))
    known = {
        "spec": "specs/linear.yaml",
        "point": "rest",
        "title": "A linear plant",
        "plant": plant,
        "place": PLACE,
        "trim": TrimAsk(hold=dict.fromkeys((*plant.inputs, *plant.states), 0.0), find=()),
        "parameters": dict(plant.defaults),
        "envelope": {name: Interval(-100.0, 100.0) for name in names},
        "nominal": {**dict.fromkeys(names, 1.0), **(nominal or {})},
        "checks": (ASK,),
        "modes": lines,
    }
    return Case(**{**known, **changes})


def verdict(A: Any, *lines: ModeAsk, B: Any = None, C: Any = None, **changes: Any) -> Verdict:
    """What `modes` says of a plant that the package linearizes itself."""
    return judge_study(Study(case(plant(A, B, C), *lines, **changes), Options()), ASK)


def judged(one: Plant, *lines: ModeAsk, **changes: Any) -> Verdict:
    """The same of a plant that the test has made."""
    return judge_study(Study(case(one, *lines, **changes), Options()), ASK)


def delivered(A: Any, *lines: ModeAsk, B: Any = None, C: Any = None, digits: int = 17, **model: Any) -> Verdict:
    """What `modes` says of a delivered model with these entries, printed to so many digits; the plant is another."""
    one = plant(-np.eye(len(A)), B, C)
    given = DeliveredModel(
        "models/rest.json", PLACE, np.array(A, dtype=float),
        np.zeros((len(A), 1)) if B is None else np.array(B, dtype=float).reshape(len(A), -1),
        np.zeros((1, len(A))) if C is None else np.array(C, dtype=float).reshape(-1, len(A)),
        np.zeros((1 if C is None else np.array(C).reshape(-1, len(A)).shape[0],
                  1 if B is None else np.array(B).reshape(len(A), -1).shape[1])),
        states=tuple(one.states), inputs=tuple(one.inputs), outputs=tuple(one.outputs or {}), digits=digits,
    )  # fmt: skip
    return judged(one, *lines, local=LocalAsk(delivered=replace(given, **model)))


def line(*limits: Limit, **words: Any) -> ModeAsk:
    """One line of `modes`; low, high, participates, near and within choose."""
    choosing = {key: words.pop(key) for key in ("low", "high", "participates", "near", "within") if key in words}
    return ModeAsk(place=PLACE, chosen=Chosen(**choosing), limits=limits, **words)


def least(word: str, low: float, **words: Any) -> Limit:
    return Limit(word, low=low, place=PLACE, **words)


def most(word: str, high: float, **words: Any) -> Limit:
    return Limit(word, high=high, place=PLACE, **words)


def pair(natural: float, damping: float) -> list[list[float]]:
    """A block with one pair of poles, in phase form."""
    return [[0.0, 1.0], [-(natural**2), -2.0 * damping * natural]]


def blocks(*parts: Any) -> np.ndarray:
    """A block-diagonal matrix."""
    parts = [np.atleast_2d(np.array(part, dtype=float)) for part in parts]
    whole, at = np.zeros((sum(map(len, parts)),) * 2), 0
    for part in parts:
        whole[at : at + len(part), at : at + len(part)] = part
        at += len(part)
    return whole


def figure(found: Verdict, what: str) -> Figure:
    """The tightest figure of that name."""
    (first, *rest) = [one for one in found.figures if one.what == what]
    return max([first, *rest], key=lambda one: (one.status is not Status.PASS, one.used_share))
