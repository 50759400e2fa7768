"""Words that are not in every version, let in for the tests that bind them."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from linverify.spec.words import CHECKS, LOCAL_MODEL_WORDS, SPEC_WORDS, Row, row_of

WORDS = (
    (LOCAL_MODEL_WORDS, "source"),
    (LOCAL_MODEL_WORDS, "keep"),
    (LOCAL_MODEL_WORDS, "others"),
    (LOCAL_MODEL_WORDS, "agree"),
    (SPEC_WORDS, "delays"),
    (SPEC_WORDS, "wraps"),
)


def _row(rows: tuple[Row, ...], word: str) -> Row:
    row = row_of(rows, word)
    assert row is not None
    return row


@pytest.fixture
def delivered_words() -> Iterator[None]:
    """Files behind `source`, and `keep`, `others`, `agree`, `delays`, `wraps`, whatever the table says."""
    rows = [_row(rows, word) for rows, word in WORDS]
    before = [(row.available, row.refusal) for row in rows]
    agrees = CHECKS["agrees"]
    for row in rows:  # the rows are frozen and shared by every reader; they are put back below
        object.__setattr__(row, "available", True)
        object.__setattr__(row, "refusal", "")
    CHECKS["agrees"] = True
    yield
    for row, (available, refusal) in zip(rows, before, strict=True):
        object.__setattr__(row, "available", available)
        object.__setattr__(row, "refusal", refusal)
    CHECKS["agrees"] = agrees
