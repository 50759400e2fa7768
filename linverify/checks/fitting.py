"""Whether a local model can be held against the plant on a set of drives at all, told before anything is simulated."""

from __future__ import annotations

from ..core.case import DriveSet
from ..core.model import LocalModel
from ..numerics.pieces import SNAP, whole_steps
from .closed import ClosedStudy, nested
from .study import Study


def misfits(study: Study, name: str) -> tuple[str, ...]:
    """Why the verified model cannot be driven by the set called `name`, a line each; empty where it can."""
    if reasons := _not_closed(study):
        return reasons
    model, drives = study.model(), study.case.drive_set(name)
    has = {*model.states.names, *model.outputs.names}
    found = [*_unbanded(study, drives)]
    found += [
        f"the local model has no state or output {signal}, which an error band is for"
        for signal in dict.fromkeys(band.signal for band in study.case.bands_for(name))
        if signal not in has
    ]
    found += [
        f"the local model has no input {one}, which is driven" for one in drives.amplitude if one not in model.inputs
    ]
    for one, amplitude in drives.amplitude.items():
        if amplitude.until is not None and amplitude.until[0] not in has:
            found.append(
                f"the local model has no state or output {amplitude.until[0]}, up to which the amplitude of {one} goes"
            )
    if model.anonymous and (started := [state for state, size in drives.offsets.items() if size > 0.0]):
        found.append(
            f"the local model's states are anonymous: it cannot start with {', '.join(started)} off the operating point"
        )
    return (*found, *_clocks(study, model, drives.every), *_straight_states(study, name, model))


def _not_closed(study: Study) -> tuple[str, ...]:
    return study.reasons if isinstance(study, ClosedStudy) else ()


def _unbanded(study: Study, drives: DriveSet) -> list[str]:
    """A loop hides errors of its output at low frequency, and shows them in what it moves: that needs bands too."""
    if not isinstance(study, ClosedStudy) or not drives.loop:
        return []
    if drives.loop in study.closing.given:
        return []  # what a delivered model has inside it need not tell
    banded = {band.signal for band in study.case.bands_for(drives.name)}
    inputs = [moved.name for loop in nested(study.case, [drives.loop]) for moved in loop.moves if not moved.loop]
    return [
        f"loop {drives.loop} hides errors in what it controls and shows them in {name}, which needs an error band too"
        for name in dict.fromkeys(inputs)
        if name not in banded
    ]


def told(study: Study, name: str) -> tuple[str, ...]:
    """What a reviewer must know about how the verified model is driven, a line each."""
    model, drives = study.model(), study.case.drive_set(name)
    absent = [state for state, size in drives.offsets.items() if size > 0.0 and state not in model.states]
    found = (
        [f"offsets of {', '.join(absent)} move the plant only: the local model does not have them"] if absent else []
    )
    if model.step is not None and study.case.plant.step is None and drives.course != model.course:
        found.append(f"the drives are {drives.course} between instants, the sampled model takes {model.course} inputs")
    if isinstance(study, ClosedStudy):
        found += study.told()
    if study.case.local.delivered is None:
        return tuple(found)
    if why := study.unmet("derived"):
        found.append(f"{why}: no drives were sought that tell delivered from derived, and errors are not split")
    elif why := study.unmet("reference"):
        found.append(f"no model to tell the delivered numbers by: {why}")
    return tuple(found)


def _clocks(study: Study, model: LocalModel, every: float) -> list[str]:
    """Sample times and dead times that do not go together."""
    plant, unit = study.case.plant.step, study.case.plant.time_unit
    if plant is not None and model.step is None:
        return [f"the local model is continuous, the plant steps every {plant:.6g} {unit}"]
    if plant is not None and model.step is not None and abs(model.step - plant) > SNAP * plant:
        return [f"the local model steps every {model.step:.6g} {unit}, the plant every {plant:.6g} {unit}"]
    if model.step is None:
        return []
    found = []
    if not whole_steps(every, model.step):
        found.append(f"the drives change every {every:.6g} {unit}, which is no whole multiple of")
    delays = study.case.delays
    for name, late in (*delays.inputs.items(), *delays.outputs.items()):
        if whole_steps(late, model.step) is None:
            found.append(f"the dead time of {name}, {late:.6g} {unit}, is no whole multiple of")
    found = [f"{one} the local model's step of {model.step:.6g} {unit}" for one in found]
    return [*found, *_between(study, model)]


def _between(study: Study, model: LocalModel) -> list[str]:
    """Sampled loops that act where a sampled model says nothing."""
    instants = [(update.instants.period, update.instants.phase) for update in study.updates]
    instants += [(jump.period, jump.phase) for jump in model.jumps]
    unit = study.case.plant.time_unit
    odd = [time for times in instants for time in times if whole_steps(time, model.step or 0.0) is None]
    if not odd:
        return []
    acting = f"sampled loops act at multiples of {min(odd):.6g} {unit}"
    return [f"{acting}, between the instants of the local model, which steps every {model.step:.6g} {unit}"]


def _straight_states(study: Study, name: str, model: LocalModel) -> list[str]:
    """Bands on states that cannot be read: a model sampled for straight inputs carries others than the plant's."""
    if study.case.plant.step is not None or model.step is None or model.course == "held" or model.ahead is not None:
        return []
    states = [
        band.signal
        for band in study.case.bands_for(name)
        if band.signal in model.states and band.signal not in model.outputs
    ]
    return [
        f"the state {one} of a model sampled for straight inputs cannot be read without the derived slopes"
        for one in dict.fromkeys(states)
    ]
