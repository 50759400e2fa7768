"""What the random drives say, in a form that a report can print and a reviewer can check."""

from __future__ import annotations

from typing import Any

from ..drives.sample import SAMPLER
from ..numerics.confidence import upper_bound

RISK = 0.05  # of a statement being wrong, for the whole family together


def statement(broken: int, count: int, family: int) -> dict[str, Any]:
    """The one-sided Clopper-Pearson bound on the share of violating draws; family: points that share the risk.

    Plain JSON values. Without random drives the bound is 1.
    """
    confidence = 1.0 - RISK / max(family, 1)
    bound = upper_bound(broken, count, confidence) if count else 1.0
    text = (
        f"{broken} of {count} random drives broke a band or did not complete; with {100 * confidence:.6g} % confidence "
        f"at most {100 * bound:.3g} % of draws from this sampler do (one-sided Clopper-Pearson). The bound concerns "
        "this sampler, not operation, and is void if the model was tuned on this seed."
    )
    return {
        "broken": broken,
        "random": count,
        "confidence": confidence,
        "bound": bound,
        "family": max(family, 1),
        "sampler": SAMPLER,
        "text": text,
    }
