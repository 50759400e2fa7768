"""A spec file and the defaults.yaml files beside and above it to one frozen `Spec`, with every mistake in one pass."""

from __future__ import annotations

import math
import os
from collections.abc import Iterator
from pathlib import Path

from linverify.core.errors import Place, Problem
from linverify.core.signals import nearest

from .actuators import actuator_words
from .kinds import Values, block
from .layout import Point, RequirementAsk, Spec, Word, matches
from .local_words import local_words, settings_told
from .merge import over, settings
from .points import OVERRIDDEN, PointReader
from .reader import Reader, check_name, misspelt
from .scalars import fraction, quoted
from .source import DEFAULTS, Block, Node, parse
from .words import CHECKS, REQUIREMENT_WORDS, SPEC_WORDS, default_of, row_of

_SHARED = tuple(row for row in SPEC_WORDS if row.shared)
# words that concern points, reports or this file alone: no settings of the spec as a whole
_NO_SETTINGS = ("linverify", "every_point", "operating_points", "requirements", *OVERRIDDEN)


def read(path: Path, shown: str, root: Path) -> tuple[Spec | None, list[Problem]]:
    """Read the spec at `path`, called `shown` in places; defaults.yaml is looked for up to the folder `root`.

    Returns the spec and all mistakes, sorted by place. The spec is None where no plant or no operating point could be
    read. With mistakes it may still be there, without the parts that could not be read: names and units in it
    can be judged, but whatever depends on its being complete (counts of unknowns, drives that lack a band) cannot.
    """
    files = [path, *_defaults(path, root)]
    names = {file: shown if file == path else _shown(file, root) for file in files}
    reader = Reader({name: file.parent for file, name in names.items()})
    trees = [_tree(reader, file, names[file]) for file in files]
    own = trees[0]
    if not isinstance(own, Block):
        if own is None and not reader.problems:
            reader.tell(Place(shown), "nothing is written in this file", "a spec starts with `linverify: 1`")
        elif own is not None:
            reader.tell(own.place, "this is no group of words", "`linverify: 1`, `plant: ...` and so on are expected")
        return None, _sorted(reader)
    _says_format(reader, own, shown)
    merged: Node = own
    for tree in trees[1:]:
        if isinstance(tree, Block):
            merged = over(merged, _shareable(reader, tree), reader.problems)
    spec = _spec(reader, merged, path, shown, files) if isinstance(merged, Block) else None
    return spec, _sorted(reader)


def _sorted(reader: Reader) -> list[Problem]:
    return sorted(set(reader.problems))


def _defaults(path: Path, root: Path) -> Iterator[Path]:
    """The defaults.yaml files that hold for `path`, nearest first; only its own folder where `root` is elsewhere."""
    root, folder = root.resolve(), path.parent.resolve()
    above = [folder, *folder.parents] if folder.is_relative_to(root) else [folder]
    for place in above:
        if (place / DEFAULTS).is_file():
            yield place / DEFAULTS
        if place == root:
            return


def _shown(file: Path, root: Path) -> str:
    return Path(os.path.relpath(file, root.resolve())).as_posix()


def _tree(reader: Reader, file: Path, shown: str) -> Node | None:
    try:
        data = file.read_bytes()
    except OSError as error:
        reader.tell(Place(shown), f"the file cannot be read: {error.strerror}")
        return None
    tree, problems = parse(data, shown)
    reader.problems += problems
    return tree


def _says_format(reader: Reader, own: Block, shown: str) -> None:
    """The format number must stand in the spec itself."""
    if own.get("linverify") is None and not misspelt("linverify", own, SPEC_WORDS):
        expected = "every .yaml file here is a spec and says its format: `linverify: 1`"
        reader.tell(Place(shown), "`linverify` is missing", expected)


def _shareable(reader: Reader, tree: Block) -> Block:
    """What a defaults.yaml passes on, after reading it alone."""
    kept = []
    for key, node in tree.entries:
        row = row_of(SPEC_WORDS, key.text)
        if row is not None and row.available and not row.shared:
            reader.tell(key.place, f"`{key.text}` cannot be shared", f"it belongs in the specs, not in {DEFAULTS}")
        elif row is not None and row.available and row.word != "linverify":
            kept.append((key, node))
    passed = Block(tuple(kept), tree.place)
    others = tuple(entry for entry in tree.entries if (row := row_of(SPEC_WORDS, entry[0].text)) is None or row.shared)
    block(reader, Block(others, tree.place), _SHARED, "")
    PointReader(reader, passed, []).shared()
    return passed


