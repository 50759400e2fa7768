"""The language as data: it is whole, it agrees with itself, and the schema made from it says the same as the reader."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from jsonschema import Draft7Validator

from linverify.spec import schema, words
from linverify.spec.kinds import READERS
from linverify.spec.read import read
from linverify.spec.scalars import Amount, amount, is_text
from linverify.spec.source import Block, Listing, Node, Scalar, parse
from linverify.spec.words import SPEC_WORDS, Kind, Row

BAD = Path(__file__).parent / "bad"
DEMOS = Path(__file__).parents[2] / "specs"

# every word that stands at the head of a line of the language, and whether this version has it
TOP = {
    "linverify": True, "title": True, "plant": True, "parameters": True, "time": True, "wraps": True, "delays": True,
    "envelope": True, "exits": True, "trims": True, "every_point": True, "operating_points": True, "local_models": True,
    "differentiable": True, "drives": True, "error_bands": True, "frequency_bands": False, "modes": True,
    "actuators": True, "loops": True, "variations": False, "reach": False, "handover": False, "coverage": False,
    "budget": False, "requirements": True, "accepted": False,
}  # fmt: skip
WITH_WORDS = (
    Kind.BLOCK, Kind.NAMED, Kind.POINTS, Kind.LIMITS, Kind.DRIVES, Kind.BANDS, Kind.SWEEP, Kind.SWEPT, Kind.MODES,
    Kind.GROUPS,
)  # fmt: skip


def rows_of(rows: tuple[Row, ...]) -> Iterator[Row]:
    for row in rows:
        yield row
        yield from rows_of(row.of)


def test_the_whole_language_is_known() -> None:
    assert {row.word: row.available for row in SPEC_WORDS} == TOP


def test_no_word_inside_another_comes_later() -> None:
    later = {row.word for row in rows_of(SPEC_WORDS) if not row.available}
    assert later == {word for word, available in TOP.items() if not available}


def test_required_words() -> None:
    required = {row.word for row in rows_of(SPEC_WORDS) if row.required}
    of_agree = {"within", "between"}
    of_spec = {"linverify", "plant", "operating_points", "horizon", "every", "from", "to", "count", "checks"}
    of_loops = {"controller", "measures", "moves"}
    assert required == of_agree | of_spec | of_loops
    count = words.row_of(words.DRIVE_WORDS, "count")
    assert count is not None
    assert not count.required


@pytest.mark.parametrize("row", list(rows_of(SPEC_WORDS)), ids=lambda row: row.word)
def test_rows_agree_with_themselves(row: Row) -> None:
    assert row.meaning or row.word == "*"
    assert bool(row.choices) == (row.kind in (Kind.CHOICE, Kind.CHOICES))
    assert bool(row.of) == (row.kind in WITH_WORDS)
    assert len({inner.word for inner in row.of}) == len(row.of)
    if row.default and row.kind is Kind.TRUTH:
        assert row.default in ("true", "false")
    elif row.default and row.kind not in (Kind.CHOICES, Kind.SOURCE):
        assert row.default in row.choices or isinstance(amount(row.default), Amount)
    assert not (row.required and row.default)


def test_every_kind_that_a_word_has_can_be_read() -> None:
    special = {Kind.NONE, Kind.SWEPT}  # refused; read within a sweep
    assert set(READERS) | special == set(Kind)


def test_the_reference_table_has_a_line_for_every_word() -> None:
    lines = list(words.reference())
    paths = [path for path, *_ in lines]
    assert len(set(paths)) == len(paths)
    assert (
        "exits.complete",
        "per cent or a fraction",
        "90 %",
        "share of the random drives that must run to the end",
    ) in lines
    assert {"error_bands.NAME.peak", "drives.discerns.gain", "operating_points.NAME.hold"} <= set(paths)
    assert {path.split(".")[0] for path in paths} == set(TOP)


def plain(node: Node) -> Any:
    """A node as an editor's YAML 1.2 reader would hand it to the schema."""
    if isinstance(node, Block):
        return {key.text: plain(value) for key, value in node.entries}
    if isinstance(node, Listing):
        return [plain(item) for item in node.items]
    assert isinstance(node, Scalar)
    if not node.plain or is_text(node.text):
        return node.text
    if node.text in ("", "~"):
        return None
    if node.text in ("true", "false"):
        return node.text == "true"
    value = float(node.text)
    return int(value) if value == int(value) else value


def errors(text: str) -> list[str]:
    node, problems = parse(text.encode(), "a.yaml")
    assert node is not None
    assert not problems
    return [error.message for error in Draft7Validator(schema.schema()).iter_errors(plain(node))]


def test_the_schema_is_a_schema_of_draft_7() -> None:
    Draft7Validator.check_schema(schema.schema())
    assert "prefixItems" not in str(schema.schema())


@pytest.mark.parametrize("path", sorted(DEMOS.rglob("*.yaml")), ids=lambda path: path.stem)
def test_the_demo_specs_fit_schema_and_reader(path: Path) -> None:
    assert errors(path.read_text(encoding="utf-8")) == []
    assert read(path, path.name, DEMOS)[1] == []


@pytest.mark.parametrize(
    "name",
    [
        "bands_form", "bands_misspelt", "word_unknown", "word_case", "word_later", "word_choices", "word_missing_all",
        "number_empty", "word_format_2", "word_format_text", "word_plant", "envelope_forms", "drives_amplitude_form",
        "sweep_steps", "point_form",
    ],
)  # fmt: skip
def test_the_schema_sees_these_mistakes_too(name: str) -> None:
    assert errors((BAD / f"{name}.yaml").read_text(encoding="utf-8"))
