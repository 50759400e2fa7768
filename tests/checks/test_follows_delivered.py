"""`follows` on models that were handed over or reduced: right ones pass, wrong ones fail, what cannot be is told."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from delivering import CART, PLACE, case, delivered, derived

from linverify.checks.judge import judge_study
from linverify.checks.replay import replayed_study
from linverify.checks.study import Study
from linverify.core.case import Amplitude, Band, Case, CheckAsk, DriveSet, Exits, Interval, Options, TrimAsk
from linverify.core.delivered import Delays, DeliveredModel, Keep, LocalAsk
from linverify.core.drive import Drive
from linverify.core.model import LocalModel
from linverify.core.plant import Plant
from linverify.core.verdict import Status, Verdict
from linverify.numerics.reduce import reduced
from linverify.numerics.sampled import sampled
from linverify.report import record

DRIVES = DriveSet("", 0.1, 40, {"command": Amplitude(-0.1, 0.1)}, count=40, search=10)
BAND = Band("place", "peak", 0.01)
KEPT = Keep(("place", "speed"), ("command",), ("place",), "settle", PLACE)
SOFT = {**CART.defaults, "hardening": 0.0}
QUICK = {**CART.defaults, "lag": 0.1}  # fast enough to be settled
SOFT_QUICK = {**QUICK, "hardening": 0.0}
SHAKEN = np.array([[2.0, 1.0, 0.0], [0.0, 1.0, -1.0], [1.0, 0.0, 3.0]])


def asked(
    model: DeliveredModel | None = None,
    *bands: Band,
    keep: Keep | None = None,
    drives: DriveSet = DRIVES,
    **changes: Any,
) -> Case:
    return case(
        None,
        local=LocalAsk(delivered=model, keep=keep),
        bands=bands or (BAND,),
        drives=(drives,),
        checks=(CheckAsk("follows", PLACE),),
        **changes,
    )


def verdict(one: Case) -> Verdict:
    return judge_study(Study(one, Options()), one.checks[0])


def turned(model: LocalModel) -> DeliveredModel:
    back = np.linalg.inv(SHAKEN)
    return delivered(replace(model, A=SHAKEN @ model.A @ back, B=SHAKEN @ model.B, C=model.C @ back), states=None)


def reordered(model: DeliveredModel) -> DeliveredModel:
    order = [2, 0, 1]
    return replace(
        model,
        A=model.A[np.ix_(order, order)],
        B=model.B[order],
        C=model.C[::-1][:, order],
        D=model.D[::-1],
        states=tuple(np.array(model.states)[order]),
        outputs=model.outputs[::-1],
    )


def wrong(model: LocalModel, block: str, place: tuple[int, int], factor: float) -> LocalModel:
    entries = np.array(getattr(model, block))
    entries[place] *= factor
    return replace(model, **{block: entries})


RIGHT: Mapping[str, Any] = {
    "as derived": lambda m: delivered(m),
    "printed to five digits": lambda m: delivered(m, digits=5),
    "reordered": lambda m: reordered(delivered(m)),
    "anonymous": turned,
    "sampled, held": lambda m: delivered(sampled(m, 0.05, "held"), step=0.05),
    "sampled at the instants": lambda m: delivered(sampled(m, 0.1, "held"), step=0.1),
}


@pytest.mark.parametrize("how", RIGHT)
def test_a_right_model_passes_and_a_wrong_one_fails_however_it_was_delivered(how: str) -> None:
    right = derived()
    assert verdict(asked(RIGHT[how](right))).status is Status.PASS
    found = verdict(asked(RIGHT[how](wrong(right, "A", (1, 0), 1.4))))
    assert found.status is Status.FAIL
    assert found.figures[0].worst - found.figures[0].error > 0.01
    assert record.loads(record.dumps(found)).details.keys() == found.details.keys()


@pytest.mark.parametrize("course", ["held", "straight"])
def test_a_model_sampled_for_straight_inputs_is_right_for_straight_drives(course: Any) -> None:
    band = Band("place", "peak", 2e-4)
    states = Band("speed", "peak", 2e-3)
    local = sampled(derived(parameters=SOFT), 0.1, course)
    drives = replace(DRIVES, course="straight")
    one = asked(delivered(local, step=0.1, course=course), band, states, drives=drives, parameters=SOFT)
    found = verdict(one)
    assert found.status is (Status.PASS if course == "straight" else Status.FAIL), found.reason
    assert any("takes held inputs" in note for note in found.notes) == (course == "held")


def test_a_reduced_model_is_compared_on_what_it_has() -> None:
    found = verdict(asked(None, Band("place", "peak", 0.04), keep=KEPT, parameters=QUICK))
    assert found.status is Status.PASS, found.reason
    tight = verdict(asked(None, Band("place", "peak", 0.004), keep=KEPT, parameters=QUICK))
    assert tight.status is Status.FAIL
    frozen = replace(KEPT, others="freeze")
    still = verdict(asked(None, Band("place", "peak", 0.04), keep=frozen, parameters=QUICK))
    assert still.status is Status.FAIL  # the winch is all that moves the cart


def test_settling_what_is_not_fast_enough_is_undecided_with_the_poles() -> None:
    found = verdict(asked(None, keep=KEPT))
    assert found.status is Status.UNDECIDED
    assert "pole -4 left out" in found.reason


def test_the_reference_of_a_reduced_delivery_is_the_reduced_derived_model() -> None:
    local = reduced(derived(parameters=QUICK), KEPT).model
    assert local is not None
    one = asked(delivered(local), Band("place", "peak", 0.04), keep=KEPT, parameters=QUICK)
    study = Study(one, Options())
    assert study.unmet("reference") == ""
    assert np.array_equal(study.reference().A, local.A)
    assert np.array_equal(study.model().A, local.A)
    assert study.derived().states.names == ("place", "speed", "winch")
    assert verdict(one).status is Status.PASS


# the split of errors


def parts_of(found: Verdict) -> dict[str, Any]:
    (parts,) = found.details["error_split"]
    assert parts["nonlinearity"] + parts["reduction"] + parts["delivered"] == pytest.approx(parts["total"], abs=1e-12)
    assert abs(parts["total"]) == pytest.approx(found.figures[0].worst, rel=1e-9)
    return dict(parts)


def test_an_error_of_a_linear_plant_is_all_delivered_numbers() -> None:
    bad = wrong(derived(parameters=SOFT), "A", (1, 0), 1.4)
    found = verdict(asked(delivered(bad), parameters=SOFT))
    parts = parts_of(found)
    assert parts["delivered"] == pytest.approx(parts["total"], rel=1e-4)
    assert parts["reduction"] == 0.0
    assert any("from the delivered numbers" in note for note in found.notes)


def test_an_error_of_a_right_model_is_all_nonlinearity() -> None:
    parts = parts_of(verdict(asked(delivered(derived()))))
    assert parts["nonlinearity"] == pytest.approx(parts["total"], rel=1e-6)


def test_an_error_of_a_reduced_model_is_told_apart_from_nonlinearity() -> None:
    parts = parts_of(verdict(asked(None, Band("place", "peak", 0.04), keep=KEPT, parameters=SOFT_QUICK)))
    assert parts["reduction"] == pytest.approx(parts["total"], rel=1e-4)
    assert parts["delivered"] == 0.0
    both = parts_of(verdict(asked(None, Band("place", "peak", 0.04), keep=KEPT, parameters=QUICK)))
    assert abs(both["nonlinearity"]) > 1e-4
    assert abs(both["reduction"]) > 1e-4


def test_a_derived_model_has_nothing_to_split() -> None:
    assert "error_split" not in verdict(asked(None)).details


# what cannot be compared is told, never passed over


def without(model: DeliveredModel, output: str) -> DeliveredModel:
    rows = [row for row, name in enumerate(model.outputs) if name != output]
    return replace(
        model, C=model.C[rows], D=model.D[rows], outputs=tuple(name for name in model.outputs if name != output)
    )


UNFIT: dict[str, tuple[Case, str]] = {
    "no such output": (
        asked(without(delivered(), "pull"), Band("pull", "peak", 1.0)),
        "the local model has no state or output pull, which an error band is for",
    ),
    "anonymous state": (
        asked(turned(derived()), Band("speed", "peak", 1.0)),
        "the local model has no state or output speed, which an error band is for",
    ),
    "anonymous with offsets": (
        asked(turned(derived()), drives=replace(DRIVES, offsets={"speed": 0.1})),
        "anonymous: it cannot start with speed off",
    ),
    "until": (
        asked(turned(derived()), drives=replace(DRIVES, amplitude={"command": Amplitude(until=("speed", 0.1))})),
        "no state or output speed, up to which the amplitude of command goes",
    ),
    "step": (
        asked(delivered(sampled(derived(), 0.04, "held"), step=0.04)),
        "the drives change every 0.1 s, which is no whole multiple of the local model's step of 0.04 s",
    ),
    "dead time": (
        asked(delivered(sampled(derived(), 0.05, "held"), step=0.05), delays=Delays({"command": 0.12})),
        "the dead time of command, 0.12 s, is no whole multiple of the local model's step of 0.05 s",
    ),
    "foreign name": (
        asked(replace(delivered(), states=("place", "speed", "wench"))),
        "the delivered model does not fit the plant: the plant has no state wench; did you mean winch",
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", UNFIT)
def test_what_does_not_fit_is_undecided_with_the_reason(name: str) -> None:
    one, told = UNFIT[name]
    found = verdict(one)
    assert found.status is Status.UNDECIDED
    assert told in found.reason
    drive = Drive(0.1, ("command",), np.full((40, 1), 0.1))
    again = replayed_study(Study(one, Options()), one.checks[0], drive)
    assert again.status is Status.UNDECIDED
    assert told in again.reason


def test_offsets_of_a_state_that_was_left_out_move_the_plant_only_and_are_told() -> None:
    drives = replace(DRIVES, offsets={"winch": 0.02})
    found = verdict(asked(None, Band("place", "peak", 0.03), keep=KEPT, drives=drives, parameters=QUICK))
    assert found.status is Status.PASS, found.reason
    assert "offsets of winch move the plant only: the local model does not have them" in found.notes


def test_a_saved_drive_replays_on_a_sampled_model_to_the_same_figures() -> None:
    bad = wrong(derived(), "A", (1, 0), 1.4)
    one = asked(delivered(sampled(bad, 0.05, "held"), step=0.05))
    study = Study(one, Options())
    drive = Drive(0.1, ("command",), np.full((40, 1), 0.1))
    first = replayed_study(study, one.checks[0], drive)
    second = replayed_study(Study(one, Options()), one.checks[0], drive)
    assert first.figures == second.figures
    assert first.status is Status.FAIL


# a plant without slopes


def stiction() -> Plant:
    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([u[0] - x[0] - 0.2 * np.abs(x[0])])

    return Plant(states={"x": "m"}, inputs={"u": "m/s"}, outputs={"y": "m"}, dynamics=dynamics,
                 measurement=lambda t, x, u, p: np.stack([1.0 * x[0]]))  # fmt: skip


def kinked(gain: float, limit: float) -> Case:
    plant = stiction()
    model = DeliveredModel(
        "m.json", PLACE, np.array([[-1.0]]), np.array([[gain]]), np.eye(1), np.zeros((1, 1)), ("x",), ("u",), ("y",)
    )
    return Case(
        spec="specs/kink.yaml", point="rest", title="", plant=plant, place=PLACE,
        trim=TrimAsk({"u": 0.0}, ("x",), {"x": 0.0}), parameters={},
        envelope={"x": Interval(-9, 9), "u": Interval(-9, 9)}, nominal={},
        checks=(CheckAsk("follows", PLACE),),
        drives=(DriveSet("", 0.2, 20, {"u": Amplitude(-1, 1)}, count=40, search=10),),
        bands=(Band("y", "peak", limit),), local=LocalAsk(delivered=model),
    )  # fmt: skip


def test_a_delivered_model_is_driven_where_the_plant_has_no_slopes() -> None:
    """Against x' = -x the plant ends at 1/1.2 upwards and at 1/0.8 downwards: 0.25 off after a long time."""
    wide, tight = kinked(1.0, 0.24), kinked(1.0, 0.2)
    study = Study(wide, Options())
    assert study.unmet("model") == ""
    assert study.unmet("derived") != ""
    assert study.unmet("reference") != ""
    found = verdict(wide)
    assert found.status is Status.PASS, found.reason
    assert any("no drives were sought that tell delivered from derived" in note for note in found.notes)
    assert "error_split" not in found.details
    assert verdict(tight).status is Status.FAIL
    assert verdict(kinked(1.3, 0.24)).status is Status.FAIL


