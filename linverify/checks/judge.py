"""Run one check of one operating point and always come back with a verdict.

The only place that turns unmet needs and a misbehaving plant into *undecided*. Exceptions other than PlantError are
defects of linverify and are let through, with their traceback.
"""

from __future__ import annotations

from dataclasses import replace

from ..core.case import Case, CheckAsk, Options
from ..core.errors import PlantError
from ..core.verdict import Status, Verdict
from . import TABLE
from .study import Study, study_of


def judge(case: Case, ask: CheckAsk, options: Options) -> Verdict:
    """The verdict of one check. Raises KeyError for a kind of check that does not exist."""
    return judge_study(study_of(case, options), ask)


def judge_study(study: Study, ask: CheckAsk) -> Verdict:
    """As `judge`, on a study that the caller has made."""
    row = TABLE[ask.kind]
    if study.case.skipped:
        return blank(study.case, ask, Status.SKIPPED, study.case.skipped)
    try:
        if study.timeless:
            return blank(study.case, ask, Status.UNDECIDED, study.timeless)
        for need in row.needs:
            if unmet := study.unmet(need):
                return blank(study.case, ask, Status.UNDECIDED, unmet)
        verdict = row.load()(study, ask)
    except PlantError as error:
        return blank(study.case, ask, Status.UNDECIDED, f"the plant misbehaved: {error}")
    return replace(verdict, requirements=requirements_of(study.case, ask))


def blank(case: Case, ask: CheckAsk, status: Status, reason: str) -> Verdict:
    """A verdict without figures."""
    return Verdict(
        spec=case.spec,
        point=case.point,
        check=ask.name,
        status=status,
        place=ask.place,
        reason=reason,
        requirements=requirements_of(case, ask),
    )


def requirements_of(case: Case, ask: CheckAsk) -> tuple[str, ...]:
    """Names of the requirements that this check answers."""
    return tuple(requirement.name for requirement in case.requirements if ask.name in requirement.checks)
