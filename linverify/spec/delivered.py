"""A claim about a local model held against the plant: by name and never by position, in the plant's units.

What comes out is in the order in which the file has it. Mistakes are those of the file and are told at their place in
it; nothing is guessed: a name that the plant does not have, a state that is missing or a shape that does not fit the
names is a mistake, not a model.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from linverify.core import units
from linverify.core.delivered import Course, DeliveredModel, Keep
from linverify.core.model import Array, frozen_array
from linverify.core.signals import nearest

from .claims import ANY, KIND_OF, ONE, POINTS, Claim, Listed, Matrix, Number
from .ground import WHOLE, Ground, listed
from .layout import Quantity
from .scalars import quoted

_HOLDS: tuple[Course, ...] = ("held", "straight")


def bind_delivered(
    ground: Ground, claim: Claim, keep: Keep | None, optional: Collection[str] = ()
) -> DeliveredModel | None:
    """The model of `claim` in the plant's units, or None after telling what is wrong with it.

    optional: inputs and states that it need not have, where loops are closed inside it.
    """
    before = len(ground.problems)
    model = _Binding(ground, claim, keep, optional).model()
    return model if len(ground.problems) == before else None


@dataclass(frozen=True, slots=True)
class _Names:
    """Names in the order of the file. states is None where they are anonymous; n: how many there are."""

    states: tuple[str, ...] | None
    inputs: tuple[str, ...]
    outputs: tuple[str, ...]
    n: int


@dataclass(frozen=True, slots=True)
class _Binding:
    """One claim, its plant, and what is kept where the model is to be a reduced one."""

    ground: Ground
    claim: Claim
    keep: Keep | None
    optional: Collection[str]

    def model(self) -> DeliveredModel | None:
        """Reads part by part, so that one mistake does not hide another one."""
        claim = self.claim
        names = self._names()
        factors = self._factors()
        a_time = self._time_unit()
        step = self._step(a_time)
        course = self._course()
        x0, u0, y0 = (self._claimed(word, names) for word in POINTS)
        if names is None or not self._complete(names):
            return None
        shaped = self._shaped(names)
        if shaped is None or not all(map(math.isfinite, (a_time, *factors.values()))):
            return None
        A, B, C, D = _converted(shaped, names, factors, 1.0 if step else a_time)
        for word, values in zip("ABCD", (A, B, C, D), strict=True):
            if not np.isfinite(values).all():
                self.ground.report(claim.place, f"`{word}` holds a number too large in the plant's units")
        return DeliveredModel(
            file=claim.file,
            place=claim.place,
            A=frozen_array(A),
            B=frozen_array(B),
            C=frozen_array(C),
            D=frozen_array(D),
            states=names.states,
            inputs=names.inputs,
            outputs=names.outputs,
            step=step,
            course=course,
            x0=x0,
            u0=u0,
            y0=y0,
            point=claim.point.text if claim.point else "",
            digits=claim.digits,
            rounding=self._rounding(names, factors, 1.0 if step else a_time),
        )

    def _names(self) -> _Names | None:
        """The names of all three kinds, each known to the plant and written once."""
        claim, ground = self.claim, self.ground
        missing = [word for word in ("A", "B") if word not in claim.matrices and (word == "A" or ground.inputs)]
        missing += ["inputs"] if "inputs" not in claim.names and ground.inputs else []
        missing += ["outputs"] if "outputs" not in claim.names and ("C" in claim.matrices) else []
        if "C" not in claim.matrices and ("D" in claim.matrices or claim.names.get("outputs", _NOTHING).words):
            missing.append("C")
        if missing:
            ground.report(
                claim.place, f"`{missing[0]}` is missing", f"the model has {listed([*claim.matrices, *claim.names])}"
            )
            return None
        states = self._states()
        inputs = self._known("inputs", ground.inputs)
        outputs = self._known("outputs", ground.outputs)
        if inputs is None or outputs is None or states is None:
            return None
        count = len(states) if states else _side(claim.matrices["A"])
        if count is None:
            ground.report(
                claim.matrices["A"].place, f"`A` is {_size(claim.matrices['A'].values)}", "a square table is expected"
            )
            return None
        return _Names(states or None, inputs, outputs, count)

    def _states(self) -> tuple[str, ...] | None:
        """Names of states; () where they are anonymous, None where they are wrong."""
        found = self.claim.names.get("states")
        if found is None or not any(word.text for word in found.words):
            return ()
        return self._known("states", self.ground.states)

    def _known(self, kind: str, among: Sequence[str]) -> tuple[str, ...] | None:
        seen: dict[str, None] = {}
        sound = True
        for word in self.claim.names.get(kind, _NOTHING).words:
            if word.text in seen:
                self.ground.report(word.place, f"`{kind}`: {quoted(word.text)} is listed twice")
                sound = False
            elif not word.text:
                self.ground.report(word.place, f"`{kind}`: a name is empty", "all names are expected, or none")
                sound = False
            else:
                article = "an" if kind[0] in "aeiou" else "a"
                sound = self.ground.known(word.text, word.place, among, f"{article} {ONE[kind]}") and sound
            seen[word.text] = None
        return tuple(seen) if sound else None

    def _complete(self, names: _Names) -> bool:
        """No state or input of the plant may be missing, nor anything that the spec keeps."""
        ground, keep = self.ground, self.keep
        wanted = {"states": ground.states, "inputs": ground.inputs, "outputs": ()}
        if keep is not None:
            wanted = {"states": keep.states, "inputs": keep.inputs, "outputs": keep.outputs}
        before = len(ground.problems)
        for kind, kept in wanted.items():
            have: tuple[str, ...] | None = getattr(names, kind)
            if have is not None:  # anonymous states are judged by what outputs do
                self._lacks(kind, [name for name in kept if name not in have and name not in self.optional])
        for kind in ("states", "inputs") if keep is not None else ():
            self._leaves_out(kind, wanted[kind])
        return len(ground.problems) == before

    def _lacks(self, kind: str, missing: Sequence[str]) -> None:
        if missing:
            expected = f"`keep` in {self.keep.place} keeps it" if self.keep else _KEEP
            place = self.claim.names[kind].place if kind in self.claim.names else self.claim.place
            self.ground.report(place, f"`{kind}` lacks {listed(missing)}", expected)

    def _leaves_out(self, kind: str, kept: Sequence[str]) -> None:
        where = f"`keep` in {self.keep.place} leaves it out" if self.keep else ""
        for word in self.claim.names.get(kind, _NOTHING).words:
            if word.text and word.text not in kept:
                self.ground.report(word.place, f"{quoted(word.text)} is not kept", where)

    def _shaped(self, names: _Names) -> tuple[Array, Array, Array, Array] | None:
        sizes = self._sizes(names)
        kinds = {"A": ("states", "states"), "B": ("states", "inputs"), "C": ("outputs", "states")}
        shaped = []
        for word, (rows, columns) in sizes.items():
            matrix = self.claim.matrices.get(word)
            values = np.zeros((rows, columns)) if matrix is None else _reshaped(matrix.values, rows, columns)
            if values is None and matrix is not None:
                above, left = kinds.get(word, ("outputs", "inputs"))
                due = f"{_many(rows, above)} x {_many(columns, left)}"
                turned = matrix.values.shape == (columns, rows)
                hint = "; its rows and columns seem to be swapped" if turned else ""
                self.ground.report(
                    matrix.place, f"`{word}` is {_size(matrix.values)}", f"{due} are expected by the names{hint}"
                )
            shaped.append(values)
        A, B, C, D = shaped
        if A is None or B is None or C is None or D is None:
            return None
        return A, B, C, D

    def _rounding(self, names: _Names, factors: Mapping[str, float], a_time: float) -> Mapping[str, Array]:
        """Half a printed unit of every entry, in the plant's units; matrices that are exact are left out."""
        printed = {word: matrix.rounding for word, matrix in self.claim.matrices.items()}
        sizes = self._sizes(names)
        tables = {
            word: np.zeros(size) if (half := printed.get(word)) is None else half.reshape(size)
            for word, size in sizes.items()
        }
        scaled = _converted((tables["A"], tables["B"], tables["C"], tables["D"]), names, factors, a_time)
        found = {word: frozen_array(np.abs(values)) for word, values in zip("ABCD", scaled, strict=True)}
        return MappingProxyType({word: found[word] for word in found if printed.get(word) is not None})

    def _sizes(self, names: _Names) -> dict[str, tuple[int, int]]:
        n, m, k = names.n, len(names.inputs), len(names.outputs)
        return {"A": (n, n), "B": (n, m), "C": (k, n), "D": (k, m)}

    def _factors(self) -> Mapping[str, float]:
        """What one unit of the file is in the plant's unit, by signal."""
        factors: dict[str, float] = {}
        for entry in self.claim.units:
            if not self.ground.known(entry.name, entry.place, self.ground.signals, "a state, input or output"):
                continue
            if not entry.value.text.strip():
                continue
            told = Quantity(1.0, entry.value.text, f"1 {entry.value.text}", entry.value.place)
            factors[entry.name] = self.ground.deviation(told, entry.name, f"units: {entry.name}")
        return factors

    def _time_unit(self) -> float:
        """One time unit of the file in that of the plant."""
        word = self.claim.time_unit
        if word is None:
            return 1.0
        return self.ground.time(Quantity(1.0, word.text, f"1 {word.text}", word.place), "time_unit")

    def _step(self, a_time: float) -> float | None:
        """The sample time in the plant's time unit; None for a continuous model."""
        number, own = self.claim.step, self.ground.plant.step
        value = 0.0 if number is None else number.value
        place = self.claim.place if number is None else number.place
        if value < 0.0:
            self.ground.report(place, f"`dt`: {units.shown(value)} is below zero", "0 is a continuous model")
            return None
        if value == 0.0:
            if own is not None:
                due = self.ground.told_time(own)
                wrong = f"the model is continuous, the plant a difference equation with steps of {due}"
                self.ground.report(place, wrong, f"`dt` of {due} is expected")
            return None
        step = value if a_time == 1.0 else value * a_time
        if own is not None and abs(step - own) > WHOLE * own:
            wrong = f"`dt`: a sample time of {units.told(step, self.ground.plant.time_unit)}"
            self.ground.report(place, wrong, f"the plant's step of {self.ground.told_time(own)} is expected")
        return own if own is not None else step

    def _course(self) -> Course:
        word = self.claim.hold
        for course in _HOLDS:
            if word is None or word.text == course:
                return course
        if word is not None:
            hint = nearest(word.text, _HOLDS)
            self.ground.report(
                word.place, f"`hold`: {quoted(word.text)} is no hold", "held or straight is expected", hint
            )
        return "held"

    def _claimed(self, word: str, names: _Names | None) -> Mapping[str, float]:
        """The part of the operating point that the file claims under `word`, in the plant's units."""
        units_of = {entry.name: entry.value.text for entry in self.claim.units}
        values = {}
        for name, number in (*self._pairs(word, names), *self._by_name(word)):
            unit = units_of.get(name, "").strip()
            told = f"{units.shown(number.value)} {unit}".strip()
            if unit and not units.convertible(unit, self.ground.unit(name)):
                continue  # the unit was told of
            values[name] = self.ground.signal(Quantity(number.value, unit, told, number.place), name, f"{word}: {name}")
        return MappingProxyType(values)

    def _by_name(self, word: str) -> list[tuple[str, Number]]:
        """Those of the values that are claimed by name alone that belong under `word`."""
        claimed = self.claim.at.get(ANY)
        among: Sequence[str] = getattr(self.ground, KIND_OF[word])
        entries = claimed.named if claimed else ()
        if word == POINTS[0]:
            for entry in entries:
                self.ground.known(entry.name, entry.place, self.ground.signals, "a state, input or output")
        return [(entry.name, entry.value) for entry in entries if entry.name in among]

    def _pairs(self, word: str, names: _Names | None) -> list[tuple[str, Number]]:
        kind, claimed = KIND_OF[word], self.claim.at.get(word)
        if claimed is None:
            return []
        if claimed.ordered is None:
            among: Sequence[str] = getattr(self.ground, kind)
            article = "an" if kind[0] in "aeiou" else "a"
            return [
                (entry.name, entry.value)
                for entry in claimed.named
                if self.ground.known(entry.name, entry.place, among, f"{article} {ONE[kind]}")
            ]
        if names is None:
            return []
        order: tuple[str, ...] | None = getattr(names, kind)
        if order is None:
            wrong = f"`{word}` is a list, and the states of this model have no names"
            self.ground.report(claimed.place, wrong, "name: value is expected")
            return []
        if len(claimed.ordered) != len(order):
            wrong = f"`{word}` has {_count(len(claimed.ordered), 'number')}"
            self.ground.report(claimed.place, wrong, f"{_many(len(order), kind)} are expected by the names")
            return []
        return list(zip(order, claimed.ordered, strict=True))