# dead times, angles and drift


def late_cart(late: float) -> Plant:
    """A lag whose plant function has no dead time; the spec declares it."""
    return Plant(
        states={"x": "m"}, inputs={"u": "m/s"}, outputs={"y": "m"},
        dynamics=lambda t, x, u, p: np.stack([u[0] - x[0]]),
        measurement=lambda t, x, u, p: np.stack([1.0 * x[0]]),
    )  # fmt: skip


def lagging(gain: float, band: Band, delays: Delays, **changes: Any) -> Case:
    one = kinked(gain, 1.0)
    return replace(one, plant=late_cart(0.0), bands=(band,), delays=delays, **changes)


@pytest.mark.parametrize("delays", [Delays({"u": 0.33}), Delays(outputs={"y": 0.7}), Delays({"u": 0.2}, {"y": 0.13})])
def test_a_wrong_gain_behind_dead_times_has_its_closed_form(delays: Delays) -> None:
    """Largest error of gain 1.1 against 1 under |u| <= 1 over 4 s less the dead times."""
    late = sum(delays.inputs.values()) + sum(delays.outputs.values())
    worst = 0.1 * (1 - np.exp(-(4.0 - late)))
    assert verdict(lagging(1.1, Band("y", "peak", 1.01 * worst), delays)).status is Status.PASS
    found = verdict(lagging(1.1, Band("y", "peak", 0.99 * worst), delays))
    assert found.status is Status.FAIL
    assert found.figures[0].worst == pytest.approx(worst, rel=1e-3)
    final = verdict(lagging(1.1, Band("y", "final", 0.99 * worst), delays))
    assert final.status is Status.FAIL
    assert final.figures[0].worst == pytest.approx(worst, rel=1e-3)
    assert verdict(lagging(1.1, Band("y", "final", 1.01 * worst), delays)).status is Status.PASS
    early = verdict(lagging(1.1, Band("y", "peak", 0.99 * worst, start=3.9), delays))
    assert early.status is Status.FAIL


