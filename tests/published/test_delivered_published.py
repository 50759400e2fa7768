"""Published matrices as delivered models: they agree with plants written from the equations, slips of them do not."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from truth import kundur, mariner, quadruple_tank

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Case, CheckAsk, Options, TrimAsk
from linverify.core.delivered import AgreeAsk, DeliveredModel, GainsAsk, Keep, LocalAsk, ResponseAsk
from linverify.core.errors import Place
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict
from linverify.numerics.gains import relative_gains, static_gain
from linverify.numerics.pair import paired
from linverify.numerics.zeros import transmission_zeros

PLACE = Place("published.yaml", 1, 1)


def _case(plant: Plant, hold: Mapping[str, float], start: Mapping[str, float], nominal: Mapping[str, float]) -> Case:
    find = tuple(name for name in (*plant.states, *plant.inputs) if name not in hold)
    return Case(
        "published.yaml", "point", "Published", plant, PLACE, TrimAsk(hold=hold, find=find, start=start),
        plant.defaults, {}, nominal, (CheckAsk("agrees", PLACE),),
    )  # fmt: skip


def _agrees(case: Case, given: DeliveredModel, agree: AgreeAsk, keep: Keep | None = None) -> Verdict:
    handed = replace(case, local=LocalAsk(given, keep, agree))
    return judge_study(Study(handed, Options()), CheckAsk("agrees", PLACE))


def _delivered(plant: Plant, A: Any, B: Any, C: Any = None, **changes: Any) -> DeliveredModel:
    A, B = np.array(A, dtype=float), np.array(B, dtype=float)
    C = np.eye(len(A)) if C is None else np.array(C, dtype=float)
    outputs = tuple(plant.outputs or ())
    known = {"states": tuple(plant.states), "inputs": tuple(plant.inputs), "outputs": outputs, "digits": 4}
    return DeliveredModel("printed.json", PLACE, A, B, C, np.zeros((len(C), B.shape[1])), **{**known, **changes})


# K. H. Johansson, IEEE Trans. Control Systems Technology 8(3), 2000. P-: time constants and transfer matrix seen in
# public transcriptions; P+ matrix and all zeros: value from memory
TANKS = {
    "minus": (quadruple_tank.minus, (62.0, 90.0, 23.0, 30.0), (3.0, 3.0), [[2.6, 1.5], [1.4, 2.8]], (-0.060, -0.018)),
    "plus": (quadruple_tank.plus, (63.0, 91.0, 39.0, 56.0), (3.15, 3.15), [[1.5, 2.5], [2.5, 1.6]], (-0.057, 0.013)),
}


def _tank_case(plant: Plant, volts: tuple[float, float]) -> Case:
    levels = dict(zip(plant.states, quadruple_tank.levels(plant, *volts), strict=True))
    sizes = {"h1": 2.0, "h2": 2.0, "h3": 1.0, "h4": 1.0, "v1": 0.5, "v2": 0.5, "y1": 1.0, "y2": 1.0}
    return _case(plant, dict(zip(plant.inputs, volts, strict=True)), levels, sizes)


def _tank_model(plant: Plant, T: tuple[float, ...]) -> DeliveredModel:
    """A from the printed time constants, with the structure A13 = A3 / (A1 T3), A24 = A4 / (A2 T4)."""
    A1, A2, A3, A4 = quadruple_tank.AREAS
    p = plant.defaults
    A = np.diag([-1 / value for value in T])
    A[0, 2], A[1, 3] = A3 / (A1 * T[2]), A4 / (A2 * T[3])
    g1, g2, k1, k2 = p["gamma1"], p["gamma2"], p["k1"], p["k2"]
    B = [[g1 * k1 / A1, 0], [0, g2 * k2 / A2], [0, (1 - g2) * k2 / A3], [(1 - g1) * k1 / A4, 0]]
    return _delivered(plant, A, B, 0.5 * np.eye(2, 4), digits=2)


@pytest.mark.parametrize("kind", TANKS)
def test_the_printed_tanks_agree_to_their_digits_and_not_further(kind: str):
    plant, T, volts, *_ = TANKS[kind]
    case, model = _tank_case(plant, volts), _tank_model(plant, T)
    # 4 % of the time constants is what the paper's own rounding and measured levels leave
    assert _agrees(case, model, AgreeAsk(entries=0.04, place=PLACE)).status is Status.PASS
    found = _agrees(case, model, AgreeAsk(entries=0.002, place=PLACE))
    assert found.status is Status.FAIL
    band = ResponseAsk(0.05, 1e-4, 1.0, 0.01, PLACE)
    assert _agrees(case, model, AgreeAsk(response=band, place=PLACE)).status is Status.PASS


@pytest.mark.parametrize("kind", TANKS)
def test_the_tanks_have_the_printed_gains_zeros_and_relative_gains(kind: str):
    plant, T, volts, gains, zeros = TANKS[kind]
    case = _tank_case(plant, volts)
    reference = Study(case, Options()).reference()
    gain = static_gain(reference)
    assert gain is not None
    assert gain[0] == pytest.approx(np.array(gains), rel=0.03)
    found = np.sort(transmission_zeros(reference).real)
    assert found == pytest.approx(np.array(zeros), abs={"minus": 2e-3, "plus": 1e-3}[kind])
    # lambda = gamma1 gamma2 / (gamma1 + gamma2 - 1), exact whatever the levels are
    g1, g2 = plant.defaults["gamma1"], plant.defaults["gamma2"]
    exact = g1 * g2 / (g1 + g2 - 1)
    assert exact == pytest.approx({"minus": 1.4, "plus": -0.63565}[kind], abs=5e-6)
    assert relative_gains(gain[0])[0, 0] == pytest.approx(exact, rel=1e-7)
    delivered = paired(_tank_model(plant, T), reference, case.nominal).delivered
    assert np.sort(transmission_zeros(delivered).real) == pytest.approx(
        np.array({"minus": (-0.0595, -0.0173), "plus": (-0.0565, 0.0130)}[kind]), abs=6e-4
    )


def test_the_tanks_gains_are_judged_and_the_other_setting_is_not_taken_for_this_one():
    asked = AgreeAsk(gains=GainsAsk(PLACE, 0.05, 0.01, "same"), place=PLACE)
    minus, T, volts, *_ = TANKS["minus"]
    case = _tank_case(minus, volts)
    assert _agrees(case, _tank_model(minus, T), asked).status is Status.PASS
    plus, T, *_ = TANKS["plus"]
    found = _agrees(case, _tank_model(plus, T), asked)
    assert found.status is Status.FAIL
    assert "determinant of the static gain: delivered negative, plant positive" in found.reason
    assert "relative gain of v1 to y1: delivered -0.63565, plant 1.4" in found.reason


# P. Kundur, Power System Stability and Control, 1994, examples 12.2 and 12.3: values from memory
def test_the_classical_machine_agrees_with_its_printed_matrix():
    case = _case(kundur.classical, {"torque": kundur.POWER}, {"speed": 0.0, "angle": 0.9}, kundur.classical.nominal)
    given = _delivered(
        kundur.classical, [[0, -0.757 / 7], [377.0, 0]], [[1 / 7], [0]], x0={"angle": np.radians(49.92)}, digits=3
    )
    agree = AgreeAsk(point=1e-3, entries=2e-3, place=PLACE)
    assert _agrees(case, given, agree).status is Status.PASS
    # K_S at another angle: what a stale operating point looks like
    wrong = replace(given, A=np.array([[0, -0.70 / 7], [377.0, 0]]))
    found = _agrees(case, wrong, agree)
    assert found.status is Status.FAIL
    assert found.reason.startswith("A[speed, angle]: delivered -0.1, plant -0.108195489 +- ")


def test_the_machine_with_its_field_circuit_agrees_with_its_printed_rows():
    A = kundur.with_field()
    plant = Plant(
        states={"speed": "pu", "angle": "rad", "flux": "pu"},
        inputs={"torque": "pu"},
        dynamics=lambda t, x, u, p: (
            np.stack([*(A @ x + np.array([[1 / 7], [0], [0]]) @ u)])
            if np.ndim(x) == 2
            else A @ x + np.array([1 / 7, 0, 0]) * u[0]
        ),
    )
    sizes = {"speed": 0.01, "angle": 0.2, "flux": 0.1, "torque": 0.1}
    case = _case(plant, {"torque": 0.0}, dict.fromkeys(plant.states, 0.0), sizes)
    printed = [[0, -0.1092, -0.1236], [376.99, 0, 0], [0, -0.1938, -0.4229]]
    given = _delivered(plant, printed, [[1 / 7], [0], [0]])
    assert _agrees(case, given, AgreeAsk(entries=5e-4, place=PLACE)).status is Status.PASS
    poles = np.linalg.eigvals(np.array(printed))
    assert sorted(poles.real) == pytest.approx([-0.2038, -0.1095, -0.1095], abs=2e-3)
    slip = replace(given, A=given.A * np.where(np.arange(3) == 2, -1.0, 1.0))
    found = _agrees(case, slip, AgreeAsk(entries=5e-4, place=PLACE))
    assert found.details["cause"]["text"] == "slopes of rates by flux have the wrong sign"


# R. K. Heffley, W. F. Jewell, NASA CR-2144, 1972, in the form of B. Etkin, L. D. Reid, Dynamics of Flight, 1996: the
# longitudinal matrices seen in public transcriptions in 4 and 8 digits; the lateral one is a value from memory
LONG = [
    [-0.00686854, 0.01394951, 0, -32.2],
    [-0.09052721, -0.31506319, 773.97653828, 0],
    [0.00011865, -0.00102552, -0.42843608, 0],
    [0, 0, 1, 0],
]
LONG_PRINTED = [
    [-0.006868, 0.01395, 0, -32.2],
    [-0.09055, -0.3151, 773.98, 0],
    [0.0001187, -0.001026, -0.4285, 0],
    [0, 0, 1, 0],
]
ELEVATOR = [[-0.000187], [-17.85], [-1.158], [0]]
LATERAL = [[-0.0558, 0, -774, 32.2], [-0.003865, -0.4342, 0.4136, 0], [0.001086, -0.006112, -0.1458, 0], [0, 1, 0, 0]]
LONG_SIZES = {"u": 20.0, "w": 20.0, "q": 0.02, "theta": 0.05, "elevator": 0.02}


def _linear_plant(A: Any, states: Mapping[str, str], B: Any) -> Plant:
    A, B = np.array(A, dtype=float), np.array(B, dtype=float)
    return Plant(
        states=states, inputs={"elevator": "rad"}, dynamics=lambda t, x, u, p: (A @ x + B @ u).reshape(np.shape(x))
    )


def _airliner() -> tuple[Plant, Case]:
    plant = _linear_plant(LONG, {"u": "ft/s", "w": "ft/s", "q": "rad/s", "theta": "rad"}, ELEVATOR)
    return plant, _case(plant, {"elevator": 0.0}, dict.fromkeys(plant.states, 0.0), LONG_SIZES)


def test_the_airliner_in_four_digits_agrees_with_the_one_in_eight():
    plant, case = _airliner()
    given = _delivered(plant, LONG_PRINTED, ELEVATOR)
    assert _agrees(case, given, AgreeAsk(entries=1e-3, place=PLACE)).status is Status.PASS
    band = ResponseAsk(0.01, 0.01, 10.0, 0.01, PLACE)
    assert _agrees(case, given, AgreeAsk(response=band, place=PLACE)).status is Status.PASS


def test_the_sign_slip_of_one_transcription_is_found_and_named():
    # one of the public transcriptions has entry (3, 1) with the other sign
    plant, case = _airliner()
    slip = np.array(LONG_PRINTED)
    slip[2, 0] *= -1
    found = _agrees(case, _delivered(plant, slip, ELEVATOR), AgreeAsk(entries=1e-3, place=PLACE))
    assert found.status is Status.FAIL
    assert found.reason.startswith("A[q, u]: delivered -0.0001187, plant 0.00011865")
    assert found.details["cause"]["text"] == "the sign of A[q, u] is reversed"
    # the phugoid is what it ruins
    slow = found.details["poles_moved"][0]
    assert slow["plant"]["real"] == pytest.approx(-0.00328967, abs=1e-7)
    assert abs(slow["delivered"]["real"] - slow["plant"]["real"]) > 1e-3


def test_the_short_period_as_a_reduced_model_agrees():
    plant, case = _airliner()
    keep = Keep(("w", "q"), ("elevator",), ("w", "q"), "freeze", PLACE)
    A, B = np.array(LONG_PRINTED)[1:3, 1:3], np.array(ELEVATOR)[1:3]
    given = _delivered(plant, A, B, states=("w", "q"), outputs=("w", "q"))
    agree = AgreeAsk(entries=1e-3, response=ResponseAsk(0.01, 0.1, 10.0, 0.01, PLACE), place=PLACE)
    assert _agrees(case, given, agree, keep).status is Status.PASS
    poles = np.linalg.eigvals(A)
    assert sorted(poles.imag) == pytest.approx([-0.8891091, 0.8891091], abs=3e-4)
    wrong = _delivered(plant, A * [[1, 1], [1, 1.1]], B, states=("w", "q"), outputs=("w", "q"))
    found = _agrees(case, wrong, agree, keep)
    assert found.status is Status.FAIL
    assert "A[q, q]: delivered -0.47135, plant -0.428436" in found.reason


def test_the_lateral_airliner_has_its_published_roots_and_agrees_with_itself_reordered():
    states = {"v": "ft/s", "p": "rad/s", "r": "rad/s", "phi": "rad"}
    B = [[5.6], [-0.14], [-0.47], [0.0]]  # invented rudder column: only the roots are published
    plant = _linear_plant(LATERAL, states, B)
    sizes = {"v": 20.0, "p": 0.05, "r": 0.03, "phi": 0.1, "elevator": 0.02}
    case = _case(plant, {"elevator": 0.0}, dict.fromkeys(states, 0.0), sizes)
    order = [3, 1, 0, 2]
    names = tuple(list(states)[i] for i in order)
    A = np.array(LATERAL)[np.ix_(order, order)]
    given = _delivered(plant, A, np.array(B)[order], np.eye(4), states=names, outputs=names)
    found = _agrees(case, given, AgreeAsk(entries=1e-6, place=PLACE))
    assert found.status is Status.PASS
    roots = sorted(one["plant"]["real"] for one in found.details["poles_moved"])
    assert roots == pytest.approx([-0.56248, -0.033011, -0.033011, -0.0072973], abs=5e-6)


# M. S. Chislett, J. Stroem-Tejsen, report Hy-6, 1965; coefficients seen in a public transcription
def test_the_mariner_agrees_with_its_matrices_and_its_nomoto_model():
    ship = mariner.ship
    at_rest = ship.dynamics(0.0, np.zeros(3), np.zeros(1), ship.defaults)

    def balanced(t: float, x: Any, u: Any, p: Any) -> Any:
        # the published linearization is about the straight course, off which the small constant force pushes the ship
        return ship.dynamics(t, x, u, p) - at_rest.reshape(-1, *(1,) * (np.ndim(x) - 1))

    plant = replace(ship, dynamics=balanced)
    case = _case(plant, {"rudder": 0.0}, {"surge": 0.0, "sway": 0.0, "yaw_rate": 0.0}, ship.nominal)
    reference = Study(case, Options()).reference()
    sway = [plant.state_signals.index(name) for name in ("sway", "yaw_rate")]
    A = reference.A[np.ix_(sway, sway)]
    assert pytest.approx(np.array([[-3.69297790e-2, -2.58498991], [-1.01141572e-3, -1.00362409e-1]]), rel=1e-7) == A
    # r / delta = K (1 + T3 s) / ((1 + T1 s)(1 + T2 s)), value from memory; the sign is that of the rudder convention
    K, T1, T2, T3 = -0.185, 118.0, 7.8, 18.5
    second = _delivered(
        plant,
        [[0, 1], [-1 / (T1 * T2), -(T1 + T2) / (T1 * T2)]],
        [[0], [1]],
        [[K / (T1 * T2), K * T3 / (T1 * T2)]],
        states=None,
        digits=3,
    )
    band = ResponseAsk(0.03, 1e-4, 1.0, 0.0, PLACE)
    found = _agrees(case, second, AgreeAsk(response=band, place=PLACE))
    assert found.status is Status.PASS
    wrong = replace(second, C=-second.C)
    assert _agrees(case, wrong, AgreeAsk(response=band, place=PLACE)).status is Status.FAIL
