"""Verdicts as JSON: every kind survives the trip, and nothing else than plain JSON is written."""

from __future__ import annotations

import json
import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented import EVERY, FOLLOWS, TRIMS

from linverify.core.errors import Place, RecordError
from linverify.core.verdict import Evidence, Figure, Sense, Status, Verdict
from linverify.report.wire import dumps, from_data, loads, plain, restored, rounded, text_of, to_data

TEXTS = st.text(st.characters(codec="utf-8"), max_size=12)
NUMBERS = st.floats() | st.sampled_from([math.nan, math.inf, -math.inf, 0.0, -0.0, 1e300, 5e-324])
KEYS = TEXTS.filter(lambda key: not key.startswith("$"))
DETAILS = st.recursive(
    st.none() | st.booleans() | st.integers() | NUMBERS | TEXTS,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(KEYS, inner, max_size=3),
    max_leaves=8,
)
FIGURES = st.builds(
    Figure, TEXTS, TEXTS, NUMBERS, NUMBERS, TEXTS, st.sampled_from(Sense), NUMBERS, NUMBERS, TEXTS, TEXTS, TEXTS,
    st.sampled_from(Status), st.floats(allow_nan=False), TEXTS, st.floats(),
)  # fmt: skip
VERDICTS = st.builds(
    Verdict,
    spec=TEXTS,
    point=TEXTS,
    check=TEXTS,
    status=st.sampled_from(Status),
    place=st.builds(Place, TEXTS, st.integers(1, 999), st.integers(1, 99)),
    reason=TEXTS,
    figures=st.lists(FIGURES, max_size=3).map(tuple),
    notes=st.lists(TEXTS, max_size=2).map(tuple),
    requirements=st.lists(TEXTS, max_size=2).map(tuple),
    evidence=st.lists(st.builds(Evidence, TEXTS, TEXTS, TEXTS), max_size=2).map(tuple),
    details=st.dictionaries(KEYS, DETAILS, max_size=3),
)


def strict(text: str) -> Any:
    """The data of a text that must be JSON by the letter."""

    def refuse(word: str) -> float:
        raise AssertionError(f"bare {word}")

    return json.loads(text, parse_constant=refuse)


@settings(deadline=None, derandomize=True, max_examples=200)
@given(VERDICTS)
def test_any_verdict_survives_the_trip(verdict: Verdict) -> None:
    text = dumps(verdict)
    strict(text)
    back = loads(text)
    assert dumps(back) == text
    assert (back.id, back.status, back.place, back.reason) == (
        verdict.id,
        verdict.status,
        verdict.place,
        verdict.reason,
    )
    assert (back.notes, back.requirements, back.evidence) == (verdict.notes, verdict.requirements, verdict.evidence)
    assert [figure.status for figure in back.figures] == [figure.status for figure in verdict.figures]
    assert [figure.sense for figure in back.figures] == [figure.sense for figure in verdict.figures]


@settings(deadline=None, derandomize=True, max_examples=300)
@given(st.floats())
def test_figures_keep_six_digits(value: float) -> None:
    back = restored(plain(value))
    if math.isnan(value):
        assert math.isnan(back)
    elif math.isinf(value):
        assert back == value
    else:
        assert back == rounded(value) == pytest.approx(value, rel=5.1e-6, abs=1e-320)
        assert math.copysign(1.0, back) == 1.0 or back != 0.0


@pytest.mark.parametrize("verdict", EVERY, ids=lambda verdict: f"{verdict.point}-{verdict.check}")
def test_every_invented_verdict_comes_back(verdict: Verdict) -> None:
    assert from_data(strict(dumps(verdict))["verdict"]).id == verdict.id
    assert dumps(loads(dumps(verdict))) == dumps(verdict)


@pytest.mark.parametrize("status", Status)
def test_every_status_and_sense_comes_back(status: Status) -> None:
    figures = tuple(Figure("f", "s", 1.0, 2.0, sense=sense, status=status) for sense in Sense)
    verdict = replace(TRIMS, status=status, figures=figures)
    assert loads(dumps(verdict)) == Verdict(**{**_fields(verdict), "details": loads(dumps(verdict)).details})


