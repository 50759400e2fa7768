"""The words under `local_models` as they were written, and which of their settings hold."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from types import MappingProxyType

from linverify.core.case import Setting
from linverify.core.errors import Place

from .kinds import Values
from .layout import FileWord, KeepWords, LocalWords, ResponseWords
from .merge import BY_LANGUAGE
from .reader import Reader
from .scalars import fraction
from .source import Block, Node
from .words import AGREE_WORDS, DERIVE, RESPONSE_WORDS, default_of

_FLOOR = "local_models.agree.response.floor"


def local_words(reader: Reader, spec: Block, values: Values) -> LocalWords:
    """What the spec says of local models; contradictions are told. values: what was read of the whole spec."""
    node, read = spec.get("local_models"), values.get("local_models", {})
    if not isinstance(node, Block):
        return LocalWords()
    agree, agreed = node.get("agree"), read.get("agree", {})
    places = {key.text: key.place for key, _ in node.entries}
    if isinstance(agree, Block):
        places |= {f"agree.{key.text}": value.place for key, value in agree.entries}
    source: FileWord | None = read.get("source")
    derived = source is None or source.text == DERIVE
    _together(reader, places, read, derived and ("source" in read or node.get("source") is None))
    return LocalWords(
        source=None if derived else source,
        keep=_keep(read.get("keep"), places.get("keep")),
        others=read.get("others"),
        point=agreed.get("point"),
        entries=agreed.get("entries"),
        response=_response(reader, agree, agreed.get("response")),
        gains=MappingProxyType(agreed["gains"]) if "gains" in agreed else None,
        closed=read.get("with", ()),
        places=MappingProxyType(places),
    )


def settings_told(settings: Iterable[Setting], local: LocalWords) -> Iterator[Setting]:
    """Without the defaults of comparisons that nobody asked for."""
    for setting in settings:
        of_agree = setting.word.startswith("local_models.agree.")
        unasked = local.source is None or (setting.word == _FLOOR and local.response is None)
        if not (of_agree and unasked and setting.origin == BY_LANGUAGE):
            yield setting


def _together(reader: Reader, places: dict[str, Place], read: Values, derived: bool) -> None:
    if "keep" in read and "others" not in places:
        expected = "`others: freeze` (held at trim) or `others: settle` (follows quasi-steadily) is expected"
        reader.tell(places["keep"], "`keep` without `others`", expected)
    if "others" in read and "keep" not in places:
        reader.tell(places["others"], "`others` without `keep`", "it says what becomes of states that are not kept")
    if read.get("with") == ():
        reader.tell(places["with"], "`local_models: with`: the list is empty", "names of loops are expected")
    if "agree" in read and derived:
        expected = "a delivered model is expected behind `source`: a derived one agrees with itself"
        reader.tell(places["agree"], "`agree` without a delivered model", expected)


def _keep(read: Values | None, place: Place | None) -> KeepWords | None:
    if read is None or place is None:
        return None
    return KeepWords(read.get("states"), read.get("inputs"), read.get("outputs"), place)


def _response(reader: Reader, agree: Node | None, read: Values | None) -> ResponseWords | None:
    if read is None or not isinstance(agree, Block):
        return None
    node, key = agree.get("response"), agree.key("response")
    if not isinstance(node, Block) or key is None:
        return None
    reader.require(node, RESPONSE_WORDS, key.place, "local_models: agree: response")
    if "within" not in read or "between" not in read:
        return None
    by_default = fraction(default_of(RESPONSE_WORDS, "floor"))
    floor = read.get("floor", by_default if isinstance(by_default, float) else 0.0)
    low, high = read["between"]
    return ResponseWords(read["within"], low, high, floor, key.place)


def default_point() -> float:
    """The tolerance of a claimed operating point where the spec says nothing."""
    read = fraction(default_of(AGREE_WORDS, "point"))
    return read if isinstance(read, float) else 0.0
