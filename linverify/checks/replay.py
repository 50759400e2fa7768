"""One saved drive run again on its check: the same figures as the run quoted, to the last digit.

Accuracy is chosen from the fixed batch and from the drive itself, exactly as in the run, and the runs are the canonical
ones of that drive alone; neither the seed nor what else was simulated enters.
"""

from __future__ import annotations

from ..core.case import Case, CheckAsk, Options
from ..core.drive import Drive
from ..core.errors import PlantError
from ..core.verdict import Evidence, Figure, Status, Verdict, merged
from ..drives import pinned
from . import fitting
from .accuracy import State, examine
from .campaign import noise_of
from .comparison import comparison
from .confirm import Word, confirmed
from .evidence import key_of, text_of
from .figures import break_told, figure_of
from .judge import blank, judge_study
from .study import Study, study_of


def replayed(case: Case, ask: CheckAsk, options: Options, drive: Drive, name: str = "drive") -> Verdict:
    """The verdict on one drive alone; `name`: of its file, for messages. A drive that does not fit is undecided."""
    return replayed_study(study_of(case, options), ask, drive, name)


def replayed_study(study: Study, ask: CheckAsk, drive: Drive, name: str = "drive") -> Verdict:
    """As `replayed`, on a study that the caller has made; of another check than `follows` all of it, once more."""
    case = study.case
    if ask.kind != "follows":  # a trajectory that another check kept belongs to all of it: there is no drive to judge
        return judge_study(study, ask)
    if case.skipped:
        return blank(case, ask, Status.SKIPPED, case.skipped)
    try:
        for need in ("trim", "model"):
            if unmet := study.unmet(need):
                return blank(case, ask, Status.UNDECIDED, unmet)
        return _replayed(study, ask, drive, name)
    except PlantError as error:
        return blank(case, ask, Status.UNDECIDED, f"the plant misbehaved: {error}")


def _replayed(study: Study, ask: CheckAsk, drive: Drive, name: str) -> Verdict:
    study = study.closed(ask.drives)
    if reasons := fitting.misfits(study, ask.drives):
        return blank(study.case, ask, Status.UNDECIDED, "; ".join(reasons))
    compared, plant = comparison(study, ask.drives), study.case.plant
    if reasons := pinned.misfits(name, drive, compared.limits, tuple(plant.inputs), tuple(plant.states)):
        return blank(study.case, ask, Status.UNDECIDED, "; ".join(reasons))
    drive = pinned.fitted(drive, compared.limits)
    noise = noise_of(compared)
    fidelity, _ = noise.settled(compared.start)
    figures: list[Figure] = []
    reasons_open: list[str] = []
    statuses = [Status.PASS]
    for row in range(len(compared.bands) + (1 if compared.exits else 0)):
        one = examine(compared, drive, fidelity, noise, row)
        status = _status(one.states[row], one.states[row] is State.BAD and confirmed(compared, one, row))
        statuses.append(status)
        if trouble := one.runs.errors[0] or one.runs.outcomes[0].value:
            reasons_open.append(trouble)
        if (figure := figure_of(compared, Word(row, status, "", one))) is not None:
            figures.append(figure)
    if reasons_open:
        statuses.append(Status.UNDECIDED)
    return _told(
        study,
        ask,
        merged(statuses),
        figures,
        reasons_open,
        Evidence("replayed", key_of(compared, drive), text_of(compared, drive)),
    )


def _status(state: State, is_confirmed: bool) -> Status:
    if state is State.GOOD:
        return Status.PASS
    return Status.FAIL if is_confirmed else Status.UNDECIDED


def _told(
    study: Study, ask: CheckAsk, status: Status, figures: list[Figure], troubles: list[str], evidence: Evidence
) -> Verdict:
    reason = ""
    if status is Status.FAIL:
        broken = [figure for figure in figures if figure.status is Status.FAIL]
        reason = "; ".join(break_told(figure) for figure in broken)
    elif status is Status.UNDECIDED:
        reason = troubles[0] if troubles else "the figure is nearer to its limit than our own error"
    return Verdict(
        study.case.spec, study.case.point, ask.name, status, ask.place, reason, tuple(figures),
        evidence=(evidence,),
    )  # fmt: skip
