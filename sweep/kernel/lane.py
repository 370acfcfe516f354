"""What happens to one lane: taking a point, a segment, ending a batch, taking samples, and leaving results.

Scalar code, called only for a lane that needs it. `shift` is 8 times the lane: added to the address of an array of vectors it
reaches the lane's own numbers.
"""

import math

from sweep.base.status import RUNAWAY, STEP_TOO_SMALL, TOO_MANY_STEPS
from sweep.kernel import layout as at
from sweep.kernel.balance import REFERENCE
from sweep.kernel.memory import coefficient, entry, integer, keep, number, of_lane, put, put_integer, row
from sweep.kernel.peaks import crossing, on_path
from sweep.kernel.vector import compiled

AT_END, AT_CROSSING, AT_BEST, AT_LAST = 0, 1, 2, 3
_FIRST_STEP = 1e-3  # of a segment's length
_KEPT_STEP = 0.25  # of the step before a segment's boundary
_NEVER = 1e300


@compiled
def references(s, w, shift):  # type: ignore[no-untyped-def]
    """Write what a segment's energies are at the common reference: the heats of reaction (J/mol), what the feeds bring (W)."""
    block, heats = row(s, w, at.W_BLOCK) + shift, row(s, w, at.W_REFERENCE) + shift
    terms, first = entry(s, at.HEAT_TERMS), entry(s, at.BLOCK_HEAT)
    for j in range(entry(s, at.N_REACTIONS)):
        heat = 0.0
        for k in range(first + (j + 1) * terms - 1, first + j * terms - 1, -1):
            heat = heat * REFERENCE + of_lane(block, k)
        keep(heats, j, heat)
    brought = 0.0
    for k in range(4, 0, -1):
        brought = (brought + of_lane(block, at.FEED_CP + k - 1) / k) * REFERENCE
    keep(row(s, w, at.W_LANE) + shift, at.L_BROUGHT, of_lane(block, at.FEED_HEAT) - brought)


@compiled
def begin_segment(s, w, lane, blocks, point, segments):  # type: ignore[no-untyped-def]
    """Load the next segment that lasts beyond the lane's time; return 1 where there is none."""
    shift, length = 8 * lane, entry(s, at.BLOCK_LENGTH)
    place, target = row(s, w, at.W_LANE) + shift, row(s, w, at.W_BLOCK) + shift
    time = of_lane(place, at.L_TIME)
    for segment in range(int(of_lane(place, at.L_SEGMENT)) + 1, segments):
        source = blocks + 8 * length * (point * segments + segment)
        end = number(source, at.T_END)
        if number(source, at.JACKET_SET) > 0.5:
            keep(row(s, w, at.W_Y) + shift, entry(s, at.N_STATES) + 1, number(source, at.JACKET_START))
        if end <= time:
            continue
        for k in range(length):
            keep(target, k, number(source, k))
        references(s, w, shift)
        keep(place, at.L_SEGMENT, 1.0 * segment)
        keep(place, at.L_SEGMENT_END, end)
        kept = _KEPT_STEP * of_lane(place, at.L_GOOD_STEP)
        keep(place, at.L_STEP, min(max(kept, (end - time) * _FIRST_STEP), 0.5 * (end - time)))
        keep(place, at.L_PENDING, 0.0)
        keep(place, at.L_GOOD_STEP, 0.0)
        return 0
    return 1


