"""Whether a local model can be held against the plant on a set of drives at all, told before anything is simulated."""

from __future__ import annotations

from ..core.model import LocalModel
from .study import Study

SLACK = 1e-9  # of a time: whole multiples may miss by rounding


def misfits(study: Study, name: str) -> tuple[str, ...]:
    """Why the verified model cannot be driven by the set called `name`, a line each; empty where it can."""
    model, drives = study.model(), study.case.drive_set(name)
    has = {*model.states.names, *model.outputs.names}
    found = [
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
    return (*found, *_clocks(study, model, drives.every))


def told(study: Study, name: str) -> tuple[str, ...]:
    """What a reviewer must know about how the verified model is driven, a line each."""
    model, drives = study.model(), study.case.drive_set(name)
    absent = [state for state, size in drives.offsets.items() if size > 0.0 and state not in model.states]
    found = (
        [f"offsets of {', '.join(absent)} move the plant only: the local model does not have them"] if absent else []
    )
    if model.step is not None and study.case.plant.step is None and drives.course != model.course:
        found.append(f"the drives are {drives.course} between instants, the sampled model takes {model.course} inputs")
    return tuple(found)


def _clocks(study: Study, model: LocalModel, every: float) -> list[str]:
    """Sample times that do not go together."""
    plant, unit = study.case.plant.step, study.case.plant.time_unit
    if plant is not None:
        if model.step is None:
            return [f"the local model is continuous, the plant steps every {plant:.6g} {unit}"]
        if abs(model.step - plant) > SLACK * plant:
            return [f"the local model steps every {model.step:.6g} {unit}, the plant every {plant:.6g} {unit}"]
        return []
    if model.step is None or whole(every, model.step):
        return []
    return [
        f"the drives change every {every:.6g} {unit}, which is no whole multiple of the local model's step of "
        f"{model.step:.6g} {unit}"
    ]


def whole(time: float, step: float) -> bool:
    """True where `time` is a whole multiple of `step`, zero included."""
    return abs(time / step - round(time / step)) <= SLACK * max(1.0, abs(time / step))
