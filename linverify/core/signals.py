"""Ordered names with units, and the nearest right word for a wrong one."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Signals:
    """Names and units in array order."""

    names: tuple[str, ...]
    units: tuple[str, ...]

    @classmethod
    def of(cls, named: Mapping[str, str]) -> Signals:
        """From a mapping name -> unit; the mapping's order is the array's order."""
        return cls(tuple(named), tuple(named.values()))

    def __len__(self) -> int:
        return len(self.names)

    def __contains__(self, name: object) -> bool:
        return name in self.names

    def index(self, name: str) -> int:
        """Row of `name`; raises ValueError for a name that is not here."""
        return self.names.index(name)

    def unit(self, name: str) -> str:
        """Unit of `name`; raises ValueError for a name that is not here."""
        return self.units[self.names.index(name)]


def nearest(word: str, words: Iterable[str]) -> str:
    """The word among `words` that `word` was probably meant to be, or an empty string."""
    pool = list(words)
    folded = {candidate.casefold(): candidate for candidate in pool}
    close = difflib.get_close_matches(word.casefold(), list(folded), n=1, cutoff=0.6)
    return folded[close[0]] if close else ""
