"""Controllers that are Python objects: (A, B, C, D), a mapping, an object with attributes, or a function of the point.

The order of inputs and outputs is that of the loop's `measures` and `moves`, unless the object names them itself.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any

import numpy as np

from linverify.core import units
from linverify.core.errors import Place, Problem
from linverify.core.model import Array
from linverify.core.realize import StateSpace

from .controller_files import shaped, size_of
from .controllers import Wiring
from .ground import WHOLE, Ground, listed
from .layout import PlantRef
from .plants import Found, Raised, called, load_object
from .scalars import printable, quoted

_KEYS = ("A", "B", "C", "D", "dt", "inputs", "outputs")
_FORMS = (
    "(A, B, C, D), (A, B, C, D, dt), a mapping or an object with A, B, C, D, or a function of the point is expected"
)
_LABELS = {"inputs": "input_labels", "outputs": "output_labels"}  # attributes that name signals
_GIVEN = math.inf  # a dt that nobody gave: that of the loop


@dataclass(slots=True)
class ControllerObjects:
    """Imports each object once. Mutable: objects are kept; `files` are those asked for since it was cleared."""

    ground: Ground
    root: Path
    files: dict[Path, None] = field(default_factory=dict)
    _found: dict[PlantRef, Found | Problem] = field(default_factory=dict)

    def bind(self, ref: PlantRef, wiring: Wiring) -> tuple[StateSpace, float | None] | None:
        """(A, B, C, D) with the sample time, or None after telling what is wrong."""
        if ref not in self._found:
            self._found[ref] = load_object(ref, self.root)
        found = self._found[ref]
        if isinstance(found, Problem):
            self.ground.problems.append(found)
            return None
        self.files |= dict.fromkeys(found.files)
        told = f"`{wiring.called}: controller: object`"
        value = found.value
        if callable(value) and not _parts_of(value):
            if any(math.isnan(each) for each in wiring.known.values.values()):
                return None  # what was refused is told; the function could only stumble over it
            value = called(value, MappingProxyType(dict(wiring.known.values)))
            if isinstance(value, Raised):
                self.ground.report(ref.place, f"{told}: {ref.text}: {printable(value)}")
                return None
        parts = _parts_of(value)
        if not parts:
            kind = "a class" if isinstance(value, type) else f"an object of type {type(value).__name__}"
            self.ground.report(ref.place, f"{told}: {ref.object!r} gives {kind}", _FORMS)
            return None
        return _Object(self.ground, parts, wiring, ref.place, told).bind()


def _parts_of(value: Any) -> Mapping[str, Any]:
    """The parts of a controller by name; nothing where `value` is none."""
    if isinstance(value, Mapping):
        return {**value, "dt": value.get("dt", 0.0)} if value else {}
    if isinstance(value, tuple | list) and len(value) in (4, 5):
        return dict(zip(_KEYS, (*value, *(() if len(value) == 5 else (_GIVEN,))), strict=False))
    if not isinstance(value, type) and all(hasattr(value, word) for word in "ABCD"):
        parts = {word: getattr(value, word) for word in "ABCD"}
        names = {word: getattr(value, label) for word, label in _LABELS.items() if hasattr(value, label)}
        return {**parts, "dt": getattr(value, "dt", None), **{f"{word}?": found for word, found in names.items()}}
    return {}


@dataclass(frozen=True, slots=True)
class _Object:
    """Binds the parts of one object. told: what messages call it."""

    ground: Ground
    parts: Mapping[str, Any]
    wiring: Wiring
    place: Place
    told: str

    def bind(self) -> tuple[StateSpace, float | None] | None:
        before = len(self.ground.problems)
        foreign = [str(key) for key in self.parts if str(key).rstrip("?") not in _KEYS]
        if foreign:
            self._report(f"unknown word {quoted(foreign[0])}", f"one of {', '.join(_KEYS)} is expected")
        found = self._shaped()
        inputs = self._order("inputs", [name for name, _ in self.wiring.measured], "measures")
        outputs = self._order("outputs", [name for name, _ in self.wiring.moved], "moves")
        if found is None or len(self.ground.problems) > before:
            return None
        step = self._step(static=not found[0].size)
        if len(self.ground.problems) > before:
            return None
        A, B, C, D = found
        return (A, B[:, inputs], C[outputs], D[np.ix_(outputs, inputs)]), step

    def _report(self, wrong: str, expected: str = "") -> None:
        self.ground.report(self.place, f"{self.told}: {wrong}", expected)

    def _shaped(self) -> StateSpace | None:
        read = {word: self._numbers(word) for word in "ABCD"}
        if any(each is None for each in read.values()):
            return None
        values = {word: each for word, each in read.items() if each is not None}
        n = _side(values["A"])
        if n is None:
            self._report(f"A is {size_of(values['A'])}", "a square matrix is expected")
            return None
        k, m = len(self.wiring.measured), len(self.wiring.moved)
        shapes = {"A": (n, n), "B": (n, k), "C": (m, n), "D": (m, k)}
        found: list[Array] = []
        for word, shape in shapes.items():
            one = np.zeros(shape) if word not in self.parts or (not n and word != "D") else shaped(values[word], shape)
            if one is None and word == "D" and not values[word].any() and values[word].size == 1:
                one = np.zeros(shape)  # a plain zero, as is the custom
            if one is None:
                expected = f"{shape[0]} x {shape[1]} is expected for {self.wiring.shape}"
                self._report(f"{word} is {size_of(values[word])}", expected)
                return None
            found.append(one)
        return found[0], found[1], found[2], found[3]

    def _numbers(self, word: str) -> Array | None:
        """Finite real numbers, or None after telling why not; nothing at all where the word is not there."""
        values = called(np.asarray, self.parts.get(word, np.zeros((0, 0))))
        if isinstance(values, Raised) or values.dtype.kind not in "iuf":
            self._report(f"{word} is no matrix of real numbers")
            return None
        numbers: Array = values.astype(np.float64)
        if not np.isfinite(numbers).all():
            self._report(f"{word} holds NaN or infinity", "finite numbers are expected")
            return None
        return numbers

    def _order(self, word: str, due: Sequence[str], of_loop: str) -> list[int]:
        """Where each of the loop's signals stands; labels of an object that are others are its own affair."""
        named = self.parts.get(word, self.parts.get(f"{word}?"))
        plain = list(range(len(due)))
        if named is None:
            return plain
        names = [str(name) for name in named] if isinstance(named, Sequence) and not isinstance(named, str) else []
        if sorted(names) == sorted(due):
            return [names.index(name) for name in due]
        if word in self.parts:
            self._report(f"{word} are {listed(names)}", f"those of `{of_loop}` are expected: {listed(due)}")
        return plain

    def _step(self, static: bool) -> float | None:
        """The sample time that object and loop agree on; a static gain agrees with any."""
        due, given = self.wiring.sample, self.parts["dt"]
        time_unit = self.ground.plant.time_unit
        if given is _GIVEN or (given is True and due is not None):
            return due
        try:
            value = 0.0 if given is None else float(given)
        except (TypeError, ValueError):
            value = math.nan
        if given is True or not 0.0 <= value < math.inf:
            self._report(f"dt is {printable(repr(given))}", "a sample time in the plant's time unit is expected")
        elif value == 0.0 and due is not None and not static:
            wrong = f"the controller is continuous, and `{self.wiring.called}` is sampled"
            self._report(wrong, f"a dt of {units.told(due, time_unit)} is expected")
        elif value > 0.0 and due is not None and abs(value - due) > WHOLE * due:
            expected = f"`{self.wiring.called}` is sampled every {units.told(due, time_unit)}"
            self._report(f"dt is {units.told(value, time_unit)}", expected)
        return due if due is not None else value or None


def _side(values: Array) -> int | None:
    if values.size == 1:
        return 1
    if values.size == 0:
        return 0
    return len(values) if values.ndim == 2 and values.shape[0] == values.shape[1] else None
