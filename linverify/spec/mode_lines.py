"""Lines of `modes`, read without knowing the plant; what a line says against itself is told."""

from __future__ import annotations

from types import MappingProxyType
from typing import Any

from linverify.core.errors import Place
from linverify.core.rules import rules_of
from linverify.core.signals import nearest

from .atoms import Entry, Location, Word
from .grammar import Kind
from .kinds import Values, block
from .mode_layout import GainWords, ModeLine
from .mode_words import EXCEPT_WORDS, GAIN_LIMITS, MODE_LIMITS, MODE_WORDS, ZERO_LIMITS
from .reader import Reader
from .scalars import quoted
from .source import Block, Listing, Node, Scalar

_CHOOSING = ("between", "participates", "near")
_OF_ZEROS = ("minimum_phase", "zeros")
_ASKING = (
    "stable", "controllable_from", "observable_from", *_OF_ZEROS, "static_gain", "rule",
    *(row.word for row in MODE_LIMITS),
)  # fmt: skip
_OF_CHOSEN = tuple(word for word in _ASKING if word not in (*_OF_ZEROS, "static_gain"))
_EXAMPLE = "a list of limits is expected, as in `- {between: [1 rad/s, 9 rad/s], damping: {min: 0.3}}`"


def mode_lines(reader: Reader, key: Scalar, node: Node) -> tuple[ModeLine, ...]:
    """All lines under `key`, each with its place; one that could not be read leaves out what is wrong in it."""
    if reader.is_missing(node, key, key.text, Kind.MODES.value):
        return ()
    if not isinstance(node, Listing):
        reader.misfit(node, key.text, _EXAMPLE)
        return ()
    if not node.items:
        reader.tell(node.place, f"`{key.text}`: the list is empty", _EXAMPLE)
    lines = []
    names: dict[str, Place] = {}
    for item in node.items:
        if not isinstance(item, Block):
            reader.misfit(item, key.text, _EXAMPLE)
            continue
        line = _line(reader, item)
        if line.name in names:
            wrong = f"`modes`: two lines are called {quoted(line.name)}"
            reader.tell(line.places["name"], wrong, f"the first one is in line {names[line.name].line}")
        elif line.name:
            names[line.name] = line.places["name"]
        lines.append(line)
    return tuple(lines)


def _line(reader: Reader, node: Block) -> ModeLine:
    before = len(reader.problems)
    read = block(reader, node, MODE_WORDS, "modes")
    places = _places(node)
    if len(reader.problems) == before:
        _Line(reader, node, read, places).check()
    excused = read.get("except", {})
    name: Word | None = read.get("name")
    return ModeLine(
        place=node.place,
        name=name.text if name else "",
        between=read.get("between"),
        participates=read.get("participates", ()),
        near=read.get("near"),
        within=read.get("within"),
        limits=_entries(read, tuple(row.word for row in MODE_LIMITS), places),
        stable=read.get("stable", False),
        at_zero=excused.get("at_zero", ()),
        time_to_double=excused.get("time_to_double"),
        may_be_empty=read.get("may_be_empty", False),
        controllable=read.get("controllable_from", ()),
        observable=read.get("observable_from", ()),
        minimum_phase=read.get("minimum_phase", False),
        inputs=read.get("inputs", ()),
        outputs=read.get("outputs", ()),
        zeros=_entries(read.get("zeros", {}), tuple(row.word for row in ZERO_LIMITS), places, "zeros."),
        static_gain=_gains(reader, read.get("static_gain", ())),
        rule=_rule(reader, read.get("rule")),
        places=MappingProxyType(places),
    )


def _places(node: Block) -> dict[str, Place]:
    """Places of the words of a line, and of those within `except` and `zeros`."""
    places = {key.text: key.place for key, _ in node.entries}
    for word in ("except", "zeros"):
        inner = node.get(word)
        if isinstance(inner, Block):
            places |= {f"{word}.{key.text}": key.place for key, _ in inner.entries}
    return places


def _entries(read: Values, words: tuple[str, ...], places: dict[str, Place], above: str = "") -> tuple[Entry[Any], ...]:
    """Limits in the order of the language, each with the place of its word."""
    return tuple(Entry(word, places[above + word], read[word]) for word in words if word in read)


def _gains(reader: Reader, entries: tuple[Entry[Values], ...]) -> tuple[GainWords, ...]:
    found = []
    for entry in entries:
        source, target, value = (entry.value.get(word) for word in ("from", "to", "is"))
        low, high = (entry.value.get(word) for word in ("min", "max"))
        if source is None or target is None:
            continue  # told: both are required
        if low is not None and high is not None and low.unit == high.unit and low.value >= high.value:
            wrong = f"`static_gain`: {low.text} to {high.text} is an empty range"
            reader.tell(high.place, wrong, "low below high is expected")
            continue
        found.append(GainWords(source, target, value, low, high, entry.place))
    return tuple(found)


