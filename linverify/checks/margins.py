"""margins.LOOP: the closed loop is stable, and every margin that its `require` asks for is kept, at every crossing.

Stability comes first: an unstable loop has no margins and fails, with its poles named. Poles that the loop cannot move
are told apart; one on or right of the axis fails as well, unless `leaves` names a state that dominates its mode. A loop
that moves nothing would pass whatever was asked: it is undecided. What beside its figures is told, and in what form, is
written in `margin_details`. With `confirm` the margins are tried on the plant itself as well (`confirm_margin`).
"""

from __future__ import annotations

from collections.abc import Sequence

from ..core.case import Case, CheckAsk
from ..core.loop import Actuator, Loop
from ..core.model import OperatingPoint
from ..core.verdict import Status, Verdict
from ..numerics.closing import RefusedError, Setup
from ..numerics.loop_margins import LoopMargins
from ..numerics.poles import AT_ZERO
from ..numerics.unmoved import Unmoved
from . import margin_details, margin_words
from .closed import nested, out_of_reach
from .findings import Findings
from .margin_delays import with_delays
from .margin_figures import figures
from .margin_poles import counted
from .margin_spread import varied, whole
from .margin_words import ROUNDING
from .mode_model import with_rounding
from .study import Study

OPEN = "the errors of the local model's entries leave open whether"
HARDLY = 0.4  # the same in a model whose entries are off by their errors
DOMINATES = 0.5  # share of the states that `leaves` names in a mode from which on it is theirs
EDGE = 1e-6  # of an input's size: nearer to a limit of its actuator it rests on it


def check(study: Study, ask: CheckAsk) -> Verdict:
    """The verdict on one loop at one operating point."""
    case, loop, found = study.case, study.case.loops[ask.loop], Findings()
    try:
        _judge(study, loop, found)
    except RefusedError as refusal:
        found.reasons.append((Status.UNDECIDED, str(refusal)))
    return Verdict(
        case.spec, case.point, ask.name, found.status, ask.place, found.reason,
        tuple(found.figures), tuple(found.notes), evidence=tuple(found.evidence), details=found.details,
    )  # fmt: skip


def setup(study: Study, name: str) -> Setup:
    """What the loop is closed around. Raises RefusedError where there is no such model."""
    case, local = study.case, study.case.local
    try:
        inside = tuple(one.name for one in nested(case, local.closed))
    except ValueError as error:
        raise RefusedError(str(error)) from None
    if name not in inside:
        closed, also = (inside, ()) if local.delivered is not None else ((), inside)
        model = with_rounding(study, study.model())
        return Setup(model, case.loops, case.actuators, case.delays, closed, also, case.plant.step)
    if local.delivered is None:
        return Setup(study.model(), case.loops, case.actuators, case.delays, tick=case.plant.step)
    # the delivered model has this loop inside: margins are those of the plant's own slopes
    if unmet := study.unmet("derived"):
        raise RefusedError(unmet)
    return Setup(study.derived(), case.loops, case.actuators, case.delays, tick=case.plant.step)