def _spec(reader: Reader, merged: Block, path: Path, shown: str, files: list[Path]) -> Spec | None:
    values = block(reader, merged, SPEC_WORDS, "")
    reader.require(merged, tuple(row for row in SPEC_WORDS if row.word != "linverify"), Place(shown), "")
    tables: list[Path] = []
    pointed = PointReader(reader, merged, tables)
    pointed.shared()
    points = _points(reader, pointed, merged)
    requirements = _requirements(reader, merged, values, pointed)
    _judges_something(reader, points)
    plant = values.get("plant")
    if plant is None or not points:
        return None
    exits, differentiable = values.get("exits", {}), values.get("differentiable", {})
    title = values.get("title")
    local = local_words(reader, merged, values)
    own_words = Block(tuple(entry for entry in merged.entries if entry[0].text not in _NO_SETTINGS), merged.place)
    own_rows = tuple(row for row in SPEC_WORDS if row.word not in _NO_SETTINGS)
    return Spec(
        shown=shown,
        path=path,
        files=tuple(dict.fromkeys((*files, *tables))),
        title=title.text if title else "",
        plant=plant,
        time=values.get("time"),
        envelope=values.get("envelope", ()),
        complete=exits.get("complete", _per_cent("exits", "complete")),
        mismatch=exits.get("mismatch", _default("exits", "mismatch")),
        accuracy=values.get("trims", {}).get("accuracy", float(_default("trims", "accuracy"))),
        accuracy_place=_place_of(merged, "trims", "accuracy"),
        slope_gap=differentiable.get("slope_gap", _per_cent("differentiable", "slope_gap")),
        side=differentiable.get("side", ()),
        points=points,
        requirements=requirements,
        settings=tuple(settings_told(settings(own_words, own_rows), local)),
        local=local,
        wraps=values.get("wraps", ()),
        delays=values.get("delays", {}),
        actuators=actuator_words(reader, merged, values),
    )


def _place_of(merged: Block, above: str, word: str) -> Place | None:
    """Where the value of `word` within `above` is written."""
    group = merged.get(above)
    value = group.get(word) if isinstance(group, Block) else None
    return value.place if value else None


def _judges_something(reader: Reader, points: tuple[Point, ...]) -> None:
    """A spec whose points are all skipped would end well, and nothing would have been judged."""
    skipped = [cell.skipped for point in points for cell in point.cells]
    if skipped and all(skipped) and skipped[0]:
        expected = "at least one point that is judged is expected"
        reader.tell(skipped[0].place, "`skip` takes every operating point of this spec", expected)


def _points(reader: Reader, pointed: PointReader, merged: Block) -> tuple[Point, ...]:
    key, node = merged.key("operating_points"), merged.get("operating_points")
    if node is not None and not (isinstance(node, Block) and node.empty):
        return pointed.points(node)
    if key is not None:
        expected = "at least one operating point is expected"
        reader.tell(key.place, "nothing is written after `operating_points`", expected)
    pointed.alone()
    return ()


def _requirements(reader: Reader, merged: Block, values: Values, pointed: PointReader) -> tuple[RequirementAsk, ...]:
    group = merged.get("requirements")
    if isinstance(group, Block):
        for key, node in group.entries:
            check_name(reader, key, "a requirement")
            if isinstance(node, Block):
                reader.require(node, REQUIREMENT_WORDS, key.place, f"requirements: {key.text}")
    asks = []
    for entry in values.get("requirements", ()):
        patterns = entry.value.get("checks", ())
        for pattern in patterns:
            _fits(reader, pattern, pointed)
        if "checks" in entry.value and not patterns:
            reader.tell(entry.place, f"no check is listed under `requirements: {entry.name}: checks`")
        text, source = (entry.value.get(word) for word in ("text", "source"))
        told = (text.text if text else "", source.text if source else "")
        asks.append(RequirementAsk(entry.name, *told, patterns, entry.place))
    return tuple(asks)


def _fits(reader: Reader, pattern: Word, pointed: PointReader) -> None:
    """A pattern under `checks` must fit at least one check."""
    if pointed.unsure or any(matches(pattern.text, name) for name in pointed.checks):
        return
    later = next((part for part in pattern.text.split(".") if CHECKS.get(part) is False), None)
    if later:
        reader.tell(pattern.place, f"`checks`: the check `{later}` is not available in this version")
        return
    hint = nearest(pattern.text, pointed.checks[:_MOST_COMPARED])
    expected = "POINT.CHECK is expected, as in " + pointed.checks[-1] if pointed.checks else ""
    reader.tell(pattern.place, f"`checks`: {quoted(pattern.text)} fits no check", expected, hint)


_MOST_COMPARED = 1000


def _default(above: str, word: str) -> str:
    row = row_of(SPEC_WORDS, above)
    return default_of(row.of, word) if row else ""


def _per_cent(above: str, word: str) -> float:
    read = fraction(_default(above, word))
    return read if isinstance(read, float) else math.nan
