"""`loops` of a merged point, or of a tree that points share, to values with places."""

from __future__ import annotations

from collections.abc import Sequence
from typing import cast

from linverify.core.errors import Place
from linverify.core.loop import BreakPoint
from linverify.core.signals import nearest

from .atoms import Word
from .kinds import Values, block
from .loop_layout import (
    ControllerAsk,
    FileAsk,
    LimitAsk,
    LoopAsk,
    MatricesAsk,
    ObjectAsk,
    PidAsk,
    RationalAsk,
    RequireAsk,
)
from .loop_words import CONTROLLER_WORDS, LOOP_WORDS, PID_WORDS
from .merge import shown
from .reader import Reader, check_name, misspelt
from .scalars import quoted
from .source import Block, Node, Scalar
from .words import default_of

FORMS = (("pid",), ("num", "den"), ("A", "B", "C", "D"), ("gain",), ("file",), ("object",))
_ONE_FORM = "one of pid, num with den, A with B, C and D, gain, file or object is expected"


def read_loops(
    reader: Reader, key: Scalar, node: Node, whole: bool, declared: Sequence[str] = ()
) -> tuple[LoopAsk, ...]:
    """The loops under `key`; whole: False where `controller` and others may still come from elsewhere.

    declared: names of the loops of the whole spec, of which one may be meant by a point. Whatever can be judged without
    the plant is judged: words, forms, lists, names of loops.
    """
    if not isinstance(node, Block):
        reader.misfit(node, "loops", "a group of `name: {controller: ..., measures: [...], moves: [...]}` is expected")
        return ()
    if node.empty:
        reader.tell(key.place, "nothing is written after `loops`", "loops by name are expected")
    asks = []
    for name, value in reader.named(node, "loops", "a loop"):
        check_name(reader, name, "a loop")
        if whole and _another(reader, name, value, declared):
            continue
        ask = _loop(reader, name, value, whole)
        asks += [ask] if ask else []
    return tuple(asks)


def _another(reader: Reader, name: Scalar, node: Node, declared: Sequence[str]) -> bool:
    """True, and told, where a loop that lacks words was probably meant to be one of the whole spec."""
    hint = "" if name.text in declared else nearest(name.text, declared)
    if not hint or not isinstance(node, Block):
        return False
    missing = [row.word for row in LOOP_WORDS if row.required and row.word not in node.words]
    if not missing:
        return False
    block(reader, node, LOOP_WORDS, f"loops: {name.text}")
    wrong = f"no loop of the spec is called {quoted(name.text)}, and a new one needs {', '.join(missing)}"
    reader.tell(name.place, wrong, f"one of {', '.join(declared)} is expected", hint)
    return True


def _loop(reader: Reader, name: Scalar, node: Node, whole: bool) -> LoopAsk | None:
    called = f"loops: {name.text}"
    values = block(reader, node, LOOP_WORDS, called)
    if not isinstance(node, Block) or not whole:
        return None
    reader.require(node, LOOP_WORDS, name.place, called)
    group, key = node.get("controller"), node.key("controller")
    controller = None
    if isinstance(group, Block) and key is not None and "controller" in values:
        controller = _controller(reader, f"{called}: controller", key, group, values["controller"])
    _some(reader, called, node, values, "measures", "outputs or states are expected")
    _some(reader, called, node, values, "moves", "plant inputs are expected, or LOOP.set_point.NAME")
    require = _require(reader, f"{called}: require", node.get("require"), values.get("require"))
    if "confirm" in values and node.get("require") is None and not misspelt("require", node, LOOP_WORDS):
        wrong = f"`{called}`: `confirm` without `require`"
        reader.tell(_key_place(node, "confirm"), wrong, "a margin that is required is expected")
    return LoopAsk(
        name=name.text,
        place=name.place,
        controller=controller,
        controller_place=group.place if group else name.place,
        text=shown(group) if group else "",
        measures=values.get("measures", ()),
        moves=values.get("moves", ()),
        within=values.get("with", ()),
        sample=values.get("sample"),
        delay=values.get("delay"),
        leaves=values.get("leaves", ()),
        break_at=cast(BreakPoint, values.get("break", default_of(LOOP_WORDS, "break"))),
        require=require,
        confirm=values.get("confirm"),
    )


