"""Local models as arrays: NPZ, and MAT files of version 5. The names of the arrays are those of `models_binary`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import IO, TYPE_CHECKING, Any

import numpy as np
from numpy.typing import NDArray

from .claims import KIND_OF, MATRICES, NAMES, POINTS
from .models_binary import UNITS_OF

if TYPE_CHECKING:
    from .write_models import Sheet

Arrays = dict[str, NDArray[Any]]


def arrays_of(sheet: Sheet) -> Arrays:
    """One model as named arrays."""
    model = sheet.model
    arrays: Arrays = {name: np.asarray(getattr(model, name)) for name in MATRICES}
    for kind in NAMES:
        names: Sequence[str] | None = getattr(model, kind)
        if names is not None:
            arrays[kind] = _texts(names)
    for word, kind in UNITS_OF.items():
        if kind in arrays:
            arrays[word] = _texts([sheet.units.get(str(name), "") for name in arrays[kind]])
    for word in POINTS:
        values: Mapping[str, float] = getattr(model, word)
        if values:
            arrays[word] = np.array(list(values.values()))
            if tuple(values) != getattr(model, KIND_OF[word]):
                arrays[f"{word}_names"] = _texts(list(values))
    arrays["time_unit"] = np.array(sheet.time_unit)
    if model.step is not None:
        arrays |= {"dt": np.array(model.step), "hold": np.array(model.course)}
    return arrays | ({"point": np.array(model.point)} if model.point else {})


def write(stream: IO[bytes], suffix: str, group: Mapping[str, Sheet]) -> None:
    """Write one model, named "", or a stack by point. Raises ValueError where the models of a stack differ in words."""
    arrays = _stacked({point: arrays_of(sheet) for point, sheet in group.items()})
    if suffix == ".npz":
        np.savez(stream, **arrays)  # type: ignore[arg-type]
        return
    from scipy.io import savemat  # late: costs a quarter of a second

    named = {name: _for_mat(name, values, "op" in arrays) for name, values in arrays.items()}
    savemat(stream, named, oned_as="column")  # type: ignore[arg-type]  # takes streams, its types say names only


def _stacked(group: Mapping[str, Arrays]) -> Arrays:
    if list(group) == [""]:
        return group[""]
    first = next(iter(group.values()))
    stacked: Arrays = {}
    for name in first:
        if name == "point":
            continue
        values = [arrays.get(name) for arrays in group.values()]
        if name in (*MATRICES, *POINTS, "dt"):
            stacked[name] = np.stack([each for each in values if each is not None])
        elif any(each is None or not np.array_equal(each, first[name]) for each in values):
            raise ValueError(f"models of one stack differ in {name}")
        else:
            stacked[name] = first[name]
    return stacked | {"op": _texts(list(group))}


def _texts(texts: Sequence[str]) -> NDArray[Any]:
    return np.array(list(texts), dtype=str) if texts else np.zeros(0, dtype="U1")


def _for_mat(name: str, values: NDArray[Any], stack: bool) -> NDArray[Any]:
    """Cell arrays for names, points along the last axis."""
    if values.dtype.kind == "U" and values.ndim == 1:
        cells = np.empty(len(values), dtype=object)
        cells[:] = [str(text) for text in values]
        return cells
    if stack and values.ndim == 3:
        return np.moveaxis(values, 0, -1)
    return values.T if stack and name in POINTS and values.ndim == 2 else values
