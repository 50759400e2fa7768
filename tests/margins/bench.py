"""The margins bench: random loops through the library's margins, held against brute force that shares no code with it.

    pytest tests/margins -m slow -s
    cd tests && python -m margins.bench --seeds 2000 --first 0

Each seed draws a loop. The verdict on stability must be the same, no crossing may be missed, and every margin must be
right to 1e-6 of itself, or within the error stated beside it, which is counted apart. One table comes out, and a line
for every disagreement.
"""

from __future__ import annotations

import argparse
import math
import time
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

import numpy as np

from linverify.core.outcome import Outcome
from linverify.numerics.margins import Crossing, Found, Margins, margins
from linverify.numerics.transfer import Transfer

from .loops import Drawn, drawn
from .oracle import Truth, truth
from .response import Loop

CLOSE = 1e-6  # of the figure
FIGURES = ("gain_up", "gain_down", "phase", "delay", "disk", "sensitivity", "complementary")
ROWS = ("stable", "crossovers", "phase_crossings", *FIGURES)
WORDS = ("right", "stated", "wrong", "undecided")
BAD = ("wrong", "undecided")


@dataclass(frozen=True)
class Result:
    """One loop. words: row of the table to outcome; notes: a line for everything that is not right."""

    ask: Drawn
    truth: Truth
    answer: Margins | None
    words: dict[str, str]
    notes: dict[str, str] = field(default_factory=dict)
    near_tie: bool = False

    def bad(self) -> list[str]:
        return [] if self.near_tie else [row for row, word in self.words.items() if word in BAD]


def transfer(loop: Loop) -> Transfer:
    """The loop as the library takes it."""
    D = np.array([[loop.D]])
    return Transfer(loop.A, loop.B[:, None], loop.C[None, :], D, delay=loop.delay, step=loop.step)


def judged(ask: Drawn) -> Result:
    """Library and brute force on one loop."""
    known, words, notes = truth(ask.loop), {}, {}
    answer = margins(transfer(ask.loop))
    tie = 1.0 / known.sensitivity < 1e-7 or abs(known.growth) < 1e-11
    if answer.outcome is not Outcome.DONE:
        words, notes = {"stable": "undecided"}, {"stable": f"{answer.outcome.name} {answer.why}"}
        return Result(ask, known, answer, words, notes, tie)
    words["stable"] = "right" if answer.stable == known.stable else "wrong"
    if words["stable"] == "wrong":
        notes["stable"] = f"{answer.stable}, truth {known.stable}: {known.unstable} unstable, growth {known.growth:.3g}"
    elif known.stable:
        compare(ask.loop, known, answer, words, notes)
    return Result(ask, known, answer, words, notes, tie)


def compare(loop: Loop, known: Truth, answer: Margins, words: dict[str, str], notes: dict[str, str]) -> None:
    """Fill in what the figures and crossings of a stable loop are worth."""
    for name in FIGURES:
        if name == "delay" and loop.step is not None:
            continue  # no quotient of phase and frequency
        found, exact = getattr(answer, name), getattr(known, name)
        words[name] = word(found, exact)
        if words[name] != "right":
            where = known.where.get(name, math.nan)
            notes[name] = f"{found.value:.15g} +- {found.error:.2g} at {found.frequency:.12g}, truth {exact:.15g} at "
            notes[name] += f"{where:.12g} (off by {relative(found.value, exact):.2g})"
    lists = (("crossovers", known.crossovers), ("phase_crossings", known.phase_crossings))
    for name, exact in lists:
        words[name], note = matched(loop, exact, getattr(answer, name), gain=name == "crossovers")
        if note:
            notes[name] = note


def word(found: Found, exact: float) -> str:
    """Right to CLOSE, or within the error that is stated, or wrong."""
    if found.value == exact or relative(found.value, exact) <= CLOSE:
        return "right"
    if math.isinf(exact) and found.value > 1.0:  # none, against one so large that its error reaches infinity
        return "stated" if found.error >= found.value else "wrong"
    return "stated" if abs(found.value - exact) <= found.error else "wrong"


def relative(value: float, exact: float) -> float:
    return abs(value - exact) / abs(exact) if exact and math.isfinite(exact) else math.inf


