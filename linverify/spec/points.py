"""Operating points: each complete in itself, merged with `every_point` and with what the whole spec says."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from linverify.core.case import Setting
from linverify.core.errors import Place

from .groups import drive_sets, error_bands, set_names
from .kinds import Values, block
from .layout import BandAsk, Cell, DriveAsk, Entry, LoopAsk, ModeLine, Point, Quantity, Word, always_checked
from .loops import read_loops
from .merge import over, setting
from .mode_lines import mode_lines
from .reader import Reader, check_name, misspelt
from .scalars import quoted
from .source import Block, Node, Scalar
from .sweeps import Sweep, cells, read_sweep
from .words import DERIVE, POINT_WORDS, SHARED_POINT_WORDS, SPEC_WORDS, row_of

# words of the whole spec that a point may override
OVERRIDDEN = ("parameters", "drives", "error_bands", "modes", "loops")
_PARTS = OVERRIDDEN[1:]
_NOT_A_NAME = "family"


@dataclass(frozen=True, slots=True)
class _Group:
    """Drives, bands, limits on modes and loops of a point, with the nodes that they were read from."""

    nodes: tuple[Node | None, ...]
    drives: tuple[DriveAsk, ...]
    bands: tuple[BandAsk, ...]
    modes: tuple[ModeLine, ...]
    loops: tuple[LoopAsk, ...]


@dataclass(slots=True)
class PointReader:
    """Reads the points of one merged spec; mutable, because sets of drives that points share are read once."""

    reader: Reader
    spec: Block
    files: list[Path]  # tables are added to it
    checks: list[str] = field(default_factory=list)  # every check of every cell, by its whole name
    unsure: bool = False  # some points could not be read, so `checks` is not all of them
    # by the identity of nodes, which are kept so that no other node can take their place in memory
    _groups: dict[tuple[int, ...], _Group] = field(default_factory=dict)
    _told: dict[int, tuple[Node, tuple[Setting, ...]]] = field(default_factory=dict)

    def points(self, node: Node) -> tuple[Point, ...]:
        """All operating points that can be read."""
        read: list[Point] = []
        for name, value in self.reader.named(node, "operating_points", "an operating point"):
            point = self._point(name, value)
            read += [point] if point else []
        self._unique(read)
        return tuple(read)

    def shared(self) -> None:
        """Tell what is wrong in the words that points share, whether or not a point brings it up."""
        every = self.spec.get("every_point")
        if every is not None:
            block(self.reader, every, SHARED_POINT_WORDS, "every_point", "")
        for each in (self.spec, every):
            if isinstance(each, Block):
                self._parts(each, whole=False)

    def alone(self) -> None:
        """Judge the shared words as if there were one point, where no point is written."""
        merged = self._merged(Block((), Place("")))
        self._parts(merged, whole=True)

    def _parts(self, tree: Block, whole: bool) -> _Group:
        nodes = tuple(tree.get(word) for word in _PARTS)
        known = tuple(map(id, nodes))
        if whole and known in self._groups:
            return self._groups[known]
        drives, bands, modes, loops = nodes
        drives_key, bands_key, modes_key, loops_key = (tree.key(word) for word in _PARTS)
        sets = set_names(drives) if whole or drives else None
        names = loop_names(loops) if whole else None
        read = _Group(
            nodes,
            drive_sets(self.reader, drives_key, drives, whole, names) if drives and drives_key else (),
            error_bands(self.reader, bands_key, bands, sets) if bands and bands_key else (),
            mode_lines(self.reader, modes_key, modes) if modes and modes_key and _available("modes") else (),
            self._loops(loops_key, loops, whole) if loops and loops_key and _available("loops") else (),
        )
        if whole:
            self._groups[known] = read
            self._together(drives_key, bands_key, read)
        return read

    def _loops(self, key: Scalar, node: Node, whole: bool) -> tuple[LoopAsk, ...]:
        return read_loops(self.reader, key, node, whole, loop_names(self.spec.get("loops")) or ())

    def _together(self, drives: Scalar | None, bands: Scalar | None, read: _Group) -> None:
        if drives and not bands and not misspelt("error_bands", self.spec, SPEC_WORDS):
            self.reader.tell(drives.place, "`drives` without `error_bands`", "they come together or not at all")
        if bands and not drives and not misspelt("drives", self.spec, SPEC_WORDS):
            self.reader.tell(bands.place, "`error_bands` without `drives`", "they come together or not at all")
        names = (None, *(each.name for each in read.drives))
        if not read.bands or any(band.drives not in names for band in read.bands):
            return
        for each in read.drives:
            if all(band.drives not in (None, each.name) for band in read.bands):
                wrong = f"no error band is for the drives {quoted(each.name)}"
                self.reader.tell(each.place, wrong, "a band for this set, or for all sets, is expected")

    def _point(self, name: Scalar, node: Node) -> Point | None:
        check_name(self.reader, name, "an operating point")
        if name.text == _NOT_A_NAME:
            self.reader.tell(
                name.place, f"{quoted(name.text)} is no name for an operating point", "another name is expected"
            )
        if not isinstance(node, Block):
            self.reader.misfit(node, f"operating_points: {name.text}", "a group of hold, find, ... is expected")
            self.unsure = True
            return None
        merged = self._merged(node)
        values = block(self.reader, merged, POINT_WORDS, f"operating_points: {name.text}", "")
        group = self._parts(merged, whole=True)
        sweep, skip = self._sweep(node), values.get("skip", ())
        if skip and node.get("sweep") is None:
            self.reader.tell(skip[0].place, "`skip` without `sweep`", "it names points of a sweep")
        rules = _Rules(self.reader, node, values, sweep)
        rules.check()
        made = cells(self.reader, name, sweep, skip) if sweep or node.get("sweep") is None else ()
        self._note_checks(merged, made)
        return Point(
            name=name.text,
            place=name.place,
            hold=rules.held(),
            find=values.get("find"),
            start=values.get("start", ()),
            start_place=_place(merged, "start"),
            rates=tuple(entry for entry in values.get("rates", ()) if isinstance(entry.value, Quantity)),
            free=tuple(Word(e.name, e.place) for e in values.get("rates", ()) if isinstance(e.value, Word)),
            minimize=values.get("minimize", ()),
            expect=values.get("expect", ()),
            parameters=values.get("parameters", ()),
            drives=group.drives,
            bands=group.bands,
            cells=made,
            settings=tuple(self._settings(merged, sweep)),
            modes=group.modes,
            modes_place=_place(merged, "modes"),
            loops=group.loops,
        )

    def _merged(self, node: Block) -> Block:
        """The point with what `every_point` and the spec add; what it shares with others stays the same object."""
        told = self.reader.problems
        every = self.spec.get("every_point")
        merged: Node = node
        if isinstance(every, Block):
            known = tuple(entry for entry in every.entries if row_of(SHARED_POINT_WORDS, entry[0].text))
            merged = over(node, Block(known, every.place), told)
        shared = tuple(entry for entry in self.spec.entries if entry[0].text in OVERRIDDEN)
        merged = over(merged, Block(shared, node.place), told)
        return merged if isinstance(merged, Block) else node

    def _sweep(self, node: Block) -> Sweep | None:
        key, value = node.key("sweep"), node.get("sweep")
        if key is None or value is None or self.reader.is_missing(value, key, "sweep", "a group"):
            return None
        return read_sweep(self.reader, key, value, self.files)

    def _settings(self, merged: Block, sweep: Sweep | None) -> Iterator[Setting]:
        """The effective words of a point, without the holds and parameters that its sweep replaces."""
        swept = {f"{word}.{name.text}" for word in ("hold", "parameters") for name in (sweep.names if sweep else ())}
        for key, node in merged.entries:
            if key.text != "skip":
                yield from (each for each in self._settings_of(key.text, node) if each.word not in swept)

    def _settings_of(self, word: str, node: Node) -> tuple[Setting, ...]:
        if id(node) not in self._told:
            self._told[id(node)] = (node, tuple(setting(word, node, row_of(POINT_WORDS, word))))
        return self._told[id(node)][1]

    def _note_checks(self, merged: Block, made: tuple[Cell, ...]) -> None:
        drives = merged.get("drives")
        names = sorted(set_names(drives)) or ["follows"] if isinstance(drives, Block) else []
        follows = [name if name == "follows" else f"follows.{name}" for name in names]
        self.unsure = self.unsure or not made or not isinstance(drives, Block | None)
        modes = ["modes"] if merged.get("modes") is not None and _available("modes") else []
        loops = merged.get("loops")
        margins = [f"margins.{name}" for name in loop_names(loops) or ()] if _available("loops") else []
        self.unsure = self.unsure or not isinstance(loops, Block | None)
        local = self.spec.get("local_models")
        source = local.get("source") if isinstance(local, Block) else None
        always = always_checked(delivered=isinstance(source, Scalar) and source.text != DERIVE)
        self.checks += [f"{cell.name}.{check}" for cell in made for check in (*always, *follows, *modes, *margins)]

    def _unique(self, points: list[Point]) -> None:
        first: dict[str, Place] = {}
        for point in points:
            for cell in point.cells:
                if cell.name in first:
                    before = first[cell.name]
                    wrong = f"two operating points are called {quoted(cell.name)}"
                    self.reader.tell(cell.place, wrong, f"the first one is in line {before.line} of {before.file}")
                else:
                    first[cell.name] = cell.place


@dataclass(frozen=True, slots=True)
class _Rules:
    """What the words of one point must not say against each other."""

    reader: Reader
    own: Block
    values: Values
    sweep: Sweep | None

    def check(self) -> None:
        """Tell every contradiction."""
        self._not_both("find", self._names("hold"), "held")
        if self.sweep:
            swept = {word.text: word.place for word in self.sweep.names}
            self._not_both("find", swept, "swept")
            for word in ("hold", "parameters"):
                group = self.own.get(word)
                for name in group.words if isinstance(group, Block) else ():
                    if name in swept:
                        self.reader.tell(swept[name], f"`sweep`: {quoted(name)} stands under `{word}` as well")

    def held(self) -> tuple[Entry[Quantity], ...]:
        """What is held; a swept value takes the place of one that `every_point` holds."""
        swept = {word.text for word in self.sweep.names} if self.sweep else set()
        return tuple(entry for entry in self.values.get("hold", ()) if entry.name not in swept)

    def _names(self, word: str) -> Mapping[str, Place]:
        return {entry.name: entry.place for entry in self.values.get(word, ())}

    def _not_both(self, word: str, others: Mapping[str, Place], how: str) -> None:
        for each in self.values.get(word) or ():
            if each.text in others:
                self.reader.tell(
                    each.place, f"`{word}`: {quoted(each.text)} is {how} already", "an unknown is expected"
                )


def loop_names(node: Node | None) -> tuple[str, ...] | None:
    """Names of the loops that are declared; None where they cannot be known."""
    if node is None:
        return ()
    return node.words if isinstance(node, Block) else None


def _available(word: str) -> bool:
    row = row_of(SHARED_POINT_WORDS, word)
    return row is not None and row.available


def _place(tree: Block, word: str) -> Place | None:
    key = tree.key(word)
    return key.place if key else None
