"""Text to nodes: every YAML trap is refused where it stands, or read as YAML 1.2 reads it."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest
import yaml

from linverify.core.errors import Place
from linverify.spec import source
from linverify.spec.source import Block, Broken, Listing, Scalar, is_spec, parse


def told(text: str | bytes) -> list[str]:
    _, problems = parse(text if isinstance(text, bytes) else text.encode(), "a.yaml")
    return [str(problem) for problem in problems]


def block(text: str) -> Block:
    node, problems = parse(text.encode(), "a.yaml")
    assert not problems
    assert isinstance(node, Block)
    return node


def test_every_word_and_value_has_its_place() -> None:
    node = block("plant: plant.py:ferry\nenvelope:\n  pitch: [-6 deg, 'six']\n")
    assert node.words == ("plant", "envelope")
    assert node.get("plant") == Scalar("plant.py:ferry", True, Place("a.yaml", 1, 8))
    inner = node.get("envelope")
    assert isinstance(inner, Block)
    assert inner.key("pitch") == Scalar("pitch", True, Place("a.yaml", 3, 3))
    low, high = Scalar("-6 deg", True, Place("a.yaml", 3, 11)), Scalar("six", False, Place("a.yaml", 3, 19))
    assert inner.get("pitch") == Listing((low, high), Place("a.yaml", 3, 10))


def test_columns_count_characters_not_bytes() -> None:
    node = block('"µ°Ω": 1 m\n')
    assert node.get("µ°Ω") == Scalar("1 m", True, Place("a.yaml", 1, 8))


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_line_ends_of_all_systems_count_alike(end: str) -> None:
    node = block(f"a: 1{end}# remark{end}b: 2{end}")
    assert node.key("b") == Scalar("b", True, Place("a.yaml", 3, 1))


def test_a_byte_order_mark_is_no_part_of_the_text() -> None:
    node, problems = parse(b"\xef\xbb\xbflinverify: 1\n", "a.yaml")
    assert (isinstance(node, Block) and node.words, problems) == (("linverify",), [])


@pytest.mark.parametrize("text", ["on", "yes", "no", "off", "1:30", "2024-01-01", "=", "1_000", "kn30"])
def test_words_that_yaml_1_1_would_change_stay_text(text: str) -> None:
    assert block(f"{text}: 1\n").words == (text,)


@pytest.mark.parametrize("text", ["010", "1e3", "0x1F", "true", "False", ".inf", ".nan", "null", "-3"])
def test_words_that_are_no_text_are_refused(text: str) -> None:
    assert told(f"{text}: 1\n") == [
        f"a.yaml:1:1: '{text}' is no text to YAML; put it in quotes, or choose another name"
    ]
    assert block(f'"{text}": 1\n').words == (text,)


def test_nothing_written_is_no_node_and_no_problem() -> None:
    assert parse(b"", "a.yaml") == (None, [])
    assert parse(b"# remark\n", "a.yaml") == (None, [])


def test_aliases_are_refused_before_they_can_grow() -> None:
    lines = ["a: &a [x, x, x, x, x, x, x, x, x]"]
    lines += [
        f"{b}: &{b} [" + ", ".join(f"*{a}" for _ in range(9)) + "]" for a, b in zip("abcdefgh", "bcdefghi", strict=True)
    ]
    problems = told("\n".join(lines))
    assert problems[0].startswith("a.yaml:1:4: an anchor '&a' is not allowed in a spec")
    assert problems[2].startswith("a.yaml:2:8: an alias '*a' is not allowed in a spec")
    assert len(problems) == 9 + 8 * 9


def test_a_value_that_contains_itself_is_refused() -> None:
    assert len(told("a: &x [*x]\n")) == 2


def test_an_alias_leaves_a_broken_node_behind() -> None:
    node, _ = parse(b"a: *x\nb: 1\n", "a.yaml")
    assert isinstance(node, Block)
    assert node.get("a") == Broken(Place("a.yaml", 1, 4))
    assert node.get("b") == Scalar("1", True, Place("a.yaml", 2, 4))


@pytest.mark.parametrize("tag", ["!!float 3", "!!python/object/apply:os.system [ls]", "!x y", "! x", "!!binary aGk="])
def test_tags_are_refused_and_never_obeyed(tag: str) -> None:
    assert told(f"a: {tag}\n")[0].startswith("a.yaml:1:4: a tag '!")


def test_depth_is_capped_far_below_what_would_overflow() -> None:
    assert told("a: " + "[" * 500 + "]" * 500) == ["a.yaml:1:67: more than 64 levels within each other"]
    assert told("a: " + "[" * 50_000)[0].endswith(": more than 64 levels within each other")
    assert told("a: " + "[" * 60 + "]" * 60) == []


def test_the_number_of_values_is_capped(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(source, "MOST_EVENTS", 20)
    assert told("a: [" + "1, " * 50 + "1]") == ["a.yaml:1:50: more than 20 values in one file; split it"]


def test_the_size_is_capped(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(source, "MOST_BYTES", 4)
    assert told("a: 12")[0].startswith("a.yaml:1:1: the file is larger than")


def test_duplicates_keep_the_first_and_cite_both() -> None:
    node, problems = parse(b"a: 1\nb: 2\na: 3\na: 4\n", "a.yaml")
    assert [str(each) for each in problems] == [
        "a.yaml:3:1: 'a' is written twice; first in line 1",
        "a.yaml:4:1: 'a' is written twice; first in line 1",
    ]
    assert isinstance(node, Block)
    assert node.get("a") == Scalar("1", True, Place("a.yaml", 1, 4))


@pytest.mark.parametrize(
    "character", ["\x00", "\x07", "\x0b", "\x85", "\u2028", "\ufeff", "\u202e", "\u200b", "\uffff"]
)
def test_invisible_characters_are_named(character: str) -> None:
    assert told(f"a: 1\nb: x{character}y\n") == [
        f"a.yaml:2:5: an invisible character U+{ord(character):04X}; delete it"
    ]


def test_many_invisible_characters_do_not_flood() -> None:
    assert len(told("\x00" * 1000)) == source.MOST_CHARACTERS_TOLD


@pytest.mark.parametrize(
    ("data", "place"),
    [
        (b"a: \xb0C\n", "1:4"),
        (b"a: 1\r\nb: \xff\n", "2:4"),
        ("a: 1\n".encode("utf-16"), "1:1"),
        (b"\xc3\xa9: \xc3", "1:4"),
    ],
)
def test_other_encodings_are_refused_at_the_first_odd_byte(data: bytes, place: str) -> None:
    assert told(data) == [f"a.yaml:{place}: the file is not UTF-8 text from here on; save it as UTF-8"]


BROKEN = [
    "a: b: c", "a: [1, 2\nb: 3", "a: 'x\nb: 3\n", "a: {b: 1", "a:1\nb: 2", "a: @x", "a: `x", "a: }", "a: [1,,2]",
    "a: |\n  x\n y", "- a\nb: 1", "]", "a: & x", "a: *", "%YAML 3.0\n---\na: 1", "   a: 1\n  b: 2", 'a: "\\uZZZZ"',
    "a: 'x\n---\n'", "? [", "a: !<", "a: \"\\x\"", "key\na: 1",
]  # fmt: skip


@pytest.mark.parametrize("text", BROKEN)
@pytest.mark.parametrize("loader", ["CSafeLoader", "SafeLoader"])
def test_what_yaml_refuses_is_told_in_plain_words(text: str, loader: str, monkeypatch: pytest.MonkeyPatch) -> None:
    if not hasattr(yaml, "CSafeLoader"):
        pytest.skip("PyYAML was built without libyaml")
    monkeypatch.setattr(yaml, "CSafeLoader", getattr(yaml, loader))
    (problem,) = told(text)
    place = problem.split(": ")[0]
    assert place.startswith("a.yaml:")
    assert len(place.split(":")) == 3
    assert "this is not YAML" not in problem


def test_names_tell_what_a_spec_is() -> None:
    assert is_spec(Path("specs/ride.yaml"))
    assert not any(is_spec(Path(name)) for name in ("defaults.yaml", "a/defaults.yaml", "ride.yml", "plant.py", "yaml"))


def test_yaml_is_not_imported_before_a_spec_is_read() -> None:
    code = "import sys; from pathlib import Path; from linverify.spec.source import is_spec; is_spec(Path('a.yaml')); "
    code += "print(sorted({'yaml', 'numpy', 'pint'} & set(sys.modules)))"
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout == "[]\n"
