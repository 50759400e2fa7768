"""The fault bench: does the gate catch every model that breaks its spec, and no other?

    pytest tests/faults -m slow -s
    cd tests && python -m faults.bench --seeds 330 --first 0

Each seed draws a subject, a delivered model that is right and one with one fault, bands and limits, judges both through
the checks, and holds the verdicts against brute force. One table comes out, and a line for every disagreement.
"""

from __future__ import annotations

import argparse
import re
import tempfile
import time
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from functools import cache
from pathlib import Path

import numpy as np

from linverify.checks.judge import judge_study
from linverify.checks.study import Study
from linverify.core.case import Band, Case, CheckAsk, Options
from linverify.core.delivered import AgreeAsk, DeliveredModel, LocalAsk, ResponseAsk
from linverify.core.drive import Drive
from linverify.core.verdict import Status, Verdict
from linverify.drives import pinned

from .deliver import FAULTS, MATRICES, Delivery, Ground, handed, right
from .hunt import Drives, Field, Worst, excursions
from .nature import Matrices, equilibrium, held, responses, slopes, without
from .subjects import PLACE, TABLE, Subject, subject

FREQUENCIES = 4000
NEAR = 0.005  # of the limit: a truth nearer than this says nothing about the gate
SLACK = 1.05  # bands are this much wider than the worst error of the right model, and a share of the motion more
SHARES = (0.005, 0.02, 0.08)
OUTCOMES = ("caught", "missed", "right pass", "false alarm", "undecided, broken", "undecided, within", "near tie")


@dataclass(frozen=True)
class Ask:
    """One case as drawn: what is delivered, what is asked of it, and what the truth needs."""

    seed: int
    kind: str  # of the fault; "none"
    form: str  # full, reduced or sampled
    delivery: Delivery
    model: DeliveredModel
    case: Case
    ground: Ground
    field: Field

    @property
    def told(self) -> str:
        size = f" {self.delivery.size}" if self.delivery.size else ""
        return (
            f"seed {self.seed}: {self.ground.subject.name}, {self.form}, {self.kind}{size}, {self.model.digits} digits"
        )


@dataclass(frozen=True)
class Answer:
    """What one check said, and what is true: the used share of its tightest limit, 1 at the limit."""

    check: str
    status: Status
    share: float
    reason: str

    @property
    def outcome(self) -> str:
        return outcome(self.status, self.share)


@dataclass(frozen=True)
class Guess:
    """What the gate takes for the cause."""

    kind: str
    text: str


@dataclass(frozen=True)
class Result:
    """All checks of one case. cause: the guess of the gate, None where it made none."""

    ask: Ask
    answers: tuple[Answer, ...]
    cause: Guess | None

    @property
    def outcome(self) -> str:
        """Of the whole spec: it is broken where any check's limit is."""
        clear = [a.share for a in self.answers if a.share > 1.0 + NEAR]
        share = max(clear, default=max(a.share for a in self.answers))
        statuses = [a.status for a in self.answers]
        status = next((s for s in (Status.FAIL, Status.UNDECIDED) if s in statuses), Status.PASS)
        return outcome(status, share)


def outcome(status: Status, share: float) -> str:
    """The word for a verdict beside the truth."""
    if abs(share - 1.0) <= NEAR:
        return "near tie"
    if status is Status.UNDECIDED:
        return "undecided, broken" if share > 1.0 else "undecided, within"
    if share > 1.0:
        return "caught" if status is Status.FAIL else "missed"
    return "right pass" if status is Status.PASS else "false alarm"


# -- drawing ---------------------------------------------------------------------------------------------------------


@cache
def ground_of(name: str, form: str) -> Ground:
    """The right model of a subject in a form, found by brute force."""
    one = subject(name)
    here = equilibrium(one.case, one.case.parameters)
    whole = slopes(one.case, one.case.parameters, here)
    made = {
        "full": lambda: whole,
        "reduced": lambda: without(whole, one.row.keep, one.row.others),
        "sampled": lambda: held(whole, one.row.every / 2.0),
    }
    return Ground(one, here, whole, made[form]())


