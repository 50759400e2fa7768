"""What the errors of the local model's own entries do to the figures of a loop.

Entries are moved by a few times their errors, since not all signs can be tried: all at once, with signs drawn once for
ever, and the opposite way, which a loop that loses its stability one way would pass. The largest change of a figure is
added to its error. Entries that are zero stay so: that they are zero says which states the loop does not move.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

import numpy as np

from ..core.model import Array, LocalModel, frozen_array
from ..numerics.closing import Opened, RefusedError, Setup, opened
from ..numerics.loop_margins import LoopMargins, measured
from ..numerics.margins import Found, Margins
from ..numerics.set_point import stepped

GROWTH = 4.0  # times the errors: by so much entries are moved, in place of the worst signs
EXACT = 1e-8  # of the largest entry: errors below are those of differences, and one draw of signs tells their size
DRAWS = 4  # of signs, where errors are larger, as those of printed entries are
WITHIN = 0.02  # of the final value: band of settling where none is asked for
ENDLESS = 1e6  # a figure that is infinite without errors, and beyond this with them, is told as infinite; a gain margin
# beyond this always is: how near to zero a gain may fall says how exact an integrator is, and nothing else


def whole(setup: Setup, name: str, at_input: bool, *, brief: bool = False) -> tuple[Opened, LoopMargins]:
    """The loop broken open, and all that its `require` asks for. Raises RefusedError."""
    loop = setup.loops[name]
    broken = opened(setup, name)
    one = measured(broken, at_input, brief=brief)
    if not one.stable or not any(limit.word in ("overshoot", "settling") for limit in loop.require):
        return broken, one
    within = next((limit.within for limit in loop.require if limit.word == "settling"), WITHIN)
    return broken, replace(one, steps=stepped(setup, name, broken, within))


def varied(setup: Setup, name: str, one: LoopMargins) -> list[LoopMargins] | None:
    """The loop of `one` on models that are wrong by as much as entries may be; None where one of them has no loop."""
    made = []
    try:
        for model in _models(setup.model):
            made.append(whole(replace(setup, model=model), name, one.at_input, brief=True)[1])
    except RefusedError:
        return None
    return made if one.loop.step is None else [_carried(one, other) for other in made]


def _models(model: LocalModel) -> Iterator[LocalModel]:
    if not any(errors.any() for errors in model.errors.values()):
        return
    generator = np.random.default_rng(20_026)
    for _ in range(1 if _exact(model) else DRAWS):
        signs = {name: generator.choice([-1.0, 1.0], size=getattr(model, name).shape) for name in "ABCD"}
        for way in (1.0, -1.0):
            A, B, C, D = (_moved(model, name, way * signs[name]) for name in "ABCD")
            yield replace(model, A=A, B=B, C=C, D=D)


def _exact(model: LocalModel) -> bool:
    """Whether entries are known so well that hardly anything depends on their errors."""
    return all(
        float(errors.max(initial=0.0)) <= EXACT * float(np.abs(getattr(model, name)).max(initial=0.0))
        for name, errors in model.errors.items()
    )


def _moved(model: LocalModel, name: str, signs: Array) -> Array:
    block: Array = getattr(model, name)
    errors = model.errors.get(name, np.zeros_like(block))
    change = GROWTH * signs * np.where(np.isfinite(errors), errors, 0.0)
    return frozen_array(np.where(block != 0.0, block + change, 0.0))


def _carried(one: LoopMargins, other: LoopMargins) -> LoopMargins:
    """`other` with the delay margins of a sampled loop, to first order in what phase and crossover changed by."""
    if len(one.channels) != len(other.channels):
        return other
    return replace(
        other,
        channels=tuple(
            replace(it, margins=replace(it.margins, delay=_delay(known.margins, it.margins)))
            for known, it in zip(one.channels, other.channels, strict=True)
        ),
    )


def _delay(one: Margins, other: Margins) -> Found:
    known, frequency = one.delay, one.phase.frequency
    if not math.isfinite(known.value) or not frequency > 0.0 or not math.isfinite(one.phase.value):
        return known
    change = (other.phase.value - one.phase.value) / frequency
    change -= known.value * (other.phase.frequency - frequency) / frequency
    return replace(known, value=known.value + change)


def widened(found: Found, others: Sequence[Found]) -> Found:
    """`found` with what the others differ from it added to its error."""
    if not others or math.isnan(found.value):
        return found
    values = [other.value for other in others]
    if any(math.isnan(value) for value in values):
        return replace(found, error=math.nan)
    if math.isinf(found.value):
        least = min(values)
        # infinite here and finite there: what it surely is lies below the smallest
        return found if least > ENDLESS else Found(least, found.frequency, (1.0 - 1.0 / GROWTH) * least)
    change = max(abs(value - found.value) for value in values)
    return replace(found, error=found.error + change)


def matched(key: tuple[str, str], others: Sequence[Mapping[tuple[str, str], Found]]) -> list[Found]:
    """The same figure of other models; NaN where one does not have it."""
    return [other.get(key, Found(math.nan)) for other in others]
