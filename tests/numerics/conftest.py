"""Strict arithmetic: what is not finite must be meant, never slip in."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest


@pytest.fixture(autouse=True)
def _strict_arithmetic() -> Iterator[None]:
    with np.errstate(divide="raise", over="raise", invalid="raise"):
        yield
