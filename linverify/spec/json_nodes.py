"""Text of a JSON file to nodes with line and column, strictly as JSON is defined.

The standard library's reader has no places, takes NaN, and lets the second of two equal keys win; YAML's reader refuses
tabs and stops at sizes that a file of matrices reaches. So the few rules of JSON are read here.
"""

from __future__ import annotations

import json
import re
from bisect import bisect_right
from dataclasses import dataclass, field
from typing import NoReturn

from linverify.core.errors import Place, Problem

from .scalars import quoted
from .source import DEEPEST, Block, Listing, Node, Scalar

_TOKEN = re.compile(
    r"""[ \t\r\n]*(?:(?P<mark>[{}\[\],:])|(?P<text>"(?:[^"\\\x00-\x1f]|\\.)*")"""
    r"""|(?P<word>[^\s{}\[\],:"]+)|(?P<odd>\S)|(?P<end>\Z))""",
    re.ASCII,
)
NUMBER = re.compile(r"-?(?:0|[1-9][0-9]*)(?:\.[0-9]+)?(?:[eE][+-]?[0-9]+)?")
_WORDS = ("true", "false", "null")
_NOT_FINITE = re.compile(r"[-+]?(?:nan|inf|infinity)", re.IGNORECASE)


def parse(data: bytes, shown: str) -> tuple[Node | None, list[Problem]]:
    """The nodes of one file and its mistakes; the node is None where it is no JSON, which is one mistake then."""
    try:
        text = data.removeprefix(b"\xef\xbb\xbf").decode("utf-8")
    except UnicodeDecodeError as error:
        before = data[: error.start].decode("utf-8", errors="replace")
        place = Place(shown, before.count("\n") + 1, len(before) - before.rfind("\n"))
        return None, [Problem(place, "the file is not UTF-8 text from here on", "save it as UTF-8")]
    scanner = _Scanner(text, shown)
    try:
        node = scanner.whole()
    except _StopError as stop:
        return None, [*scanner.problems, stop.problem]
    return node, scanner.problems


class _StopError(Exception):
    """Reading cannot go on."""

    def __init__(self, problem: Problem) -> None:
        super().__init__(str(problem))
        self.problem = problem


@dataclass(slots=True)
class _Frame:
    """A list or group that is still open; mutable while its children arrive."""

    place: Place
    block: bool
    items: list[Node] = field(default_factory=list)
    entries: list[tuple[Scalar, Node]] = field(default_factory=list)
    first: dict[str, Place] = field(default_factory=dict)
    key: Scalar | None = None


class _Scanner:
    """Walks over the text once, with a stack of its own, so that depth cannot exhaust Python's."""

    def __init__(self, text: str, shown: str) -> None:
        self.text, self.shown = text, shown
        self.problems: list[Problem] = []
        self._starts = [0, *(match.end() for match in re.finditer("\n", text))]
        self._at = 0

    def whole(self) -> Node:
        """The one value that the file holds."""
        node = self._value()
        kind, text, place = self._next()
        if kind != "end":
            self._stop(place, f"{quoted(text)} after the end", "one value in the file is expected")
        return node

    def _value(self) -> Node:
        open_frames: list[_Frame] = []
        while True:
            done = self._opened(open_frames)
            while done is not None:
                if not open_frames:
                    return done
                done = self._put(open_frames, done)

    def _opened(self, frames: list[_Frame]) -> Node | None:
        """Reads the start of a value: the value itself, or None where a list or group was opened that is not empty."""
        kind, text, place = self._next()
        if text in ("[", "{") and kind == "mark":
            if len(frames) >= DEEPEST:
                self._stop(place, f"more than {DEEPEST} levels within each other")
            frame = _Frame(place, text == "{")
            close = "}" if frame.block else "]"
            before = self._at
            kind, text, _ = self._next()
            if kind == "mark" and text == close:
                return Block((), place) if frame.block else Listing((), place)
            self._at = before
            frames.append(frame)
            if frame.block:
                self._key(frame)
            return None
        return self._scalar(kind, text, place)

    def _put(self, frames: list[_Frame], node: Node) -> Node | None:
        """Puts a finished value into the innermost frame; that frame's own node where it is finished with this."""
        frame = frames[-1]
        if frame.key is not None:
            frame.entries.append((frame.key, node))
        elif not frame.block:
            frame.items.append(node)
        kind, text, place = self._next()
        if kind == "mark" and text == ",":
            if frame.block:
                self._key(frame)
            return None
        close = "}" if frame.block else "]"
        if kind != "mark" or text != close:
            self._stop(place, self._told(kind, text), f"',' or '{close}' is expected")
        frames.pop()
        return Block(tuple(frame.entries), frame.place) if frame.block else Listing(tuple(frame.items), frame.place)

    def _key(self, frame: _Frame) -> None:
        kind, text, place = self._next()
        if kind != "text":
            self._stop(place, self._told(kind, text), "a word in quotes is expected")
        key = Scalar(self._string(text, place), False, place)
        kind, text, place = self._next()
        if kind != "mark" or text != ":":
            self._stop(place, self._told(kind, text), "':' is expected")
        frame.key = key
        if key.text in frame.first:
            before = frame.first[key.text]
            self.problems.append(
                Problem(key.place, f"{quoted(key.text)} is written twice", f"first in line {before.line}")
            )
            frame.key = None
        else:
            frame.first[key.text] = key.place

    def _scalar(self, kind: str, text: str, place: Place) -> Scalar:
        if kind == "text":
            return Scalar(self._string(text, place), False, place)
        if kind != "word" or not (NUMBER.fullmatch(text) or text in _WORDS or _NOT_FINITE.fullmatch(text)):
            self._stop(place, self._told(kind, text), "a value is expected")
        return Scalar(text, True, place)

    def _string(self, token: str, place: Place) -> str:
        try:
            return str(json.loads(token))
        except ValueError:
            self._stop(place, "an escape that JSON does not know", "write a backslash as \\\\")

    def _next(self) -> tuple[str, str, Place]:
        match = _TOKEN.match(self.text, self._at)
        if match is None or match.lastgroup is None:  # only whitespace that JSON does not know
            self._stop(self._place(self._at), "a character that JSON does not know", "delete it")
        self._at = match.end()
        return match.lastgroup, match[match.lastgroup], self._place(match.start(match.lastgroup))

    def _place(self, at: int) -> Place:
        line = bisect_right(self._starts, at)
        return Place(self.shown, line, at - self._starts[line - 1] + 1)

    def _told(self, kind: str, text: str) -> str:
        if kind == "end":
            return "the file ends here"
        if text == '"':
            return "a quotation mark is not closed"
        return f"{quoted(text)} cannot stand here"

    def _stop(self, place: Place, wrong: str, expected: str = "") -> NoReturn:
        raise _StopError(Problem(place, wrong, expected))