@cache
def field_of(name: str) -> Field:
    ground = ground_of(name, "full")
    one = ground.subject
    return Field(one.case, one.drives, one.case.parameters, ground.here, ground.whole, one.row.signals)


@cache
def base_of(name: str, form: str) -> dict[tuple[str, str], float]:
    """The worst error of the right model by signal and kind of band: what nonlinearity (and the reduction) cost."""
    field, model = field_of(name), ground_of(name, form).right
    sizes = excursions(field)
    bands = [_band(signal, kind, sizes[signal]) for signal in field.signals for kind in ("peak", "rms")]
    worst = field.hunt(model, model, bands)
    return {(b.signal, b.kind): share * b.limit for b, share in zip(bands, worst.shares, strict=True)}


def _band(signal: str, kind: str, limit: float) -> Band:
    return Band(signal, "rms" if kind == "rms" else "peak", limit, place=PLACE)


def drawn(seed: int, faulty: bool, among: Sequence[str] = tuple(TABLE)) -> Ask:
    """The case of a seed. The right and the faulty case of a seed differ in all that is drawn. among: subjects."""
    generator = np.random.default_rng([seed, int(faulty), 20_261])
    kind = list(FAULTS)[seed % len(FAULTS)] if faulty else "none"
    form, name = _form_and_subject(kind, generator, among)
    ground = ground_of(name, form)
    delivery = FAULTS[kind](ground, generator) if faulty else right(ground, generator)
    digits = int(generator.choice([5, 6, 17] if faulty else [4, 5, 6, 17]))
    model = handed(delivery, digits, generator)
    case = _case(ground, form, generator)
    checks = ("agrees", "follows")
    field = field_of(name)
    if delivery.plant is not None:
        case = replace(case, plant=delivery.plant)
        checks = ("differentiable", "agrees", "follows")
        field = Field(case, ground.subject.drives, case.parameters, ground.here, ground.whole, field.signals)
    limit = float(generator.choice([0.005, 0.02, 0.1]))
    keep = ground.subject.keep if form == "reduced" else None
    case = replace(
        case,
        spec=f"faults/{seed}{'f' if faulty else 'r'}.yaml",
        local=LocalAsk(
            model, keep, AgreeAsk(entries=limit, response=_response(ground.subject, generator), place=PLACE)
        ),
        checks=tuple(CheckAsk(check, PLACE) for check in checks),
    )
    return Ask(seed, kind, form, delivery, model, case, ground, field)


def _response(one: Subject, generator: np.random.Generator) -> ResponseAsk | None:
    """Asked for in half of the cases, from once a horizon to far below what a sampled model can say."""
    if generator.random() < 0.5:
        return None
    within = float(generator.choice([0.01, 0.05, 0.2]))
    return ResponseAsk(within, 1.0 / one.drives.horizon, 2.0 / one.drives.every, 0.02, PLACE)


def _form_and_subject(kind: str, generator: np.random.Generator, among: Sequence[str]) -> tuple[str, str]:
    forms = {"reduced wrongly": "reduced", "sample time": "sampled", "corner": "full"}
    form = forms.get(kind) or str(generator.choice(["full", "reduced", "sampled"], p=[0.7, 0.15, 0.15]))
    names = [
        name
        for name, row in ((name, TABLE[name]) for name in among)
        if not (form == "reduced" and not row.keep) and not (form == "sampled" and row.course == "straight")
    ]
    return form, names[int(generator.integers(len(names)))]


def _case(ground: Ground, form: str, generator: np.random.Generator) -> Case:
    """With bands: a little wider than the right model needs, and a share of the motion."""
    one = ground.subject
    sizes, base = excursions(field_of(one.name)), base_of(one.name, form)
    share = float(generator.choice(SHARES))
    bands = []
    for signal in one.row.signals:
        kinds = ["peak"] if generator.random() < 0.6 else ["rms", "wider_of"]
        for kind in kinds:
            need = base[signal, "rms" if kind == "rms" else "peak"]
            limit = SLACK * need + share * sizes[signal]
            if kind == "wider_of":
                bands.append(Band(signal, "wider_of", limit, fraction=0.5 * limit / sizes[signal], place=PLACE))
            else:
                bands.append(_band(signal, kind, limit))
    return replace(one.case, bands=tuple(bands))


