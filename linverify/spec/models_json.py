"""Local models in JSON: one model, or several under `points`, where words beside `points` hold for all of them.

{"states": ["speed", "pitch"], "inputs": ["flap"], "time_unit": "s", "units": {"pitch": "deg"},
 "points": {"kn30": {"A": [[...]], "B": [[...]], "x0": {"speed": 15.4}}, "kn40": {...}}}
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from linverify.core.errors import Place

from . import json_nodes
from .claims import (
    KEYS,
    MATRICES,
    NAMES,
    POINTS,
    Claim,
    Claimed,
    Listed,
    Matrix,
    Number,
    fewest_digits,
    finite,
    half_units,
    unknown,
)
from .layout import Entry, Word
from .reader import Reader
from .source import Block, Listing, Node, Scalar


def read_json(reader: Reader, data: bytes, shown: str) -> dict[str, Claim]:
    """The models of a file by the name of their point; "" for a model that stands alone. Mistakes go to `reader`."""
    tree, problems = json_nodes.parse(data, shown)
    reader.problems += problems
    if tree is None:
        return {}
    if not isinstance(tree, Block):
        reader.tell(tree.place, "this is no group of words", 'a model is expected: {"A": [[...]], "B": ...}')
        return {}
    points = tree.get("points")
    if points is None:
        claim = _claim(reader, tree, tree.place, shown, "")
        return {} if claim is None else {"": claim}
    if not isinstance(points, Block) or not points.entries:
        reader.tell(points.place, "`points` holds no models", 'a group is expected: {"NAME": {"A": ...}, ...}')
        return {}
    shared = tuple(entry for entry in tree.entries if entry[0].text != "points")
    return dict(_several(reader, points, shared, shown))


def _several(
    reader: Reader, points: Block, shared: tuple[tuple[Scalar, Node], ...], shown: str
) -> Iterator[tuple[str, Claim]]:
    for key, node in points.entries:
        if not isinstance(node, Block):
            reader.misfit(node, f"points: {key.text}", "a model is expected")
            continue
        rest = tuple(entry for entry in shared if node.get(entry[0].text) is None)
        claim = _claim(reader, Block((*node.entries, *rest), node.place), key.place, shown, f"points: {key.text}: ")
        if claim is not None:
            yield key.text, claim


def _claim(reader: Reader, block: Block, place: Place, shown: str, above: str) -> Claim | None:
    before = len(reader.problems)
    _known(reader, block, above)
    matrices, texts = {}, []
    for word in MATRICES:
        node = block.get(word)
        if node is not None and (matrix := _matrix(reader, node, f"{above}{word}")) is not None:
            matrices[word] = matrix[0]
            texts.append(matrix[1])
    names = {word: _names(reader, node, f"{above}{word}") for word in NAMES if (node := block.get(word)) is not None}
    at = {word: _claimed(reader, node, f"{above}{word}") for word in POINTS if (node := block.get(word)) is not None}
    claim = Claim(
        file=shown,
        place=place,
        matrices=matrices,
        names=names,
        units=_units(reader, block.get("units"), f"{above}units"),
        at=at,
        step=_number(reader, block.get("dt"), f"{above}dt"),
        time_unit=_text(reader, block.get("time_unit"), f"{above}time_unit"),
        hold=_text(reader, block.get("hold"), f"{above}hold"),
        point=_text(reader, block.get("point"), f"{above}point"),
        digits=fewest_digits(texts),
    )
    return claim if len(reader.problems) == before else None


def _known(reader: Reader, block: Block, above: str) -> None:
    for key, _ in block.entries:
        if key.text not in KEYS:
            unknown(reader, Word(key.text, key.place), (*KEYS, "points"), above)


def _matrix(reader: Reader, node: Node, called: str) -> tuple[Matrix, list[str]] | None:
    """The numbers of a matrix and how they are written; a list of numbers or one number is for names to shape."""
    rows = node.items if isinstance(node, Listing) else (node,)
    nested = [row for row in rows if isinstance(row, Listing)]
    if nested and len(nested) != len(rows):
        reader.tell(node.place, f"`{called}`: numbers stand beside lists", "a list of rows is expected")
        return None
    cells = [item for row in rows for item in (row.items if isinstance(row, Listing) else (row,))]
    odd = next((row for row in nested if len(row.items) != len(nested[0].items)), None)
    if odd is not None:
        wrong = f"`{called}`: rows of {len(nested[0].items)} and of {len(odd.items)}"
        reader.tell(odd.place, wrong, "as many numbers in each row are expected")
        return None
    numbers = [_number(reader, cell, called) for cell in cells]
    values = np.array([number.value for number in numbers if number is not None], dtype=np.float64)
    if len(values) != len(cells):
        return None
    texts = [cell.text for cell in cells if isinstance(cell, Scalar)]
    if nested:
        values = values.reshape(len(nested), len(nested[0].items))
    elif not isinstance(node, Listing):
        values = values.reshape(())
    return Matrix(values, node.place, half_units(values, texts)), texts


def _number(reader: Reader, node: Node | None, called: str) -> Number | None:
    if node is None:
        return None
    scalar = reader.scalar(node, called, "a finite number is expected")
    return None if scalar is None else finite(reader, scalar, called)


def _text(reader: Reader, node: Node | None, called: str) -> Word | None:
    if node is None:
        return None
    if not isinstance(node, Scalar) or node.plain:
        reader.misfit(node, called, "text in quotes is expected")
        return None
    return Word(node.text, node.place)


def _names(reader: Reader, node: Node, called: str) -> Listed:
    items = reader.items(node, called, 'a list of names is expected: ["speed", ...]')
    words = [_text(reader, item, called) for item in items or ()]
    return Listed(tuple(word for word in words if word is not None), node.place)


def _units(reader: Reader, node: Node | None, called: str) -> tuple[Entry[Word], ...]:
    if node is None:
        return ()
    texts = [(key, _text(reader, value, f"{called}: {key.text}")) for key, value in reader.named(node, called)]
    return tuple(Entry(key.text, key.place, text) for key, text in texts if text is not None)


def _claimed(reader: Reader, node: Node, called: str) -> Claimed:
    if isinstance(node, Block):
        named = [(key, _number(reader, value, f"{called}: {key.text}")) for key, value in node.entries]
        entries = tuple(Entry(key.text, key.place, number) for key, number in named if number is not None)
        return Claimed(entries, None, node.place)
    items = reader.items(node, called, "a list of numbers or a group of name: number is expected")
    numbers = [_number(reader, item, called) for item in items or ()]
    return Claimed((), tuple(number for number in numbers if number is not None), node.place)
