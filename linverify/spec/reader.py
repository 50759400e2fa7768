"""What every reader of nodes needs: the list of mistakes, and the questions asked of every node.

A mistake is told once and never raised; what cannot be used is None or left out. `Broken` nodes were told of before
and are passed over in silence.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from itertools import pairwise
from pathlib import Path
from typing import TypeVar

from linverify.core.errors import Place, Problem
from linverify.core.signals import nearest

from . import scalars
from .scalars import Wrong, quoted
from .source import Block, Broken, Listing, Node, Scalar
from .words import SPEC_WORDS, Row, row_of

T = TypeVar("T")
_TOP = "at the top of the spec"
_MOST_LISTED = 10
_NAME = re.compile(r"[A-Za-z0-9_\-+.]+")


class Reader:
    """Reads nodes by the grammar and collects what is wrong.

    folders: shown name of a file -> its folder, to which file names in it are relative.
    """

    def __init__(self, folders: Mapping[str, Path]) -> None:
        self.problems: list[Problem] = []
        self._folders = folders

    def tell(self, place: Place, wrong: str, expected: str = "", hint: str = "") -> None:
        """Add a mistake; what the user wrote is made printable."""
        told = (scalars.printable(text) for text in (wrong, expected, hint))
        self.problems.append(Problem(place, *told))

    def folder(self, place: Place) -> Path:
        """Folder of the file that `place` is in."""
        return self._folders[place.file]

    def words(self, node: Node, rows: tuple[Row, ...], called: str) -> Iterator[tuple[Row, Scalar, Node]]:
        """The known, available words of a block with their rows; the others are told."""
        if not isinstance(node, Block):
            known = ", ".join(row.word for row in rows if row.available)
            self.misfit(node, called, f"a group of {known} is expected")
            return
        for key, value in node.entries:
            row = row_of(rows, key.text)
            if row is None:
                self._unknown(key, rows, called)
            elif not row.available:
                self.tell(key.place, f"`{row.word}` is not available in this version")
            elif not self.is_missing(value, key, row.word, wanted(row)):
                yield row, key, value

    def require(self, node: Block, rows: tuple[Row, ...], place: Place, called: str) -> bool:
        """Tell of required words that are not written; place is that of the block's own word."""
        missing = [row for row in rows if row.required and row.word not in node.words]
        for word in missing:
            if not misspelt(word.word, node, rows):
                where = f" in `{called}`" if called else ""
                self.tell(place, f"`{word.word}` is missing{where}", f"{wanted(word)} is expected")
        return not missing

    def named(self, node: Node, called: str, wanted: str = "") -> Iterator[tuple[Scalar, Node]]:
        """Names and values of a group whose names are the user's own."""
        if not isinstance(node, Block):
            self.misfit(node, called, "a group of `name: value` is expected")
            return
        for key, value in node.entries:
            if not self.is_missing(value, key, f"{called}: {key.text}", wanted or "a value"):
                yield key, value

    def is_missing(self, node: Node, key: Scalar, called: str, wanted: str) -> bool:
        """True, and told, where nothing stands behind a word."""
        if isinstance(node, Broken):
            return True
        if isinstance(node, Scalar) and node.plain and scalars.is_null(node.text):
            if ":" in key.text and " " not in key.text.split(":")[0]:
                self.tell(key.place, f"{quoted(key.text)} is one word to YAML", "write a space after ':'")
            else:
                self.tell(key.place, f"nothing is written after `{called}`", f"{wanted} is expected")
            return True
        return False

    def misfit(self, node: Node, called: str, expected: str) -> None:
        """Tell that a node has the wrong form: text, a list or a group where another is due."""
        form = {Scalar: "text", Listing: "a list", Block: "a group"}
        if isinstance(node, Scalar):
            self.tell(node.place, f"`{called}`: {quoted(node.text)} is no value for this word", expected)
        elif not isinstance(node, Broken):
            self.tell(node.place, f"`{called}`: {form[type(node)]} is no value for this word", expected)

    def scalar(self, node: Node, called: str, expected: str) -> Scalar | None:
        """The node if it is a scalar with something in it."""
        if isinstance(node, Scalar) and not (node.plain and scalars.is_null(node.text)):
            return node
        if isinstance(node, Scalar):
            self.tell(node.place, f"`{called}`: nothing is written here", expected)
        else:
            self.misfit(node, called, expected)
        return None

    def judged(self, read: T | Wrong, place: Place, called: str) -> T | None:
        """What a scalar reader returned, or None and a mistake."""
        if isinstance(read, Wrong):
            self.tell(place, f"`{called}`: {read.wrong}", read.expected)
            return None
        return read

    def items(self, node: Node, called: str, expected: str, count: int | None = None) -> tuple[Node, ...] | None:
        """Items of a list, of a fixed count where one is given."""
        if not isinstance(node, Listing):
            self.misfit(node, called, expected)
            return None
        if count is not None and len(node.items) != count:
            many = f"{len(node.items)} value{'' if len(node.items) == 1 else 's'}"
            comma = "; a number has a decimal point, no comma" if _is_cut_by_comma(node.items) else ""
            self.tell(node.place, f"`{called}`: {many} in the list", expected + comma)
            return None
        return node.items

    def sign(self, value: float, row: Row, text: str, place: Place, called: str) -> bool:
        """True where the value has the sign that its word asks for; else told."""
        if (row.sign == "+" and value <= 0) or (row.sign == "0+" and value < 0):
            self.tell(place, f"`{called}`: {quoted(text)} is {'not above' if row.sign == '+' else 'below'} zero")
            return False
        return True

    def _unknown(self, key: Scalar, rows: tuple[Row, ...], called: str) -> None:
        known = [row.word for row in rows]
        where = f"in `{called}` " if called else ""
        homes = _homes(key.text)
        hint = nearest(key.text, known)
        if ":" in key.text:
            self.tell(key.place, f"unknown word {quoted(key.text)}", "a space belongs after ':'")
        elif homes:
            here = f"in `{called}`" if called else "here"
            self.tell(key.place, f"{quoted(key.text)} has no place {here}", f"it belongs {homes}")
        elif hint and len(known) > _MOST_LISTED:
            self.tell(key.place, f"unknown word {quoted(key.text)}", hint=hint)
        else:
            self.tell(key.place, f"unknown word {quoted(key.text)}", f"{where}{_listed(rows)}", hint)