def test_the_mean_square_of_a_delayed_output_counts_the_time_at_trim() -> None:
    """A step of the error 0.1 (1 - exp(-t)) behind 1.5 s, squared and averaged over all 4 s."""
    t = 2.5
    square = 0.01 * (t - 2 * (1 - np.exp(-t)) + 0.5 * (1 - np.exp(-2 * t)))
    worst = float(np.sqrt(square / 4.0))
    found = verdict(lagging(1.1, Band("y", "rms", 0.97 * worst), Delays(outputs={"y": 1.5})))
    assert found.status is Status.FAIL
    assert found.figures[0].worst == pytest.approx(worst, rel=0.01)
    assert verdict(lagging(1.1, Band("y", "rms", 1.03 * worst), Delays(outputs={"y": 1.5}))).status is Status.PASS


def test_a_dead_time_beyond_the_horizon_leaves_nothing_to_see() -> None:
    found = verdict(lagging(1.1, Band("y", "peak", 0.01), Delays({"u": 9.0})))
    assert found.status is Status.UNDECIDED
    assert "predicts no motion" in found.reason


def compass(unit: str) -> Plant:
    turn = 360.0 if unit == "deg" else 2 * np.pi

    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        return np.stack([u[0] - 0.1 * x[0]])

    return Plant(
        states={"swing": unit}, inputs={"u": f"{unit}/s"}, outputs={"shown": unit}, dynamics=dynamics,
        measurement=lambda t, x, u, p: np.stack([np.mod(x[0] + turn / 2, turn) - turn / 2]),
    )  # fmt: skip