@compiled
def begin_point(s, f, w, lane, point, blocks, starts, constants, segments, times, n_times, levels, whose):  # type: ignore[no-untyped-def]
    """Load a point into a lane; return 1 where it is over before it began."""
    put_integer(whose, lane, point)
    shift, n, nz = 8 * lane, entry(s, at.N_ROWS), entry(s, at.N_STATES)
    place, y = row(s, w, at.W_LANE) + shift, row(s, w, at.W_Y) + shift
    reacted = 0.0
    for i in range(n):
        value = number(starts, point * n + i)
        keep(y, i, value)
        if i < nz:
            reacted += coefficient(f, entry(s, at.AT_TARGET) + i) * value
    for name in range(at.LANE_ROWS):
        keep(place, name, 0.0)
    for k in range(at.N_CONSTANTS):
        keep(place, at.CONSTANTS + k, number(constants, point * at.N_CONSTANTS + k))
    for k in range(entry(s, at.N_WATCHES)):
        keep(row(s, w, at.W_LEVEL) + shift, k, number(levels, point * entry(s, at.N_WATCHES) + k))
    keep(place, at.L_EVENT, -1.0)
    keep(place, at.L_EVENT_THETA, 2.0)
    keep(place, at.L_SEGMENT, -1.0)
    keep(place, at.L_T_MAX, of_lane(y, nz))
    keep(place, at.L_REACTED_MAX, reacted)
    keep(place, at.L_HEAT_MAX, -_NEVER)
    keep(place, at.L_DUTY_MAX, -_NEVER)
    keep(place, at.L_RATE_MAX, -_NEVER)
    keep(place, at.L_BEST, -_NEVER)
    keep(place, at.L_CROSSED, math.nan)
    keep(place, at.L_BEST_TIME, math.nan)
    keep(place, at.L_END_TIME, math.nan)
    end = of_lane(place, at.L_END_FIXED)
    keep(place, at.L_BATCH_END, of_lane(place, at.L_FINAL) if math.isnan(end) else end)
    keep(place, at.L_SAMPLE_TIME, number(times, point * n_times) if n_times > 0 else math.inf)
    return begin_segment(s, w, lane, blocks, point, segments)


@compiled
def path_of_state(s, w, shift, i):  # type: ignore[no-untyped-def]
    """Return y0, y1, p, q, r of state i along the step just made."""
    y, new, dense = row(s, w, at.W_Y) + shift, row(s, w, at.W_NEW) + shift, row(s, w, at.W_DENSE) + shift
    return of_lane(y, i), of_lane(new, i), of_lane(row(s, w, at.W_P) + shift, i), of_lane(row(s, w, at.W_Q) + shift, i), of_lane(dense, i)


@compiled
def path_of_sum(s, f, w, shift, weights):  # type: ignore[no-untyped-def]
    """Return y0, y1, p, q, r of a weighted sum over z along the step just made."""
    y0, y1, p, q, r = 0.0, 0.0, 0.0, 0.0, 0.0
    for k in range(entry(s, at.N_STATES)):
        weight = coefficient(f, weights + k)
        a, b, c, d, e = path_of_state(s, w, shift, k)
        y0, y1, p, q, r = y0 + weight * a, y1 + weight * b, p + weight * c, q + weight * d, r + weight * e
    return y0, y1, p, q, r


@compiled
def capture(s, w, shift, target, theta):  # type: ignore[no-untyped-def]
    """Write the state at a fraction of the step just made to an address."""
    for i in range(entry(s, at.N_ROWS)):
        put(target, i, on_path(path_of_state(s, w, shift, i), theta))


@compiled
def states_left(s, out, out_length, point):  # type: ignore[no-untyped-def]
    """Return where the four states of a point are left, and the bytes of each."""
    return out + 8 * (point * out_length + at.OUT_STATES), 8 * entry(s, at.N_ROWS)


@compiled
def note_crossing(s, f, w, lane, out, out_length, whose):  # type: ignore[no-untyped-def]
    """Note when the target was reached inside the step just made, the state there, and when the batch ends if it ends by it."""
    shift = 8 * lane
    place = row(s, w, at.W_LANE) + shift
    theta = crossing(path_of_sum(s, f, w, shift, entry(s, at.AT_TARGET)), of_lane(place, at.L_TARGET))
    when = of_lane(place, at.L_TIME) + theta * of_lane(place, at.L_STEP)
    keep(place, at.L_CROSSED, when)
    left, each = states_left(s, out, out_length, integer(whose, lane))
    capture(s, w, shift, left + AT_CROSSING * each, theta)
    if math.isnan(of_lane(place, at.L_END_FIXED)):
        keep(place, at.L_BATCH_END, min(max(when, of_lane(place, at.L_EARLIEST)), of_lane(place, at.L_FINAL)))


