"""The drives of one check, in order: pinned, deterministic, random, searched; all run at one settled fidelity.

Only the random ones enter the statistics. The search begins with what Hypothesis draws, then asks for the worst drives
of the error that was observed (its response to steps, turned round in time), and climbs from the worst found so far.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from ..core.case import Options
from ..core.drive import Drive
from ..core.errors import DriveFileError
from ..core.model import Array
from ..drives import pinned, seeds
from ..drives.climb import neighbours
from ..drives.sample import sample, seed_of
from ..numerics.simulate import Fidelity, run
from .accuracy import BATCH, Noise, within
from .bands import Figures, joined
from .comparison import Comparison

KINDS = ("pinned", "deterministic", "random", "searched")
QUICK = 5  # a quick profile draws and searches so many times less
SWITCHED = 160  # corners of the declared set that the search looks at, beside what Hypothesis draws
ROUNDS, FROM, AROUND = 4, 2, 12  # of climbing: rounds, drives a band, neighbours of each


@dataclass(frozen=True, slots=True, eq=False)
class Campaign:
    """Every drive that was run, what kind it is, and its figures at `fidelity`.

    still: figures against a model that does not move; wrong: why a drive could not be followed, empty where it could;
    settled: whether the fixed batch is accurate enough; method: the integrator, as a report calls it.
    """

    drives: tuple[Drive, ...]
    kinds: tuple[str, ...]
    figures: Figures
    still: Figures
    wrong: tuple[str, ...]
    fidelity: Fidelity
    noise: Noise
    settled: bool
    method: str = ""

    def of(self, kind: str) -> list[int]:
        """Columns of one kind of drive."""
        return [column for column, other in enumerate(self.kinds) if other == kind]

    @property
    def shares(self) -> Array:
        """Used shares (B, N) for ranking; zero where nothing is there beyond our own error."""
        error = self.noise.at(self.fidelity)[:, np.newaxis]
        quiet = within(self.noise.comparison, self.figures.worst, error, self.noise.allowed(self.fidelity))
        return np.where(quiet, 0.0, self.figures.share)


def campaign(comparison: Comparison, options: Options, pins: Sequence[Drive]) -> Campaign:
    """Run the drives of a check. Deterministic: a function of the case, the seed and the profile alone."""
    quick = QUICK if options.profile == "quick" else 1
    limits, drives = comparison.limits, comparison.drives
    fixed = _deterministic(comparison)
    rng = np.random.default_rng(seed_of(options.seed, comparison.id, "random"))
    drawn = sample(limits, drives.shapes, max(1, drives.count // quick) if drives.count else 0, rng)
    noise = noise_of(comparison)
    fidelity, settled = noise.settled(comparison.start)
    corners = SWITCHED // quick if drives.search else 0
    hunted = _searched(comparison, options, drives.search // quick, corners)
    searched = (*hunted, *_observed(comparison, fidelity), *noise.batch)
    kinds = [kind for kind, some in zip(KINDS, (pins, fixed, drawn, searched), strict=True) for _ in some]
    everything = (*pins, *fixed, *drawn, *searched)
    figures, still, wrong = comparison.figures(everything, fidelity)
    method = comparison.alone(everything[0], fidelity)[1].method
    found = Campaign(everything, tuple(kinds), figures, still, wrong, fidelity, noise, settled, method)
    return _climbed(found, comparison, options, 0 if any(wrong) or not drives.search else ROUNDS)


def _deterministic(comparison: Comparison) -> tuple[Drive, ...]:
    squares = [band.signal for band in comparison.bands if band.kind == "rms"]
    rig, limits = comparison.rig, comparison.limits
    worst = seeds.worst_of_model(limits, rig.model, rig.signals, squares, rig.delays)
    apart = [
        drive
        for other in comparison.others
        for drive in seeds.worst_of_difference(limits, rig.model, other, rig.signals, squares, rig.delays)
    ]
    return seeds.unique((*seeds.plain(limits), *worst, *apart))


def noise_of(comparison: Comparison) -> Noise:
    """Our own error over the fixed batch: draws that depend on neither seed nor profile, so that a replay has them too.

    They are no part of the random drives that are counted.
    """
    rng = np.random.default_rng(seed_of(0, comparison.id, "batch"))
    return Noise(comparison, sample(comparison.limits, comparison.drives.shapes, BATCH, rng))


def _searched(comparison: Comparison, options: Options, examples: int, corners: int) -> tuple[Drive, ...]:
    from ..drives.search import searched

    rng = np.random.default_rng(seed_of(options.seed, comparison.id, "corners"))
    return (
        *searched(comparison.limits, examples, seed_of(options.seed, comparison.id, "search")),
        *seeds.switched(comparison.limits, corners, rng),
    )


def _observed(comparison: Comparison, fidelity: Fidelity) -> tuple[Drive, ...]:
    """The worst drives of the error itself, as far as it is linear: from its answer to a step in each input."""
    limits, signals = comparison.limits, comparison.rig.signals
    steps = seeds.steps(limits)
    if not steps:
        return ()
    runs = run(comparison.rig, steps, fidelity)
    ends = np.nan_to_num(runs.error[:, :, -1, :])  # (q, K, m) at the end of each interval
    pulses = np.diff(ends, axis=1, prepend=0.0)
    sizes = np.array([drive.values[-1, column] for column, drive in enumerate(steps)])
    found: list[Drive] = []
    for at in range(len(signals)):
        # what arrives by the end of the horizon is older than it
        age = (
            max(0, limits.intervals - math.ceil(runs.late[at] / limits.every - 1e-9)) if runs.late else limits.intervals
        )
        rows = np.zeros_like(pulses[at])
        rows[:age] = pulses[at, :age][::-1] * np.sign(sizes)
        found += seeds.worst_of_weights(limits, rows, {})
    return seeds.unique(found)


def _climbed(found: Campaign, comparison: Comparison, options: Options, rounds: int) -> Campaign:
    rng = np.random.default_rng(seed_of(options.seed, comparison.id, "climb"))
    for _ in range(rounds):
        near = [other for start in _worst(found) for other in neighbours(start, comparison.limits, AROUND, rng)]
        known = {drive.digest for drive in found.drives}
        fresh = [drive for drive in seeds.unique(near) if drive.digest not in known]
        if not fresh:
            break
        figures, still, wrong = comparison.figures(fresh, found.fidelity)
        found = replace(
            found,
            drives=(*found.drives, *fresh),
            kinds=(*found.kinds, *("searched" for _ in fresh)),
            figures=joined((found.figures, figures)),
            still=joined((found.still, still)),
            wrong=(*found.wrong, *wrong),
        )
    return found


def _worst(found: Campaign) -> list[Drive]:
    """The worst drives of each row, each once."""
    columns: dict[int, None] = {}
    for row in found.shares:
        for column in np.lexsort((np.arange(row.size), -row))[:FROM]:
            columns.setdefault(int(column))
    return [found.drives[column] for column in columns]


@dataclass(frozen=True, slots=True)
class Pins:
    """Pinned drives that fit this set here; misfits: a line each that leaves the check undecided; told: mere notes."""

    drives: tuple[Drive, ...] = ()
    misfits: tuple[str, ...] = ()
    told: tuple[str, ...] = ()


def read_pins(comparison: Comparison) -> Pins:
    """The pinned drives of this set.

    A drive that fits is replayed wherever it was found. One that does not leaves the check undecided, unless its file
    says that it was found at another point or with another set: there, not here, it has to fit.
    """
    plant = comparison.case.plant
    drives: list[Drive] = []
    misfits: list[str] = []
    told: list[str] = []
    for path in comparison.drives.pinned:
        try:
            drive, about = pinned.read(path)
        except DriveFileError as error:
            misfits.append(f"pinned drive {error}")
            continue
        reasons = pinned.misfits(path.name, drive, comparison.limits, tuple(plant.inputs), tuple(plant.states))
        if not reasons:
            drives.append(pinned.fitted(drive, comparison.limits))
        elif (home := str(about.get("item", ""))) and home.split("::")[1:] != comparison.id.split("::")[1:]:
            told.append(f"pinned drive {path.name} was found by {home} and does not fit here: not replayed")
        else:
            misfits += reasons
    return Pins(tuple(drives), tuple(misfits), tuple(told))
