"""Static gains, delivered against derived: singular values, relative gains, sign of the determinant."""

from __future__ import annotations

from ..core.delivered import GainsAsk
from ..core.verdict import Figure, Status
from ..numerics import gains as numbers
from ..numerics.pair import Pair
from .claims import status_of
from .findings import Findings


def compare(pair: Pair, ask: GainsAsk, findings: Findings) -> None:
    """Add a figure for each word of `gains`."""
    found = numbers.static_gains(pair)
    if found is None:
        findings.reasons.append((Status.UNDECIDED, "there are no static gains: a pole lies at the origin"))
        return
    if not found.reference.size:
        findings.reasons.append(
            (Status.UNDECIDED, "there are no static gains: no input and output that both models have")
        )
        return
    if ask.singular_values is not None:
        _singular_values(pair, found, ask, ask.singular_values, findings)
    if ask.relative_gain is not None:
        _relative_gain(pair, found, ask, ask.relative_gain, findings)
    if ask.determinant_sign is not None:
        _determinant(found, ask, findings)


def _singular_values(pair: Pair, found: numbers.StaticGains, ask: GainsAsk, limit: float, findings: Findings) -> None:
    moved = numbers.singular_values(found, pair.inputs, pair.outputs)
    status = status_of(moved.change, moved.error, limit)
    place = f"singular value {moved.place[0] + 1}"
    findings.figures.append(
        Figure(
            "static gain, scaled by nominal sizes", place, 100 * moved.change, 100 * limit, "%",
            error=100 * moved.error, origin=str(ask.place), status=status,
        )
    )  # fmt: skip
    if status is not Status.PASS:
        told = f"{place} of the static gain, scaled by nominal sizes: delivered {moved.delivered:.6g}, "
        findings.reasons.append((status, f"{told}plant {moved.reference:.6g}"))


def _relative_gain(pair: Pair, found: numbers.StaticGains, ask: GainsAsk, limit: float, findings: Findings) -> None:
    moved = numbers.relative_gain(found)
    status = status_of(moved.change, moved.error, limit)
    row, column = moved.place
    place = f"{pair.reference.inputs.names[column]} to {pair.reference.outputs.names[row]}"
    findings.figures.append(
        Figure("relative gain", place, moved.change, limit, error=moved.error, origin=str(ask.place), status=status)
    )
    if status is not Status.PASS:
        told = f"relative gain of {place}: delivered {moved.delivered:.5g}, plant {moved.reference:.5g}"
        findings.reasons.append((status, told))


def _determinant(found: numbers.StaticGains, ask: GainsAsk, findings: Findings) -> None:
    if found.reference.shape[0] != found.reference.shape[1]:
        k, m = found.reference.shape
        told = f"`determinant_sign` needs as many outputs as inputs, and the models share {k} outputs and {m} inputs"
        findings.reasons.append((Status.UNDECIDED, told))
        return
    theirs, ours = numbers.determinant_signs(found)
    if ours == 0 or theirs == 0:
        whose = "plant's" if ours == 0 else "delivered model's"
        findings.reasons.append((Status.UNDECIDED, f"the {whose} static gain is singular as far as it is known"))
        return
    status = Status.PASS if theirs == ours else Status.FAIL
    words = {1: "positive", -1: "negative"}
    findings.details["determinant_sign"] = {"delivered": words[theirs], "plant": words[ours]}
    if status is Status.FAIL:
        told = f"determinant of the static gain: delivered {words[theirs]}, plant {words[ours]}"
        findings.reasons.append((status, f"{told} ({ask.place})"))
