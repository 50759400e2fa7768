"""The delivered model's frequency response against the derived one's, over the band that `agree` states."""

from __future__ import annotations

import cmath
import math
from collections.abc import Mapping
from typing import Any

from ..core.delivered import ResponseAsk
from ..core.units import composed
from ..core.verdict import Figure, Status
from ..numerics.pair import Pair
from ..numerics.response import Channel, channels
from .findings import Findings

TOLD = 2  # channels that a message names; all of them are in the details


def compare(pair: Pair, ask: ResponseAsk, time_unit: str, findings: Findings) -> None:
    """Add the worst channel's figure, a sentence for those that break the limit, and a table of all."""
    high = ask.high
    if pair.reference.step is not None:
        nyquist = math.pi / pair.reference.step
        if high > nyquist:
            high = nyquist
            findings.notes.append(
                f"responses are compared up to half the sampling frequency, {high:.6g} rad/{time_unit}"
            )
    if ask.low >= high:
        findings.reasons.append((Status.UNDECIDED, "the band of `response` lies above half the sampling frequency"))
        return
    found = channels(pair, ask.low, high, ask.floor)
    if not found:
        findings.notes.append("there is no input and output that both models have: no response was compared")
        findings.reasons.append((Status.UNDECIDED, "no input and output that both models have: nothing to respond"))
        return
    ranked = [(_status(one, ask.within), one) for one in found]
    status = next((wanted for wanted in (Status.FAIL, Status.UNDECIDED) if wanted in dict(ranked)), Status.PASS)
    deciding = [one for its, one in ranked if its is status]
    findings.figures.append(_figure(deciding[0], status, ask))
    findings.details["response"] = [_plain(one) for one in found]
    if status is not Status.PASS:
        words = [_told(pair, one, time_unit, status) for one in deciding[:TOLD]]
        more = f"; and {len(deciding) - TOLD} more channels" if len(deciding) > TOLD else ""
        findings.reasons.append((status, "; ".join(words) + more))


def _status(one: Channel, limit: float) -> Status:
    if one.lowest > limit:
        return Status.FAIL
    return Status.PASS if one.highest <= limit else Status.UNDECIDED


def _figure(one: Channel, status: Status, ask: ResponseAsk) -> Figure:
    return Figure(
        what="frequency response",
        signal=f"{one.input} to {one.output}",
        worst=100 * one.share,
        limit=100 * ask.within,
        unit="%",
        error=100 * one.error,
        origin=str(ask.place),
        status=status,
    )


def _told(pair: Pair, one: Channel, time_unit: str, status: Status) -> str:
    model = pair.reference
    unit = composed([model.outputs.unit(one.output)], [model.inputs.unit(one.input)])
    where = f"{one.input} to {one.output} at {one.frequency:.6g} rad/{time_unit}"
    words = f"{where}: delivered {_polar(one.delivered, unit)}, plant {_polar(one.reference, unit)}"
    words += f", off by {100 * one.share:.3g} %"
    if status is Status.UNDECIDED:
        if math.isinf(one.highest):
            return (
                f"{words}, but the plant's own response is not known at every frequency of the band: a pole on its edge"
            )
        return f"{words}, known to +- {100 * one.error:.1g} %"
    return words


def _polar(value: complex, unit: str) -> str:
    if cmath.isinf(value):
        return "unbounded"
    size = f"{abs(value):.4g}" + ("" if unit == "1" else f" {unit}")
    return f"{size} at {math.degrees(cmath.phase(value)):.1f} deg"


def _plain(one: Channel) -> Mapping[str, Any]:
    return {
        "input": one.input,
        "output": one.output,
        "frequency": one.frequency,
        "share": _finite(one.share),
        "error": _finite(one.error),
        "delivered_gain": _finite(abs(one.delivered)),
        "plant_gain": _finite(abs(one.reference)),
        "delivered_phase": _degrees(one.delivered),
        "plant_phase": _degrees(one.reference),
    }


def _finite(value: float) -> float | None:
    return float(value) if math.isfinite(value) else None


def _degrees(value: complex) -> float | None:
    return None if cmath.isinf(value) or cmath.isnan(value) else math.degrees(cmath.phase(value))
