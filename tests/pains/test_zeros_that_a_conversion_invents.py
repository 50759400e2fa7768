"""Turning states into polynomials invents zeros where a chain of lags has none, some of them right of the axis."""

from __future__ import annotations

import numpy as np
import pytest
from margins.bench import transfer
from margins.oracle import truth
from margins.response import Loop

from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.signals import Signals
from linverify.core.verdict import Status
from linverify.numerics.margins import margins
from linverify.numerics.zeros import transmission_zeros

POLES = np.array([0.5, 1.0, 2.0, 100.0, 200.0, 500.0])  # of six lags in a row: no zeros


def turned(seed: int, gain: float) -> Loop:
    """The chain, in states that are mixed and scaled."""
    generator = np.random.default_rng(seed)
    A = np.diag(-POLES) + np.diag(POLES[1:], -1)
    B, C = np.eye(6)[0] * POLES[0], gain * np.eye(6)[5]
    turn = np.linalg.qr(generator.normal(size=(6, 6)))[0]
    scale = 10.0 ** generator.uniform(-2.0, 2.0, 6)
    return Loop(turn @ A @ turn.T * scale[:, None] / scale, turn @ B * scale, C @ turn.T / scale, 0.0)


def model(loop: Loop) -> LocalModel:
    names = [Signals(tuple(f"{p}{i}" for i in range(c)), ("1",) * c) for p, c in (("x", loop.n), ("u", 1), ("y", 1))]
    at = OperatingPoint(np.zeros(loop.n), np.zeros(1), np.zeros(1), np.zeros(loop.n), 0.0, *names)
    return LocalModel(loop.A, loop.B[:, None], loop.C[None, :], np.zeros((1, 1)), *names, at)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_a_chain_of_lags_has_no_zeros(seed: int, record_property: pytest.RecordProperty) -> None:
    """python-control 0.10.2 without slycot finds five, near 1e4 to 1e5, two or three of them right of the axis."""
    import control

    loop = turned(seed, 3.0)
    assert transmission_zeros(model(loop)).size == 0
    found, exact = margins(transfer(loop)), truth(loop)
    assert found.stable
    for name in ("gain_up", "phase", "delay", "sensitivity", "disk"):
        assert getattr(found, name).value == pytest.approx(getattr(exact, name), rel=1e-6), name
    theirs = control.ss2tf(control.ss(loop.A, loop.B[:, None], loop.C[None, :], 0.0)).zeros()
    record_property("python-control", str(np.round(theirs).tolist()))
    assert theirs.size >= 4
    assert theirs.real.max() > 1e3


def test_far_above_the_poles_the_response_still_falls() -> None:
    """Five invented zeros turn the fall by six decades a decade into one by one."""
    import control

    loop = turned(2, 3.0)
    w = np.array([1e6])
    exact = abs(complex(loop.exact(w)[0][0]))
    assert exact == pytest.approx(3.0 * np.prod(POLES) / 1e36, rel=1e-6)
    polynomial = control.ss2tf(control.ss(loop.A, loop.B[:, None], loop.C[None, :], 0.0))
    assert abs(polynomial(1j * w[0])) > 1e3 * exact


def test_a_gate_on_minimum_phase_passes(judged) -> None:
    loop = turned(2, 3.0)
    plant = f"""
    A, B, C = np.array({loop.A.tolist()}), np.array({loop.B.tolist()}), np.array({loop.C.tolist()})
    plant = Plant(
        states={{f"x{{i}}": "" for i in range(6)}},
        inputs={{"u": ""}},
        outputs={{"y": ""}},
        dynamics=lambda t, x, u, p: A @ x + np.multiply.outer(B, u[0]),
        measurement=lambda t, x, u, p: np.stack([np.tensordot(C, x, 1)]),
    )
    """
    spec = """
    operating_points: {rest: {hold: {u: 0}}}
    modes: [{minimum_phase: true, outputs: [y]}]
    """
    found = judged(plant, spec)["rest.modes"]
    assert found.status is Status.PASS, found.reason
