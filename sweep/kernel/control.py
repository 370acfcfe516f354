"""Which steps are accepted, and how long the next one is: for all lanes at once."""

from sweep.kernel import layout as at
from sweep.kernel.functions import rough_power
from sweep.kernel.memory import load, store
from sweep.kernel.vector import compiled, where

SAFETY, SHRINK, GROW = 0.9, 0.2, 6.0
ORDER = 5.0  # the error of one step grows with this power of its length
MILD = 2.5  # the error of the step before counts as no smaller than this suggests: 0.01 of what is allowed
COOL, HOT = 1.0, 4.0  # K, and in shares of the model's upper limit: a step that leaves this range is tried again, shorter
LANDED = 1e-13  # relative; a time this close to a segment's end is its end
SPACING = 1e-15  # of the time; a step this short no longer moves it


@compiled
def accepted(lanes, wrong, T_new):  # type: ignore[no-untyped-def]
    """Return the mask of lanes whose step is good: error within its allowance, and T (K) within the range of a trial."""
    return (wrong <= 1.0) & (T_new > COOL) & (T_new < load(lanes, at.L_TOO_HOT) * HOT)


@compiled
def next_step(lanes, wrong, fine, h):  # type: ignore[no-untyped-def]
    """Return the step (s) that the error suggests, of a method whose error in one step is of order 5; never longer just after a rejection.

    Where errors grow from step to step, as on the way into a runaway, the next step is shortened ahead of its rejection: Gustafsson's
    predictive controller (ACM TOMS 20 (1994) 496; Hairer and Wanner, Solving ODEs II, IV.8; from memory).
    """
    shrink = rough_power(where(wrong > 1e-8, wrong, 1e-8), -1.0 / ORDER)
    factor = SAFETY * shrink
    before, h_before = load(lanes, at.L_SHRINK_BEFORE), load(lanes, at.L_GOOD_STEP)
    known = fine & (h_before > 0.0)
    ahead = factor * shrink * h / where(known, h_before * before, 1.0)
    factor = where(known & (ahead < factor), ahead, factor)
    store(lanes, at.L_SHRINK_BEFORE, where(fine, where(shrink < MILD, shrink, MILD), before))
    store(lanes, at.L_GOOD_STEP, where(fine, h, h_before))
    factor = where(factor > GROW, GROW, factor)
    factor = where(factor >= SHRINK, factor, SHRINK)
    shorter = where(factor > 0.9, 0.9, factor)
    again = where(load(lanes, at.L_FAILED_LAST) > 0.5, where(factor > 1.0, 1.0, factor), factor)
    return h * where(fine, again, shorter)


@compiled
def move_on(lanes, good, rejected, time, h, wanted):  # type: ignore[no-untyped-def]
    """Move the clock of lanes with a good step, count steps, and fit the next step to what is left of the segment.

    Returns the masks of lanes that reached their segment's end, and of those whose step became too short to move the time.
    """
    end = load(lanes, at.L_SEGMENT_END)
    reached = time + h
    landed = good & (end - reached <= LANDED * where(end > 0.0, end, -end))
    now = where(landed, end, where(good, reached, time))
    left = end - now
    fitted = where(wanted >= left, left, where(wanted > 0.5 * left, 0.5 * left, wanted))
    store(lanes, at.L_TIME, now)
    store(lanes, at.L_STEP, where(good | rejected, fitted, h))
    store(lanes, at.L_STEPS, load(lanes, at.L_STEPS) + where(good, 1.0, 0.0))
    store(lanes, at.L_REJECTED, load(lanes, at.L_REJECTED) + where(rejected, 1.0, 0.0))
    store(lanes, at.L_FAILED_LAST, where(rejected, 1.0, 0.0))
    return landed, ~(fitted > SPACING * now)
