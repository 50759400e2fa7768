"""Everything that one `follows` check compares with: drives allowed, bands, rig and how finely it starts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from ..core.case import Band, Case, DriveSet
from ..core.drive import Drive
from ..core.model import Array, LocalModel
from ..core.units import convert
from ..drives.declared import Limits, declared
from ..numerics.simulate import Fidelity, Rig, Runs, run, run_alone
from ..numerics.worst import reaches
from .bands import Figures, joined, judged
from .study import Study

TOLERANCE = 1e-3  # of the state errors that bands allow; the halved grid shows whether that is enough
PHASE = 0.2  # radians of the fastest oscillation between samples: peaks in between are missed by 0.5 % of its size
NODES = (4, 8, 16, 32, 64)
CHAIN = ".delay."  # in the names of states that stand for dead times
BATCH = 256  # drives simulated at once; the trajectories of a batch are let go before the next


@dataclass(frozen=True, slots=True, eq=False)
class Comparison:
    """One set of drives at one operating point, ready to be run.

    exits: unpredicted exits fail; others: models that the verified one is told apart from by drives of their own (the
    full derived model, and what an exact delivery would be), as far as they exist and differ.
    """

    case: Case
    drives: DriveSet
    bands: tuple[Band, ...]
    limits: Limits
    rig: Rig
    start: Fidelity
    exits: bool
    others: tuple[LocalModel, ...] = ()

    @property
    def id(self) -> str:
        """What the seeds and the file names of this check are made from."""
        name = f"follows.{self.drives.name}" if self.drives.name else "follows"
        return f"{self.case.spec}::{self.case.point}::{name}"

    @property
    def units(self) -> dict[str, str]:
        """Unit of every state, input and output."""
        plant = self.case.plant
        return {**plant.states, **plant.inputs, **(plant.outputs or {})}

    def figures(self, drives: Sequence[Drive], fidelity: Fidelity) -> tuple[Figures, Figures, tuple[str, ...]]:
        """Run drives in batches: figures against the local model, against one that does not move, and what went wrong.

        The last holds a sentence for each drive that could not be followed, else an empty string.
        """
        seen, still, wrong = [], [], []
        for first in range(0, len(drives), BATCH):
            runs = run(self.rig, drives[first : first + BATCH], fidelity)
            seen.append(judged(runs, self.bands))
            still.append(judged(runs, self.bands, model=np.zeros_like(runs.model)))
            wrong += troubles(runs)
        return joined(seen), joined(still), tuple(wrong)

    def alone(self, drive: Drive, fidelity: Fidelity) -> tuple[Figures, Runs]:
        """The canonical run of one drive, from which every quoted figure comes."""
        runs = run_alone(self.rig, drive, fidelity)
        return judged(runs, self.bands), runs


def troubles(runs: Runs) -> list[str]:
    """Why each drive could not be followed; empty strings for those that could."""
    pairs = zip(runs.outcomes, runs.errors, strict=True)
    return [
        "" if outcome.done else ": ".join(part for part in (outcome.value, error) if part) for outcome, error in pairs
    ]


def comparison(study: Study, name: str) -> Comparison:
    """The comparison for the set of drives called `name`. Raises KeyError for a name that the case does not have."""
    case, model, point = study.case, study.model(), study.point()
    drives = case.drive_set(name)
    bands = case.bands_for(name)
    limits = declared(drives, point, model, case.envelope, case.rate_limits, case.delays)
    signals = tuple(dict.fromkeys(band.signal for band in bands))
    plant = study.bound
    watched = {name: room for name, room in case.envelope.items() if name in plant.states or name in plant.outputs}
    about = study.about()
    weights = _weights(study, model if about is None else about, limits, bands, signals)
    rig = Rig(
        plant, point, model, signals, watched, weights, about=about, delays=case.delays, turns=_turns(case),
        updates=study.updates,
    )  # fmt: skip
    nodes = max(_nodes(one, drives.every) for one in (model, about) if one is not None)
    start = Fidelity(nodes, TOLERANCE)
    return Comparison(
        case, drives, bands, limits, rig, start, case.exits.mismatch == "fail", _others(study, model, about)
    )


def _others(study: Study, model: LocalModel, about: LocalModel | None) -> tuple[LocalModel, ...]:
    """The plant's own slopes, where it has them and they are not the verified model themselves, and the reference."""
    if about is None or about is model or study.unmet("derived"):
        return ()
    if study.unmet("reference") or (reference := study.reference()) is model or study.case.local.keep is None:
        return (about,)
    return (about, reference)


