"""The table of checks: one row a check, in the order in which a point's checks run."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from importlib import import_module
from typing import cast

from ..core.case import CheckAsk
from ..core.verdict import Verdict
from .study import Study

Check = Callable[[Study, CheckAsk], Verdict]


@dataclass(frozen=True, slots=True)
class Row:
    """kind: the check's word; needs: what the study must have found before the check can say anything."""

    kind: str
    needs: tuple[str, ...]

    def load(self) -> Check:
        """The check itself; imported when it is first run, since some checks bring heavy libraries along."""
        return cast(Check, import_module(f".{self.kind}", __name__).check)


TABLE = {
    row.kind: row
    for row in (
        Row("trims", ()),
        Row("differentiable", ("trim",)),
        Row("agrees", ("trim", "reference")),
        Row("follows", ("trim", "model")),
        Row("modes", ("trim", "model")),
        Row("margins", ("trim", "model")),
    )
}
