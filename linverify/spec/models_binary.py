"""Local models in NPZ and in MAT files of version 5: named arrays, one model or a stack of them.

The names are those of the JSON form; lists of names are arrays of text (NPZ) or cell arrays (MAT). Units stand in
`state_units`, `input_units`, `output_units`, in the order of the names; a part of an operating point is named by
`x0_names` and so on. `op` names the points of a stack: A is then (points, n, n) in NPZ and n x n x points in MAT, x0
(points, n) and n x points. A table without the points' axis holds for all of them.

No pickles are read. A line of numbers gets its shape from the names: MAT has no lines, only tables of one row or one
column, and which of the two it is says nothing.
"""

from __future__ import annotations

import io
import zipfile
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from linverify.core.errors import Place
from linverify.core.model import Array

from . import mat5
from .claims import EXACT, MATRICES, NAMES, POINTS, Claim, Claimed, Listed, Matrix, Number, unknown
from .layout import Entry, Word
from .reader import Reader
from .scalars import quoted

UNITS_OF = MappingProxyType({"state_units": "states", "input_units": "inputs", "output_units": "outputs"})
NAMES_OF = MappingProxyType({f"{word}_names": word for word in POINTS})
_NUMBERS = (*MATRICES, *POINTS, "dt")
_TEXTS = ("time_unit", "hold", "point", "note")
_LISTS = (*NAMES, *UNITS_OF, *NAMES_OF, "op")
_KEYS = (*_NUMBERS, *_TEXTS, *_LISTS)
_SINGLE_DIGITS = 7  # that a number of single precision holds
_HALF_SINGLE = float(np.finfo(np.float32).eps) / 2
_HDF5 = b"\x89HDF\r\n\x1a\n"
_SAVEZ = "write it with numpy.savez and arrays of numbers and text"
_VERSION_5 = "save it as version 5, for example with save(..., '-v7')"


def read_npz(reader: Reader, data: bytes, shown: str) -> dict[str, Claim]:
    """The models of an NPZ archive by the name of their point; "" for one that stands alone."""
    arrays: dict[str, NDArray[Any]] = {}
    if not zipfile.is_zipfile(io.BytesIO(data)):
        reader.tell(Place(shown), "this is no NPZ archive", _SAVEZ)
        return {}
    try:
        # whatever bytes the file holds, what cannot be read is its own mistake
        with np.load(io.BytesIO(data), allow_pickle=False) as archive:
            for name in archive.files:
                found = _unpickled(reader, archive, name, shown)
                if found is not None:
                    arrays[name] = found
    except Exception:
        reader.tell(Place(shown), "this NPZ archive is damaged", _SAVEZ)
        return {}
    return _Stack(reader, shown, arrays).claims()


def _unpickled(reader: Reader, archive: Any, name: str, shown: str) -> NDArray[Any] | None:
    try:
        return np.asarray(archive[name])
    except ValueError as error:
        if "allow_pickle" not in str(error):
            raise
        expected = "names are expected as an array of text: numpy.array(names, dtype=str)"
        reader.tell(Place(shown), f"`{name}` is an array of Python objects, which are never loaded", expected)
        return None


def read_mat(reader: Reader, data: bytes, shown: str) -> dict[str, Claim]:
    """The models of a MAT file of version 5; of another version it is told what to do."""
    place = Place(shown)
    if _HDF5 in data[:1024] or data[:30].startswith(b"MATLAB 7.3"):
        reader.tell(place, "this is a MAT file of version 7.3, which is HDF5 inside", _VERSION_5)
        return {}
    try:
        arrays = mat5.arrays(data)
    except mat5.MatError as error:
        reader.tell(place, str(error))
        return {}
    return _Stack(reader, shown, _points_first(arrays)).claims()


def _points_first(arrays: Mapping[str, NDArray[Any]]) -> dict[str, NDArray[Any]]:
    """Stacks with their points along the first axis, as NPZ has them."""
    turned = dict(arrays)
    for name in (*MATRICES, *POINTS):
        values = turned.get(name)
        if values is None:
            continue
        if name in MATRICES and values.ndim == 2 and 1 in values.shape:
            turned[name] = values.ravel()  # a line lies or stands, whichever way it was saved
        elif values.ndim == 3:
            turned[name] = np.moveaxis(values, -1, 0)
        elif name in POINTS and "op" in arrays and values.ndim == 2 and values.shape[1] == arrays["op"].size:
            turned[name] = values.T
    return turned


