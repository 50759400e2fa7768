"""Limits on transmission zeros and on static gains of a local model."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from ..core.loop import Limit
from ..core.mode import ModeAsk
from ..core.model import LocalModel, frozen_array
from ..core.shown import Shown, number, with_unit
from ..core.signals import Signals
from ..core.verdict import Figure, Status
from ..numerics.frequency import respond_within
from ..numerics.modal import Modes
from ..numerics.structure import leads
from ..numerics.traits import TRAITS, Known, decay_rate
from ..numerics.zero_discs import Zero, Zeros, channels, zeros_of
from .findings import Findings
from .mode_choice import line_name, told_complex
from .mode_limits import WORDED, figure, own_unit, sentence

REACHES = 1e-6  # measure of control and of sight from which a pole at the origin makes a static gain infinite


def judge_zeros(modes: Modes, ask: ModeAsk, into: Findings) -> None:
    """`minimum_phase` and limits on the zeros of a line.

    States that do not lie between its inputs and its outputs have no part in what one does to the other: their modes
    are no zeros.
    """
    if not ask.minimum_phase and not ask.zeros:
        return
    model = modes.model
    inputs, outputs = ask.inputs or model.inputs.names, ask.outputs or model.outputs.names
    path = f"from {', '.join(inputs)} to {', '.join(outputs)}"
    try:
        whole = channels(model, inputs, outputs)
        between = _between(modes, whole)
        found = zeros_of(replace(_cut(whole, between), errors=_cut_errors(whole, between)))
    except ValueError:
        known = {*model.inputs.names, *model.outputs.names, *model.states.names}
        lacks = [name for name in (*inputs, *outputs) if name not in known]
        reason = f"{line_name(ask)}zeros {path}: the local model has no {', '.join(lacks)}"
        into.reasons.append((Status.UNDECIDED, reason))
        return
    told = [_plain(zero) for zero in found.zeros]
    into.details.setdefault("zeros", []).append({"inputs": list(inputs), "outputs": list(outputs), "zeros": told})
    if found.blind:
        words = "the outputs do not answer all of these inputs independently, so that every place is a zero"
        into.reasons.append((Status.UNDECIDED, f"{line_name(ask)}zeros {path}: {words}"))
        return
    if not found.zeros:
        into.notes.append(f"{line_name(ask)}there are no zeros {path}")
    if ask.minimum_phase:
        _right_of_axis(found, ask, path, into)
    for limit in ask.zeros:
        _limited(found, ask, limit, path, into)


def _plain(zero: Zero) -> dict[str, Any]:
    value = zero.pole.value
    if not math.isfinite(abs(value)):
        return {"z_real": zero.z.real, "z_imag": zero.z.imag}
    z = {} if math.isnan(zero.z.real) else {"z_real": zero.z.real, "z_imag": zero.z.imag}
    return {"real": value.real, "imag": value.imag, **z, "error": zero.pole.radius}


def _label(zero: Zero) -> str:
    if not math.isfinite(abs(zero.pole.value)):
        return f"zero at z = {told_complex(zero.z)}"
    return f"zero {told_complex(zero.pole.value, pair=zero.pole.value.imag > 0.0 and zero.z.imag != 0.0)}"


def _right_of_axis(found: Zeros, ask: ModeAsk, path: str, into: Findings) -> None:
    unit = f"1/{into.details['time_unit']}"
    for zero in found.zeros:
        rate = decay_rate(zero.pole)
        status = Status.PASS if zero.at_origin or rate.low >= 0.0 else Status.UNDECIDED
        if status is not Status.PASS and rate.high < 0.0:
            status = Status.FAIL
        what = f"{line_name(ask)}real part (not above zero) of the zeros {path}"
        into.figures.append(
            Figure(what, _label(zero), -rate.value + 0.0, 0.0, unit, error=rate.error, origin=str(ask.place),
                   status=status)
        )  # fmt: skip
        if status is Status.FAIL:
            into.reasons.append((status, f"{line_name(ask)}the {_label(zero)} {path} lies right of the axis"))
        elif status is Status.UNDECIDED:
            why = f"it is known to within {with_unit(number(zero.pole.radius, 2), unit)}"
            if not found.square:
                why = "with more signals on one side than on the other, any error of an entry makes it vanish"
            into.reasons.append((status, f"{line_name(ask)}the {_label(zero)} {path} may lie right of the axis: {why}"))


def _limited(found: Zeros, ask: ModeAsk, limit: Limit, path: str, into: Findings) -> None:
    shown = limit.shown or own_unit(limit.word, into.details["time_unit"])
    what = f"{line_name(ask)}{WORDED[limit.word]} of the zeros {path}"
    for zero in found.zeros:
        known = _real(zero) if limit.word == "real" else TRAITS[limit.word](zero.pole)
        one = figure(what, _label(zero), known, limit, shown)
        into.figures.append(one)
        if one.status is not Status.PASS:
            into.reasons.append((one.status, f"{what}: that of the {_label(zero)} is {sentence(one, limit)}"))


def _real(zero: Zero) -> Known:
    rate = decay_rate(zero.pole)
    return Known(-rate.value, -rate.high, -rate.low)


@dataclass(frozen=True, slots=True)
class _Gain:
    """A static gain with its error; infinite: it grows without bound for sure; NaN value where nothing is known."""

    value: float
    error: float
    infinite: bool = False


def judge_gains(found: Modes, ask: ModeAsk, into: Findings) -> None:
    """Static gains of a line."""
    for source, target, limit in ask.static_gain:
        what = f"{line_name(ask)}static gain from {source} to {target}"
        try:
            gain = _gain(found, channels(found.model, (source,), (target,)))
        except ValueError:
            lacks = source if source not in found.model.inputs else target
            into.reasons.append((Status.UNDECIDED, f"{what}: the local model has no {lacks}"))
            continue
        shown = limit.shown or Shown()
        row = {"input": source, "output": target, "gain": shown.size(gain.value), "unit": shown.unit}
        into.details.setdefault("gains_at_rest", []).append(row)
        if gain.infinite:
            into.reasons.append((Status.FAIL, f"{what} is infinite: a pole at the origin lies between them"))
            continue
        if math.isnan(gain.value):
            words = "a pole lies so near to the origin, as far as the entries are known, that there may be none"
            into.reasons.append((Status.UNDECIDED, f"{what}: {words}"))
            continue
        known = Known(gain.value, gain.value - gain.error, gain.value + gain.error)
        one = figure(what, "", known, limit, shown)
        into.figures.append(one)
        if one.status is not Status.PASS:
            into.reasons.append((one.status, f"{what} is {sentence(one, limit)}"))


def _gain(found: Modes, model: LocalModel) -> _Gain:
    """The static gain of one channel, through the states that lie between the input and the output."""
    between = _between(found, model)
    gain, error = respond_within(_cut(model, between), _cut_errors(model, between), np.zeros(1))
    value, doubt = complex(gain[0, 0, 0]), float(error[0, 0, 0])
    if math.isfinite(abs(value)) and math.isfinite(doubt):
        return _Gain(value.real, doubt)
    whole = replace(found, model=model)
    reached = [
        mode
        for mode in found.modes
        if mode.origin == "yes"
        and mode.alone
        and whole.controllability(mode, model.inputs.names[0]).low > REACHES
        and whole.observability(mode, model.outputs.names[0]).low > REACHES
    ]
    return _Gain(math.inf, 0.0, infinite=True) if reached else _Gain(math.nan, math.inf)


def _between(found: Modes, model: LocalModel) -> Any:
    """Places of the states on a path from an input to an output, by the pattern of zeros alone."""
    starts, ends = (model.B != 0.0).any(axis=1), (model.C != 0.0).any(axis=0)
    return np.flatnonzero(leads(found.acts, starts, ends))


def _cut(model: LocalModel, places: Any) -> LocalModel:
    names = tuple(model.states.names[at] for at in places)
    units = tuple(model.states.units[at] for at in places)
    return replace(
        model,
        A=frozen_array(model.A[np.ix_(places, places)]),
        B=frozen_array(model.B[places]),
        C=frozen_array(model.C[:, places]),
        states=Signals(names, units),
        ahead=None,
    )


def _cut_errors(model: LocalModel, places: Any) -> dict[str, Any]:
    known = {name: model.errors.get(name, np.zeros_like(getattr(model, name))) for name in "ABCD"}
    A = np.where(model.A == 0.0, 0.0, known["A"])
    return {
        "A": A[np.ix_(places, places)],
        "B": known["B"][places],
        "C": known["C"][:, places],
        "D": known["D"],
    }