def _is_cut_by_comma(items: Sequence[Node]) -> bool:
    """True where `0,01` stands in a list: two numbers, and no space between."""
    pairs = [pair for pair in pairwise(items) if all(isinstance(each, Scalar) and each.plain for each in pair)]
    return any(
        first.place.line == second.place.line
        and second.place.column == first.place.column + len(first.text) + 1
        and first.text.isdecimal()
        and second.text[:1].isdecimal()
        for first, second in pairs
        if isinstance(first, Scalar) and isinstance(second, Scalar)
    )


def _listed(rows: Sequence[Row]) -> str:
    words = [row.word for row in rows if row.available]
    return (words[0] if len(words) == 1 else "one of " + ", ".join(words)) + " is expected"


def _homes(word: str) -> str:
    """Where a word of the language belongs, for one that was written elsewhere."""
    found: dict[str, None] = {}

    def walk(rows: tuple[Row, ...], home: str) -> None:
        for row in rows:
            if row.word == word and home:
                found[home] = None
            if row.available:
                walk(row.of, home if row.word == "*" else f"`{row.word}`")

    walk(SPEC_WORDS, _TOP)
    top = _TOP if found.pop(_TOP, _TOP) is None else ""
    return " or ".join(each for each in (top, f"under {' or '.join(found)}" if found else "") if each)


def wanted(row: Row) -> str:
    """What is due behind a word, for messages."""
    return "a time" if row.dimension == "time" else row.kind.value


def misspelt(word: str, node: Block, rows: tuple[Row, ...]) -> bool:
    """True where an unknown word, told already, was probably meant to be `word`."""
    return bool(nearest(word, [each for each in node.words if row_of(rows, each) is None]))


def check_name(reader: Reader, name: Scalar, what: str) -> bool:
    """True where `name` can stand in an id; else told."""
    if _NAME.fullmatch(name.text):
        return True
    expected = "a name is made of letters, digits, '_', '-', '+' and '.'"
    reader.tell(name.place, f"{quoted(name.text)} is no name for {what}", expected)
    return False