@dataclass(frozen=True, slots=True)
class _Stack:
    """The arrays of one file, points first."""

    reader: Reader
    shown: str
    arrays: Mapping[str, NDArray[Any]]

    def claims(self) -> dict[str, Claim]:
        """The models by point."""
        before = len(self.reader.problems)
        for name in self.arrays:
            if name not in _KEYS:
                unknown(self.reader, Word(name, Place(self.shown)), _KEYS)
        lists = {name: self._list(name) for name in _LISTS if name in self.arrays}
        numbers = {name: self._numbers(name) for name in _NUMBERS if name in self.arrays}
        texts = {name: self._text(name) for name in _TEXTS if name in self.arrays}
        points = lists.get("op")
        if points is not None and (not points or len(set(points)) != len(points) or "" in points):
            self._tell("`op` does not name every point once", "a list of names is expected, each once")
        if len(self.reader.problems) > before:
            return {}
        claims = {
            point: self._claim(at, len(points or ()), lists, numbers, texts) for at, point in enumerate(points or [""])
        }
        return claims if len(self.reader.problems) == before else {}

    def _tell(self, wrong: str, expected: str = "", hint: str = "") -> None:
        self.reader.tell(Place(self.shown), wrong, expected, hint)

    def _list(self, name: str) -> list[str]:
        values = self.arrays[name]
        if values.size == 0:
            return []
        if values.dtype.kind != "U" or sum(side > 1 for side in values.shape) > 1:
            self._tell(f"`{name}` holds no names", "a list of text is expected")
            return []
        return [str(text).strip() for text in values.ravel()]

    def _text(self, name: str) -> Word:
        texts = self._list(name)
        if len(texts) > 1:
            self._tell(f"`{name}` holds {len(texts)} texts", "one is expected")
        return Word(texts[0] if texts else "", Place(self.shown))

    def _numbers(self, name: str) -> Array:
        values = self.arrays[name]
        if values.dtype.kind not in "biuf":
            kind = {"c": "complex numbers", "U": "text", "S": "text"}.get(values.dtype.kind, "no numbers")
            self._tell(f"`{name}` holds {kind}", "real numbers are expected")
            return np.zeros(0)
        numbers = values.astype(np.float64)
        odd = np.argwhere(~np.isfinite(numbers))
        if len(odd):
            at = ", ".join(str(index + 1) for index in odd[0])
            where = f" at [{at}]" if at else ""
            self._tell(f"`{name}` holds {float(numbers[tuple(odd[0])])}{where}", "finite numbers are expected")
        return numbers

    def _claim(
        self,
        at: int,
        points: int,
        lists: Mapping[str, list[str]],
        numbers: Mapping[str, Array],
        texts: Mapping[str, Word],
    ) -> Claim:
        place = Place(self.shown)
        own = {name: self._own(name, values, at, points) for name, values in numbers.items()}
        names = {
            kind: Listed(tuple(Word(text, place) for text in lists[kind]), place) for kind in NAMES if kind in lists
        }
        step = own.get("dt")
        if step is not None and step.size > 1:
            self._tell(f"`dt` holds {step.size} numbers", "one is expected")
        singles = any(self.arrays[name].dtype == np.float32 for name in MATRICES if name in self.arrays)
        return Claim(
            file=self.shown,
            place=place,
            matrices={
                name: Matrix(own[name], place, self._rounding(name, own[name])) for name in MATRICES if name in own
            },
            names=names,
            units=tuple(self._units(lists)),
            at={word: self._claimed(word, own[word], lists.get(f"{word}_names")) for word in POINTS if word in own},
            step=Number(float(step.ravel()[0]), place) if step is not None and step.size == 1 else None,
            time_unit=_said(texts.get("time_unit")),
            hold=_said(texts.get("hold")),
            point=_said(texts.get("point")),
            digits=_SINGLE_DIGITS if singles else EXACT,
        )

    def _own(self, name: str, values: Array, at: int, points: int) -> Array:
        """The part of one point: a stack has one axis more than what it holds."""
        axes = {"dt": 0}.get(name, 1 if name in POINTS else 2)
        if name in POINTS and not points and values.ndim == 2 and 1 in values.shape:
            return values.ravel()  # MAT has no lines, only tables of one row or column
        if name == "dt":
            values = values.ravel()
            if values.size == 1:
                return values
        if values.ndim <= axes:
            return values
        if values.ndim == axes + 1 and points and len(values) == points:
            return np.asarray(values[at])
        held = f"a stack of {len(values)}" if values.ndim == axes + 1 else f"an array with {values.ndim} axes"
        due = f"`op` names {points}" if points else "`op` with a name for each point is expected"
        self._tell(f"`{name}` is {held}", due)
        return np.zeros(0)

    def _rounding(self, name: str, values: Array) -> Array | None:
        return _HALF_SINGLE * np.abs(values) if self.arrays[name].dtype == np.float32 else None

    def _units(self, lists: Mapping[str, list[str]]) -> list[Entry[Word]]:
        place = Place(self.shown)
        found = []
        for word, kind in UNITS_OF.items():
            given, names = lists.get(word), lists.get(kind, [])
            if given is None:
                continue
            if len(given) != len(names):
                self._tell(f"`{word}` holds {len(given)}", f"{len(names)} are expected, as many as `{kind}`")
            found += [Entry(name, place, Word(unit, place)) for name, unit in zip(names, given, strict=False) if name]
        unique = {entry.name: entry for entry in found}  # an output may have the name of a state
        for entry in found:
            if unique[entry.name].value != entry.value:
                self._tell(f"two units for {quoted(entry.name)}", "one is expected")
        return list(unique.values())

    def _claimed(self, word: str, values: Array, names: list[str] | None) -> Claimed:
        place = Place(self.shown)
        numbers = tuple(Number(float(value), place) for value in values.ravel())
        if names is None:
            return Claimed((), numbers, place)
        if len(names) != len(numbers):
            self._tell(f"`{word}` holds {len(numbers)}", f"{len(names)} are expected, as many as `{word}_names`")
        pairs = zip(names, numbers, strict=False)
        return Claimed(tuple(Entry(name, place, number) for name, number in pairs), None, place)


def _said(word: Word | None) -> Word | None:
    return word if word is not None and word.text else None
