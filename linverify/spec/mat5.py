"""Arrays of a MAT file of version 5, by name: numbers, text, sparse tables and cell arrays of text.

The layout is a header of 128 bytes and a row of elements, each a tag (kind, length) and data padded to 8 bytes; arrays
are elements of elements, packed ones a zlib stream. It is read here, and not by scipy, because a damaged file must be
one mistake in a list: under random changes of bytes scipy's reader took the whole process down. Every length is held
against what is there before anything is read or made.
"""

from __future__ import annotations

import math
import struct
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

HEADER = 128
_MOST_BYTES = 1 << 30  # of an unpacked array
_NUMBERS = {1: "i1", 2: "u1", 3: "i2", 4: "u2", 5: "i4", 6: "u4", 7: "f4", 9: "f8", 12: "i8", 13: "u8"}
_CODES = {2: "latin-1", 4: "utf-16", 16: "utf-8", 17: "utf-16", 18: "utf-32"}
_MATRIX, _PACKED = 14, 15
_CELL, _CHAR, _SPARSE = 1, 4, 5
_CLASSES = {6: "f8", 7: "f4", 8: "i1", 9: "u1", 10: "i2", 11: "u2", 12: "i4", 13: "u4", 14: "i8", 15: "u8"}
_COMPLEX = 0x0800


class MatError(ValueError):
    """The bytes are no MAT file of version 5, or hold something that no model has."""


@dataclass(frozen=True, slots=True)
class _Element:
    kind: int
    data: bytes


def arrays(data: bytes) -> dict[str, NDArray[Any]]:
    """Arrays by name; text has one string a row, a cell array of text one a cell. Raises MatError."""
    if len(data) < HEADER or data[126:128] not in (b"IM", b"MI"):
        raise MatError("this is no MAT file of version 5")
    order = "<" if data[126:128] == b"IM" else ">"
    if struct.unpack_from(f"{order}H", data, 124)[0] != 0x0100:
        raise MatError("this is no MAT file of version 5")
    found: dict[str, NDArray[Any]] = {}
    for element in _elements(data[HEADER:], order):
        whole = _unpacked(element, order)
        if whole.kind != _MATRIX:
            raise MatError("this MAT file is damaged: something else than an array stands among the arrays")
        name, values = _array(whole.data, order)
        if name in found:
            raise MatError(f"`{name}` stands twice in the file")
        found[name] = values
    return found


def _elements(data: bytes, order: str) -> Iterator[_Element]:
    at = 0
    while at < len(data):
        if len(data) - at < 8:
            raise MatError("this MAT file is damaged: it ends within an array")
        first, length = struct.unpack_from(f"{order}II", data, at)
        start, small = at + 8, first >> 16
        if small:  # up to four bytes stand in the tag itself
            first, length, start = first & 0xFFFF, small, at + 4
        if (small and length > 4) or length > len(data) - start:
            raise MatError("this MAT file is damaged: it ends within an array")
        yield _Element(first, data[start : start + length])
        end = at + 8 if small else start + length
        at = end if first == _PACKED else end + -end % 8


def _unpacked(element: _Element, order: str) -> _Element:
    if element.kind != _PACKED:
        return element
    stream = zlib.decompressobj()
    try:
        data = stream.decompress(element.data, _MOST_BYTES)
    except zlib.error:
        raise MatError("this MAT file is damaged: a packed array cannot be unpacked") from None
    if stream.unconsumed_tail:
        raise MatError(f"an array is larger than {_MOST_BYTES >> 20} MB")
    inner = list(_elements(data, order))
    if len(inner) != 1:
        raise MatError("this MAT file is damaged: a packed array cannot be unpacked")
    return inner[0]


