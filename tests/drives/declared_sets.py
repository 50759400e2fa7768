"""Declared sets that several tests of drives share."""

from __future__ import annotations

import numpy as np

from linverify.core.case import Course
from linverify.core.model import frozen_array
from linverify.drives.declared import Limits


def limits(course: Course = "held", *, rate: float = np.inf, offsets: bool = True, intervals: int = 24) -> Limits:
    """Two inputs, one of them one-sided, and one offset; `rate`: largest change of the first from row to row."""
    return Limits(
        0.1,
        intervals,
        course,
        ("flap", "reflux"),
        frozen_array([-1.5, 0.0]),
        frozen_array([1.0, 0.5]),
        frozen_array([rate, np.inf]),
        ("pitch",) if offsets else (),
        frozen_array([-0.2] if offsets else []),
        frozen_array([0.3] if offsets else []),
    )
