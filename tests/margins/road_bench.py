"""The road bench: random plants, actuators and loops as specs, through `margins` to verdicts, held against algebra.

    pytest tests/margins/test_road_bench.py -m slow -s
    cd tests && python -m margins.road_bench --seeds 300 --first 0

Stability has to be told right, and every margin of every channel to 1e-6 of itself, with its crossings.
"""

from __future__ import annotations

import argparse
import math
import tempfile
import time
from collections import Counter
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from linverify.checks.judge import judge
from linverify.core.case import Options
from linverify.core.verdict import Status, Verdict
from linverify.spec.bind import load

from .response import about
from .steps import Step, stepped
from .wired import SHAPES, Wired, changed, closed, drawn, late_is_stable, transfer

CLOSE = 1e-6
Response = Callable[[np.ndarray], np.ndarray]


@dataclass(frozen=True)
class Result:
    """One case. wrong: a line for every disagreement."""

    wired: Wired
    status: Status
    wrong: tuple[str, ...] = ()
    figures: int = 0
    near_tie: bool = False


@dataclass(frozen=True)
class Scanned:
    """One channel by brute force, in double precision."""

    figures: dict[str, float]
    crossovers: list[float] = field(default_factory=list)


# -- brute force -----------------------------------------------------------------------------------------------------


def frequencies(wired: Wired) -> np.ndarray:
    """A dense grid about everything that turns."""
    A, B, C = wired.flow()
    roots = np.concatenate([np.linalg.eigvals(each) for each in (A, wired.A, wired.outer.A) if len(each)])
    whole = A - B @ wired.outer.D @ C if not wired.sample else A
    roots = np.concatenate([roots, np.linalg.eigvals(whole)])
    if wired.sample:
        discrete = np.linalg.eigvals(wired.outer.A) if len(wired.outer.A) else np.empty(0)
        roots = np.concatenate(
            [roots[: len(A) + len(wired.A)], np.log(discrete[np.abs(discrete) > 1e-9] + 0j) / wired.sample]
        )
    roots = roots[np.abs(roots) > 1e-9]
    top = math.pi / wired.sample if wired.sample else 1e4 * float(np.abs(roots).max())
    low = 1e-9 * min(float(np.abs(roots).min()), 1.0)  # T tends to one at an integrator
    parts = [np.geomspace(low, top, 8000), *(about(complex(root)) for root in roots)]
    if wired.sample:
        parts.append(np.linspace(low, top, 4000))
    elif late := wired.delay + sum(wired.outside):
        parts.append(np.arange(low, 200.0 / late, 0.05 / late))
    w = np.unique(np.concatenate(parts))
    w = w[(w > 0.0) & (w <= top)]
    return w[np.diff(w, prepend=0.0) > 1e-10 * w]


def zeros(w: np.ndarray, value: Response) -> np.ndarray:
    """Where value(w) changes its sign, by halving."""
    side = value(w) < 0.0
    place = np.flatnonzero(side[:-1] != side[1:])
    low, high, before = w[place].copy(), w[place + 1].copy(), side[place]
    for _ in range(52 if place.size else 0):
        middle = (low + high) / 2.0
        same = (value(middle) < 0.0) == before
        low, high = np.where(same, middle, low), np.where(same, high, middle)
    return (low + high) / 2.0


def peak(w: np.ndarray, value: Response) -> float:
    """The largest value on the grid and between its points."""
    heights = value(w)
    inner = np.flatnonzero((heights[1:-1] >= heights[:-2]) & (heights[1:-1] >= heights[2:])) + 1
    inner = inner[np.argsort(heights[inner])[::-1][:30]]
    low, high = w[inner - 1].copy(), w[inner + 1].copy()
    for _ in range(60 if inner.size else 0):
        left, right = high - 0.618033988749895 * (high - low), low + 0.618033988749895 * (high - low)
        up = value(left) < value(right)
        low, high = np.where(up, left, low), np.where(up, high, right)
    return max(float(heights.max()), float(value((low + high) / 2.0).max(initial=0.0)))