@pytest.mark.parametrize("unit, size", [("deg", 90.0), ("rad", np.pi / 2)])
def test_an_angle_is_compared_modulo_a_turn(unit: str, size: float) -> None:
    model = DeliveredModel(
        "m.json", PLACE, np.array([[-0.1]]), np.eye(1), np.eye(1), np.zeros((1, 1)), ("swing",), ("u",), ("shown",)
    )
    far = Interval(-1e6, 1e6)
    one = replace(
        kinked(1.0, 1.0), plant=compass(unit), trim=TrimAsk({"u": 0.0}, ("swing",), {"swing": 0.0}),
        envelope={"swing": far, "u": far}, nominal={"swing": size, "u": size, "shown": size},
        drives=(DriveSet("", 0.5, 20, {"u": Amplitude(-size, size)}, count=40, search=10),),
        bands=(Band("shown", "peak", size / 90),), local=LocalAsk(delivered=model), wraps=("shown",),
    )  # fmt: skip
    assert verdict(one).status is Status.PASS
    assert verdict(replace(one, wraps=())).status is Status.FAIL
    off = replace(one, local=LocalAsk(delivered=replace(model, B=np.array([[1.05]]))))
    assert verdict(off).status is Status.FAIL


def climber(matters: float) -> Plant:
    """Altitude climbs at 2 m/s; the lag grows with altitude where that matters."""

    def dynamics(t: float, x: Any, u: Any, p: Any) -> Any:
        altitude, lift = x
        return np.stack([2.0 + lift, u[0] - lift - matters * altitude])

    return Plant(
        states={"altitude": "m", "lift": "m/s"}, inputs={"u": "m/s^2"}, outputs={"shown": "m/s"}, dynamics=dynamics,
        measurement=lambda t, x, u, p: np.stack([1.0 * x[1]]),
    )  # fmt: skip


@pytest.mark.parametrize("matters", [0.0, 0.05])
def test_a_drift_that_matters_shows_and_one_that_does_not_is_no_error(matters: float) -> None:
    """lift' = -lift - 0.05 (2 t) off the steady climb: -0.1 (t - 1 + exp(-t)) without any drive, -0.3 after 4 s."""
    one = replace(
        kinked(1.0, 1.0), plant=climber(matters),
        trim=TrimAsk({"altitude": 0.0}, ("lift", "u"), {"lift": 0.0}, rates={"altitude": 2.0}),
        envelope={"altitude": Interval(-99, 99), "lift": Interval(-9, 9), "u": Interval(-9, 9)},
        bands=(Band("shown", "peak", 0.01),), local=LocalAsk(), exits=Exits(),
    )  # fmt: skip
    found = verdict(one)
    assert found.status is (Status.FAIL if matters else Status.PASS), found.reason
    if matters:
        study = Study(one, Options())
        assert study.point().drift.tolist() == [2.0, 0.0]
        off = 0.1 * (4.0 - 1.0 + np.exp(-4.0))
        assert found.figures[0].worst >= 0.9 * off