def matched(loop: Loop, exact: np.ndarray, given: Sequence[Crossing], *, gain: bool) -> tuple[str, str]:
    """Whether every crossing of brute force was met, and every other one holds when it is evaluated.

    With a dead time there are ever more phase crossings: up to the highest one that was given.
    """
    inner = np.array([each.frequency for each in given if 0.0 < each.frequency < min(loop.top, math.inf)])
    shifts = np.array([each.shift for each in given if 0.0 < each.frequency < min(loop.top, math.inf)])
    if loop.delay and not gain:
        exact = exact[exact <= inner.max(initial=0.0) * (1.0 + CLOSE)]
    apart = np.abs(exact[:, None] - inner[None, :]) if inner.size else np.full((exact.size, 1), np.inf)
    nearest = apart.argmin(axis=1) if exact.size else np.empty(0, int)
    least = apart.min(axis=1) if exact.size else np.empty(0)
    right = least <= CLOSE * exact
    stated = least <= (shifts[nearest] if inner.size else 0.0)
    missed = exact[~(right | stated)]
    if missed.size:
        return "wrong", f"missed {missed[:4]}, given {inner[:8]}"
    false = [w for w in inner if not holds(loop, float(w), gain=gain)]
    if false:
        return "wrong", f"none at {false[:4]}"
    return ("right", "") if right.all() else ("stated", f"off by {(least / exact).max():.2g}")


def holds(loop: Loop, w: float, *, gain: bool) -> bool:
    """Whether L is on the unit circle or the negative axis within 1e-6 of the frequency."""
    L, slope = (complex(each[0]) for each in loop.exact(np.array([w])))
    play = CLOSE * (w * abs(slope) + abs(L))
    return abs(abs(L) - 1.0) <= play if gain else L.real < 0.0 and abs(L.imag) <= play


def run(seeds: Iterable[int]) -> list[Result]:
    """Judge some seeds."""
    return [judged(drawn(seed)) for seed in seeds]


# -- telling ---------------------------------------------------------------------------------------------------------


def table(results: Sequence[Result]) -> str:
    """Figure by outcome, near ties left out."""
    clear = [result for result in results if not result.near_tie]
    lines = [f"{'':18s}" + "".join(f"{each:>12s}" for each in ("loops", *WORDS))]
    for row in ROWS:
        counts = Counter(result.words[row] for result in clear if row in result.words)
        cells = [sum(counts.values()), *(counts[each] for each in WORDS)]
        lines.append(f"{row:18s}" + "".join(f"{cell or '.':>12}" for cell in cells))
    return "\n".join(lines)


def kinds(results: Sequence[Result]) -> str:
    """What was drawn: tag by closed loops that are stable, not stable, and wrong in any row."""
    counts: dict[str, Counter[str]] = {}
    for result in results:
        for tag in ("all", result.ask.kind, *result.ask.tags):
            here = counts.setdefault(tag, Counter())
            here["near ties" if result.near_tie else "stable" if result.truth.stable else "unstable"] += 1
            here["wrong"] += bool(result.bad())
    words = ("stable", "unstable", "near ties", "wrong")
    lines = [f"{'':20s}" + "".join(f"{each:>12s}" for each in words)]
    return "\n".join(lines + [f"{tag:20s}" + "".join(f"{n[w] or '.':>12}" for w in words) for tag, n in counts.items()])


def disagreements(results: Sequence[Result]) -> list[str]:
    """A line for every row that is wrong or came to no answer."""
    return [
        f"{result.words[row]}: {result.ask.told}: {row}: {result.notes.get(row, '')}"
        for result in results
        for row in result.bad()
    ]


def report(results: Sequence[Result]) -> str:
    """Tables and lines, ready to be printed."""
    stated = [f"stated: {r.ask.told}: {n}: {r.notes[n]}" for r in results for n, w in r.words.items() if w == "stated"]
    return "\n\n".join([table(results), kinds(results), "\n".join(disagreements(results)), "\n".join(stated[:40])])


def main() -> None:
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--seeds", type=int, default=150, help="how many")
    parser.add_argument("--first", type=int, default=0)
    given = parser.parse_args()
    began = time.perf_counter()
    results = run(range(given.first, given.first + given.seeds))
    print(report(results))
    print(f"\n{len(results)} loops in {time.perf_counter() - began:.0f} s")


if __name__ == "__main__":
    main()