def _judge(study: Study, loop: Loop, found: Findings) -> None:
    case, at_input = study.case, loop.break_at == "plant_input"
    around = setup(study, loop.name)
    moves = [moved.name for one in nested(case, (loop.name,)) for moved in one.moves if not moved.loop]
    found.reasons += [(Status.UNDECIDED, words) for words in out_of_reach(case, study.point(), dict.fromkeys(moves))]
    found.reasons += [(Status.UNDECIDED, words) for words in _at_their_limit(case, study.point(), moves)]
    broken, one = whole(around, loop.name, at_input)
    one, told = with_delays(around, loop, one, case.plant.time_unit)
    found.notes += told
    excused = _covered(loop, one)
    found.details["margins"] = margin_details.told(case, loop, broken, one, excused)
    if one.trivial:
        found.reasons.append((Status.UNDECIDED, "the loop moves nothing: any limit on its margins would be kept"))
        return
    _unmoved(one, excused, found)
    if not one.outcome.done:
        found.reasons.append((Status.UNDECIDED, margin_words.undecided(one)))
        return
    if not one.stable:
        found.reasons.append((Status.FAIL, margin_words.unstable(one, case.plant.time_unit)))
        return
    for channel in one.channels:
        if not channel.moves:
            found.reasons.append((Status.UNDECIDED, f"{channel.name} has no effect on itself around the loop"))
    others = varied(around, loop.name, one)
    if others is None or not all(other.stable and other.outcome.done for other in others):
        found.reasons.append((Status.UNDECIDED, f"{OPEN} the loop is stable"))
        return
    if not _loose(one, excused) and any(_loose(other, _covered(loop, other, HARDLY)) for other in others):
        found.reasons.append((Status.UNDECIDED, f"{OPEN} a pole that the loop does not move is stable"))
    made, silent = figures(case, loop, one, others)
    found.figures += made
    found.reasons += [(each.status, margin_words.figure(each)) for each in made if each.status is not Status.PASS]
    found.reasons += [(Status.UNDECIDED, words) for words in margin_words.silent(silent, one)]
    found.reasons += margin_words.without_crossover(case, loop, one)
    if loop.confirm:
        _confirm(study, loop, one, found)
    reasons, notes = counted(loop, one, case.plant.time_unit)
    found.reasons, found.notes = found.reasons + reasons, found.notes + notes + margin_words.notes(loop, one)


def _confirm(study: Study, loop: Loop, one: LoopMargins, found: Findings) -> None:
    from .confirm_margin import confirm  # it brings the simulation along

    tried = confirm(study, loop, one)
    found.figures += tried.figures
    found.reasons += tried.reasons
    found.notes += tried.notes
    found.evidence += tried.evidence
    found.details["confirmed"] = [dict(each) for each in tried.details]


def _covered(loop: Loop, one: LoopMargins, least: float = DOMINATES) -> list[bool]:
    """Whether `leaves` covers each of the poles that the loop does not move."""
    shares = [sum(share for name, share in pole.shares if name in loop.leaves) for pole in one.unmoved]
    return [round(share, 9) >= least for share in shares]


def _at_their_limit(case: Case, point: OperatingPoint, names: Sequence[str]) -> list[str]:
    """What to tell of inputs that rest on a limit of their actuator: the local model's gain holds one way only."""
    found = []
    for name in dict.fromkeys(names):
        actuator, at = case.actuators.get(name, Actuator()), point.value(name)
        if not actuator.low <= at <= actuator.high:
            continue
        room = min(at - actuator.low, actuator.high - at)
        if room <= EDGE * max(abs(at), case.nominal.get(name, 1.0)):
            found.append(
                f"the trimmed value of {name} rests on a limit of its actuator: it can move one way only there"
            )
    return found


def _unmoved(one: LoopMargins, excused: Sequence[bool], found: Findings) -> None:
    """Judge the poles that the loop does not move."""
    if loose := _loose(one, excused):
        found.reasons.append((Status.FAIL, margin_words.unmoved(loose, one.loop.step, _fastest(one))))


def _loose(one: LoopMargins, excused: Sequence[bool]) -> list[Unmoved]:
    """Poles that nobody stabilizes."""
    return [pole for pole, its in zip(one.unmoved, excused, strict=True) if not its and not _stable(one, pole)]


def _stable(one: LoopMargins, pole: Unmoved) -> bool:
    """Left of the axis by more than rounding."""
    if one.loop.step is not None:
        return abs(pole.value) < 1.0 - AT_ZERO
    return pole.value.real < -max(AT_ZERO * abs(pole.value), ROUNDING * _fastest(one))


def _fastest(one: LoopMargins) -> float:
    """Size of the largest pole around, moved or not; of a sampled loop the rate of the samples."""
    if one.loop.step is not None:
        return 1.0 / one.loop.step
    sizes = [abs(each.value) for each in one.unmoved]
    sizes += [] if one.poles is None else [abs(complex(value)) for value in one.poles.values]
    return max(sizes, default=0.0)
