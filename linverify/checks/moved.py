"""What a wrong model moves: poles, zeros and static gains in pairs, and whether only coordinates differ."""

from __future__ import annotations

from typing import Any

import numpy as np

from ..numerics.frequency import Complex, blocks
from ..numerics.gains import static_gains
from ..numerics.pair import Pair
from ..numerics.similarity import same_behaviour, similar
from ..numerics.zeros import matched, transmission_zeros
from .findings import Findings

SAME = (
    "inputs do the same to outputs as in the plant: the delivered model is the derived one in other state coordinates"
)
UNSEEN = "inputs do the same to outputs as in the plant: what differs in the delivered model is not seen at its outputs"


def tell(pair: Pair, findings: Findings, *, entries_differ: bool) -> None:
    """Add tables of poles, zeros and gains (delivered beside plant) to the details, and what they mean to the notes."""
    if pair.time_clash:
        return
    findings.details["poles_moved"] = _pairs(_poles(pair.delivered), _poles(pair.reference))
    zeros = [transmission_zeros(model) for model in (pair.delivered, pair.reference)]
    findings.details["zeros_moved"] = _pairs(*zeros)
    gains = static_gains(pair)
    if gains is not None:
        model = pair.reference
        findings.details["static_gains"] = [
            {
                "input": model.inputs.names[j],
                "output": model.outputs.names[i],
                "delivered": float(gains.delivered[i, j]),
                "plant": float(gains.reference[i, j]),
            }
            for i, j in np.ndindex(gains.reference.shape)
        ]
    if (entries_differ or pair.anonymous) and same_behaviour(pair):
        findings.notes.append(SAME if similar(pair) else UNSEEN)


def _poles(model: Any) -> Complex:
    return np.asarray(np.linalg.eigvals(blocks(model).A), dtype=np.complex128)


def _pairs(theirs: Complex, ours: Complex) -> list[dict[str, Any]]:
    pairs = matched(theirs, ours)
    # in the order of the plant's: slow ones first, conjugates together
    pairs.sort(key=lambda pair: _order(pair[0] if pair[1] is None else pair[1]))
    return [{"delivered": _plain(one), "plant": _plain(other)} for one, other in pairs]


def _order(value: complex | None) -> tuple[float, float, float]:
    value = value or 0j
    return float(f"{abs(value):.9g}"), float(f"{value.real:.9g}"), -value.imag


def _plain(value: complex | None) -> dict[str, float] | None:
    return None if value is None else {"real": value.real, "imag": value.imag}
