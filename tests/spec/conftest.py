"""The language as it will be: words that can be read, and are refused while their checks are built, are read."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from linverify.spec.words import SPEC_WORDS, Kind, Row


@pytest.fixture
def whole_language() -> Iterator[None]:
    """Words with a reader are available during the test."""
    refused = [row for row in _rows(SPEC_WORDS) if not row.available and row.kind is not Kind.NONE]
    for row in refused:
        object.__setattr__(row, "available", True)
    yield
    for row in refused:
        object.__setattr__(row, "available", False)


def _rows(rows: tuple[Row, ...]) -> Iterator[Row]:
    for row in rows:
        yield row
        yield from _rows(row.of)
