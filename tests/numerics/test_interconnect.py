"""Blocks wired by name: against transfer functions evaluated by hand."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from linverify.numerics.interconnect import Block, IllPosedError, Wire, connected, solved


def block(name: str, n: int, m: int, k: int, rng: Any) -> Block:
    return Block(
        rng.normal(size=(n, n)) - 2.0 * np.eye(n), rng.normal(size=(n, m)), rng.normal(size=(k, n)),
        0.3 * rng.normal(size=(k, m)), tuple(f"{name}.x{i}" for i in range(n)),
        tuple(f"{name}.u{i}" for i in range(m)), tuple(f"{name}.y{i}" for i in range(k)),
    )  # fmt: skip


def gains(matrix: Any, inputs: tuple[str, ...], outputs: tuple[str, ...]) -> Block:
    k, m = matrix.shape
    return Block(np.zeros((0, 0)), np.zeros((0, m)), np.zeros((k, 0)), matrix, (), inputs, outputs)


def at(one: Block, s: complex) -> Any:
    return one.C @ np.linalg.solve(s * np.eye(len(one.A)) - one.A, one.B) + one.D


@pytest.mark.parametrize("seed", range(5))
def test_a_ring_of_blocks_answers_as_its_parts_do(seed: int) -> None:
    rng, s = np.random.default_rng(seed), 0.3 + 1.7j
    one, two, three = block("a", 3, 2, 2, rng), block("b", 2, 1, 1, rng), gains(
        rng.normal(size=(1, 2)), ("c.u0", "c.u1"), ("c.y0",)
    )  # fmt: skip
    wires = [Wire("a.y0", "b.u0", 2.0), Wire("b.y0", "c.u0"), Wire("a.y1", "c.u1", -1.0), Wire("c.y0", "a.u0"),
             Wire("b.y0", "a.u0", 0.5)]  # fmt: skip
    whole = connected([one, two, three], wires)
    G = np.zeros((4, 5), dtype=complex)  # outputs a0 a1 b0 c0, inputs a0 a1 b0 c0 c1
    G[:2, :2], G[2, 2], G[3, 3:] = at(one, s), at(two, s)[0, 0], at(three, s)[0]
    W = np.zeros((5, 4))
    W[2, 0], W[3, 2], W[4, 1], W[0, 3], W[0, 2] = 2.0, 1.0, -1.0, 1.0, 0.5
    assert at(whole, s) == pytest.approx(np.linalg.solve(np.eye(4) - G @ W, G), rel=1e-10)
    part = whole.picked(["c.u1", "a.u1"], ["b.y0"])
    assert at(part, s) == pytest.approx(np.linalg.solve(np.eye(4) - G @ W, G)[2:3, [4, 1]], rel=1e-10)


def test_negative_feedback() -> None:
    one = block("a", 3, 1, 1, np.random.default_rng(3))
    L = at(one, 1.0j)[0, 0]
    assert at(connected([one], [Wire("a.y0", "a.u0", -1.0)]), 1.0j)[0, 0] == pytest.approx(L / (1.0 + L), rel=1e-10)


def test_a_cycle_without_a_solution_is_refused_whatever_the_units() -> None:
    for size in (1.0, 1e6, 1e-9):
        one = gains(np.array([[0.0, size], [1.0 / size, 0.0]]), ("p", "q"), ("r", "s"))
        with pytest.raises(IllPosedError):
            connected([one], [Wire("r", "p"), Wire("s", "q")])
        other = gains(np.array([[0.0, 0.5 * size], [1.0 / size, 0.0]]), ("p", "q"), ("r", "s"))
        assert connected([other], [Wire("r", "p"), Wire("s", "q")]).D[0, 1] == pytest.approx(size, rel=1e-12)


def test_names_are_checked() -> None:
    one = block("a", 1, 1, 1, np.random.default_rng(0))
    with pytest.raises(ValueError, match=r"two blocks have a signal called a\.u0"):
        connected([one, one], [])
    with pytest.raises(ValueError, match="no block has both ends"):
        connected([one], [Wire("b.y0", "a.u0")])


def test_equations_of_feedthrough() -> None:
    assert solved(np.array([[1.0]]), np.array([[3.0]])) == pytest.approx(1.5)
    with pytest.raises(IllPosedError):
        solved(np.array([[-1.0]]), np.array([[3.0]]))


@pytest.mark.parametrize("gain", [1e6, 1e9, 1e15])
def test_no_gain_is_too_large_where_nothing_feeds_through_in_a_circle(gain: float) -> None:
    plant = Block(np.zeros((1, 1)), np.array([[1.0 / gain]]), np.eye(1), np.zeros((1, 1)), ("x",), ("u",), ("y",))
    wires = [Wire("y", "e", -1.0), Wire("v", "u")]
    closed = connected([plant, gains(np.array([[gain]]), ("e",), ("v",))], wires)
    assert closed.A[0, 0] == pytest.approx(-1.0, rel=1e-12)
    assert solved(np.array([[0.0, gain], [0.0, 0.0]]), np.eye(2)) == pytest.approx(
        np.array([[1.0, -gain], [0.0, 1.0]]), rel=1e-12
    )