def _array(data: bytes, order: str) -> tuple[str, NDArray[Any]]:
    """Name and values of one array."""
    parts = list(_elements(data, order))
    if len(parts) < 3 or len(parts[0].data) != 8:
        raise MatError("this MAT file is damaged: an array has no head")
    flags = struct.unpack_from(f"{order}I", parts[0].data)[0]
    shape = tuple(int(side) for side in _numbers(parts[1], order))
    name = parts[2].data.decode("latin-1")
    if any(side < 0 for side in shape) or len(shape) < 2:
        raise MatError(f"this MAT file is damaged: `{name}` has no shape")
    if flags & _COMPLEX:
        raise MatError(f"`{name}` holds complex numbers; real numbers are expected")
    kind, size = flags & 0xFF, math.prod(shape)
    if kind == _CELL:
        return name, _cells(name, parts[3:], size, order)
    if kind == _CHAR:
        return name, _text(name, parts[3:], shape)
    if kind == _SPARSE:
        return name, _sparse(name, parts[3:], shape, order)
    if kind not in _CLASSES:
        raise MatError(f"`{name}` is no array of numbers or text, nor a cell array of text")
    values = _numbers(parts[3], order) if len(parts) > 3 else np.zeros(0)
    if values.size != size:
        raise MatError(f"this MAT file is damaged: `{name}` holds {values.size} numbers, its shape asks for {size}")
    return name, values.astype(_CLASSES[kind]).reshape(shape, order="F")


def _numbers(element: _Element, order: str) -> NDArray[Any]:
    kind = _NUMBERS.get(element.kind)
    if kind is None or len(element.data) % int(kind[1]):
        raise MatError("this MAT file is damaged: numbers of no known kind")
    values: NDArray[Any] = np.frombuffer(element.data, dtype=np.dtype(f"{order}{kind}"))
    return values


def _cells(name: str, parts: list[_Element], size: int, order: str) -> NDArray[Any]:
    wrong = MatError(f"`{name}` is a cell array of something else than text; names are expected in it")
    texts = []
    for part in parts:
        if part.kind != _MATRIX:
            raise wrong
        values = _array(part.data, order)[1] if part.data else np.zeros(0)
        if values.size > 1 or (values.size and values.dtype.kind != "U"):
            raise wrong
        texts.append(str(values[0]) if values.size else "")
    if len(texts) != size:
        raise MatError(f"this MAT file is damaged: `{name}` holds {len(texts)} cells, its shape asks for {size}")
    return np.array(texts, dtype=str) if texts else np.zeros(0, dtype="U1")


def _text(name: str, parts: list[_Element], shape: tuple[int, ...]) -> NDArray[Any]:
    """One string a row."""
    codes = _CODES.get(parts[0].kind) if parts else "latin-1"
    try:
        letters = parts[0].data.decode(codes or "utf-8") if parts else ""
    except UnicodeDecodeError:
        codes = None
    if codes is None or len(shape) != 2 or len(letters) != math.prod(shape):
        raise MatError(f"this MAT file is damaged: `{name}` is text of no known kind")
    rows = shape[0]
    texts = [letters[row::rows].rstrip() for row in range(rows)] if letters else []
    return np.array(texts, dtype=str) if texts else np.zeros(0, dtype="U1")


def _sparse(name: str, parts: list[_Element], shape: tuple[int, ...], order: str) -> NDArray[Any]:
    """A sparse table made full."""
    if len(parts) < 3 or len(shape) != 2 or math.prod(shape) * 8 > _MOST_BYTES:
        raise MatError(f"this MAT file is damaged: the sparse table `{name}` is incomplete or too large")
    rows, starts, values = (_numbers(part, order) for part in parts[:3])
    count = int(starts[-1]) if starts.size == shape[1] + 1 else -1
    steps: NDArray[np.int64] = np.diff(starts.astype(np.int64)).astype(np.int64)
    if count < 0 or starts[0] != 0 or (steps < 0).any() or min(rows.size, values.size) < count:
        raise MatError(f"this MAT file is damaged: the sparse table `{name}` does not fit its shape")
    columns, rows = np.repeat(np.arange(shape[1]), steps), rows[:count].astype(np.int64)
    if count and (rows.min() < 0 or rows.max() >= shape[0]):
        raise MatError(f"this MAT file is damaged: the sparse table `{name}` does not fit its shape")
    full = np.zeros(shape)
    full[rows, columns] = values[:count]
    return full
