"""The local model at an operating point: Jacobians of rates and outputs, judged for corners, noise and exactness.

What is not an equilibrium (prescribed and free rates apart) is not linearized: a linear model about a point that moves
away is a model of something else. A Jacobian that the plant brings is never taken on trust: every entry is held against
differences, within their error.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from ..core.bound import BoundPlant
from ..core.case import Interval, SlopeAsk
from ..core.model import Array, LocalModel, OperatingPoint, frozen_array
from ..core.outcome import Outcome
from ..core.shown import Shown, number, with_unit
from ..core.units import UnitError, composed, per_time
from .claimed import Mismatch, claimed_jacobian, mismatches
from .differentiate import Slopes, slopes
from .kinks import GapFinding, GapKind

NOTHING_SHOWN: Mapping[str, Shown] = MappingProxyType({})
ACCURACY = 1e-8  # default of the trim: scaled residual up to which a point is an equilibrium
SLACK = 1.5  # a residual that the trim accepted is not refused here for its last bits
AT = 1e-10  # nominal sizes: closer than this is told as "at the point"
LEAST_SCALE = 1e-9  # nominal sizes per time unit and nominal size: terms of a row below this are noise, not structure


@dataclass(frozen=True, slots=True)
class Corner:
    """A corner, jump or infinite slope ("steep") with names.

    row: as a reader calls it (`speed_rate`, or an output); column: state or input; distance: signed, in nominal sizes
    of the column; place: value of the column there; gap, error: difference of the one-sided slopes and its error, as
    shares of the row's largest term; left, right: slopes in plant units; height: of a jump; near: it counts as on the
    point, as far as noise lets us know; sure: it does so whatever noise did.
    """

    row: str
    column: str
    kind: GapKind
    distance: float
    place: float
    gap: float
    error: float
    left: float
    right: float
    height: float
    near: bool
    sure: bool
    at: str = ""  # the column's value there in words: fore_flap = 0.2 rad
    row_unit: str = ""
    slope_unit: str = ""


@dataclass(frozen=True, slots=True, eq=False)
class Linearization:
    """What linearizing found; `model` is None where there are no slopes at all.

    gaps: corners and jumps, nearest first; noise: one evaluation's noise, by row name; jacobian_source: one line;
    cross_check: entries in which the plant's own Jacobian is wrong; largest: largest gap on the point, as a share of
    its row's largest term, with the entry it belongs to and its error; message: one line, empty when DONE; notes:
    further lines.
    """

    outcome: Outcome
    model: LocalModel | None = None
    gaps: tuple[Corner, ...] = ()
    noise: Mapping[str, float] | None = None
    jacobian_source: str = ""
    cross_check: tuple[Mismatch, ...] = ()
    largest: float = 0.0
    largest_entry: str = ""
    largest_error: float = 0.0
    message: str = ""
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class _Task:
    """What every step needs: sizes and names of states and inputs (columns) and of rates and outputs (rows)."""

    plant: BoundPlant
    point: OperatingPoint
    sizes: Array
    row_sizes: Array
    rows: tuple[str, ...]
    columns: tuple[str, ...]
    ask: SlopeAsk
    shown: Mapping[str, Shown]


def linearize(
    plant: BoundPlant,
    point: OperatingPoint,
    nominal: Mapping[str, float],
    envelope: Mapping[str, Interval],
    ask: SlopeAsk,
    *,
    accuracy: float = ACCURACY,
    shown: Mapping[str, Shown] = NOTHING_SHOWN,
) -> Linearization:
    """The local model about `point`, with error estimates.

    nominal: typical sizes by name, 1 where missing; they scale steps, distances and gaps. envelope: not a limit for
    steps (the plant's domain is) and not used. accuracy: largest scaled residual that still is an equilibrium; shown:
    the units that values of signals are told in, the plant's where missing. Raises PlantError where the plant fails at
    the point itself.
    """
    task = _task(plant, point, nominal, ask, shown)
    if refusal := _not_an_equilibrium(task, nominal, accuracy):
        return Linearization(Outcome.NOT_EQUILIBRIUM, message=refusal)
    found = _differences(task)
    if not found.outcome.done:
        return _unanswered(task, found)
    corners = tuple(_named(task, found, gap) for gap in found.gaps)
    return _concluded(task, found, corners)


def row_names(plant: BoundPlant) -> tuple[str, ...]:
    """Names of the rows of the Jacobian: rates (or next values) of the states, then outputs."""
    suffix = "next" if plant.step is not None else "rate"
    taken = set(plant.outputs.names)
    rates = [f"{name}_{suffix}" for name in plant.states.names]
    pairs = zip(plant.states.names, rates, strict=True)
    return (*(f"{suffix} of {state}" if row in taken else row for state, row in pairs), *plant.outputs.names)


def row_units(plant: BoundPlant) -> tuple[str, ...]:
    """Units of the rows of the Jacobian, in the order of `row_names`."""
    time_unit = plant.plant.time_unit
    rates = (unit if plant.step is not None else per_time(unit, time_unit) for unit in plant.states.units)
    return (*rates, *plant.outputs.units)


def _slope_unit(above: str, below: str) -> str:
    """The unit of a slope; spelled out where the plant's own units are none that we know."""
    try:
        return composed([above], [below])
    except UnitError:
        return f"({above})/({below})"


def _task(
    plant: BoundPlant,
    point: OperatingPoint,
    nominal: Mapping[str, float],
    ask: SlopeAsk,
    shown: Mapping[str, Shown],
) -> _Task:
    columns = (*plant.states.names, *plant.inputs.names)
    sizes = np.array([nominal.get(name, 1.0) for name in columns])
    outputs = np.array([nominal.get(name, 1.0) for name in plant.outputs.names])
    rows = np.concatenate([sizes[: plant.n], outputs])
    return _Task(plant, point, sizes, rows, row_names(plant), columns, ask, shown)


def _not_an_equilibrium(task: _Task, nominal: Mapping[str, float], accuracy: float) -> str:
    """Why the point is no equilibrium; empty where it is one."""
    plant, point = task.plant, task.point
    rates = plant.rates(point.time, point.x, point.u)
    left = (rates - point.x if plant.step is not None else rates) - point.drift
    scaled = np.abs(left) / task.sizes[: plant.n]
    worst = int(np.argmax(scaled))
    if scaled[worst] <= SLACK * accuracy:
        return ""
    return (
        f"{task.rows[worst]} is off by {with_unit(number(float(left[worst])), row_units(plant)[worst])}, "
        f"{number(float(scaled[worst]), 3)} nominal sizes of {plant.states.names[worst]}; at most "
        f"{number(accuracy, 3)} is an equilibrium"
    )


def _differences(task: _Task) -> Slopes:
    plant, point = task.plant, task.point
    bounds = [plant.plant.domain.get(name, (None, None)) for name in task.columns]
    low = np.array([-np.inf if low is None else low for low, _ in bounds])
    high = np.array([np.inf if high is None else high for _, high in bounds])
    ways = {"up": 1, "down": -1}
    sides = [ways.get(task.ask.side.get(name, ""), 0) for name in task.columns]

    def both(z: Array) -> Array:
        x, u = z[: plant.n], z[plant.n :]
        return np.concatenate([plant.rates_or_nan(point.time, x, u), plant.measure_or_nan(point.time, x, u)])

    z0 = np.clip(np.concatenate([point.x, point.u]), low, high)
    plant.last_error = None
    return slopes(both, z0, task.sizes, low, high, sides=sides, floors=LEAST_SCALE * task.row_sizes)


def _unanswered(task: _Task, found: Slopes) -> Linearization:
    error = task.plant.last_error
    lost = [name for name, lost in zip(task.columns, found.lost, strict=True) if lost]
    where = f" close to the point along {', '.join(lost)}" if lost else ""
    told = f": {error}" if error else ""
    raised = error is not None and " raised " in str(error)
    outcome = Outcome.PLANT_RAISED if raised else Outcome.NOT_FINITE
    return Linearization(outcome, message=f"no slopes: the plant cannot be called{where}{told}")


def _named(task: _Task, found: Slopes, gap: GapFinding) -> Corner:
    size = float(task.sizes[gap.column])
    z0 = np.concatenate([task.point.x, task.point.u])
    scale = float(found.scales[gap.row])
    if gap.kind == "kink":  # beside one further out the row may have a larger term than on the point
        scale = max(scale, size * abs(gap.left), size * abs(gap.right))
    place = float(z0[gap.column] + gap.distance * size)
    name, unit = task.columns[gap.column], (*task.plant.states.units, *task.plant.inputs.units)[gap.column]
    row_unit = row_units(task.plant)[gap.row]
    return Corner(
        row=task.rows[gap.row],
        column=name,
        kind=gap.kind,
        distance=gap.distance,
        place=place,
        gap=gap.gap * size / scale,
        error=gap.error * size / scale,
        left=gap.left,
        right=gap.right,
        height=gap.height,
        near=gap.maybe_near,
        sure=gap.surely_near,
        at=f"{name} = {(task.shown.get(name) or Shown(unit)).told(place, 9)}",
        row_unit=row_unit,
        slope_unit=_slope_unit(row_unit, unit),
    )


def _concluded(task: _Task, found: Slopes, corners: tuple[Corner, ...]) -> Linearization:
    claimed, wrong = _claimed(task, found)
    jacobian = found.jacobian if claimed is None or wrong else claimed
    outcome, message = _outcome(task, found, corners, wrong)
    largest, entry, error = _largest(task, found, corners)
    return Linearization(
        outcome,
        _model(task, jacobian, found.error),
        corners,
        dict(zip(task.rows, found.noise.tolist(), strict=True)),
        _source(claimed, wrong),
        wrong,
        largest,
        entry,
        error,
        message,
        _notes(task, found),
    )


def _claimed(task: _Task, found: Slopes) -> tuple[Array | None, tuple[Mismatch, ...]]:
    """The plant's own Jacobian (rates and outputs by states and inputs), if any, and its wrong entries."""
    if task.plant.plant.jacobian is None:
        return None, ()
    claimed = claimed_jacobian(task.plant, task.point)
    steps = found.scales[:, np.newaxis] / task.sizes
    return claimed, mismatches(claimed, found.jacobian, found.error, steps, task.rows, task.columns)


def _outcome(
    task: _Task, found: Slopes, corners: tuple[Corner, ...], wrong: tuple[Mismatch, ...]
) -> tuple[Outcome, str]:
    limit = task.ask.slope_gap
    over = [corner for corner in corners if corner.sure and corner.gap - corner.error > limit]
    if over:
        return Outcome.NOT_DIFFERENTIABLE, told_corner(max(over, key=lambda corner: corner.gap))
    if wrong:
        return Outcome.WRONG_JACOBIAN, wrong[0].told()
    shares = np.maximum(found.unresolved, np.where(found.grainy[:, np.newaxis], found.error, 0.0))
    shares = shares * task.sizes / np.maximum(found.scales, 1e-300)[:, np.newaxis]
    row, column = (int(index) for index in np.unravel_index(np.argmax(shares), shares.shape))
    close = [corner for corner in corners if corner.near and corner.gap + corner.error > limit]
    if close:
        return Outcome.NOISY, f"{told_corner(close[0])}; noise leaves its size or its place open"
    if shares[row, column] > limit:
        return Outcome.NOISY, (
            f"d {task.rows[row]} / d {task.columns[column]} is known to {number(100 * shares[row, column], 2)} % of "
            f"the row's largest term only; one evaluation of {task.rows[row]} carries a noise of "
            f"{with_unit(number(found.noise[row], 2), row_units(task.plant)[row])}"
        )
    return Outcome.DONE, ""


def told_corner(corner: Corner) -> str:
    """One line: what, where, how large."""
    entry = f"d {corner.row} / d {corner.column}"
    where = " at the point"
    if abs(corner.distance) >= AT:
        side = "above" if corner.distance > 0 else "below"
        where = f", {number(abs(corner.distance), 3)} nominal sizes {side} the point"
    spot = f"{where}, at {corner.at or f'{corner.column} = {number(corner.place, 9)}'}"
    if corner.kind == "jump":
        return f"{entry}: {corner.row} jumps by {with_unit(number(abs(corner.height), 4), corner.row_unit)}{spot}"
    if corner.kind == "steep":
        return f"{entry}: the slope grows without bound{spot}"
    above = with_unit(number(corner.right, 4), corner.slope_unit)
    share = number(100 * corner.gap, 3)
    return f"{entry}: slopes {number(corner.left, 4)} below and {above} above differ by {share} %{spot}"


def _largest(task: _Task, found: Slopes, corners: tuple[Corner, ...]) -> tuple[float, str, float]:
    """Largest gap on the point with the entry and its error; where there is none, what noise may be hiding."""
    near = [corner for corner in corners if corner.near]
    if near:
        corner = max(near, key=lambda corner: corner.gap)
        return corner.gap, f"d {corner.row} / d {corner.column}", corner.error
    shares = found.unresolved * task.sizes / np.maximum(found.scales, 1e-300)[:, np.newaxis]
    row, column = (int(index) for index in np.unravel_index(np.argmax(shares), shares.shape))
    return 0.0, f"d {task.rows[row]} / d {task.columns[column]}", float(shares[row, column])


def _source(claimed: Array | None, wrong: tuple[Mismatch, ...]) -> str:
    if claimed is None:
        return "central differences, extrapolated"
    if wrong:
        return "central differences, extrapolated; the plant's own Jacobian disagrees"
    return "the plant's own Jacobian, cross-checked by differences"


def _notes(task: _Task, found: Slopes) -> tuple[str, ...]:
    words = {1: "above", -1: "below"}
    notes = []
    for name, way in zip(task.columns, found.one_sided, strict=True):
        if way != 0:
            why = "as `side` says" if name in task.ask.side else "the domain ends there"
            notes.append(f"slopes by {name} are taken from {words[way]} only: {why}")
    return tuple(notes)


def _model(task: _Task, jacobian: Array, error: Array) -> LocalModel:
    plant, n = task.plant, task.plant.n
    blocks = {"A": np.s_[:n, :n], "B": np.s_[:n, n:], "C": np.s_[n:, :n], "D": np.s_[n:, n:]}
    entries = {name: frozen_array(jacobian[block]) for name, block in blocks.items()}
    return LocalModel(
        A=entries["A"],
        B=entries["B"],
        C=entries["C"],
        D=entries["D"],
        states=plant.states,
        inputs=plant.inputs,
        outputs=plant.outputs,
        at=task.point,
        step=plant.step,
        errors={name: frozen_array(error[block]) for name, block in blocks.items()},
    )
