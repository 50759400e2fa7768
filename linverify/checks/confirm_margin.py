"""Margins tried on the nonlinear plant: short of the margin the loop must come to rest, beyond it it must not.

The loop's gain is multiplied by GM^0.9 and by GM^1.1, up and down, and the dead time is raised by 0.9 and 1.1 of the
delay margin. Each time the plant with the loop closed is left to itself after a small kick along the mode that the
margin is about, for as long as the local model needs to decay or to grow tenfold. What then happens is agreement, or a
finding with the trajectory kept; a limit cycle, an actuator at its limit and an exit from the envelope are told apart.
"""

from __future__ import annotations

import hashlib
import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any, Literal

import numpy as np

from ..core.case import Interval
from ..core.drive import Drive
from ..core.loop import Loop
from ..core.model import Array, LocalModel
from ..core.shown import number
from ..core.verdict import Evidence, Figure, Sense, Status, merged
from ..drives import pinned
from ..numerics.independent import run_independent
from ..numerics.kicked import Kicked, Trial, swing
from ..numerics.loop_margins import LoopMargins
from ..numerics.pace import clock, pace
from ..numerics.rig import Exit, Fidelity, Rig
from ..numerics.simulate import run_alone
from .closed import ClosedStudy, Closing, nested
from .evidence import FOLDER, plain_runs
from .study import Study

SHORT, BEYOND = 0.9, 1.1  # of a margin
KICK = 1e-3  # of nominal sizes
TENFOLD = math.log(10.0)
LONG = 3.0  # times as long a motion that grows is followed, to see what becomes of it
SECOND = Fidelity(4, 1e-2)  # it is run a hundred times as accurately as this asks for
WINDOWS, FEWEST = 400, 5  # of half a period each
FAR = 30.0  # nominal sizes of a state from trim, where a trial ends at the latest
GROUPS = 8  # parts of a window
WEIGHT = 0.5  # of the kick: error of a state that is acceptable; a thousandth of it is allowed in one step
SMALLER = 1e-3  # of the kick: tried where the plant brings back what should grow
SATURATES = "the plant brings back a motion of {} nominal sizes and not one of {}: it saturates in between"
LARGER, COARSER = 30.0, 300.0  # kick and weights where what becomes of a growing motion is only told
GUARD = 0.1  # of the predicted growth: nearer to none says nothing
Way = Literal["rest", "grow"]