# -- truth -----------------------------------------------------------------------------------------------------------


def by_name(model: DeliveredModel, like: Matrices) -> Matrices:
    """What was handed over, in the order of `like`."""
    states = model.states or like.states
    s, i, o = (
        [theirs.index(name) for name in ours]
        for theirs, ours in ((states, like.states), (model.inputs, like.inputs), (model.outputs, like.outputs))
    )
    A, B, C, D = (np.asarray(getattr(model, name)) for name in MATRICES)
    return Matrices(
        A[np.ix_(s, s)], B[np.ix_(s, i)], C[np.ix_(o, s)], D[np.ix_(o, i)],
        like.states, like.inputs, like.outputs, model.step,
    )  # fmt: skip


def true_entries(ask: Ask) -> float:
    """Largest share of the limit on entries: |difference| x nominal size of the column over the row's largest term."""
    ours = ask.ground.right
    theirs = by_name(ask.model, ours)
    x, u = (np.array([ask.case.nominal.get(name, 1.0) for name in names]) for names in (ours.states, ours.inputs))
    moved = ours.A - np.eye(len(x)) if ours.step is not None else ours.A
    worst = 0.0
    for left, right_, a, b in (("A", "B", moved, ours.B), ("C", "D", ours.C, ours.D)):
        scale = np.abs(np.hstack([a * x, b * u])).max(axis=1)
        for name, size in ((left, x), (right_, u)):
            away = np.abs(getattr(theirs, name) - getattr(ours, name)) * size
            worst = max(worst, float((away / scale[:, np.newaxis]).max(initial=0.0)))
    return worst / (ask.case.local.agree.entries or np.inf)


