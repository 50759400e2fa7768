"""The worst drive by brute force: a fixed-step integrator of our own, every drive at once, and a stubborn hunt.

Plant and model are sampled at NODES points of each interval, with both sides of every jump. Drives are rows of a table
of deviations at the instants; what a rate limit forbids is followed as fast as it allows. The hunt starts from a
library (steps, bang-bang, random levels), adds the drives that are worst for the linear difference of two models (signs
of its pulse response, or a linear programme under rate limits), and climbs by changing one value or tail at a time.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from scipy.linalg import expm
from scipy.optimize import linprog

from linverify.core.case import Band, Case, DriveSet

from .nature import Here, Matrices, Matrix, Parameters, output_names, rates, readings

NODES = 16
RESOLVED = 5e-5  # of a signal's excursion: largest change when the steps are halved
LIBRARY, BEST, ROUNDS = 160, 3, 5


@dataclass(frozen=True)
class Drives:
    """N drives: values (N, K, m) of the driven inputs about trim, offsets (N, p) of the declared states."""

    values: Matrix
    offsets: Matrix

    def pick(self, rows: Sequence[int]) -> Drives:
        return Drives(self.values[list(rows)], self.offsets[list(rows)])


def together(parts: Sequence[Drives]) -> Drives:
    return Drives(np.concatenate([p.values for p in parts]), np.concatenate([p.offsets for p in parts]))


@dataclass(frozen=True)
class Worst:
    """By band: the largest share of its limit that was found."""

    shares: tuple[float, ...]
    drives: Drives

    @property
    def share(self) -> float:
        return max(self.shares)


@dataclass
class Field:
    """One plant at one point under one declared set of drives."""

    case: Case
    drives: DriveSet
    parameters: Parameters
    here: Here
    slopes: Matrices
    signals: tuple[str, ...]
    substeps: int = 0
    library: Drives = field(init=False)
    moved: Matrix = field(init=False)  # the plant's answers to the library, (q, K, NODES + 1, N)

    def __post_init__(self) -> None:
        self.inputs = [list(self.case.plant.inputs).index(name) for name in self.drives.amplitude]
        self.started = [list(self.case.plant.states).index(name) for name in self.drives.offsets]
        self.high = np.array([one.high for one in self.drives.amplitude.values()])
        self.low = np.array([one.low for one in self.drives.amplitude.values()])
        self.step = np.array([self.drives.rate.get(name, np.inf) for name in self.drives.amplitude]) * self.drives.every
        self.reach = np.array(list(self.drives.offsets.values()))
        self.library = self._library()
        self._resolve()
        self.moved = self.plant(self.library)

    # -- drives ------------------------------------------------------------------------------------------------------

    def kept(self, values: Matrix) -> Matrix:
        """Cut to amplitude, and to the rate from one instant to the next."""
        wanted = np.clip(values, self.low, self.high)
        if not np.any(np.isfinite(self.step)):
            return wanted
        out, before = np.empty_like(wanted), np.zeros((len(wanted), len(self.high)))
        for k in range(wanted.shape[1]):
            before = np.clip(wanted[:, k], before - self.step, before + self.step)
            out[:, k] = before
        return out

    def sized(self, shape: Matrix) -> Matrix:
        """From [-1, 1] to deviations."""
        return np.where(shape >= 0, shape * self.high, -shape * self.low)

    def _library(self) -> Drives:
        generator = np.random.default_rng(5)
        K, m, p = self.drives.intervals, len(self.high), len(self.reach)
        shapes = []
        for signs in np.stack(np.meshgrid(*[[-1.0, 0.0, 1.0]] * m), -1).reshape(-1, m):
            if np.any(signs):
                for first in range(0, K, max(1, K // 4)):
                    step = np.zeros((K, m))
                    step[first:] = signs
                    shapes.append(step)
        for _ in range(LIBRARY):
            length = int(generator.integers(1, max(2, K // 2)))
            blocks = generator.choice([-1.0, 1.0], size=(K // length + 2, m))
            shapes.append(np.repeat(blocks, length, axis=0)[int(generator.integers(length)) :][:K])
        shapes += list(generator.uniform(-1, 1, size=(LIBRARY // 4, K, m)))
        values = self.kept(self.sized(np.array(shapes)))
        offsets = (
            self.reach * generator.choice([-1.0, 0.0, 1.0], size=(len(values), p)) if p else np.zeros((len(values), 0))
        )
        return Drives(values, offsets)

    # -- simulation --------------------------------------------------------------------------------------------------

    def _resolve(self) -> None:
        """Steps halved until the plant's answers stand still."""
        fastest = float(np.abs(np.linalg.eigvals(self.slopes.A)).max())
        per_node = max(1, int(np.ceil(fastest * self.drives.every / NODES / 1.2)))
        some = self.library.pick(range(0, len(self.library.values), 12))
        self.substeps = per_node
        coarse = self.plant(some)
        for _ in range(6):
            self.substeps *= 2
            fine = self.plant(some)
            size = np.abs(fine).max(axis=(1, 2, 3))
            if np.all(np.abs(fine - coarse).max(axis=(1, 2, 3)) <= 15 * RESOLVED * size):
                return  # of fourth order: the halved step is sixteen times better than the difference says
            coarse = fine
        raise ArithmeticError(f"{self.case.point} cannot be resolved by fixed steps")

    def plant(self, drives: Drives) -> Matrix:
        """Deviations of the compared signals of the plant, (q, K, NODES + 1, N)."""
        K, N = drives.values.shape[1], len(drives.values)
        x = np.repeat(self.here.x[:, np.newaxis], N, axis=1)
        for column, row in enumerate(self.started):
            x[row] += drives.offsets[:, column]
        out = np.empty((len(self.signals), K, NODES + 1, N))
        h = self.drives.every / (NODES * self.substeps)
        for k in range(K):
            begin, end = self._ends(drives, k)
            for node in range(NODES + 1):
                out[:, k, node] = self._read(x, self._between(begin, end, node / NODES))
                if node < NODES:
                    for sub in range(self.substeps):
                        x = self._advance(x, begin, end, (node + sub / self.substeps) / NODES, h)
        return out

    def _ends(self, drives: Drives, k: int) -> tuple[Matrix, Matrix]:
        now = drives.values[:, k].T
        if self.drives.course == "held":
            return now, now
        return (drives.values[:, k - 1].T if k else np.zeros_like(now)), now

    def _between(self, begin: Matrix, end: Matrix, share: float) -> Matrix:
        u = np.repeat(self.here.u[:, np.newaxis], begin.shape[1], axis=1)
        u[self.inputs] += begin + (end - begin) * share
        return u

    def _advance(self, x: Matrix, begin: Matrix, end: Matrix, share: float, h: float) -> Matrix:
        part = 1.0 / (NODES * self.substeps)
        first, middle, last = (self._between(begin, end, share + add) for add in (0.0, part / 2, part))
        k1 = rates(self.case, self.parameters, x, first)
        k2 = rates(self.case, self.parameters, x + h / 2 * k1, middle)
        k3 = rates(self.case, self.parameters, x + h / 2 * k2, middle)
        k4 = rates(self.case, self.parameters, x + h * k3, last)
        return x + h / 6 * (k1 + 2 * k2 + 2 * k3 + k4)

    def _read(self, x: Matrix, u: Matrix) -> Matrix:
        y = readings(self.case, self.parameters, x, u)
        states, outputs = list(self.case.plant.states), output_names(self.case)
        rows = []
        for name in self.signals:
            if name in outputs:
                rows.append(y[outputs.index(name)] - self.here.y[outputs.index(name)])
            else:
                rows.append(x[states.index(name)] - self.here.x[states.index(name)])
        return np.array(rows)

    def linear(self, model: Matrices, drives: Drives) -> Matrix:
        """Deviations that a model predicts, on the same samples; a sampled model's stand still in between."""
        K, N, m = drives.values.shape[1], len(drives.values), len(model.inputs)
        x = np.zeros((len(model.states), N))
        for column, name in enumerate(self.drives.offsets):
            if name in model.states:
                x[model.states.index(name)] += drives.offsets[:, column]
        columns = [model.inputs.index(name) for name in self.drives.amplitude]
        move, push, tilt = _exact(model, self.drives.every / NODES)
        skip = 1 if model.step is None else round(NODES * model.step / self.drives.every)
        rows, through = self._reader(model)
        out = np.empty((len(self.signals), K, NODES + 1, N))
        for k in range(K):
            begin, end = self._ends(drives, k)
            u0, slope = np.zeros((m, N)), np.zeros((m, N))
            u0[columns], slope[columns] = begin, (end - begin) / self.drives.every
            for node in range(NODES + 1):
                u = u0 + slope * (node * self.drives.every / NODES)
                out[:, k, node] = rows @ x + through @ u
                if node < NODES and model.step is None:
                    x = move @ x + push @ u + tilt @ slope
                elif node < NODES and node % skip == skip - 1:
                    x = model.A @ x + model.B @ u0
        return out

    def _reader(self, model: Matrices) -> tuple[Matrix, Matrix]:
        n, m = model.B.shape
        rows, through = [], []
        for name in self.signals:
            if name in model.outputs:
                rows.append(model.C[model.outputs.index(name)])
                through.append(model.D[model.outputs.index(name)])
            else:
                rows.append(np.eye(n)[model.states.index(name)])
                through.append(np.zeros(m))
        return np.array(rows), np.array(through)

    # -- bands -------------------------------------------------------------------------------------------------------

    def shares(self, plant: Matrix, model: Matrix, bands: Sequence[Band], step: float | None) -> Matrix:
        """Used share of every band, (B, N)."""
        skip = 1 if step is None else round(NODES * step / self.drives.every)
        if step is not None:  # only values at samples mean anything, with the input that comes after
            plant, model = (np.array(one) for one in (plant, model))
            for one in (plant, model):
                one[:, :-1, -1] = one[:, 1:, 0]
        plant, error = plant[:, :, ::skip], np.abs(plant - model)[:, :, ::skip]
        found = []
        for band in bands:
            at = self.signals.index(band.signal)
            peak = np.abs(plant[at]).max(axis=(0, 1))
            if band.kind == "rms":
                squares = error[at] ** 2
                worst = np.sqrt(((squares[:, 1:] + squares[:, :-1]) / 2).mean(axis=(0, 1)))
            else:
                worst = error[at].max(axis=(0, 1))
            limit = np.maximum(band.limit, band.fraction * peak) if band.kind == "wider_of" else band.limit
            found.append(worst / limit)
        return np.array(found)

    # -- the hunt ----------------------------------------------------------------------------------------------------

    def hunt(self, model: Matrices, against: Matrices, bands: Sequence[Band], enough: float = np.inf) -> Worst:
        """The largest share of each band. against: the right model; enough: a share at which the hunt may stop."""
        everything, shares = self.library, self.judged(model, self.library, bands, self.moved)
        fresh = self._of_difference(model, against)
        for _ in range(ROUNDS):
            if shares.max() > enough:
                break
            if len(fresh.values):
                before = shares.max(axis=1)
                everything, shares = (
                    together((everything, fresh)),
                    np.concatenate((shares, self.judged(model, fresh, bands)), axis=1),
                )
                if _ and np.all(shares.max(axis=1) <= 1.0005 * before):
                    break
            best = list(dict.fromkeys(int(c) for row in shares for c in np.argsort(-row)[:BEST]))
            fresh = self._near(everything.pick(best))
        return Worst(tuple(float(row.max()) for row in shares), everything.pick([int(r.argmax()) for r in shares]))

    def judged(self, model: Matrices, drives: Drives, bands: Sequence[Band], moved: Matrix | None = None) -> Matrix:
        """Shares (B, N) of some drives."""
        plant = self.plant(drives) if moved is None else moved
        return self.shares(plant, self.linear(model, drives), bands, model.step)

    def _near(self, best: Drives) -> Drives:
        """Each with one value, or everything from one instant on, at another level; offsets turned."""
        values, offsets = [], []
        for course, offset in zip(best.values, best.offsets, strict=True):
            for k in range(course.shape[0]):
                for j in range(course.shape[1]):
                    for level in (self.low[j], 0.0, self.high[j]):
                        for tail in (slice(k, k + 1), slice(k, None)):
                            if np.any(course[tail, j] != level):
                                changed = course.copy()
                                changed[tail, j] = level
                                values.append(changed)
                                offsets.append(offset)
            for p in range(len(offset)):
                turned = offset.copy()
                turned[p] = -offset[p] if offset[p] else self.reach[p]
                values.append(course)
                offsets.append(turned)
        return Drives(self.kept(np.array(values)), np.array(offsets).reshape(len(values), -1))

    def _of_difference(self, model: Matrices, against: Matrices) -> Drives:
        """Worst drives of the linear difference: for every signal and end of an interval, up and down."""
        K, m, p = self.drives.intervals, len(self.high), len(self.reach)
        pulses = np.zeros((m + p, K, m))
        pulses[np.arange(m), 0, np.arange(m)] = 1.0
        starts = np.zeros((m + p, p))
        starts[m + np.arange(p), np.arange(p)] = 1.0
        some = Drives(pulses, starts)
        gap = self.linear(against, some) - self.linear(model, some)
        values, offsets = [], []
        for answer in gap:
            for last in range(K):
                weights = answer[last::-1, NODES, :m]  # weight of interval 0, 1, ..., last
                shape = np.zeros((K, m))
                shape[: last + 1] = weights
                for sign in (1.0, -1.0):
                    values.append(self._best(sign * shape))
                    offsets.append(sign * self.reach * np.sign(answer[last, NODES, m:]))
        return Drives(np.array(values), np.array(offsets).reshape(len(values), -1))

    def _best(self, weights: Matrix) -> Matrix:
        """The allowed course with the largest sum of weights times values."""
        limited = np.flatnonzero(np.isfinite(self.step))
        best = np.where(weights > 0, self.high, np.where(weights < 0, self.low, 0.0))
        for j in limited:
            K = len(weights)
            change = np.eye(K) - np.eye(K, k=-1)
            scale = float(np.abs(weights[:, j]).max()) or 1.0
            found = linprog(
                -weights[:, j] / scale,
                A_ub=np.vstack([change, -change]),
                b_ub=np.full(2 * K, self.step[j]),
                bounds=[(self.low[j], self.high[j])] * K,
            )
            best[:, j] = found.x
        return self.kept(best[np.newaxis])[0]


def _exact(model: Matrices, h: float) -> tuple[Matrix, Matrix, Matrix]:
    """State after h from state, input and slope of the input, exactly; zeros for a sampled model."""
    n, m = model.B.shape
    if model.step is not None:
        return np.zeros((n, n)), np.zeros((n, m)), np.zeros((n, m))
    whole = np.zeros((n + 2 * m, n + 2 * m))
    whole[:n, :n], whole[:n, n : n + m] = model.A * h, model.B * h
    whole[n : n + m, n + m :] = np.eye(m) * h
    made = expm(whole)
    return made[:n, :n], made[:n, n : n + m], made[:n, n + m :]


def excursions(field: Field) -> Mapping[str, float]:
    """Largest deviation of each compared signal over the library."""
    return {name: float(np.abs(field.moved[row]).max()) for row, name in enumerate(field.signals)}
