"""Sets of drives and error bands: groups whose form depends on each other's names."""

from __future__ import annotations

from typing import Any, Literal, cast

from linverify.core.case import BandKind, Course
from linverify.core.errors import Place
from linverify.core.signals import nearest

from . import scalars
from .kinds import Values, block
from .layout import BandAsk, DriveAsk, Quantity, Word
from .merge import is_for_set, is_one_set
from .reader import Reader, check_name, misspelt
from .source import Block, Node, Scalar
from .words import BAND_WORDS, DRIVE_WORDS, default_of, row_of


def drive_sets(
    reader: Reader, key: Scalar, node: Node, whole: bool, loops: tuple[str, ...] | None = None
) -> tuple[DriveAsk, ...]:
    """The sets of drives under `key`.

    whole: false where `horizon` and others may still come from elsewhere; loops: names of the loops, None where they
    are not known.
    """
    if not isinstance(node, Block):
        reader.misfit(node, "drives", "one set of drives is expected, or several by name")
        return ()
    if node.empty:
        reader.tell(key.place, "nothing is written after `drives`", "one set of drives, or several by name")
        return ()
    if _mixed(reader, node):
        return ()
    if is_one_set(node):
        return _drive_set(reader, "", key, node, whole, loops)
    sets: list[DriveAsk] = []
    for name, value in reader.named(node, "drives", "a set of drives"):
        check_name(reader, name, "a set of drives")
        sets += _drive_set(reader, name.text, name, value, whole, loops)
    return tuple(sets)


def _mixed(reader: Reader, node: Block) -> bool:
    """True, and told, where sets with names stand beside words of a set without one."""
    strangers = [
        key
        for key, value in node.entries
        if row_of(DRIVE_WORDS, key.text) is None
        and isinstance(value, Block)
        and any(row_of(DRIVE_WORDS, word) for word in value.words)
    ]
    if not strangers or not is_one_set(node):
        return False
    for key in strangers:
        wrong = f"`drives`: the set {scalars.quoted(key.text)} stands beside words of a set without a name"
        reader.tell(key.place, wrong, "one set of drives is expected, or several by name")
    return True


def set_names(node: Node | None) -> frozenset[str]:
    """Names of the sets of drives; none where there is one unnamed set."""
    return frozenset(node.words) if isinstance(node, Block) and not is_one_set(node) else frozenset()


def _drive_set(
    reader: Reader, name: str, key: Scalar, node: Node, whole: bool, loops: tuple[str, ...] | None
) -> tuple[DriveAsk, ...]:
    called = f"drives: {name}" if name else "drives"
    values = block(reader, node, DRIVE_WORDS, called)
    if not isinstance(node, Block) or not whole:
        return ()
    complete = reader.require(node, DRIVE_WORDS, key.place, called)
    if node.get("amplitude") is None and node.get("offsets") is None:
        reader.tell(key.place, f"`{called}` moves nothing", "`amplitude` or `offsets` is expected")
    horizon, every = values.get("horizon"), values.get("every")
    loop: Word | None = values.get("loop")
    if "at" in values and node.get("loop") is None and not misspelt("loop", node, DRIVE_WORDS):
        place = next(inner.place for inner, _ in node.entries if inner.text == "at")
        reader.tell(place, f"`{called}`: `at` without `loop`", "it says where the drives enter a closed loop")
    if loop is not None and loops is not None:
        known_loop(reader, loop, loops, f"{called}: loop")
    if not complete or horizon is None or every is None:
        return ()
    if horizon.unit == every.unit and every.value > horizon.value:
        reader.tell(every.place, f"`{called}: every` is longer than its horizon, {horizon.text}")
    discerns = values.get("discerns", {})
    return (
        DriveAsk(
            name=name,
            place=key.place,
            horizon=horizon,
            every=every,
            amplitude=values.get("amplitude", ()),
            course=cast(Course, _or_default(values, "course")),
            rate=values.get("rate", ()),
            offsets=values.get("offsets", ()),
            shapes=values.get("shapes") or _default_shapes(),
            count=int(_or_default(values, "count")),
            search=int(_or_default(values, "search")),
            pinned=values.get("pinned", ()),
            discerns_gain=discerns.get("gain"),
            discerns_delay=discerns.get("delay"),
            loop=loop,
            at=cast(Literal["input", "set_point"], _or_default(values, "at")),
        ),
    )