def true_response(ask: Ask) -> float:
    """Largest share of the limit on the response, over a dense grid that is made denser about its largest values."""
    wanted = ask.case.local.agree.response
    if wanted is None:
        return 0.0
    ours, theirs = ask.ground.right, by_name(ask.model, ask.ground.right)
    u, y = (np.array([ask.case.nominal.get(name, 1.0) for name in names]) for names in (ours.inputs, ours.outputs))
    grid = np.geomspace(wanted.low, wanted.high, FREQUENCIES)
    right_, wrong = responses(ours, grid), responses(theirs, grid)
    peak = np.abs(right_).max(axis=0)
    # what is nothing but rounding beside all that these inputs do to all outputs is no difference
    nothing = 1e-10 * (peak * u / y[:, np.newaxis]).max() * y[:, np.newaxis] / u

    def share(right_: np.ndarray, wrong: np.ndarray) -> np.ndarray:
        away = np.abs(wrong - right_)
        least = np.maximum(np.abs(right_), np.maximum(wanted.floor * peak, 1e-300))
        return np.where(away > nothing, away / least, 0.0).max(axis=(1, 2))

    worst = share(right_, wrong)
    for at in np.argsort(-worst)[:3]:
        near = np.geomspace(grid[max(at - 1, 0)], grid[min(at + 1, len(grid) - 1)], FREQUENCIES // 4)
        worst = np.append(worst, share(responses(ours, near), responses(theirs, near)))
    return float(worst.max()) / wanted.within


def true_point(ask: Ask) -> float:
    """Largest share of the limit on what is claimed of the operating point."""
    plant, here = ask.case.plant, ask.ground.here
    ours = dict(zip((*plant.states, *plant.inputs), (*here.x, *here.u), strict=True))
    claims = {**ask.model.x0, **ask.model.u0}
    away = [abs(value - ours[name]) / ask.case.nominal.get(name, 1.0) for name, value in claims.items()]
    return max(away, default=0.0) / ask.case.local.agree.point


def true_corner(ask: Ask) -> float:
    """The gap of the planted corner as a share of what is allowed; it is twice the size of the corner."""
    return 2.0 * float(ask.delivery.size) / ask.case.slopes.slope_gap


def true_error(ask: Ask) -> Worst:
    """The worst drive that brute force finds."""
    theirs = by_name(ask.model, ask.ground.right)
    return ask.field.hunt(theirs, ask.ground.right, ask.case.bands, enough=1.0 + 4 * NEAR)


def cited(ask: Ask) -> float:
    """Share that the worst of the drives reaches which the gate itself names, simulated by brute force.

    A hunt may stop short of what the gate found; a drive of the declared set that breaks a band settles it.
    """
    with tempfile.TemporaryDirectory() as folder:
        options = Options(seed=ask.seed, profile="quick", reports=Path(folder))
        judge_study(Study(ask.case, options), CheckAsk("follows", PLACE))
        drives = [pinned.read(path)[0] for path in sorted(Path(folder).rglob("*.json"))]
    return max((_replayed(ask, drive) for drive in drives), default=0.0)


def _replayed(ask: Ask, drive: Drive) -> float:
    names = list(ask.ground.subject.drives.amplitude)
    values = np.zeros((1, drive.intervals, len(names)))
    for column, name in enumerate(drive.inputs):
        values[0, :, names.index(name)] = drive.values[:, column]
    offsets = np.array([[drive.offsets.get(name, 0.0) for name in ask.ground.subject.drives.offsets]])
    if np.abs(ask.field.kept(values) - values).max() > 1e-9 * np.abs(values).max():
        return 0.0  # no drive of the declared set
    if np.any(np.abs(offsets) > ask.field.reach * (1.0 + 1e-9)):
        return 0.0
    theirs = by_name(ask.model, ask.ground.right)
    return float(ask.field.judged(theirs, Drives(values, offsets.reshape(1, -1)), ask.case.bands).max())


# -- judging ---------------------------------------------------------------------------------------------------------


def judged(ask: Ask) -> Result:
    """All checks of a case, beside the truth."""
    study = Study(ask.case, Options(seed=ask.seed, profile="quick"))
    verdicts = {check.kind: judge_study(study, check) for check in ask.case.checks}
    answers = []
    for kind, verdict in verdicts.items():
        share = {"agrees": _agrees, "differentiable": true_corner, "follows": _follows(verdict)}[kind](ask)
        answers.append(Answer(kind, verdict.status, share, verdict.reason))
    return Result(ask, tuple(answers), guessed(verdicts["agrees"]))


def _agrees(ask: Ask) -> float:
    return max(true_entries(ask), true_point(ask), true_response(ask))


def _follows(verdict: Verdict):
    def share(ask: Ask) -> float:
        found = true_error(ask).share
        if verdict.status is Status.FAIL and found <= 1.0 + NEAR:
            return max(found, cited(ask))
        return found

    return share


def guessed(verdict: Verdict) -> Guess | None:
    """The guess at a cause, as the report holds it."""
    found = verdict.details.get("cause")
    return Guess(str(found["kind"]), str(found["text"])) if found else None


def run(seeds: Iterable[int], *, faulty: bool, among: Sequence[str] = tuple(TABLE)) -> list[Result]:
    """Judge the cases of some seeds; a disagreement is told at once, since a long run is long."""
    results = []
    for seed in seeds:
        results.append(judged(drawn(seed, faulty, among)))
        for line in disagreements(results[-1:]):
            print(line, flush=True)
    return results


# -- telling ---------------------------------------------------------------------------------------------------------


def table(results: Sequence[Result], check: str = "") -> str:
    """Fault kind by outcome: of the whole spec, or of one check."""
    counts: dict[str, Counter[str]] = {}
    for result in results:
        words = [a.outcome for a in result.answers if a.check == check] if check else [result.outcome]
        counts.setdefault(result.ask.kind, Counter()).update(words)
    head = f"{check or 'all checks':18s}" + "".join(f"{word:>19s}" for word in ("cases", *OUTCOMES))
    lines = [head]
    for kind in [*FAULTS, "none"]:
        if kind in counts:
            cells = [sum(counts[kind].values()), *(counts[kind][word] for word in OUTCOMES)]
            lines.append(f"{kind:18s}" + "".join(f"{cell or '.':>19}" for cell in cells))
    return "\n".join(lines)


def causes(results: Sequence[Result]) -> str:
    """How often the cause was guessed right, not at all, or wrongly, over faulty models that `agrees` failed."""
    counts: dict[str, Counter[str]] = {}
    for result in results:
        if result.ask.kind == "none" or not any(
            a.check == "agrees" and a.status is Status.FAIL for a in result.answers
        ):
            continue
        counts.setdefault(result.ask.kind, Counter())[word_of(result)] += 1
    lines = [f"{'guess at a cause':18s}" + "".join(f"{word:>19s}" for word in ("right", "none", "wrong"))]
    for kind, found in counts.items():
        lines.append(f"{kind:18s}" + "".join(f"{found[word] or '.':>19}" for word in ("right", "none", "wrong")))
    return "\n".join(lines)


def word_of(result: Result) -> str:
    """Whether the guess names what was done: the kind of fault, the signals or entry, and the value."""
    cause, made = result.cause, result.ask.delivery
    if cause is None or (cause.kind == "entry" and "entry" not in made.kinds):
        return "none"  # that a single entry differs is a fact and no guess
    if cause.kind == "point" and "point" in made.kinds:
        return "right"  # the spec has a point with these very holds
    if cause.kind not in made.kinds or not all(clue in cause.text for clue in made.clues):
        return "wrong"
    if np.isnan(made.value):
        return "right"
    numbers = [float(text) for text in re.findall(r"(?<![\w.])-?\d+(?:\.\d+)?(?:e[+-]?\d+)?", cause.text)]
    return "right" if any(abs(number - made.value) <= 2e-3 * abs(made.value) for number in numbers) else "wrong"


def disagreements(results: Sequence[Result]) -> list[str]:
    """A line for every missed fault and false alarm, of the whole spec or of one check."""
    lines = []
    for result in results:
        for answer in result.answers:
            if answer.outcome in ("missed", "false alarm"):
                told = f"{answer.check} {answer.status}, truth {answer.share:.4f} of its limit"
                lines.append(f"{answer.outcome}: {result.ask.told}: {told}; {answer.reason[:200]}")
    return lines


def undecided(results: Sequence[Result]) -> list[str]:
    """A line for every check that came to no answer."""
    return [
        f"undecided: {result.ask.told}: {answer.check}: {answer.reason[:160]}"
        for result in results
        for answer in result.answers
        if answer.status is Status.UNDECIDED
    ]


def misled(results: Sequence[Result]) -> list[str]:
    """A line for every guess at a cause that is wrong."""
    return [
        f"wrong guess: {result.ask.told} ({', '.join(result.ask.delivery.clues)}): {result.cause.text}"
        for result in results
        if result.cause is not None and result.ask.kind != "none" and word_of(result) == "wrong"
    ]


def report(results: Sequence[Result], *, full: bool = False) -> str:
    """Tables and lines, ready to be printed."""
    checks = dict.fromkeys(answer.check for result in results for answer in result.answers)
    parts = [table(results), *(table(results, check) for check in checks), causes(results)]
    lines = disagreements(results) + (misled(results) + undecided(results) if full else [])
    return "\n\n".join(parts) + "\n\n" + "\n".join(lines)


def main() -> None:
    parser = argparse.ArgumentParser(description=(__doc__ or "").splitlines()[0])
    parser.add_argument("--seeds", type=int, default=44, help="how many; each gives a right and a faulty model")
    parser.add_argument("--first", type=int, default=0)
    parser.add_argument("--kind", default="", help="only faults of this kind")
    parser.add_argument("--faulty", action="store_true", help="only faulty models")
    given = parser.parse_args()
    seeds = range(given.first, given.first + given.seeds)
    chosen = [seed for seed in seeds if given.kind in ("", list(FAULTS)[seed % len(FAULTS)])]
    began = time.perf_counter()
    results = run(chosen, faulty=True)
    if not given.faulty and not given.kind:
        results += run(seeds, faulty=False)
    print(report(results, full=True))
    print(f"\n{len(results)} cases in {time.perf_counter() - began:.0f} s")


if __name__ == "__main__":
    main()