def _rule(reader: Reader, rule: Word | None) -> Word | None:
    """The rule, where there is one of this name for modes."""
    known = rules_of("modes")
    if rule is None or rule.text in known:
        return rule
    if rule.text in rules_of("loops"):
        wrong = f"`rule`: {quoted(rule.text)} holds for loops, not for modes"
        reader.tell(rule.place, wrong, "it belongs under `require` of a loop")
    else:
        hint = nearest(rule.text, known)
        expected = "" if hint else f"the language knows {', '.join(known[:_MOST_RULES])} and others"
        reader.tell(rule.place, f"`rule`: there is no rule {quoted(rule.text)}", expected, hint)
    return None


_MOST_RULES = 6


class _Line:
    """What the words of one line must not say against each other."""

    def __init__(self, reader: Reader, node: Block, read: Values, places: dict[str, Place]) -> None:
        self.reader, self.node, self.read, self.places = reader, node, read, places

    def check(self) -> None:
        """Tell every contradiction."""
        self._says_something()
        self._no_false()
        self._near()
        self._except()
        self._zeros()
        self._gains()

    def _says_something(self) -> None:
        asks = [word for word in _ASKING if word in self.read]
        chooses = [word for word in _CHOOSING if word in self.read]
        empty = self.read.get("may_be_empty", False)
        if not asks and (empty or not chooses):
            wrong = "a line of `modes` that asks for nothing"
            told = "a limit such as `damping: {min: 0.3}`, or `stable: true`, is expected"
            self.reader.tell(self.node.place, wrong, told)
        elif chooses and asks and not any(word in _OF_CHOSEN for word in asks):
            wrong = f"`{chooses[0]}` chooses modes, but `{asks[0]}` is about none"
            self.reader.tell(self.places[chooses[0]], wrong, "a limit on these modes is expected, or a line of its own")
        elif empty and not chooses:
            wrong = "`may_be_empty` where no modes are chosen"
            self.reader.tell(self.places["may_be_empty"], wrong, "it goes with between, participates or near")

    def _no_false(self) -> None:
        for word in ("stable", "minimum_phase"):
            if self.read.get(word) is False:
                value = self.node.get(word)
                place = value.place if value else self.node.place
                self.reader.tell(place, f"`{word}: false` asks for nothing", "leave the word out")

    def _near(self) -> None:
        near: Location | None = self.read.get("near")
        if near is not None and "within" not in self.read:
            self.reader.tell(self.places["near"], "`near` without `within`", "how near is expected: `within: 5 %`")
        if near is None and "within" in self.read:
            self.reader.tell(self.places["within"], "`within` without `near`", "it says how near a mode must be")
        if near is not None and near.value == 0:
            wrong = "`near`: nothing is a per cent of 0 away from the origin"
            self.reader.tell(near.place, wrong, "a place off the origin is expected, or `except: {at_zero: [...]}`")

    def _except(self) -> None:
        excused = self.read.get("except")
        if excused is None:
            return
        if self.read.get("stable") is not True:
            wrong = "`except` without `stable: true`"
            self.reader.tell(self.places["except"], wrong, "it says which modes need not be stable")
        if not excused or excused.get("at_zero") == ():
            expected = ", ".join(row.word for row in EXCEPT_WORDS) + " are expected"
            self.reader.tell(self.places["except"], "`except` excuses nothing", expected)
        double = excused.get("time_to_double")
        if double is not None and (double.low is None or double.high is not None):
            wrong = f"`except: time_to_double`: {double.text} is no lower limit"
            self.reader.tell(double.place, wrong, "the fastest growth that is excused is expected, as in {min: 20 s}")

    def _zeros(self) -> None:
        if self.read.get("zeros") == {}:
            expected = ", ".join(row.word for row in ZERO_LIMITS) + " are expected"
            self.reader.tell(self.places["zeros"], "nothing is written after `zeros`", expected)
        for word in ("inputs", "outputs"):
            if word in self.read and not any(each in self.read for each in _OF_ZEROS):
                told = "it says from where or to where zeros are taken"
                self.reader.tell(self.places[word], f"`{word}` without `minimum_phase` or `zeros`", told)
            elif self.read.get(word) == ():
                self.reader.tell(
                    self.places[word], f"`{word}`: the list is empty", "leave the word out for all of them"
                )

    def _gains(self) -> None:
        node = self.node.get("static_gain")
        items = node.items if isinstance(node, Listing) else (node,)
        if isinstance(node, Listing) and not node.items:
            self.reader.tell(node.place, "`static_gain`: the list is empty")
        for item, entry in zip(items, self.read.get("static_gain", ()), strict=False):
            if not isinstance(item, Block):
                continue
            self.reader.require(item, GAIN_LIMITS, item.place, "modes: static_gain")
            limits = [word for word in ("min", "max") if word in entry.value]
            if "is" not in entry.value and not limits:
                self.reader.tell(item.place, "`static_gain` has no limit", "`is: V +- T`, min or max is expected")
            if "is" in entry.value and limits:
                place = next(key.place for key, _ in item.entries if key.text == limits[0])
                wrong = f"`static_gain`: `is` and `{limits[0]}` both say where the limit is"
                self.reader.tell(place, wrong, "one of them is enough")
