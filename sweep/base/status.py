"""How a point ended: code, status, sentence and remedy, in one table for every layer."""

from dataclasses import dataclass

DONE, RUNAWAY, TOO_MANY_STEPS, STEP_TOO_SMALL, UNBALANCED, BAD_INPUT, RESTLESS, CRASHED = range(8)


@dataclass(frozen=True)
class Outcome:
    """One way a march can end; `sentence` may hold {time:g} (s) and {limit:g}."""

    code: int
    status: str
    sentence: str
    remedy: str


OUTCOMES = (
    Outcome(DONE, "done", "", ""),
    Outcome(
        RUNAWAY,
        "runaway",
        "the temperature left the model's range (above {limit:g} K) at t = {time:.6g} s",
        "figures up to there stand, no limit holds; the setting is not to be used",
    ),
    Outcome(
        TOO_MANY_STEPS,
        "failed",
        "the march used up its steps at t = {time:.6g} s",
        "look for rates that differ by many orders of magnitude, or loosen accuracy.relative",
    ),
    Outcome(
        STEP_TOO_SMALL,
        "failed",
        "the step fell below the spacing of numbers at t = {time:.6g} s",
        "look for a jump or an explosion in the inputs there",
    ),
    Outcome(
        UNBALANCED,
        "failed",
        "the energy balance does not close to 1e-3",
        "tighten accuracy.relative",
    ),
    Outcome(
        BAD_INPUT,
        "failed",
        "an input makes no sense at this point",
        "look at the reason named beside it",
    ),
    Outcome(
        RESTLESS,
        "failed",
        "its events by condition fired, or were armed again, more than 200 times",
        "widen the hysteresis of an event that is armed again",
    ),
    Outcome(
        CRASHED,
        "failed",
        "the evaluation of this point crashed the process that did it",
        "the other points stand; a crash is a fault of the program or of the machine, not of the study: report it with this point",
    ),
)