def _key_place(node: Block, word: str) -> Place:
    key = node.key(word)
    return key.place if key else node.place


def _some(reader: Reader, called: str, node: Block, values: Values, word: str, expected: str) -> None:
    listed, value = values.get(word), node.get(word)
    if listed == () and value is not None:
        reader.tell(value.place, f"`{called}: {word}`: the list is empty", expected)


def _controller(reader: Reader, called: str, key: Scalar, node: Block, values: Values) -> ControllerAsk | None:
    """The one form that is written, complete; None where it is a mistake."""
    found = [form for form in FORMS if any(word in form for word in node.words)]
    if not found:
        if node.sound and not any(misspelt(row.word, node, CONTROLLER_WORDS) for row in CONTROLLER_WORDS):
            reader.tell(key.place, f"`{called}` says nothing", _ONE_FORM)
        return None
    if len(found) > 1:
        second = next(inner for inner, _ in node.entries if inner.text in found[1])
        first = next(word for word in node.words if word in found[0])
        reader.tell(second.place, f"`{called}`: `{second.text}` stands beside `{first}`", _ONE_FORM)
        return None
    (form,) = found
    if not _complete(reader, called, key, node, form) or any(word not in values for word in node.words):
        return None
    if form == ("pid",):
        return _pid(reader, f"{called}: pid", node, values["pid"])
    if form == ("num", "den"):
        return RationalAsk(values["num"], values["den"])
    if form == ("file",):
        return FileAsk(values["file"])
    if form == ("object",):
        return ObjectAsk(values["object"])
    if form == ("gain",):
        return MatricesAsk(None, None, None, values["gain"], gain=True)
    return MatricesAsk(values.get("A"), values.get("B"), values.get("C"), values.get("D"))


def _complete(reader: Reader, called: str, key: Scalar, node: Block, form: tuple[str, ...]) -> bool:
    """Words that need each other: num with den; A, B and C, or D alone."""
    needed = ("num", "den") if "num" in form else ("A", "B", "C") if "A" in form else ()
    if node.words == ("D",):
        return True
    missing = [word for word in needed if word not in node.words]
    for word in missing:
        there = " and ".join(f"`{each}`" for each in node.words if each in form)
        reader.tell(key.place, f"`{word}` is missing in `{called}`", f"it is expected beside {there}")
    return not missing


def _pid(reader: Reader, called: str, node: Block, values: Values) -> PidAsk | None:
    group, key = node.get("pid"), node.key("pid")
    if not isinstance(group, Block) or key is None:
        return None
    if not any(word in group.words for word in ("kp", "ki", "kd")):
        if group.sound and not any(misspelt(row.word, group, PID_WORDS) for row in PID_WORDS):
            reader.tell(key.place, f"`{called}` has no gain", "one of kp, ki, kd is expected")
        return None
    if "kd" in group.words and "filter" not in group.words and not misspelt("filter", group, PID_WORDS):
        wrong = f"`{called}`: `kd` without `filter` is improper: it would have no bound at high frequencies"
        reader.tell(_key_place(group, "kd"), wrong, "the time constant of its filter is expected, as in filter: 20 ms")
        return None
    if "filter" in group.words and "kd" not in group.words and not misspelt("kd", group, PID_WORDS):
        wrong = f"`{called}`: `filter` without `kd`"
        reader.tell(_key_place(group, "filter"), wrong, "it filters the derivative, which is not there")
        return None
    if any(word not in values for word in group.words):
        return None
    return PidAsk(values.get("kp"), values.get("ki"), values.get("kd"), values.get("filter"), group.place)


def _require(reader: Reader, called: str, node: Node | None, values: Values | None) -> RequireAsk | None:
    if not isinstance(node, Block) or values is None:
        return None
    limits = []
    for word, value in values.items():
        written = node.get(word)
        if word == "rule" or written is None:
            continue
        within = 0.02
        if word == "settling":
            value, within = value
        limits.append(LimitAsk(word, value, shown(written), written.place, within))
    rules: tuple[Word, ...] = values.get("rule", ())
    return RequireAsk(tuple(limits), rules, node.place)