@dataclass(frozen=True, slots=True)
class Confirmation:
    """What the trials came to. reasons: a line each for what is not agreement; details: plain JSON values."""

    status: Status
    figures: tuple[Figure, ...] = ()
    reasons: tuple[tuple[Status, str], ...] = ()
    notes: tuple[str, ...] = ()
    evidence: tuple[Evidence, ...] = ()
    details: tuple[Mapping[str, Any], ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class _Change:
    """One change of the loop. what: in words; way: what must follow; frequency: of the crossing, per time unit."""

    what: str
    loop: Loop
    way: Way
    signal: str
    frequency: float


@dataclass(slots=True)
class _Found:
    """What the trials have come to so far (not frozen: filled one by one)."""

    figures: list[Figure] = field(default_factory=list)
    reasons: list[tuple[Status, str]] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    evidence: list[Evidence] = field(default_factory=list)
    details: list[Mapping[str, Any]] = field(default_factory=list)


def confirm(study: Study, loop: Loop, measured: LoopMargins) -> Confirmation:
    """Try the margins of a stable loop on the plant. Raises PlantError where the plant misbehaves at trim."""
    found = _Found()
    changes = _changes(study, loop, measured, found)
    for change in changes:
        _try(study, loop, change, found)
    if not changes:
        found.notes.append("no margin of this loop is finite: there is nothing to try on the nonlinear plant")
    status = merged([Status.PASS, *(its for its, _ in found.reasons)])
    return Confirmation(
        status, tuple(found.figures), tuple(found.reasons), tuple(found.notes), tuple(found.evidence),
        tuple(found.details),
    )  # fmt: skip


def _changes(study: Study, loop: Loop, measured: LoopMargins, found: _Found) -> list[_Change]:
    changes: list[_Change] = []
    several = len(measured.channels) > 1
    for at, channel in enumerate(measured.channels):
        signal, margins = channel.name if several else "", channel.margins
        for word, gain in (("up", margins.gain_up), ("down", margins.gain_down)):
            if not (math.isfinite(gain.value) and gain.value > 0.0 and gain.value != 1.0):
                continue
            for power, way in _tries():
                factor = gain.value**power
                what = f"gain times {number(factor, 4)} ({power} of the margin {word}wards)"
                changes.append(_Change(what, _scaled(loop, measured, at, factor), way, signal, gain.frequency))
        late = margins.delay
        if not (math.isfinite(late.value) and late.value > 0.0):
            continue
        if several:
            found.notes.append(f"the delay margin of {channel.name} alone is not tried: the loop has one dead time")
            continue
        for share, way in _tries():
            extra = share * late.value
            what = f"dead time of {number(extra, 4)} {study.case.plant.time_unit} more ({share} of the delay margin)"
            changes.append(_Change(what, replace(loop, delay=loop.delay + extra), way, signal, late.frequency))
    return changes


def _tries() -> tuple[tuple[float, Way], ...]:
    return ((SHORT, "rest"), (BEYOND, "grow"))


def _scaled(loop: Loop, measured: LoopMargins, at: int, factor: float) -> Loop:
    """The loop with one channel's gain multiplied, where it is broken."""
    control = loop.controller
    if measured.at_input:
        scale = np.ones((len(loop.moves), 1))
        scale[at] = factor
        return replace(loop, controller=replace(control, C=control.C * scale, D=control.D * scale))
    columns = np.ones(len(loop.measures))
    columns[at] = factor
    return replace(loop, controller=replace(control, B=control.B * columns, D=control.D * columns))


def _try(study: Study, loop: Loop, change: _Change, found: _Found) -> None:
    """Run one change and add what came of it."""
    closed = _closed(study, loop, change.loop)
    subject = f"with {change.what}" + (f" of {change.signal}" if change.signal else "")
    if closed.reasons:
        found.reasons.append((Status.UNDECIDED, f"not tried {subject}: {closed.reasons[0]}"))
        return
    model = closed.derived() if loop.name in closed.closing.given else closed.model()
    mode = _mode(model, change)
    if mode is None or (mode.real > 0.0) != (change.way == "grow"):
        text = f"{subject} the local model itself does not {'grow' if change.way == 'grow' else 'come to rest'}"
        found.reasons.append((Status.UNDECIDED, text))
        return
    trial, predicted = _trial(closed, model, mode)
    if predicted < 2.0 * GUARD:
        text = f"{subject} the motion changes too slowly to be told within {WINDOWS // 2} periods"
        found.reasons.append((Status.UNDECIDED, text))
        return
    judged = _judged(trial, change.way, predicted)
    if judged[0] is Status.FAIL and change.way == "grow":
        # a plant that saturates below the kick brings it back, and says nothing of smaller motions
        small = _smaller(trial)
        if (again := _judged(small, change.way, predicted))[0] is not Status.FAIL:
            trial, judged = small, again
            found.notes.append(f"{subject} {SATURATES.format(number(KICK, 3), number(KICK * SMALLER, 3))}")
    _tell(study, closed, loop, change, trial, judged, found)


def _smaller(trial: Trial) -> Trial:
    rig = replace(trial.rig, weights=SMALLER * trial.rig.weights)
    return replace(trial, rig=rig, drive=trial.drive.scaled(SMALLER))


def _closed(study: Study, loop: Loop, changed: Loop) -> ClosedStudy:
    loops = nested(study.case, [loop.name, *study.case.local.closed])
    loops = tuple(changed if one.name == loop.name else one for one in loops)
    given: tuple[str, ...] = ()
    if study.case.local.delivered is not None:
        given = tuple(one.name for one in nested(study.case, study.case.local.closed))
    return ClosedStudy(study, Closing(loops, given))


def _mode(model: LocalModel, change: _Change) -> complex | None:
    """The pole that the margin is about: beyond it the one furthest right, short of it the nearest to the crossing."""
    poles, _ = pace(model)
    poles = poles[np.isfinite(poles)]
    if not poles.size:
        return None
    if change.way == "grow":
        return complex(poles[int(np.argmax(poles.real))])
    crossing = 1j * (0.0 if math.isnan(change.frequency) else abs(change.frequency))
    moving = poles[np.abs(poles) > 1e-9 * np.abs(poles).max()]
    return complex(moving[int(np.argmin(np.abs(moving - crossing)))]) if moving.size else None


def _trial(closed: ClosedStudy, model: LocalModel, mode: complex) -> tuple[Trial, float]:
    """The kick along `mode`, and by how much its logarithm changes in the local model."""
    rate = abs(mode.real)
    wanted = TENFOLD / rate
    # half a period holds a peak of every signal
    window = min(math.pi / abs(mode.imag), wanted) if mode.imag else wanted / FEWEST
    every, group = _grid(window, clock(model))
    count = min(WINDOWS, max(FEWEST, math.ceil(wanted / (every * group)) + 1))
    kick, weights = _kick(closed, model, mode)
    still = np.zeros((count * group, 1))  # a drive that is read back needs an input
    drive = Drive(every, closed.moved[:1], still, "held", kick, "a kick along the mode")
    rig = _rig(closed, model, weights)
    plant = closed.bare.case.plant
    rows = tuple(row for row, name in enumerate(rig.signals) if name in plant.states or name in (plant.outputs or {}))
    nominal = np.array([closed.case.nominal.get(rig.signals[row], 1.0) for row in rows])
    return Trial(rig, drive, group, rows, nominal, math.exp(TENFOLD)), rate * every * group * (count - 1)


def _grid(window: float, clock: float | None) -> tuple[float, int]:
    """Time between instants, and how many of them make a window."""
    if clock is None:
        return window / GROUPS, GROUPS
    group = max(1, min(GROUPS, round(window / clock)))
    return clock * max(1, round(window / clock / group)), group


def _kick(closed: ClosedStudy, model: LocalModel, mode: complex) -> tuple[dict[str, float], Array]:
    """Offsets of states along the mode, KICK of a nominal size where they are largest, and weights for all states."""
    about = closed.about()
    whole = not model.anonymous and all(name in model.states for name in closed.bare.case.plant.states)
    guide = model if whole or about is None else about
    poles, vectors = pace(guide)
    column = vectors[:, int(np.argmin(np.abs(np.where(np.isfinite(poles), poles, 1e300) - mode)))]
    names, plant = guide.states.names, closed.point().states.names
    sizes = np.array([closed.case.nominal.get(name, math.inf) for name in names])
    scaled = np.abs(column) / sizes
    largest = int(np.argmax(scaled))
    if not scaled[largest] > 0.0:  # the controller's states alone: their own sizes are all there is
        scaled, largest = np.abs(column), int(np.argmax(np.abs(column)))
    column = column * (KICK / scaled[largest]) * np.exp(-1j * np.angle(column[largest]))
    reach = dict(zip(names, np.abs(column), strict=True))
    rest = float(np.abs(column).max()) * 1e-3
    together: dict[str, float] = {}  # states of one chain or controller: what is small among them matters as little
    for name, size in reach.items():
        group = name.rpartition(".")[0]
        together[group] = max(together.get(group, 0.0), float(size))
    weights = []
    for name in plant:
        own = closed.case.nominal.get(name, math.inf)
        size = (
            max(reach.get(name, 0.0), 0.1 * KICK * own) if math.isfinite(own) else together.get(name.rpartition(".")[0])
        )
        weights.append(WEIGHT * (size or rest))
    kick = {name: float(value) for name, value in zip(names, column.real, strict=True) if name in plant and value.real}
    return kick, np.array(weights)


def _rig(closed: ClosedStudy, model: LocalModel, weights: Array) -> Rig:
    case, bound = closed.case, closed.bound
    loops = closed.closing.loops
    wanted = (*closed.moved, *(name for one in loops for name in one.measures), *closed.bare.case.plant.states)
    has = {*model.states.names, *model.outputs.names}
    signals = tuple(name for name in dict.fromkeys(wanted) if name in has)
    watched = {name: room for name, room in case.envelope.items() if name in bound.states or name in bound.outputs}
    point = closed.point()
    for name in closed.bare.case.plant.states:  # where nothing else ends it, a motion that grows ends here
        room = FAR * case.nominal.get(name, 1.0)
        far = Interval(point.value(name) - room, point.value(name) + room)
        watched[name] = watched.get(name, Interval()).meet(far)
    return Rig(
        bound, point, model, signals, watched, weights, about=closed.about(), delays=case.delays,
        updates=closed.updates,
    )  # fmt: skip


def _judged(trial: Trial, way: Way, predicted: float) -> tuple[Status, Kicked, float]:
    """Whether what happens is what must happen, on both grids, a disagreement by the second integrator too."""
    coarse, fine = (trial.run(run_alone, fidelity) for fidelity in (Fidelity(), Fidelity().finer()))
    error = 2.0 * abs(fine.growth - coarse.growth)
    if not math.isfinite(error):
        error = 0.0 if _gone(fine) and _gone(coarse) else math.inf
    word = _word(fine, way, predicted, error)
    if word is Status.FAIL and _word(trial.run(run_independent, SECOND), way, predicted, error) is not Status.FAIL:
        word = Status.UNDECIDED
    return word, fine, error


def _gone(found: Kicked) -> bool:
    """Whether the plant left its envelope, or every bound."""
    return found.left is not None or found.outcome.name == "DIVERGED"


def _word(found: Kicked, way: Way, predicted: float, error: float) -> Status:
    if not found.outcome.done and not _gone(found):
        return Status.UNDECIDED
    if _gone(found):
        return Status.PASS if way == "grow" else Status.FAIL
    guard = GUARD * predicted + error
    if way == "grow":
        return Status.PASS if found.growth > guard else Status.FAIL if found.growth < -guard else Status.UNDECIDED
    if found.growth < -guard and not found.sustained:
        return Status.PASS
    return Status.FAIL if found.growth > guard or found.sustained else Status.UNDECIDED


def _tell(
    study: Study,
    closed: ClosedStudy,
    loop: Loop,
    change: _Change,
    trial: Trial,
    judged: tuple[Status, Kicked, float],
    found: _Found,
) -> None:
    status, seen, error = judged
    unit, length = study.case.plant.time_unit, seen.window * max(1, len(seen.sizes) - 1)
    shown = seen
    if status is Status.PASS and change.way == "grow" and not _gone(seen):
        longer = np.zeros((round(LONG * trial.drive.intervals / trial.group) * trial.group, 1))
        rig, drive = replace(trial.rig, weights=COARSER * trial.rig.weights), replace(trial.drive, values=longer)
        trial = replace(trial, rig=rig, drive=drive.scaled(LARGER))
        shown = trial.run(run_alone, Fidelity())
    what = _became(closed, shown, unit)
    subject = f"with {change.what}" + (f" of {change.signal}" if change.signal else "")
    found.figures.append(
        Figure(
            f"growth of a small motion with {change.what}", change.signal, seen.growth / length, 0.0, f"1/{unit}",
            Sense.UPPER if change.way == "rest" else Sense.LOWER, error / length if math.isfinite(error) else 0.0,
            origin=str(loop.place), status=status, at_frequency=abs(change.frequency), frequency_unit=f"rad/{unit}",
        )
    )  # fmt: skip
    found.details.append({
        "change": change.what, "signal": change.signal, "must": change.way, "status": str(status), "became": what,
        "growth": float(f"{seen.growth / length:.6g}") if math.isfinite(seen.growth) else None,
        "unit": f"1/{unit}", "windows": len(seen.sizes), "window": float(f"{seen.window:.6g}"), "unit_of_time": unit,
    })  # fmt: skip
    if status is Status.PASS:
        if change.way == "grow" and shown.sustained:
            found.notes.append(f"{subject} the plant {what}")
            found.evidence.append(_saved(study, loop, change, trial, shown))
        return
    must = "come to rest" if change.way == "rest" else "grow"
    sure = "" if status is Status.FAIL else ", which our own accuracy or the length of the run leaves open"
    found.reasons.append((status, f"{subject} a small motion must {must}; the plant {what}{sure}"))
    found.evidence.append(_saved(study, loop, change, trial, shown))


def _became(closed: ClosedStudy, seen: Kicked, unit: str) -> str:
    """What became of the kick, in words."""
    limits = _limited(closed, seen)
    if seen.left is not None:
        text = _left(closed, seen.left, unit)
    elif not seen.outcome.done:
        text = f"cannot be followed: {seen.outcome.value}" + (f": {seen.text}" if seen.text else "")
    elif seen.sustained:
        signal = closed.closing.loops[0].measures[0]
        text = "goes on in a limit cycle"
        if signal in seen.runs.signals:
            size, period = swing(seen, seen.runs.signals.index(signal))
            text += f" of {signal} by {closed.bare.case.shown_as(signal).told_size(size)}"
            text += f" every {number(period, 3)} {unit}" if math.isfinite(period) else ""
    else:
        text = "comes to rest" if seen.growth < 0.0 else "grows"
    return text + (f", with {' and '.join(limits)} at the limit of its actuator" if limits else "")


def _left(closed: ClosedStudy, left: Exit, unit: str) -> str:
    when, room = f"at {number(left.time, 4)} {unit}", closed.case.envelope.get(left.signal, Interval())
    if left.limit in (room.low, room.high):
        return f"leaves the envelope through {left.signal} {when}"
    return f"grows beyond {number(FAR, 3)} nominal sizes of {left.signal} {when}"


def _limited(closed: ClosedStudy, seen: Kicked) -> list[str]:
    """Moved inputs that came to rest against the range of their actuator."""
    found = []
    for name in closed.moved:
        actuator = closed.bare.case.actuators.get(name)
        if actuator is None or name not in seen.runs.signals:
            continue
        values = seen.runs.plant[seen.runs.signals.index(name)] + closed.bare.point().value(name)
        room = 1e-6 * max(abs(value) for value in (actuator.low, actuator.high, 1e-12) if math.isfinite(value))
        if np.nanmax(values) >= actuator.high - room or np.nanmin(values) <= actuator.low + room:
            found.append(name)
    return found


def _saved(study: Study, loop: Loop, change: _Change, trial: Trial, seen: Kicked) -> Evidence:
    """Keep the trajectory where reports go, if they are written at all."""
    item = f"{study.case.spec}::{study.case.point}::margins.{loop.name}"
    text = f"{change.what}: {trial.drive.text}"
    key = hashlib.sha256(f"{item}\n{text}\n{trial.drive.digest}".encode()).hexdigest()[:12]
    if study.options.reports is not None:
        plant = study.case.plant
        units = {name: plant.unit(name) for name in seen.runs.signals}
        about = {"item": item, "role": "confirmation", "text": text, **plain_runs(seen.runs, units, plant.time_unit)}
        try:
            pinned.write(study.options.reports / FOLDER, trial.drive, about, key)
        except OSError as error:  # a full disk takes nothing from the verdict
            text += f" (not saved: {error.strerror or error})"
    return Evidence("confirmation", key, text)
