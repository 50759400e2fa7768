"""Controllers from files of the same form as delivered models: by name and never by position, in the plant's units.

`inputs` of the file are the signals that the loop measures (set point minus measurement), `outputs` what it moves;
states are the controller's own and carry no meaning. A controller works on deviations, so a file that claims an
operating point for it is refused.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from linverify.core import units
from linverify.core.model import Array
from linverify.core.realize import StateSpace
from linverify.core.signals import nearest

from .atoms import FileWord, Quantity
from .claims import MATRICES, Claim, Matrix
from .controllers import Wiring
from .ground import WHOLE, Ground, listed
from .models import Models, place_of, read_models
from .scalars import quoted


@dataclass(slots=True)
class ControllerFiles:
    """Reads each file once. Mutable: claims are kept; `files` are those that were asked for since it was cleared."""

    ground: Ground
    root: Path
    files: dict[Path, None] = field(default_factory=dict)
    _read: dict[Path, Models] = field(default_factory=dict)

    def claim(self, file: FileWord, point: str, called: str) -> Claim | None:
        """What the file says for `point`, or None after telling what is wrong with it."""
        path, shown = place_of(file, point, self.root)
        if path not in self._read:
            self._read[path] = read_models(file, path, shown, f"{called}: controller: file", "controllers")
            self.ground.problems += self._read[path].problems
        models = self._read[path]
        self.files |= dict.fromkeys(models.files)
        if not models.claims or models.problems:
            return None
        claim = models.claims.get(point) if models.several else models.claims[""]
        if claim is None:
            wrong = f"{models.shown} has no controller for the operating point {quoted(point)}"
            self.ground.report(file.place, wrong, f"it has {listed(models.claims)}", nearest(point, models.claims))
        elif claim.point is not None and claim.point.text != point:
            wrong = f"`point`: this controller is for {quoted(claim.point.text)}"
            self.ground.report(claim.point.place, wrong, f"{file.place} takes it for {quoted(point)}")
            return None
        return claim


@dataclass(frozen=True, slots=True)
class Claimed:
    """Binds one claim to the loop that it is for."""

    ground: Ground
    claim: Claim
    wiring: Wiring

    def bind(self) -> tuple[StateSpace, float | None] | None:
        """(A, B, C, D) in the plant's units with the sample time, or None after telling what is wrong."""
        before = len(self.ground.problems)
        self._refuses()
        inputs = self._order("inputs", [name for name, _ in self.wiring.measured], "measures")
        outputs = self._order("outputs", [name for name, _ in self.wiring.moved], "moves")
        factors = self._factors()
        a_time = self._time_unit()
        step = self._step(a_time)
        shaped = self._shaped()
        if len(self.ground.problems) > before or inputs is None or outputs is None or shaped is None:
            return None
        A, B, C, D = shaped
        ins = np.array([factors.get(name, 1.0) for name, _ in self.wiring.measured])
        outs = np.array([factors.get(name, 1.0) for name, _ in self.wiring.moved])
        rate = 1.0 if step is not None else a_time
        with np.errstate(over="ignore", invalid="ignore"):
            found = (A / rate, B[:, inputs] / ins / rate, outs[:, None] * C[outputs], D[np.ix_(outputs, inputs)])
            return (*found[:3], outs[:, None] * found[3] / ins), step

    def _refuses(self) -> None:
        for word, claimed in self.claim.at.items():
            expected = "a controller works on deviations from trim, and has no operating point of its own"
            self.ground.report(claimed.place, f"`{word}` in a controller", expected)
        hold = self.claim.hold
        if hold is not None and hold.text != "held":
            wrong = f"`hold`: {quoted(hold.text)} is no hold of a controller"
            self.ground.report(hold.place, wrong, "held is expected")

    def _order(self, word: str, due: Sequence[str], of_loop: str) -> list[int] | None:
        """Where each of the loop's signals stands in the file."""
        found, ground = self.claim.names.get(word), self.ground
        if found is None:
            wrong = f"`{word}` is missing"
            ground.report(self.claim.place, wrong, f"{listed(due)} is expected, as `{self._loop}: {of_loop}` has it")
            return None
        names = [each.text for each in found.words]
        sound = True
        for index, each in enumerate(found.words):
            if each.text not in due:
                wrong = f"`{word}`: {quoted(each.text)} is not among what `{self._loop}: {of_loop}` lists"
                ground.report(each.place, wrong, f"{listed(due)} is expected", nearest(each.text, due))
            elif each.text in names[:index]:
                ground.report(each.place, f"`{word}`: {quoted(each.text)} is listed twice")
            else:
                continue
            sound = False
        missing = [name for name in due if name not in names]
        if missing and sound:
            wrong = f"`{word}` lacks {listed(missing)}"
            ground.report(found.place, wrong, f"`{self._loop}: {of_loop}` lists it")
        return [names.index(name) for name in due] if sound and not missing else None

    @property
    def _loop(self) -> str:
        return self.wiring.called

    def _factors(self) -> Mapping[str, float]:
        """What one unit of the file is in the plant's unit, by signal."""
        signals = dict((*self.wiring.measured, *self.wiring.moved))
        states = {word.text for word in self.claim.names["states"].words} if "states" in self.claim.names else set()
        factors: dict[str, float] = {}
        for entry in self.claim.units:
            if entry.name not in signals:
                if entry.name not in states:
                    wrong = f"`units`: {quoted(entry.name)} is no signal of this controller"
                    self.ground.report(
                        entry.place, wrong, f"{listed(signals)} is expected", nearest(entry.name, signals)
                    )
                continue
            if entry.value.text.strip():
                told = Quantity(1.0, entry.value.text, f"1 {entry.value.text}", entry.value.place)
                word = f"units: {entry.name}"
                factors[entry.name] = self.ground.amount(told, signals[entry.name], word, difference=True)
        return factors

    def _time_unit(self) -> float:
        word = self.claim.time_unit
        if word is None:
            return 1.0
        return self.ground.time(Quantity(1.0, word.text, f"1 {word.text}", word.place), "time_unit")

    def _step(self, a_time: float) -> float | None:
        """The sample time that file and loop agree on; a static gain agrees with any."""
        number, due = self.claim.step, self.wiring.sample
        value = 0.0 if number is None else number.value * a_time
        place = self.claim.place if number is None else number.place
        if value < 0.0:
            self.ground.report(place, f"`dt`: {units.shown(value)} is below zero", "0 is a continuous controller")
        elif value == 0.0 and due is not None and "A" in self.claim.matrices:
            sample = units.told(due, self.ground.plant.time_unit)
            wrong = f"the controller is continuous, and `{self._loop}` is sampled"
            self.ground.report(place, wrong, f"`dt` of {sample} is expected")
        elif value > 0.0 and due is not None and abs(value - due) > WHOLE * due:
            time_unit = self.ground.plant.time_unit
            wrong = f"`dt`: a sample time of {units.told(value, time_unit)}"
            self.ground.report(place, wrong, f"`{self._loop}` is sampled every {units.told(due, time_unit)}")
        return due if due is not None else value or None

    def _shaped(self) -> StateSpace | None:
        matrices = self.claim.matrices
        missing = [word for word in ("A", "B", "C") if word not in matrices]
        if missing and (len(missing) < 3 or "D" not in matrices):
            self.ground.report(self.claim.place, f"`{missing[0]}` is missing", "A, B and C are expected, or D alone")
            return None
        side = 0 if "A" not in matrices else _side(matrices["A"])
        if side is None:
            wrong = f"`A` is {size_of(matrices['A'].values)}"
            self.ground.report(matrices["A"].place, wrong, "a square table is expected")
            return None
        k, m = len(self.wiring.measured), len(self.wiring.moved)
        shapes = {"A": (side, side), "B": (side, k), "C": (m, side), "D": (m, k)}
        found = [self._table(matrices.get(word), word, shapes[word]) for word in MATRICES]
        A, B, C, D = found
        return None if A is None or B is None or C is None or D is None else (A, B, C, D)

    def _table(self, matrix: Matrix | None, word: str, shape: tuple[int, int]) -> Array | None:
        if matrix is None:
            return np.zeros(shape)
        values = shaped(matrix.values, shape)
        if values is None:
            wrong = f"`{word}` is {size_of(matrix.values)}"
            self.ground.report(matrix.place, wrong, f"{shape[0]} x {shape[1]} is expected for {self.wiring.shape}")
        return values


def _side(matrix: Matrix) -> int | None:
    values = matrix.values
    if values.size == 1:
        return 1
    return len(values) if values.ndim == 2 and values.shape[0] == values.shape[1] else None


def shaped(values: Array, shape: tuple[int, int]) -> Array | None:
    """The matrix of `shape`; a line or a single number only where there is one way to read it."""
    if values.shape == shape:
        return values
    one_way = values.size == math.prod(shape) and (values.size == 0 or (values.ndim < 2 and 1 in shape))
    return values.reshape(shape) if one_way else None


def size_of(values: Array) -> str:
    """The size of a table as messages tell it."""
    if values.ndim == 0:
        return "one number"
    return " x ".join(map(str, values.shape)) if values.ndim > 1 else f"a list of {len(values)}"
