"""One tree from several: the spec over its defaults.yaml files, a point over `every_point` over the whole spec.

Groups are merged word by word and name by name; everything else (values, lists) is replaced as a whole. Every node
keeps its place, so that the merged tree still says where each value was written.
"""

from __future__ import annotations

from collections.abc import Iterator

from linverify.core.case import Setting
from linverify.core.errors import Place, Problem

from .scalars import printable, quoted
from .source import Block, Broken, Listing, Node, Scalar
from .words import BAND_WORDS, DRIVE_WORDS, Kind, Row, row_of

BY_LANGUAGE = "default of the language"


def over(nearer: Node, farther: Node | None, problems: list[Problem], path: tuple[str, ...] = ()) -> Node:
    """`nearer` with what only `farther` has added.

    path: the words above, needed because an envelope's forms are alike ([a, b] is a `range`), because the one signal
    of `until` is replaced and not joined by another, because a controller of another form is replaced, and because
    named sets of drives cannot meet an unnamed one.
    """
    if farther is None:
        return nearer
    if len(path) == 2 and path[0] == "envelope":
        nearer, farther = _sides(nearer), _sides(farther)
    if not isinstance(nearer, Block) or not isinstance(farther, Block) or path[-1:] == ("until",):
        return nearer
    if path[-1:] == ("controller",) and not any(word in farther.words for word in nearer.words):
        return nearer  # of another form: the two cannot be mixed
    if path[-1:] in (("drives",), ("error_bands",), ("loops",)) and not farther.empty:
        if nearer.empty:  # not the same as nothing: it looks as if it took away what it takes over
            expected = f"leave the word out to take over what is written at {farther.place}"
            problems.append(Problem(nearer.place, f"`{path[-1]}` is an empty group", expected))
            return farther
        if path[-1] == "drives" and is_one_set(nearer) != is_one_set(farther):
            problems.append(_unlike_sets(nearer, farther))
            return Broken(nearer.place)
    entries = [(key, over(node, farther.get(key.text), problems, (*path, key.text))) for key, node in nearer.entries]
    entries += [(key, node) for key, node in farther.entries if nearer.get(key.text) is None]
    return Block(tuple(entries), nearer.place, nearer.sound and farther.sound)


def _unlike_sets(nearer: Block, farther: Block) -> Problem:
    """Named sets of drives over the one set without a name, or the other way round."""
    names = ", ".join(quoted(name) for name in (farther if is_one_set(nearer) else nearer).words)
    if is_one_set(nearer):
        wrong = f"`drives` says nothing of the sets {names} at {farther.place}"
        return Problem(nearer.place, wrong, "the same names are expected: `drives: {NAME: {...}}`")
    wrong = f"`drives` names {names}, but the set at {farther.place} has no name"
    return Problem(nearer.place, wrong, "write the words to be changed without a name, or give that set the name")


def is_one_set(drives: Block) -> bool:
    """True where `drives` is one set without a name: a word of a set stands in it, or something that is no group."""
    return any(row_of(DRIVE_WORDS, key.text) or not isinstance(node, Block) for key, node in drives.entries)


def is_for_set(name: str, node: Node, sets: frozenset[str] | None) -> bool:
    """True where an entry of `error_bands` is a group of bands for one set of drives, not the band of a signal."""
    if not isinstance(node, Block) or not node.entries:
        return False
    if all(isinstance(value, Block) for _, value in node.entries):
        return True
    return sets is not None and name in sets and not any(row_of(BAND_WORDS, word) for word in node.words)


def _sides(node: Node) -> Node:
    """An envelope line with its range split, so that a farther `max` can stand beside a nearer `min`."""
    if isinstance(node, Listing) and len(node.items) == 2:
        return Block(_split(node, node.place), node.place)
    if isinstance(node, Block):
        inner, key = node.get("range"), node.key("range")
        alone = node.get("min") is None and node.get("max") is None
        if isinstance(inner, Listing) and len(inner.items) == 2 and key is not None and alone:
            rest = tuple(entry for entry in node.entries if entry[0].text != "range")
            return Block((*_split(inner, key.place), *rest), node.place)
    return node


def _split(listing: Listing, place: Place) -> tuple[tuple[Scalar, Node], ...]:
    return tuple((Scalar(word, True, place), item) for word, item in zip(("min", "max"), listing.items, strict=True))


def settings(node: Node | None, rows: tuple[Row, ...], above: str = "") -> Iterator[Setting]:
    """The effective words of a merged tree: dotted word, value as written, FILE:LINE:COLUMN of the value.

    Words of `rows` with a default that are not written are there too, with `BY_LANGUAGE` for a place.
    """
    written = node.entries if isinstance(node, Block) else ()
    for key, value in written:
        yield from setting(f"{above}{key.text}", value, row_of(rows, key.text) or row_of(rows, "*"))
    words = tuple(key.text for key, _ in written)
    for row in rows:
        if row.available and row.word != "*" and row.word not in words:
            if row.needs and row.needs not in words:
                continue
            if row.default:
                yield Setting(f"{above}{row.word}", row.default, BY_LANGUAGE)
            elif row.kind is Kind.BLOCK:
                yield from settings(None, row.of, f"{above}{row.word}.")


def setting(word: str, node: Node, row: Row | None) -> Iterator[Setting]:
    """The settings behind one word; row: that of the word, None where names and values are the user's own."""
    rows = row.of if row else ()
    if row and row.kind is Kind.MODES and isinstance(node, Listing):
        for number, item in enumerate(node.items, start=1):
            yield Setting(f"{word}.{number}", shown(item), str(item.place))
    elif not isinstance(node, Block):
        yield Setting(printable(word), shown(node), str(node.place))
    elif row and row.kind is Kind.DRIVES and not is_one_set(node):
        for key, value in node.entries:
            yield from settings(value, rows, f"{word}.{key.text}.")
    elif row and row.kind is Kind.BANDS:
        for key, value in node.entries:
            yield from setting(f"{word}.{key.text}", value, None)
    else:
        yield from settings(node, rows if row and row.kind in (Kind.BLOCK, Kind.NAMED, Kind.DRIVES) else (), f"{word}.")


def shown(node: Node) -> str:
    """A value as it could be written on one line."""
    if isinstance(node, Scalar):
        return printable(" ".join(node.text.split()))
    if isinstance(node, Listing):
        return "[" + ", ".join(shown(item) for item in node.items) + "]"
    if isinstance(node, Block):
        return "{" + ", ".join(f"{key.text}: {shown(value)}" for key, value in node.entries) + "}"
    return ""