def scanned(wired: Wired, L: Response, w: np.ndarray) -> Scanned:
    """Margins of one channel."""
    crossing = zeros(w, lambda w: np.log(np.abs(L(w))))
    real = zeros(w, lambda w: (lambda at: at.imag / np.abs(at))(L(w)))
    real = real[np.abs(L(real).imag) < 1e-6 * np.abs(L(real))]
    at_real = L(real)
    sizes = [float(abs(each)) for each in at_real if each.real < 0.0]
    sizes += [float(abs(each)) for each in L(w[[0, -1]]) if each.real < 0.0 and abs(each.imag) < 1e-3 * abs(each)]
    turns = np.mod(np.angle(-L(crossing)), 2.0 * math.pi)
    figures = {
        "gain_up": min((1.0 / size for size in sizes if size < 1.0), default=math.inf),
        "gain_down": max((1.0 / size for size in sizes if size > 1.0), default=0.0),
        "phase": math.degrees(float(np.minimum(turns, 2.0 * math.pi - turns).min(initial=math.inf))),
        "sensitivity_peak": peak(w, lambda w: 1.0 / np.abs(1.0 + L(w))),
        "complementary_peak": peak(w, lambda w: np.abs(L(w) / (1.0 + L(w)))),
        "disk": 1.0 / peak(w, lambda w: np.abs((1.0 - L(w)) / (1.0 + L(w))) / 2.0),
    }
    if not wired.sample:
        figures["delay"] = float((turns / crossing).min(initial=math.inf))
    return Scanned(figures, [float(each) for each in crossing])


def channels(wired: Wired) -> list[Response]:
    """Each channel with the others closed."""
    whole = transfer(wired)
    if wired.shape != "square":
        return [lambda w: whole(w)[:, 0, 0]]

    def one(i: int) -> Response:
        def L(w: np.ndarray) -> np.ndarray:
            M = whole(w)
            return M[:, i, i] - M[:, i, 1 - i] * M[:, 1 - i, i] / (1.0 + M[:, 1 - i, 1 - i])

        return L

    return [one(0), one(1)]


