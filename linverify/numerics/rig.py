"""What a comparison of plant and local model is made of, and what comes out of it.

Everything here is values: the rig is built once per operating point, so that method, weights and limits are chosen per
operating point and never by what else happens to be simulated.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from ..core.bound import BoundPlant
from ..core.case import Interval
from ..core.delivered import Delays
from ..core.model import Array, LocalModel, OperatingPoint
from ..core.outcome import Outcome
from .instants import Instants, Update
from .reduce import rates

# an explicit step costs a quarter of an implicit one, and resolves what a fast pole shows just as well: measured over
# the halved grids, break-even lies at 25 where fast poles show in nothing that is compared, at 100 where they do
STIFF = 30.0  # rho(A) x every from which drives are integrated by the implicit method


@dataclass(frozen=True, slots=True, eq=False)
class Rig:
    """One operating point, ready to be driven.

    signals: the compared ones, states or outputs of plant and model; envelope: absolute ranges of states and outputs
    (inputs are not looked at: drives are cut to their ranges); weights (n,): absolute error of each state that is
    acceptable at all, in its unit. attempts: steps tried an interval, and evaluations: plant columns a drive, before a
    run ends with TOO_MANY_STEPS. about: the plant's own slopes, by which its integrator is chosen; None: the model's.
    delays: dead times of inputs and outputs, the same for plant and model; turns: a whole turn of each signal that is
    compared modulo one, in its unit. The envelope holds for outputs before their dead time. updates: what sampled
    controllers do to the plant's states, in the order in which they act; the model's are its `jumps`.
    """

    plant: BoundPlant
    point: OperatingPoint
    model: LocalModel
    signals: tuple[str, ...]
    envelope: Mapping[str, Interval]
    weights: Array
    attempts: int = 4000
    evaluations: int = 2_000_000
    about: LocalModel | None = None
    delays: Delays = field(default_factory=Delays)
    turns: Mapping[str, float] = field(default_factory=lambda: MappingProxyType({}))
    updates: tuple[Update, ...] = ()

    def __post_init__(self) -> None:
        if self.weights.shape != (self.plant.n,) or not np.all(self.weights > 0) or not np.isfinite(self.weights).all():
            raise ValueError(f"weights must be {self.plant.n} positive numbers, got {self.weights!r}")
        for name in self.signals:
            if name not in self.plant.states and name not in self.plant.outputs:
                raise ValueError(f"the plant has no state or output {name!r} to compare")
            if name not in self.model.states and name not in self.model.outputs:
                raise ValueError(f"the local model has no state or output {name!r} to compare")

    @property
    def instants(self) -> tuple[Instants, ...]:
        """When states jump, on either side."""
        jumps = (Instants(jump.period, jump.phase) for jump in self.model.jumps)
        return tuple(dict.fromkeys((*(update.instants for update in self.updates), *jumps)))

    def stiffness(self, every: float) -> float:
        """Spectral radius of the plant's slopes times the time between instants."""
        model = self.about or self.model
        if self.plant.step is None and model.step is not None:
            poles = rates(model.A, model.step)
            return float(np.abs(poles[np.isfinite(poles)]).max(initial=0.0)) * every
        return float(np.abs(np.linalg.eigvals(model.A)).max(initial=0.0)) * every

    def stiff(self, every: float) -> bool:
        """Whether drives that change every `every` time units are integrated by an implicit method."""
        return self.plant.step is None and self.stiffness(every) > STIFF


@dataclass(frozen=True, slots=True)
class Fidelity:
    """How finely a run is made.

    nodes: sub-intervals an interval, at least, at which both models are sampled; tolerance: local error of a step, as a
    share of the rig's weights. The longest step is four of an uncut interval's sub-intervals, or the same share of a
    piece of one that is cut, so that more nodes force shorter steps. A difference equation has one node a step,
    whatever is asked for.
    """

    nodes: int = 4
    tolerance: float = 1e-3

    def __post_init__(self) -> None:
        if self.nodes < 4 or not self.tolerance > 0:
            raise ValueError(f"a run needs at least 4 nodes and a positive tolerance, got {self}")

    def finer(self) -> Fidelity:
        """The halved grid: twice the nodes, half the longest step, and a tolerance that halves each shorter one.

        The difference of a figure between both runs holds the integration error and that of peaks between samples. A
        smaller tolerance on the same grid would be blind where both runs take one step an interval.
        """
        return Fidelity(2 * self.nodes, self.tolerance / 32.0)

    @property
    def longest(self) -> float:
        """Longest step as a share of an interval, or of each piece that one is cut into."""
        return 4.0 / self.nodes


@dataclass(frozen=True, slots=True)
class Exit:
    """The plant left the envelope: through which side of which signal, and when (time since the drive began).

    limit: the absolute limit; model_way: how far the local model had gone by then from trim to that limit: 0 not at
    all, 1 at it, NaN where the model does not have this signal.
    """

    signal: str
    side: Literal["low", "high"]
    time: float
    limit: float
    model_way: float


@dataclass(frozen=True, slots=True, eq=False)
class Runs:
    """N drives of K intervals with S sub-intervals each, plant and local model.

    times (K, S + 1): since the drive began; times[k, S] equals times[k + 1, 0], and both sides of each instant are
    kept, since an output with direct feedthrough jumps there. plant, model (q, K, S + 1, N): deviations of the compared
    signals from the trimmed course. ended (N,): the horizon, or when the comparison ends before it (exit or failure);
    plant is NaN after it. outcomes: DONE for a drive that completed or left the envelope, else why it could not be
    followed further, with `errors` naming the call. evaluations: plant columns that were evaluated. late (q,): dead
    time of each signal: a sample taken at t arrives at t + late, and one that arrives after the horizon does not count;
    turns (q,): a whole turn of a signal that is compared modulo one, else zero. Empty: zero for all.
    """

    signals: tuple[str, ...]
    times: Array
    plant: Array
    model: Array
    ended: Array
    exits: tuple[Exit | None, ...]
    outcomes: tuple[Outcome, ...]
    errors: tuple[str, ...]
    method: str = ""
    evaluations: int = 0
    late: tuple[float, ...] = ()
    turns: tuple[float, ...] = ()

    def __len__(self) -> int:
        return len(self.outcomes)

    @property
    def horizon(self) -> float:
        """Length of the drives."""
        return float(self.times[-1, -1])

    @property
    def error(self) -> Array:
        """Plant minus local model, (q, K, S + 1, N); NaN where the comparison has ended."""
        found = self.plant - self.model
        for row, turn in enumerate(self.turns):
            found[row] = wrapped(found[row], turn)
        return found

    def arrives(self, row: int) -> Array:
        """When the samples of a signal arrive, (K, S + 1)."""
        return self.times + self.late[row] if self.late else self.times

    @property
    def completed(self) -> NDArray[np.bool_]:
        """Drives that ran their whole horizon, (N,)."""
        return np.array(
            [outcome.done and left is None for outcome, left in zip(self.outcomes, self.exits, strict=True)], dtype=bool
        )

    def counts(self) -> NDArray[np.bool_]:
        """Samples that count, (K, S + 1, N): those before the comparison ended."""
        return np.asarray(np.isfinite(self.plant).all(axis=0))


def wrapped(values: Array, turn: float) -> Array:
    """`values` less whole turns, within half a turn of zero; unchanged where `turn` is zero."""
    if not turn > 0.0:
        return values
    return np.asarray(values - turn * np.round(values / turn))