_NOTHING = Listed((), None)  # type: ignore[arg-type]
_KEEP = "every one of the plant is expected, or `keep` in the spec"


def _side(matrix: Matrix) -> int | None:
    """Side of a square table, 1 for a single number."""
    shape = matrix.values.shape
    if matrix.values.size == 1:
        return 1
    return shape[0] if len(shape) == 2 and shape[0] == shape[1] else None


def _reshaped(values: Array, rows: int, columns: int) -> Array | None:
    """The table that the names ask for; a line or a single number only where there is one way to read it."""
    if values.shape == (rows, columns):
        return values
    one_way = values.size == rows * columns and (values.size == 0 or (values.ndim < 2 and 1 in (rows, columns)))
    return values.reshape(rows, columns) if one_way else None


def _converted(
    shaped: tuple[Array, Array, Array, Array], names: _Names, factors: Mapping[str, float], a_time: float
) -> tuple[Array, ...]:
    """Each entry by the unit of its row over that of its column, per time for rates; untouched where all are equal."""
    x = np.array([factors.get(name, 1.0) for name in names.states or [""] * names.n])
    u = np.array([factors.get(name, 1.0) for name in names.inputs])
    y = np.array([factors.get(name, 1.0) for name in names.outputs])
    A, B, C, D = shaped
    return (
        _scaled(A, x, x, a_time),
        _scaled(B, x, u, a_time),
        _scaled(C, y, x, 1.0),
        _scaled(D, y, u, 1.0),
    )


def _scaled(matrix: Array, rows: Array, columns: Array, a_time: float) -> Array:
    with np.errstate(over="ignore", invalid="ignore"):
        above = np.where(rows[:, None] == columns[None, :], 1.0, rows[:, None] / columns[None, :])
        return np.asarray(matrix * above if a_time == 1.0 else matrix * above / a_time, dtype=np.float64)


def _size(values: Array) -> str:
    if values.ndim == 0:
        return "one number"
    return " x ".join(map(str, values.shape)) if values.ndim > 1 else f"a list of {_count(len(values), 'number')}"


def _many(count: int, kind: str) -> str:
    return f"{count} {kind if count != 1 else ONE[kind]}"


def _count(count: int, what: str) -> str:
    return f"{count} {what}{'' if count == 1 else 's'}"
