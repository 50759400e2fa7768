"""The bench's own measure held against closed forms, so that a wrong measure does not pass as a good gate."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from faults.bench import drawn, field_of, ground_of, outcome, true_entries
from faults.hunt import NODES, Drives
from faults.subjects import TABLE, subject
from truth import quadruple_tank

from linverify.core.case import Band
from linverify.core.verdict import Status


def test_levels_and_slopes_of_the_tanks() -> None:
    here, model = ground_of("tanks, minimum phase", "full").here, ground_of("tanks, minimum phase", "full").whole
    levels = quadruple_tank.levels(quadruple_tank.minus, 3.0, 3.0)
    times = np.array(quadruple_tank.AREAS) / np.array(quadruple_tank.HOLES) * np.sqrt(2.0 * levels / 981.0)
    assert here.x == pytest.approx(levels, rel=1e-12)
    assert np.diag(model.A) == pytest.approx(-1.0 / times, rel=1e-10)


@pytest.mark.parametrize("name", [name for name in TABLE if name != "pasteurizer"])
def test_plant_and_model_move_alike_for_small_drives(name: str) -> None:
    """What is left between them goes with the square of the drive: both integrations are right."""
    field = field_of(name)
    some = field.library.pick(range(0, len(field.library.values), 40))
    small = Drives(some.values * 1e-3, some.offsets * 1e-3)
    plant, model = field.plant(small), field.linear(ground_of(name, "full").right, small)
    size = np.abs(plant).max(axis=(1, 2, 3))
    assert np.all(np.abs(plant - model).max(axis=(1, 2, 3)) <= 1e-3 * size)


def test_worst_drive_of_a_scaled_entry_in_closed_form() -> None:
    """The buck is linear in its supply: a gain that is 3 % off errs by 3 % of the largest possible answer."""
    field, ground = field_of("buck"), ground_of("buck", "full")
    alone = replace(field.drives, amplitude={"supply": field.drives.amplitude["supply"]})
    only = type(field)(field.case, alone, field.parameters, field.here, field.slopes, ("voltage",))
    B = ground.right.B.copy()
    B[:, 1] *= 1.03
    pulse = Drives(np.eye(alone.intervals, 1)[np.newaxis], np.zeros((1, 0)))
    answer = only.linear(ground.right, pulse)[0, :, :, 0]
    # at node r of the last interval, all intervals before add their part with the best sign
    largest = max(np.abs(answer[:, r]).sum() for r in range(NODES + 1)) * only.high[0]
    found = only.hunt(replace(ground.right, B=B), ground.right, [Band("voltage", "peak", 1.0)])
    assert found.share == pytest.approx(0.03 * largest, rel=1e-4)


def test_entries_are_measured_in_nominal_sizes() -> None:
    ask = drawn(0, faulty=False)
    model = ask.model
    A = np.array(model.A)
    row = A[0] * [ask.case.nominal.get(name, 1.0) for name in model.states or ()]
    inputs = model.B[0] * [ask.case.nominal.get(name, 1.0) for name in model.inputs]
    at = int(np.abs(row).argmax())
    A[0, at] *= 1.5
    wanted = 0.5 * abs(row[at]) / max(np.abs(row).max(), np.abs(inputs).max())
    worse = replace(ask, model=replace(model, A=A), case=ask.case)
    assert true_entries(worse) == pytest.approx(wanted / (ask.case.local.agree.entries or np.nan), rel=1e-3)


@pytest.mark.parametrize(
    ("status", "share", "word"),
    [
        (Status.FAIL, 1.2, "caught"),
        (Status.PASS, 1.2, "missed"),
        (Status.PASS, 0.9, "right pass"),
        (Status.FAIL, 0.9, "false alarm"),
        (Status.FAIL, 1.004, "near tie"),
        (Status.UNDECIDED, 0.9, "undecided, within"),
        (Status.UNDECIDED, 1.2, "undecided, broken"),
    ],
)
def test_words_of_the_table(status: Status, share: float, word: str) -> None:
    assert outcome(status, share) == word


def test_subjects_are_small_enough_to_stay_inside_their_envelopes() -> None:
    """An exit would end a comparison early, which this measure does not know."""
    for name in TABLE:
        field = field_of(name)
        room = {signal: subject(name).case.envelope.get(signal) for signal in field.signals}
        for row, signal in enumerate(field.signals):
            inside = room[signal]
            if inside is not None:
                names = list(field.case.plant.states)
                outputs = list(field.case.plant.outputs or {})
                here = field.here.x[names.index(signal)] if signal in names else field.here.y[outputs.index(signal)]
                assert float(here + field.moved[row].min()) in inside, (name, signal)
                assert float(here + field.moved[row].max()) in inside, (name, signal)
