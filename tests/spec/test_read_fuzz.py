"""Whatever is done to a valid spec, the reader answers with a spec or with places, and never with a traceback."""

from __future__ import annotations

import re
import tempfile
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from linverify.spec.read import read
from linverify.spec.source import parse
from linverify.spec.words import SPEC_WORDS, Row

LANGUAGE = Path(__file__).parent / "language"
WHOLE, OVER, SHARED = ((LANGUAGE / f"{name}.yaml").read_text(encoding="utf-8") for name in ("whole", "over", "shared"))
EXAMPLES = 150


def words_of(rows: tuple[Row, ...]) -> Iterator[str]:
    for row in rows:
        yield row.word
        yield from words_of(row.of)


WORDS = sorted(set(words_of(SPEC_WORDS)))
PIECES = [
    *(
        "",
        " ",
        "\n",
        "\t",
        ":",
        ": ",
        "- ",
        "[",
        "]",
        "{",
        "}",
        ",",
        "'",
        '"',
        "#",
        "&a ",
        "*a",
        "!!int ",
        "%",
        "|",
        ">",
        "?",
    ),
    *("<<", "~", "null", "on", "1:30", "0x1F", "010", "1_000", "1e400", ".nan", "-", "+-", "\u2212", "\u00a0", "\x00"),
    *(
        "\x85",
        "\u2028",
        "\ufeff",
        "\U0001f6a2",
        "é",
        "---\n",
        "...\n",
        "%YAML 1.1\n",
        "family",
        "*",
        "10 %",
        "free",
        "{}",
    ),
    *("[]", "\\", "{from: 1, to: 2, count: 3}", "9" * 400, "{min: 1", "table", "points.csv"),
]
TOKENS = re.compile(r"\w+|\s+|[^\w\s]")


@st.composite
def mutated(draw: st.DrawFn, source: str) -> str:
    """`source` with tokens replaced, repeated, left out, swapped, or lines moved and indented."""
    tokens = TOKENS.findall(source)
    for _ in range(draw(st.integers(1, 4))):
        at = draw(st.integers(0, len(tokens) - 1))
        other = draw(st.integers(0, len(tokens) - 1))
        piece = draw(st.one_of(st.sampled_from(PIECES), st.sampled_from(WORDS), st.text(max_size=5)))
        how = draw(st.sampled_from(["put", "add", "drop", "swap", "copy", "cut"]))
        if how == "put":
            tokens[at] = piece
        elif how == "add":
            tokens.insert(at, piece)
        elif how == "drop":
            del tokens[at : at + draw(st.integers(1, 5))]
        elif how == "swap":
            tokens[at], tokens[other] = tokens[other], tokens[at]
        elif how == "copy":
            tokens[at:at] = tokens[other : other + 12]
        else:
            tokens = tokens[:at] or tokens
        tokens = tokens or [" "]
    return "".join(tokens)


def answer(spec: bytes, defaults: bytes = b"") -> list[str]:
    """What the reader says of a spec; fails where it says it badly."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "ride.yaml").write_bytes(spec)
        if defaults:
            (folder / "defaults.yaml").write_bytes(defaults)
        (folder / "points.csv").write_text("speed [kn],mass\n20,41 t\n", encoding="utf-8")
        found, problems = read(folder / "ride.yaml", "ride.yaml", folder)
    assert found is not None or problems
    for problem in problems:
        assert problem.place.file in ("ride.yaml", "defaults.yaml", "points.csv")
        assert problem.place.line >= 1
        assert problem.place.column >= 1
        assert str(problem).encode()
        assert str(problem).isprintable()
        assert len(str(problem)) < 1000
    assert problems == sorted(set(problems))
    return [str(problem) for problem in problems]


@settings(max_examples=EXAMPLES, deadline=None)
@given(mutated(WHOLE))
def test_mutated_specs(text: str) -> None:
    data = text.encode("utf-8", errors="surrogatepass")
    assert answer(data) == answer(data)


@settings(max_examples=EXAMPLES, deadline=None)
@given(mutated(OVER), mutated(SHARED))
def test_mutated_specs_with_mutated_defaults(text: str, defaults: str) -> None:
    assert answer(*(each.encode("utf-8", errors="surrogatepass") for each in (text, defaults))) is not None


@settings(max_examples=EXAMPLES, deadline=None)
@given(st.binary(max_size=200))
def test_any_bytes(data: bytes) -> None:
    assert answer(data)


@settings(max_examples=EXAMPLES, deadline=None)
@given(st.text(alphabet="ab:-[]{},'\"#&*!|>%?\n \t~<1", max_size=60))
def test_any_yaml(text: str) -> None:
    assert answer(b"linverify: 1\n" + text.encode())


@settings(max_examples=EXAMPLES, deadline=None)
@given(mutated(WHOLE))
def test_every_place_lies_in_the_text(text: str) -> None:
    data = text.encode("utf-8", errors="surrogatepass")
    lines = re.split(r"\r\n|\r|\n", data.decode("utf-8", errors="replace"))
    _, problems = parse(data, "ride.yaml")
    for problem in problems:
        assert problem.place.line <= len(lines) + 1
        assert problem.place.line > len(lines) or problem.place.column <= len(lines[problem.place.line - 1]) + 2


@pytest.mark.slow
@settings(max_examples=2000, deadline=None)
@given(mutated(WHOLE), mutated(SHARED))
def test_many_mutated_specs(text: str, defaults: str) -> None:
    assert answer(*(each.encode("utf-8", errors="surrogatepass") for each in (text, defaults))) is not None
