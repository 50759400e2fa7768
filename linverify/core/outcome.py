"""How a piece of numerical work ended: a value with a sentence, so that a check can say why it is undecided."""

from __future__ import annotations

from enum import Enum

from .errors import PlantError, UnsolvedError


class Outcome(Enum):
    """DONE, or the reason why a result cannot be used; the value is what a reader is told."""

    DONE = ""
    NO_TRIM = "no equilibrium was found inside the envelope"
    SEVERAL_TRIMS = "several equilibria lie inside the envelope and `start` does not say which one is meant"
    FAMILY = "the equilibria are not isolated: they form a family; add a hold or `minimize`"
    NOT_UNIQUE = "the weights of `minimize` do not single out one equilibrium"
    NOT_FINITE = "the plant returned a number that is not finite"
    PLANT_RAISED = "the plant raised an exception"
    NO_SOLUTION = "the signals of a loop that answers at once have no common solution"
    PLANT_ANSWER = "the plant's answer has a wrong shape or type"
    NOT_DETERMINISTIC = "the plant answers the same call differently"
    NOISY = "the plant's own noise hides what was asked for"
    NOT_DIFFERENTIABLE = "the plant has a kink or a jump on the operating point"
    NOT_EQUILIBRIUM = "the point is not an equilibrium"
    WRONG_JACOBIAN = "the plant's own Jacobian disagrees with differences"
    INACCURATE = "the integration did not reach the accuracy that the error bands ask for"
    TOO_MANY_STEPS = "the integration needed more steps than the budget allows"
    DIVERGED = "the plant left every bound before the envelope could end the comparison"
    DEAD_TIMES = "two models with different dead times, or a loop with one, have no exact distance here"
    AT_NYQUIST = "a sampled model has a pole at z = -1, where it alternates for ever"
    BUDGET = "the budget of plant evaluations was used up"
    ILL_POSED = "the loop has no solution: one plus its feedthrough is zero"
    ON_THE_EDGE = "a closed-loop pole lies on the boundary of stability to within rounding"
    DELAY_NOT_DECIDED = "a dead time in a loop whose gain does not fall below one at high frequency"
    UNVERIFIED = "a figure could not be verified by evaluation"

    @property
    def done(self) -> bool:
        """True where the result can be used."""
        return self is Outcome.DONE


def of_call(error: PlantError) -> Outcome:
    """What a failed call of a plant in time counts as; the border chains the plant's own exceptions only."""
    if isinstance(error, UnsolvedError):
        return Outcome.NO_SOLUTION
    return Outcome.NOT_FINITE if error.__cause__ is None else Outcome.PLANT_RAISED