def _turns(case: Case) -> dict[str, float]:
    """A whole turn of each angle that is compared modulo one, in the plant's unit for it."""
    units = {**case.plant.states, **(case.plant.outputs or {})}
    return {name: convert(1.0, "rev", units[name]) for name in case.wraps if name in units}


def _nodes(model: LocalModel, every: float) -> int:
    """Samples an interval that the local model's fastest oscillation needs; what is damped well does not ring.

    A first guess only: the halved grid tells whether peaks were missed.
    """
    if model.step is not None:
        return NODES[0]
    poles = _own_poles(model)
    fastest = float(np.max(np.abs(poles.imag), where=np.abs(poles.imag) > np.abs(poles.real), initial=0.0))
    return next((nodes for nodes in NODES if fastest * every / nodes <= PHASE), NODES[-1])


def _own_poles(model: LocalModel) -> NDArray[np.complexfloating]:
    """The model's poles without those of chains that stand for dead times: their ringing is no motion of anything."""
    chains = [CHAIN in name for name in model.states.names]
    if not any(chains):
        return np.asarray(np.linalg.eigvals(model.A), dtype=np.complex128)
    poles, right = np.linalg.eig(model.A)
    left = np.linalg.pinv(right)
    shares = np.abs(right * left.T)
    own = shares[np.logical_not(chains)].sum(axis=0) >= 0.5 * shares.sum(axis=0)
    return np.asarray(poles[own], dtype=np.complex128)


def _weights(study: Study, model: LocalModel, limits: Limits, bands: Sequence[Band], signals: tuple[str, ...]) -> Array:
    """Absolute error of each state that no band would notice: what moves a compared signal by its limit at most.

    An error in a state reaches a signal later, through the dynamics: the largest effect over the horizon counts. The
    size of the state's own motion under these drives bounds the weight from above; of a chain that stands for a dead
    time the size of what goes in, since the ringing of its last states is no motion of anything.
    """
    plant = study.bound.states.names
    names = tuple(dict.fromkeys(name for name in (*plant, *signals) if name in model.states or name in model.outputs))
    inputs, states = reaches(model, names, limits.every, limits.intervals, limits.course, study.case.delays)
    moved = dict(zip(names, _excursions(model, limits, inputs, states), strict=True))
    nominal = np.array([study.case.nominal.get(name, 1.0) for name in plant])
    excursion = np.array([moved.get(name, 0.0) for name in plant])
    excursion = np.where(excursion > 0.0, np.minimum(excursion, nominal), np.where(np.isfinite(nominal), nominal, 1.0))
    for chain in _chains(plant):
        excursion[chain] = excursion[chain].max()
    effect = {name: _by_state(model, plant, row) for name, row in zip(names, states, strict=True)}
    found = excursion
    for band in bands:
        size = band.limit if band.kind != "relative" else band.fraction * moved[band.signal]
        if size > 0.0:
            reach = effect[band.signal]
            found = np.minimum(found, np.divide(size, reach, out=np.full(reach.shape, np.inf), where=reach > 0.0))
    # a growing mode would ask for weights without end; the halved grid judges what they gave
    weights: Array = np.maximum(found, 1e-6 * excursion)
    return weights


def _chains(plant: Sequence[str]) -> list[list[int]]:
    """Rows of the states of each loop's dead times."""
    found: dict[str, list[int]] = {}
    for row, name in enumerate(plant):
        if CHAIN in name:
            found.setdefault(name.partition(CHAIN)[0], []).append(row)
    return list(found.values())


def _by_state(model: LocalModel, plant: Sequence[str], row: Array) -> Array:
    """What each of the plant's states adds; nothing is known of those that the model does not have."""
    return np.array([row[model.states.index(name)] if name in model.states else 0.0 for name in plant])


def _excursions(model: LocalModel, limits: Limits, inputs: Array, states: Array) -> Array:
    """Largest possible deviation of each signal in the local model under these drives and offsets together."""
    total = np.zeros(len(inputs))
    for column, name in enumerate(limits.inputs):
        if name in model.inputs:
            total += max(limits.high[column], -limits.low[column]) * inputs[:, model.inputs.index(name)]
    for column, name in enumerate(limits.offsets):
        if name in model.states:
            total += max(limits.offset_high[column], -limits.offset_low[column]) * states[:, model.states.index(name)]
    return total