def known_loop(reader: Reader, name: Word, loops: tuple[str, ...], called: str) -> bool:
    """True where a loop of this name is declared; else told."""
    if name.text in loops:
        return True
    expected = f"one of {', '.join(loops)} is expected" if loops else "this spec declares no `loops`"
    wrong = f"`{called}`: no loop is called {scalars.quoted(name.text)}"
    reader.tell(name.place, wrong, expected, nearest(name.text, loops))
    return False


def _or_default(values: Values, word: str) -> Any:
    return values.get(word, default_of(DRIVE_WORDS, word))


def _default_shapes() -> tuple[str, ...]:
    return tuple(default_of(DRIVE_WORDS, "shapes").strip("[]").split(", "))


def error_bands(reader: Reader, key: Scalar, node: Node, sets: frozenset[str] | None) -> tuple[BandAsk, ...]:
    """All error bands under `key`. sets: names of the sets of drives, None where they are not known yet."""
    if not isinstance(node, Block):
        reader.misfit(node, "error_bands", "a group of `signal: {peak: 4 cm}` is expected")
        return ()
    if node.empty:
        reader.tell(key.place, "nothing is written after `error_bands`", "error bands by signal are expected")
    bands: list[BandAsk] = []
    for name, value in reader.named(node, "error_bands", "an error band"):
        if not is_for_set(name.text, value, sets):
            bands += _bands(reader, name, value, None)
            continue
        if sets is not None and name.text not in sets:
            _no_such_set(reader, name, sets)
        for signal, inner in reader.named(value, f"error_bands: {name.text}", "an error band"):
            bands += _bands(reader, signal, inner, name.text)
    return tuple(bands)


def _no_such_set(reader: Reader, name: Scalar, sets: frozenset[str]) -> None:
    expected = "one of " + ", ".join(sorted(sets)) + " is expected" if sets else "the sets of drives have no names"
    wrong = f"`error_bands`: no set of drives is called {scalars.quoted(name.text)}"
    reader.tell(name.place, wrong, expected, nearest(name.text, sets))


def _bands(reader: Reader, signal: Scalar, node: Node, drives: str | None) -> list[BandAsk]:
    called = f"error_bands: {drives}: {signal.text}" if drives else f"error_bands: {signal.text}"
    values = block(reader, node, BAND_WORDS, called)
    if isinstance(node, Block) and not any(word in node.words for word in BAND_KINDS):
        kinds = ", ".join(BAND_KINDS)
        reader.tell(signal.place, f"`{called}` has no limit", f"at least one of {kinds} is expected")
    start = values.pop("from", None)
    if not values:  # told; the signal is still to be judged
        return [_band(signal, "peak", None, start, drives, node.place)]
    return [
        _band(signal, cast(BandKind, kind), value, start, drives, _place(node, kind)) for kind, value in values.items()
    ]


BAND_KINDS = tuple(row.word for row in BAND_WORDS if row.word != "from")


def _band(
    signal: Scalar, kind: BandKind, value: Any, start: Quantity | None, drives: str | None, place: Place
) -> BandAsk:
    limit, fraction = value if kind == "wider_of" else (None, value) if kind == "relative" else (value, None)
    return BandAsk(signal.text, signal.place, kind, limit, fraction, start, drives, place)


def _place(node: Node, word: str) -> Place:
    value = node.get(word) if isinstance(node, Block) else None
    return value.place if value is not None else node.place
