"""What a sampled loop sees, against a simulation in plain time that keeps whole histories and shares no code."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
import pytest
from scipy.linalg import expm

from linverify.numerics.held_loop import Sampled, seen
from linverify.numerics.interconnect import Block

TINY = 1e-9


def block(A: Any, B: Any, C: Any, D: Any, prefix: str, inputs: tuple[str, ...], outputs: tuple[str, ...]) -> Block:
    A, B, C, D = (np.array(each, dtype=float, ndmin=2) for each in (A, B, C, D))
    return Block(A, B, C, D, tuple(f"{prefix}{k}" for k in range(len(A))), inputs, outputs)


def answered(seen_by: Block, values: Any) -> Any:
    """Readings (K, q) of a difference equation for outputs (K, m) of the loop."""
    x, found = np.zeros(len(seen_by.A)), []
    for v in values:
        found.append(seen_by.C @ x + seen_by.D @ v)
        x = seen_by.A @ x + seen_by.B @ v
    return np.array(found)


class Plain:
    """A hybrid simulation: outputs of all loops as lists of (time, value), the plant exact between any two events."""

    def __init__(self, plant: Block, outer: Sampled, inside: list[Sampled], values: Any) -> None:
        self.plant, self.outer, self.inside, self.values = plant, outer, inside, values
        self.loops = [outer, *inside]
        self.sent: dict[tuple[str, int], list[tuple[float, float]]] = {
            (one.name, j): [] for one in self.loops for j in range(len(one.moves))
        }
        self.state = {one.name: np.zeros(len(one.controller.A)) for one in inside}
        self.track: list[tuple[float, Any]] = []  # measured, just before each event

    def held(self, loop: Sampled, j: int, t: float) -> float:
        late = [value for when, value in self.sent[loop.name, j] if when + loop.late[j] <= t + TINY]
        return late[-1] if late else 0.0

    def inputs(self, t: float) -> Any:
        u = np.zeros(len(self.plant.inputs))
        for one in self.loops:
            for j, name in enumerate(one.moves):
                if name in self.plant.inputs:
                    u[self.plant.inputs.index(name)] += self.held(one, j, t)
        return u

    def events(self, end: float) -> list[float]:
        found = {0.0}
        for one in self.loops:
            for k in range(round(end / one.step) + 1):
                for shift in (0.0, *one.late, *(-old for old in one.old)):
                    found.add(k * one.step + shift)
        kept: list[float] = []
        for t in sorted(found):
            if 0.0 <= t <= end + TINY and (not kept or t - kept[-1] > TINY):
                kept.append(t)
        return kept

    def measured_at(self, t: float) -> Any:
        for when, values in self.track:
            if abs(when - t) <= TINY:
                return values
        return np.zeros(len(self.plant.outputs))  # before the beginning

    def read(self, loop: Sampled, t: float) -> Any:
        rows = [self.plant.outputs.index(name) for name in loop.reads]
        return np.array([self.measured_at(t - old)[row] for row, old in zip(rows, loop.old, strict=True)])

    def run(self) -> Any:
        end = self.outer.step * (len(self.values) - 1)
        times, x, u, readings = self.events(end), np.zeros(len(self.plant.A)), np.zeros(len(self.plant.inputs)), []
        before = 0.0
        for t in times:
            n, m = self.plant.B.shape
            whole = np.zeros((n + m, n + m))
            whole[:n] = np.hstack([self.plant.A, self.plant.B])
            x = (expm(whole * (t - before)) @ np.concatenate([x, u]))[:n]
            before = t
            self.track.append((t, self.plant.C @ x + self.plant.D @ u))
            for one in self.loops:
                if abs(t / one.step - round(t / one.step)) > TINY:
                    continue
                y = self.read(one, t)
                if one is self.outer:
                    readings.append(y)
                    self.send(one, t, self.values[round(t / one.step)])
                else:
                    error = self.set_points(one, t) - y
                    k, s = one.controller, self.state[one.name]
                    self.send(one, t, k.C @ s + k.D @ error)
                    self.state[one.name] = k.A @ s + k.B @ error
            u = self.inputs(t)
        return np.array(readings)

    def set_points(self, loop: Sampled, t: float) -> Any:
        found = np.zeros(len(loop.reads))
        for one in self.loops:
            for j, name in enumerate(one.moves):
                for i, signal in enumerate(loop.reads):
                    if name == f"{loop.name}.set_point.{signal}":
                        found[i] += self.held(one, j, t)
        return found

    def send(self, loop: Sampled, t: float, values: Any) -> None:
        for j, value in enumerate(np.atleast_1d(values)):
            self.sent[loop.name, j].append((t, float(value)))


def controller(name: str, n: int, reads: tuple[str, ...], count: int, rng: Any) -> Block:
    A = rng.normal(size=(n, n))
    A *= 0.7 / max(1e-9, np.abs(np.linalg.eigvals(A)).max()) if n else 1.0
    return Block(
        A, rng.normal(size=(n, len(reads))), rng.normal(size=(count, n)), 0.3 * rng.normal(size=(count, len(reads))),
        tuple(f"{name}.{k}" for k in range(n)), tuple(f"{name}.set_point.{one}" for one in reads),
        tuple(f"{name}.out{k}" for k in range(count)),
    )  # fmt: skip


@pytest.mark.parametrize("seed", range(12))
@pytest.mark.parametrize("feed", [0.0, 0.4])
def test_delays_and_inner_loops_are_exact(seed: int, feed: float) -> None:
    rng = np.random.default_rng(seed)
    n = 4
    A = rng.normal(size=(n, n)) - 1.5 * np.eye(n)
    plant = block(
        A, rng.normal(size=(n, 2)), rng.normal(size=(3, n)), feed * rng.normal(size=(3, 2)), "x", ("u1", "u2"),
        ("a", "b", "c"),
    )  # fmt: skip
    H, ratio = 0.2, int(rng.integers(1, 4))
    delays = [0.0, 0.07, 0.2, 0.31, 0.4]
    inner = Sampled(
        "inner", H / ratio, controller("inner", 2, ("b",), 1, rng), ("b",), ("u2",), (float(rng.choice(delays)),),
        (float(rng.choice(delays)),),
    )  # fmt: skip
    other = Sampled(
        "other", H, controller("other", 1, ("c",), 1, rng), ("c",), ("u1",), (float(rng.choice(delays)),), (0.0,)
    )
    outer = Sampled(
        "outer", H, controller("outer", 0, ("a", "c"), 2, rng), ("a", "c"), ("u1", "inner.set_point.b"),
        (float(rng.choice(delays)), float(rng.choice(delays))), (float(rng.choice(delays)), 0.0),
    )  # fmt: skip
    values = rng.normal(size=(15, 2))
    found = answered(seen(plant, outer, [inner, other], None), values)
    plain = Plain(plant, outer, [inner, other], values).run()
    assert np.abs(plain).max() > 0.01
    assert found == pytest.approx(plain, rel=1e-8, abs=1e-9 * np.abs(plain).max())


def test_a_difference_equation_is_lifted_to_the_slower_loop() -> None:
    plant = block([[0.9, 0.1], [0.0, 0.8]], [[0.0], [1.0]], [[1.0, 0.0]], [[0.0]], "x", ("u",), ("y",))
    outer = Sampled("outer", 0.3, controller("outer", 0, ("y",), 1, np.random.default_rng(0)), ("y",), ("u",),
                    (0.1,), (0.0,))  # fmt: skip
    found = seen(plant, outer, [], 0.1)
    x, u, readings = np.zeros(2), [0.0] * 31, []
    for k in range(30):
        if k % 3 == 0:
            readings.append(x[0])
            for later in range(k + 1, min(k + 4, 31)):
                u[later] = 1.0
        x = plant.A @ x + plant.B[:, 0] * u[k]
    assert answered(found, np.ones((10, 1)))[:, 0] == pytest.approx(readings, rel=1e-12)


def test_rates_that_do_not_fit_are_refused() -> None:
    plant = block([[-1.0]], [[1.0]], [[1.0]], [[0.0]], "x", ("u",), ("y",))
    make = controller("one", 0, ("y",), 1, np.random.default_rng(0))
    outer = Sampled("outer", 0.3, make, ("y",), ("u",), (0.0,), (0.0,))
    with pytest.raises(ValueError, match="no whole multiple of that of inner"):
        seen(plant, outer, [Sampled("inner", 0.2, make, ("y",), ("u",), (0.0,), (0.0,))], None)
    with pytest.raises(ValueError, match="no whole multiple of that of inner"):
        seen(plant, outer, [Sampled("inner", 0.6, make, ("y",), ("u",), (0.0,), (0.0,))], None)
    with pytest.raises(ValueError, match="no whole multiple of the step"):
        seen(plant, outer, [], 0.2)


def test_a_hold_costs_half_a_sample() -> None:
    """An integrator behind a hold: z-transform h / (z - 1), by hand."""
    plant = block([[0.0]], [[1.0]], [[1.0]], [[0.0]], "x", ("u",), ("y",))
    make = controller("one", 0, ("y",), 1, np.random.default_rng(0))
    found = seen(plant, Sampled("outer", 0.1, make, ("y",), ("u",), (0.0,), (0.0,)), [], None)
    z = np.exp(0.7j)
    shown = found.C @ np.linalg.solve(z * np.eye(len(found.A)) - found.A, found.B) + found.D
    assert shown[0, 0] == pytest.approx(0.1 / (z - 1.0), rel=1e-12)
    assert math.isclose(abs(found.A[0, 0]), 1.0)