@compiled
def end_batch(s, w, lane, out, out_length, whose):  # type: ignore[no-untyped-def]
    """Note the batch's end inside the step just made, at the fraction left in L_THETA."""
    place = row(s, w, at.W_LANE) + 8 * lane
    left, each = states_left(s, out, out_length, integer(whose, lane))
    capture(s, w, 8 * lane, left + AT_END * each, of_lane(place, at.L_THETA))
    keep(place, at.L_BATCH_OVER, 1.0)
    keep(place, at.L_END_TIME, of_lane(place, at.L_BATCH_END))


@compiled
def take_samples(s, w, lane, times, n_times, samples, whose):  # type: ignore[no-untyped-def]
    """Write the states at the times asked for inside the step just made, up to the time left in L_THETA."""
    place, point, n = row(s, w, at.W_LANE) + 8 * lane, integer(whose, lane), entry(s, at.N_ROWS)
    start, until = of_lane(place, at.L_TIME), of_lane(place, at.L_THETA)
    inverse = 1.0 / of_lane(place, at.L_STEP)
    k, wanted = int(of_lane(place, at.L_SAMPLE)), of_lane(place, at.L_SAMPLE_TIME)
    while wanted <= until:
        theta = min(1.0, max(0.0, (wanted - start) * inverse))
        capture(s, w, 8 * lane, samples + 8 * n * (point * n_times + k), theta)
        k += 1
        wanted = number(times, point * n_times + k) if k < n_times else math.inf
    keep(place, at.L_SAMPLE, 1.0 * k)
    keep(place, at.L_SAMPLE_TIME, wanted)


@compiled
def settle(s, w, lane, blocks, point, segments, met, hot, landed, short, most_steps):  # type: ignore[no-untyped-def]
    """After a step: go on with the next segment, or return 1 when the point is over, its status noted."""
    place = row(s, w, at.W_LANE) + 8 * lane
    if met:
        keep(place, at.L_TIME, of_lane(place, at.L_EVENT_TIME))
        return 1
    if hot:
        keep(place, at.L_STATUS, 1.0 * RUNAWAY)
        return 1
    if landed and begin_segment(s, w, lane, blocks, point, segments) == 1:
        return 1
    if of_lane(place, at.L_STEPS) + of_lane(place, at.L_REJECTED) >= most_steps:
        keep(place, at.L_STATUS, 1.0 * TOO_MANY_STEPS)
        return 1
    if short and not landed:
        keep(place, at.L_STATUS, 1.0 * STEP_TOO_SMALL)
        return 1
    return 0


@compiled
def leave(s, w, lane, out, out_length, whose):  # type: ignore[no-untyped-def]
    """Write what a lane found for its point; what it never found is NaN."""
    shift, point = 8 * lane, integer(whose, lane)
    place, target = row(s, w, at.W_LANE) + shift, out + 8 * point * out_length
    for k in range(at.LEFT):
        value = of_lane(place, k)
        put(target, k, math.nan if value <= -_NEVER else value)
    put(target, at.OUT_EVENT, of_lane(place, at.L_EVENT))
    left, each = states_left(s, out, out_length, point)
    for i in range(entry(s, at.N_ROWS)):
        put(left + AT_LAST * each, i, of_lane(row(s, w, at.W_Y) + shift, i))
        if not math.isnan(of_lane(place, at.L_BEST_TIME)):
            put(left + AT_BEST * each, i, of_lane(row(s, w, at.W_BEST) + shift, i))