def _fields(verdict: Verdict) -> dict[str, Any]:
    return {name: getattr(verdict, name) for name in verdict.__dataclass_fields__}


def test_numbers_are_written_to_six_digits_with_their_headroom() -> None:
    figure = to_data(FOLLOWS)["figures"][0]
    assert (figure["worst"], figure["limit"], figure["headroom"]) == (0.0512346, 0.04, -0.280865)


def test_numbers_of_numpy_become_plain_ones() -> None:
    figure = Figure("peak", "h", np.float64(1.5), np.float32(2.0), error=np.int64(0))  # type: ignore[arg-type]
    details = {"flag": np.bool_(True), "row": np.array([1.0, np.nan]), "count": np.int32(3), "name": np.str_("x")}
    data = strict(dumps(replace(TRIMS, figures=(figure,), details=details)))["verdict"]
    assert data["figures"][0]["worst"] == 1.5
    assert data["details"] == {"flag": True, "row": [1.0, {"$float": "nan"}], "count": 3, "name": "x"}


@pytest.mark.parametrize("value", [1j, np.complex128(1j), {1, 2}, object(), b"x", {1: "x"}, {"$float": "nan"}])
def test_what_is_not_plain_is_refused(value: object) -> None:
    with pytest.raises(RecordError, match=r"cannot hold|keys in a verdict's details"):
        dumps(replace(TRIMS, details={"wrong": value}))


def test_memory_addresses_are_taken_out() -> None:
    assert plain("<function rates at 0x7f12ab34cd50> raised") == "<function rates at 0x...> raised"


def test_exact_numbers_keep_every_digit() -> None:
    assert plain([1 / 3, np.float64(0.1)], exact=True) == [1 / 3, 0.1]


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "is not JSON"),
        ("[1]", "has the words format, verdict"),
        ('{"format": 1}', "has the words format, verdict"),
        ('{"format": 2, "verdict": {}}', "has format 2; this version of linverify reads format 1"),
        ('{"format": true, "verdict": {}}', "has format True"),
        ('{"format": 1, "verdict": {}}', "a verdict has the words"),
        ('{"format": 1, "verdict": NaN}', "NaN is not JSON"),
    ],
)
def test_foreign_text_is_refused(text: str, message: str) -> None:
    with pytest.raises(RecordError, match=message):
        loads(text)


@pytest.mark.parametrize(
    ("word", "value"),
    [
        ("status", "green"),
        ("place", {"file": "x"}),
        ("place", None),
        ("reason", 3),
        ("notes", "text"),
        ("notes", [1]),
        ("figures", [{"what": "x"}]),
        ("figures", None),
        ("place", {"file": "x", "line": "y", "column": 1}),
        ("evidence", [{"role": "x"}]),
        ("evidence", [{"role": "x", "drive": 1, "text": ""}]),
        ("details", {"x": {"$float": "many"}}),
        ("details", {"x": {"$other": 1}}),
        ("details", [1]),
        ("id", "other::id::x"),
        ("spec", 1),
    ],
)
def test_damaged_data_is_refused(word: str, value: object) -> None:
    with pytest.raises(RecordError):
        from_data({**to_data(FOLLOWS), word: value})


def test_damaged_figures_are_refused() -> None:
    data = to_data(FOLLOWS)
    for word, value in (("worst", "large"), ("worst", True), ("unit", 3), ("sense", "sideways")):
        with pytest.raises(RecordError):
            from_data({**data, "figures": [{**data["figures"][0], word: value}]})


def test_json_text_refuses_nan() -> None:
    with pytest.raises(RecordError, match="cannot be written as JSON"):
        text_of({"x": math.nan})


def test_a_figure_without_a_frequency_is_written_without_one() -> None:
    assert "frequency" not in dumps(TRIMS)
    figure = Figure("gain margin", "ride", 5.1, 6.0, "dB", Sense.LOWER, at_frequency=3.2, frequency_unit="rad/s")
    again = loads(dumps(replace(TRIMS, figures=(figure,)))).figures[0]
    assert again == replace(figure, when=again.when)
    half = to_data(replace(TRIMS, figures=(figure,)))
    del half["figures"][0]["frequency_unit"]
    with pytest.raises(RecordError, match="frequency_unit"):
        from_data(half)
