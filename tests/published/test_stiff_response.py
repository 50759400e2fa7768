"""Robertson's kinetics, simulated as a drive without inputs from an offset, against the published table."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from linverify.core.bound import BoundPlant
from linverify.core.drive import Drive
from linverify.core.model import LocalModel, OperatingPoint
from linverify.core.outcome import Outcome
from linverify.core.plant import Plant
from linverify.numerics.independent import run_independent
from linverify.numerics.simulate import Fidelity, Rig, run, run_alone

# H. H. Robertson 1966; printed output of the SUNDIALS cvRoberts example (row .4 seen, the others from memory)
PRINTED = {
    0.4: (9.8517e-1, 3.3864e-5, 1.4794e-2),
    4.0: (9.0553e-1, 2.2406e-5, 9.4452e-2),
    40.0: (7.1582e-1, 9.1851e-6, 2.8417e-1),
    400.0: (4.5054e-1, 3.2231e-6, 5.4946e-1),
    4000.0: (1.8320e-1, 8.9429e-7, 8.1680e-1),
}
# derived: Radau at a relative tolerance of 1e-10, no published source
DERIVED = {
    0.4: (9.85172114e-1, 3.38639538e-5, 1.47940222e-2),
    4.0: (9.05518679e-1, 2.24047569e-5, 9.44589167e-2),
    40.0: (7.15827069e-1, 9.18553476e-6, 2.84163746e-1),
    400.0: (4.50518668e-1, 3.22290144e-6, 5.49478109e-1),
    4000.0: (1.83202258e-1, 8.94237125e-7, 8.16796848e-1),
}
FIDELITY = Fidelity(4, 1e-5)


def kinetics(t: float, x: Any, u: Any, p: Any) -> Any:
    first = 0.04 * x[0] - 1e4 * x[1] * x[2] - u[0]
    second = 3e7 * x[1] ** 2
    return np.stack([-first, first - second, second])


def rig() -> Rig:
    """About the steady state (0, 0, 1), whose Jacobian has the eigenvalues 0, 0 and -10000.04."""
    plant = BoundPlant(Plant(states={"a": "1", "b": "1", "c": "1"}, inputs={"feed": "1/s"}, dynamics=kinetics))
    generator = np.random.default_rng(0)
    plant.detect(0.0, generator.uniform(0, 1, (3, 5)), generator.uniform(0, 1, (1, 5)))
    x, zero = np.array([0.0, 0.0, 1.0]), np.zeros(3)
    point = OperatingPoint(x, np.zeros(1), x, zero, 0.0, plant.states, plant.inputs, plant.outputs)
    A = np.array([[-0.04, 1e4, 0.0], [0.04, -1e4, 0.0], [0.0, 0.0, 0.0]])
    B = np.array([[1.0], [-1.0], [0.0]])
    model = LocalModel(A, B, np.eye(3), np.zeros((3, 1)), plant.states, plant.inputs, plant.outputs, point)
    return Rig(plant, point, model, ("a", "b", "c"), {}, np.array([1e-3, 1e-8, 1e-3]))


def start(end: float) -> Drive:
    """Eight intervals up to `end`, from (1, 0, 0)."""
    return Drive(end / 8, ("feed",), np.zeros((8, 1)), "held", {"a": 1.0, "c": -1.0})


@pytest.mark.parametrize("end", sorted(PRINTED))
def test_concentrations_are_met(end: float) -> None:
    runs = run(rig(), [start(end)], FIDELITY)
    assert runs.method == "Rosenbrock 4(3)"
    assert runs.outcomes == (Outcome.DONE,)
    found = runs.plant[:, -1, -1, 0] + np.array([0.0, 0.0, 1.0])
    assert found == pytest.approx(PRINTED[end], rel=5e-4)
    assert found == pytest.approx(DERIVED[end], rel=1e-6)
    assert found.sum() == pytest.approx(1.0, abs=1e-9)


def test_local_model_keeps_what_reacts_no_further() -> None:
    """Poles 0, 0, -10000.04: the linear side moves the first two states to their fast balance at once."""
    runs = run_alone(rig(), start(4.0), FIDELITY)
    fast = 1.0 / (1.0 + 0.04 / 1e4)
    assert runs.model[0, -1, -1, 0] == pytest.approx(fast, rel=1e-11)
    assert runs.model[1, -1, -1, 0] == pytest.approx(fast * 0.04 / 1e4, rel=1e-9)
    assert runs.model[2, -1, -1, 0] == -1.0


def test_second_opinion_agrees() -> None:
    runs = run_independent(rig(), start(40.0), FIDELITY)
    assert runs.method == "scipy Radau"
    found = runs.plant[:, -1, -1, 0] + np.array([0.0, 0.0, 1.0])
    assert found == pytest.approx(DERIVED[40.0], rel=1e-6)


def test_halved_grid_tells_the_error() -> None:
    coarse, fine = (run_alone(rig(), start(40.0), f) for f in (Fidelity(4, 1e-2), Fidelity(4, 1e-2).finer()))
    scale = np.array([1.0, 1e-5, 1.0])[:, np.newaxis, np.newaxis]
    exact = run_alone(rig(), start(40.0), Fidelity(32, 1e-5)).plant[:, :, ::8, 0]
    told = np.abs(coarse.plant[..., 0] - fine.plant[:, :, ::2, 0]) / scale
    true = np.abs(coarse.plant[..., 0] - exact) / scale
    assert 2 * told.max() >= true.max()