def joint(wired: Wired, w: np.ndarray) -> dict[str, float]:
    """Of two channels at once: the largest singular values, and the disk margins at the plant's input and output.

    Two complex numbers on the diagonal: the smallest perturbation that reaches -1 is one over the least largest
    singular value of diag(d, 1) M diag(1/d, 1) over d, exactly.
    """
    inputs, outputs = transfer(changed(wired, at_output=False)), transfer(changed(wired, at_output=True))
    here = outputs if wired.at_output else inputs
    eye = np.eye(2)

    def largest(M: np.ndarray) -> np.ndarray:
        return np.linalg.svd(M, compute_uv=False)[:, 0]

    def structured(L: np.ndarray) -> np.ndarray:
        S = np.linalg.inv(eye + L)
        M = S - eye / 2.0  # (S - T) / 2
        low, high = np.full(len(L), -12.0), np.full(len(L), 12.0)

        def scaled(power: np.ndarray) -> np.ndarray:
            moved = M.copy()
            moved[:, 0, 1] *= np.exp(power)
            moved[:, 1, 0] *= np.exp(-power)
            return largest(moved)

        for _ in range(48):
            left, right = high - 0.618033988749895 * (high - low), low + 0.618033988749895 * (high - low)
            down = scaled(left) > scaled(right)
            low, high = np.where(down, left, low), np.where(down, high, right)
        return scaled((low + high) / 2.0)

    coarse = w[:: max(w.size // 1000, 1)]
    return {
        "sensitivity_peak": peak(w, lambda w: largest(np.linalg.inv(eye + here(w)))),
        "complementary_peak": peak(w, lambda w: largest(eye - np.linalg.inv(eye + here(w)))),
        "input": 1.0 / peak(coarse, lambda w: structured(inputs(w))),
        "output": 1.0 / peak(coarse, lambda w: structured(outputs(w))),
    }


# -- judging ---------------------------------------------------------------------------------------------------------


def delayed(wired: Wired) -> Wired:
    """Every other continuous loop with a dead time of part of what it bears."""
    if wired.sample or not wired.stable or wired.seed % 4 > 1:
        return wired
    w = frequencies(wired)
    bears = min(scanned(wired, L, w).figures["delay"] for L in channels(wired))
    share = 0.1 + 0.08 * (wired.seed % 10)
    if wired.shape == "square" or not 1e-6 < bears < 1e3:
        return wired
    whole = float(share * bears)
    if wired.shape == "single" and wired.seed % 8 < 4:  # part of it outside the loop's own words
        parts = (0.3 * whole, 0.5 * whole)
        return changed(wired, delay=0.2 * whole, outside=parts, tags=(*wired.tags, "dead time of the plant"))
    return changed(wired, delay=whole, tags=(*wired.tags, "dead time"))


def verdict(wired: Wired) -> Verdict:
    """What the gate says of the asked loop."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "plant.py").write_text(wired.plant_file, encoding="utf-8")
        (folder / "loop.yaml").write_text(wired.spec, encoding="utf-8")
        (case,) = load(folder / "loop.yaml", folder)
        (ask,) = (each for each in case.checks if each.name == "margins.asked")
        return judge(case, ask, Options())


def judged(seed: int) -> Result:
    """The gate and brute force on one case."""
    wired = delayed(drawn(seed))
    if wired.stable and not wired.delay and seed % 4 > 1:
        wired = changed(wired, steps=True, tags=(*wired.tags, "steps"))
    found = verdict(wired)
    growth = closed(wired).max()
    tie = abs(growth) < 1e-9
    if found.status is Status.UNDECIDED:
        return Result(wired, found.status, (f"undecided: {found.reason[:200]}",), 0, tie)
    if (found.status is Status.PASS) != wired.stable:
        told = f"{found.status}, but {'stable' if wired.stable else 'unstable'} ({growth:.3g}): {found.reason[:200]}"
        return Result(wired, found.status, (told,), 0, tie)
    if not wired.stable:
        return Result(wired, found.status, (), 0, tie)
    w, wrong, figures = frequencies(wired), [], 0
    for told, L in zip(found.details["margins"]["channels"], channels(wired), strict=True):
        exact = scanned(wired, L, w)
        figures += len(exact.figures)
        wrong += compared(told, exact)
    if wired.sample:
        figures += 1
        wrong += outlasted(wired, found.details["margins"]["channels"][0])
    if wired.steps and (steps := stepped(wired)) is not None:
        figures += 3 * len(steps)
        for told, step in zip(found.details["margins"]["steps"], steps, strict=True):
            wrong += as_seen(told, step, wired.sample or 0.0)
    if wired.shape == "square":
        exact = joint(wired, w)
        figures += len(exact)
        wrong += at_once(found.details["margins"]["all_channels"], exact)
    return Result(wired, found.status, tuple(wrong), figures, tie)


def outlasted(wired: Wired, told: dict[str, Any]) -> list[str]:
    """The delay margin of a sampled loop: stable at all dead times before, and not behind, by eigenvalues."""
    if "delay" not in told:
        return ["no delay margin is told"]
    margin, met = told["delay"]["value"], "frequency" in told["delay"]
    sample = float(wired.sample or 1.0)
    for each in min(margin, 20.0 * sample) * np.linspace(0.0, 1.0 - 1e-5, 40):
        if not late_is_stable(changed(wired, delay=wired.delay + float(each))):
            return [f"delay margin {margin}, but unstable at {each}"]
    if met and margin < 20.0 * sample and late_is_stable(changed(wired, delay=wired.delay + margin * (1.0 + 1e-4))):
        return [f"delay margin {margin}, but stable beyond"]
    return []


def as_seen(told: dict[str, Any], step: Step, sample: float) -> list[str]:
    """Step figures against what was seen at many times: straight lines between them are good for 1e-3."""
    given = {name: told[name]["value"] for name in ("overshoot", "settling")} | {"final": told["final"]}
    off = {
        "final": abs(given["final"] - step.final) > CLOSE * abs(step.final),
        "overshoot": abs(given["overshoot"] - 100.0 * step.overshoot)
        > 0.05 + (0.02 if sample else 2e-3) * given["overshoot"],
        "settling": not step.tie
        and abs(given["settling"] - step.settling) > 2e-3 * step.settling + 0.2 * sample + 1e-6,
    }
    return [f"{told['channel']}: {name} {given[name]:.8g}, as seen {step}" for name, bad in off.items() if bad]


def at_once(told: dict[str, Any], exact: dict[str, float]) -> list[str]:
    """As `compared`, of what is meant for all channels at once; disk margins come with what may be more."""
    wrong = []
    for name, value in exact.items():
        given = (told if name.endswith("peak") else told["disk"])[name]
        if not abs(given["value"] - value) <= 3.0 * CLOSE * value + given["error"]:
            wrong.append(f"all channels: {name} {given['value']:.12g}, by algebra {value:.12g}")
    disks = {side: told["disk"][side]["value"] for side in ("input", "output", "both")}
    if disks["both"] > min(disks["input"], disks["output"]) * (1.0 + CLOSE):
        wrong.append(f"all channels: disk margins {disks}")
    return wrong


def compared(told: dict[str, Any], exact: Scanned) -> list[str]:
    """A line for every figure that is not the same."""
    wrong = []
    for name, value in exact.figures.items():
        given = told[name]["value"]
        play = CLOSE * abs(value) + told[name]["error"] if math.isfinite(value) else 0.0
        rounding = min(given, value) > 1e6 if name == "gain_up" else name == "gain_down" and max(given, value) < 1e-6
        if given != value and not abs(given - value) <= play and not rounding:
            wrong.append(f"{told['channel']}: {name} {given:.12g}, by algebra {value:.12g}")
    given = [each["frequency"] for each in told["crossovers"]]
    if len(given) != len(exact.crossovers) or not np.allclose(given, exact.crossovers, rtol=CLOSE):
        wrong.append(f"{told['channel']}: crossovers {given[:6]}, by algebra {exact.crossovers[:6]}")
    return wrong


def run(seeds: Iterable[int]) -> list[Result]:
    return [judged(seed) for seed in seeds]


def report(results: list[Result]) -> str:
    """A table by shape, and a line for every disagreement."""
    lines = [f"{'':18s}" + "".join(f"{each:>12s}" for each in ("stable", "unstable", "dead time", "figures", "wrong"))]
    for shape in SHAPES:
        here = [each for each in results if each.wired.shape == shape and not each.near_tie]
        counts = Counter(each.wired.stable for each in here)
        cells = (
            counts[True], counts[False], sum(each.wired.delay > 0 for each in here),
            sum(each.figures for each in here), sum(bool(each.wrong) for each in here),
        )  # fmt: skip
        lines.append(f"{shape:18s}" + "".join(f"{cell or '.':>12}" for cell in cells))
    lines.append("")
    lines += [f"{each.wired.told}: {line}" for each in results if not each.near_tie for line in each.wrong]
    return "\n".join(lines)


def main() -> None:
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--seeds", type=int, default=60, help="how many")
    parser.add_argument("--first", type=int, default=0)
    given = parser.parse_args()
    began = time.perf_counter()
    results = run(range(given.first, given.first + given.seeds))
    print(report(results))
    print(f"\n{len(results)} loops in {time.perf_counter() - began:.0f} s")


if __name__ == "__main__":
    main()
