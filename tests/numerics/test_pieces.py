"""How an interval that is cut into pieces is sampled: densely enough, and twice as densely for twice the nodes."""

from __future__ import annotations

import numpy as np
import pytest

from linverify.numerics.pieces import _shared


@pytest.mark.parametrize("nodes", [4, 8, 16, 64])
@pytest.mark.parametrize("shares", [(1.0,), (0.5, 0.5), (0.63, 0.37), (0.1,) * 10, (0.05,) * 18 + (0.1,)])
def test_no_sub_interval_is_longer_than_those_of_an_uncut_interval(nodes: int, shares: tuple[float, ...]) -> None:
    found = _shared(nodes, np.array(shares))
    assert max(shares) / found <= 1.0 / nodes + 1e-12
    assert _shared(2 * nodes, np.array(shares)) == 2 * found


def test_a_piece_among_many_is_not_read_in_between() -> None:
    assert _shared(4, np.full(10, 0.1)) == 1
    assert _shared(4, np.full(2, 0.5)) == 2
    assert _shared(4, np.array([1.0])) == 4
