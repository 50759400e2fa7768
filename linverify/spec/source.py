"""Text of a spec to nodes with line and column; the only file that imports yaml, and only when a spec is read.

Nothing here knows a word of the language. Whatever makes YAML mean something else than it looks like (anchors, merge
keys, tags, directives, several documents, doubled keys, keys that are no text, invisible characters) is refused with
its place; what YAML itself refuses is told in plain words.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterator
from dataclasses import dataclass, field
from itertools import islice
from pathlib import Path
from typing import Any, TypeAlias

from linverify.core.errors import Place, Problem

from .scalars import is_text, quoted

DEFAULTS = "defaults.yaml"
MOST_BYTES = 8_000_000
MOST_EVENTS = 200_000
DEEPEST = 64
MOST_CHARACTERS_TOLD = 20

# what neither shows in an editor nor belongs in a spec: control, zero-width and direction characters, YAML 1.1's odd
# line ends, half surrogates
_INVISIBLE = re.compile(
    "[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\u200b-\u200f\u2028-\u202e\u2060-\u206f\ufeff\ud800-\udfff\ufffe\uffff]"
)
_INDENT = re.compile(r"[^\S\n]+(?=[^\s#])")
_LINE_END = re.compile(r"\r\n|\r|\n")

# pieces of the messages of both YAML scanners, and what they mean for somebody who is writing a spec
_SAID: tuple[tuple[str, str, str], ...] = (
    ("mapping values are not allowed", "a ':' cannot stand here",
     "check the indentation and the space after the ':' of the line before; text that holds ': ' belongs in quotes"),
    ("sequence entries are not allowed", "a '-' cannot stand here", "a list starts on a line of its own"),
    ("',' or ']'", "a list that starts with '[' is not closed before this", "',' or ']' is expected"),
    ("',' or '}'", "a group that starts with '{' is not closed before this", "',' or '}' is expected"),
    ("unexpected end of stream", "a quotation mark is not closed before the file ends", ""),
    ("unexpected document", "a quotation mark is not closed", ""),
    ("cannot start any token", "this character cannot start a value", "text that starts with it belongs in quotes"),
    ("could not find expected ':'", "this line has no ':' after its word", "'word: value' is expected"),
    ("unknown escape", "this escape is unknown", "use single quotes, in which a backslash is just a backslash"),
    ("hexdecimal", "this escape is not a character", "use single quotes, in which a backslash is just a backslash"),
    ("escape", "this escape is not a character", "use single quotes, in which a backslash is just a backslash"),
    ("node content", "a value is expected before this", ""),
    ("expected key", "this does not fit the lines above", "check the indentation, brackets and quotation marks"),
    ("<block end>", "this does not fit the lines above", "check the indentation, brackets and quotation marks"),
    ("'-' indicator", "this does not fit the list above", "check the indentation, and the '-' of each line"),
    ("document start>", "this does not fit what stands above", "check the indentation; a spec is one document"),
    ("nesting depth", f"more than {DEEPEST} levels within each other", ""),
    ("incompatible YAML", "a %YAML line", "leave it out"),
)  # fmt: skip


# `{level: 0,01 m}` is `level: 0` and this word to YAML
_AFTER_COMMA = re.compile(r"[0-9]+(\.[0-9]*)?([eE][-+]?[0-9]+)?(\s.*)?")


@dataclass(frozen=True, slots=True)
class Scalar:
    """One value as written, without its quotes. plain: it had no quotes."""

    text: str
    plain: bool
    place: Place


@dataclass(frozen=True, slots=True)
class Listing:
    """`[a, b]` or lines that start with `-`."""

    items: tuple[Node, ...]
    place: Place


@dataclass(frozen=True, slots=True)
class Block:
    """`word: value` pairs in the order written; no word twice, every word is text."""

    entries: tuple[tuple[Scalar, Node], ...]
    place: Place
    sound: bool = True  # False where some words were refused and are missing here

    def get(self, word: str) -> Node | None:
        """The value of `word`, or None."""
        return next((node for key, node in self.entries if key.text == word), None)

    def key(self, word: str) -> Scalar | None:
        """`word` itself, with its place, or None."""
        return next((key for key, _ in self.entries if key.text == word), None)

    @property
    def empty(self) -> bool:
        """True where nothing was written in it."""
        return self.sound and not self.entries

    @property
    def words(self) -> tuple[str, ...]:
        """The words in order."""
        return tuple(key.text for key, _ in self.entries)


@dataclass(frozen=True, slots=True)
class Broken:
    """Stands for what was refused already, so that nobody complains about it twice."""

    place: Place


Node: TypeAlias = "Scalar | Listing | Block | Broken"


def is_spec(path: Path) -> bool:
    """True where `path` is named like a spec: every .yaml file but `defaults.yaml`. Opens nothing."""
    return path.suffix == ".yaml" and path.name != DEFAULTS


def parse(data: bytes, shown: str) -> tuple[Node | None, list[Problem]]:
    """The nodes of one file, and every mistake that can be seen without the language.

    The node is None where nothing is written in the file, or where it cannot be parsed, which is a problem then.
    """
    text, problems = _decoded(data, shown)
    if text is None:
        return None, problems
    builder = _Builder(shown, problems)
    builder.read(text)
    return (None if builder.stopped else builder.root), problems


def _decoded(data: bytes, shown: str) -> tuple[str | None, list[Problem]]:
    if len(data) > MOST_BYTES:
        return None, [Problem(Place(shown), f"the file is larger than {MOST_BYTES // 1_000_000} MB")]
    try:
        text = data.removeprefix(b"\xef\xbb\xbf").decode("utf-8")
    except UnicodeDecodeError as error:
        before = data[: error.start].decode("utf-8", errors="replace")
        place = _place_of(before, len(before), shown)
        return None, [Problem(place, "the file is not UTF-8 text from here on", "save it as UTF-8")]
    problems = list(islice(_invisible(text, shown), MOST_CHARACTERS_TOLD))
    return (None if problems else text), problems


def _invisible(text: str, shown: str) -> Iterator[Problem]:
    for match in _INVISIBLE.finditer(text):
        name = f"U+{ord(match.group()):04X}"
        yield Problem(_place_of(text, match.start(), shown), f"an invisible character {name}", "delete it")
    for line, content in enumerate(_LINE_END.split(text), 1):
        indent = _INDENT.match(content)
        odd = indent and next((i for i, character in enumerate(indent.group()) if character != " "), None)
        if indent and odd is not None:
            character = indent.group()[odd]
            what = "tab" if character == "\t" else unicodedata.name(character, f"U+{ord(character):04X}").lower()
            yield Problem(Place(shown, line, odd + 1), f"a {what} in the indentation", "YAML is indented by spaces")


def _place_of(text: str, at: int, shown: str) -> Place:
    lines = _LINE_END.split(text[:at])
    return Place(shown, len(lines), len(lines[-1]) + 1)


@dataclass(slots=True)
class _Frame:
    """A list or block that is still open; mutable while its children arrive."""

    place: Place
    block: bool
    children: list[Node] = field(default_factory=list)


class _Builder:
    """Turns YAML events into nodes with a stack of its own, so that depth cannot exhaust Python's."""

    def __init__(self, shown: str, problems: list[Problem]) -> None:
        self.shown = shown
        self.problems = problems
        self.root: Node | None = None
        self.stopped = False
        self._open: list[_Frame] = []
        self._documents = 0

    def read(self, text: str) -> None:
        """Read `text` into `root`; `stopped` is set where reading could not go on to the end."""
        import yaml

        loader: Any = getattr(yaml, "CSafeLoader", yaml.SafeLoader)
        try:
            for count, event in enumerate(yaml.parse(text, Loader=loader)):
                if count >= MOST_EVENTS:
                    self._stop(self._place(event), f"more than {MOST_EVENTS} values in one file", "split it")
                self._take(event, yaml)
                if self.stopped:
                    return
        except yaml.MarkedYAMLError as error:
            self._refused(error)
        except (yaml.YAMLError, UnicodeError, RecursionError) as error:
            self._stop(Place(self.shown), f"this is not YAML: {quoted(str(error))}")

    def _place(self, event: Any) -> Place:
        return Place(self.shown, event.start_mark.line + 1, event.start_mark.column + 1)

    def _tell(self, place: Place, wrong: str, expected: str = "") -> None:
        self.problems.append(Problem(place, wrong, expected))

    def _stop(self, place: Place, wrong: str, expected: str = "") -> None:
        self._tell(place, wrong, expected)
        self.stopped = True

    def _refused(self, error: Any) -> None:
        mark = error.problem_mark or error.context_mark
        place = Place(self.shown, mark.line + 1, mark.column + 1) if mark else Place(self.shown)
        marks = {"anchor": "a '*' or '&'", "alias": "a '*' or '&'", "tag": "a '!'"}
        for piece, sign in marks.items():
            if piece in str(error.context):
                self._stop(place, f"{sign} without quotes", "text that starts with it belongs in quotes")
                return
        for piece, wrong, expected in _SAID:
            if piece in str(error.problem):
                self._stop(place, wrong, expected)
                return
        self._stop(place, f"this is not YAML: {quoted(str(error.problem))}")

    def _take(self, event: Any, yaml: Any) -> None:
        place = self._place(event)
        if isinstance(event, yaml.DocumentStartEvent):
            self._document(event, place)
        elif isinstance(event, yaml.AliasEvent):
            self._tell(
                place,
                f"an alias {quoted('*' + str(event.anchor))} is not allowed in a spec",
                "text that starts with * belongs in quotes; what is shared belongs in `every_point` or defaults.yaml",
            )
            self._put(Broken(place))
        elif isinstance(event, yaml.ScalarEvent):
            marked = self._marked(event, place)
            self._put(Broken(place) if marked else Scalar(event.value, not event.style, place))
        elif isinstance(event, (yaml.SequenceStartEvent, yaml.MappingStartEvent)):
            self._marked(event, place)
            self._open.append(_Frame(place, isinstance(event, yaml.MappingStartEvent)))
            if len(self._open) > DEEPEST:
                self._stop(place, f"more than {DEEPEST} levels within each other")
        elif isinstance(event, (yaml.SequenceEndEvent, yaml.MappingEndEvent)):
            frame = self._open.pop()
            self._put(self._block(frame) if frame.block else Listing(tuple(frame.children), frame.place))

    def _document(self, event: Any, place: Place) -> None:
        self._documents += 1
        if self._documents > 1:
            self._stop(place, "a second document starts here", "one spec a file")
        elif event.version or event.tags:
            self._tell(place, "a line that starts with '%'", "leave it out")

    def _marked(self, event: Any, place: Place) -> bool:
        """Tell of an anchor or a tag; true where the value must not be read."""
        if event.anchor is not None:
            expected = "what is shared belongs in `every_point` or defaults.yaml"
            self._tell(place, f"an anchor {quoted('&' + str(event.anchor))} is not allowed in a spec", expected)
        if event.tag is not None:
            tag = str(event.tag).replace("tag:yaml.org,2002:", "!!")
            self._tell(place, f"a tag {quoted(tag)} is not allowed in a spec", "write the value alone")
        return event.tag is not None

    def _put(self, node: Node) -> None:
        if self._open:
            self._open[-1].children.append(node)
        else:
            self.root = node

    def _block(self, frame: _Frame) -> Block:
        entries: list[tuple[Scalar, Node]] = []
        first: dict[str, Place] = {}
        for key, node in zip(frame.children[::2], frame.children[1::2], strict=True):
            if not isinstance(key, Scalar):
                if not isinstance(key, Broken):
                    self._tell(key.place, "a list or group cannot be a word", "'word: value' is expected")
            elif self._sound_key(key, node):
                if key.text in first:
                    before = first[key.text]
                    self._tell(key.place, f"{quoted(key.text)} is written twice", f"first in line {before.line}")
                else:
                    first[key.text] = key.place
                    entries.append((key, node))
        return Block(tuple(entries), frame.place, 2 * len(entries) == len(frame.children))

    def _sound_key(self, key: Scalar, node: Node) -> bool:
        if key.plain and key.text == "<<":
            self._tell(
                key.place, "'<<' is not allowed in a spec", "`every_point` and defaults.yaml hold what is shared"
            )
        elif key.text.strip() == "":
            self._tell(key.place, "a word is missing before ':'")
        elif (
            key.plain and _AFTER_COMMA.fullmatch(key.text) and isinstance(node, Scalar) and node.plain and not node.text
        ):
            self._tell(key.place, f"{quoted(key.text)} where a word is due", "write a decimal point, not a comma")
        elif key.plain and not is_text(key.text):
            self._tell(key.place, f"{quoted(key.text)} is no text to YAML", "put it in quotes, or choose another name")
        else:
            return True
        return False
