"""A drive: one input sequence and one initial offset, given to plant and local model alike."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from types import MappingProxyType
from typing import Any

import numpy as np

from .case import Course
from .model import Array, frozen_array


@dataclass(frozen=True, slots=True, eq=False)
class Drive:
    """One input sequence about trim.

    every: time between instants; inputs: the driven ones; values (K, len(inputs)): deviations from the trimmed inputs.
    held: row k holds over interval k, from k * every to (k + 1) * every. straight: row k is reached at the end of
    interval k, in a straight line from row k - 1 (from zero in interval 0). offsets: initial deviation of states.
    text: how a reader would call it.
    """

    every: float
    inputs: tuple[str, ...]
    values: Array
    course: Course = "held"
    offsets: Mapping[str, float] = field(default_factory=lambda: MappingProxyType({}))
    text: str = ""

    def __post_init__(self) -> None:
        object.__setattr__(self, "values", frozen_array(self.values))
        if self.values.ndim != 2 or self.values.shape[1] != len(self.inputs):
            raise ValueError(f"values must have shape (K, {len(self.inputs)}), got {self.values.shape}")
        object.__setattr__(self, "offsets", MappingProxyType(dict(self.offsets)))

    @property
    def intervals(self) -> int:
        """Number of intervals K."""
        return int(self.values.shape[0])

    def scaled(self, factor: float) -> Drive:
        """The same drive with inputs and offsets multiplied by `factor`."""
        offsets = {name: factor * value for name, value in self.offsets.items()}
        return replace(self, values=frozen_array(factor * self.values), offsets=offsets)

    def to_data(self) -> dict[str, Any]:
        """Plain data, JSON-ready; floats are exact (repr round trip)."""
        return {
            "every": self.every,
            "course": self.course,
            "inputs": list(self.inputs),
            "values": [[float(value) for value in row] for row in self.values],
            "offsets": {name: float(value) for name, value in sorted(self.offsets.items())},
            "text": self.text,
        }

    @classmethod
    def from_data(cls, data: Mapping[str, Any]) -> Drive:
        """Back from `to_data`. Raises KeyError, TypeError or ValueError on data of another form."""
        inputs = tuple(str(name) for name in data["inputs"])
        values = np.array(data["values"], dtype=np.float64).reshape(-1, len(inputs))
        if data["course"] not in ("held", "straight") or not np.all(np.isfinite(values)):
            raise ValueError("a drive needs course held or straight and finite values")
        offsets = {str(name): float(value) for name, value in data.get("offsets", {}).items()}
        return cls(float(data["every"]), inputs, values, data["course"], offsets, str(data.get("text", "")))

    @property
    def digest(self) -> str:
        """Twelve hexadecimal digits that name this drive; the text does not count."""
        data = self.to_data()
        del data["text"]
        return hashlib.sha256(json.dumps(data, sort_keys=True).encode()).hexdigest()[:12]
