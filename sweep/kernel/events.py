"""What an accepted step tells, for all lanes at once: target reached, batch over, extremes, the most productive time, samples.

Whatever is rare in a lane (a crossing, a peak inside the step, a sample) is found here by a mask and worked out by scalar code.
"""

from sweep.kernel import layout as at
from sweep.kernel.balance import right_side
from sweep.kernel.control import LANDED
from sweep.kernel.lane import end_batch, note_crossing, path_of_state, path_of_sum, take_samples
from sweep.kernel.layout import STRIDE
from sweep.kernel.memory import coefficient, entry, keep, load, of_lane, row, store
from sweep.kernel.peaks import SLOPE, carry_over, corrected, inner_heights, most_productive, on_path, path_peak, peak_at_end, peak_between
from sweep.kernel.vector import bits, compiled, lowest, size, spread, where

CLOSE, CLOSER = 1e-12, 1e-14  # relative; times nearer than this are the same
BRIEF = 10.0  # a value that would be gone this often within a step is a transient's, not resolved


@compiled
def weigh(s, f, w, weights):  # type: ignore[no-untyped-def]
    """Return a weighted sum over z along the step just made, for all lanes: (y0, y1, p, q, r) of its path."""
    y, new, ps, qs, rs = row(s, w, at.W_Y), row(s, w, at.W_NEW), row(s, w, at.W_P), row(s, w, at.W_Q), row(s, w, at.W_DENSE)
    y0, y1, p, q, r = spread(0.0), spread(0.0), spread(0.0), spread(0.0), spread(0.0)
    for k in range(entry(s, at.N_STATES)):
        weight = coefficient(f, weights + k)
        y0, y1 = y0 + weight * load(y, k), y1 + weight * load(new, k)
        p, q, r = p + weight * load(ps, k), q + weight * load(qs, k), r + weight * load(rs, k)
    return y0, y1, p, q, r


@compiled
def path_of_row(s, w, i):  # type: ignore[no-untyped-def]
    """Return y0, y1, p, q, r of state i along the step just made, for all lanes."""
    y0, y1 = load(row(s, w, at.W_Y), i), load(row(s, w, at.W_NEW), i)
    return y0, y1, load(row(s, w, at.W_P), i), load(row(s, w, at.W_Q), i), load(row(s, w, at.W_DENSE), i)


@compiled
def follow_target(s, f, w, lanes, good, h, out, out_length, whose):  # type: ignore[no-untyped-def]
    """Raise the highest amount reacted; note, once, the crossing of the target."""
    weights, new = entry(s, at.AT_TARGET), row(s, w, at.W_NEW)
    reacted = spread(0.0)
    for k in range(entry(s, at.N_STATES)):
        reacted = reacted + coefficient(f, weights + k) * load(new, k)
    highest, crossed = load(lanes, at.L_REACTED_MAX), load(lanes, at.L_CROSSED)
    store(lanes, at.L_REACTED_MAX, where(good & (reacted > highest), reacted, highest))
    flags = bits(good & (reacted >= load(lanes, at.L_TARGET)) & ~(crossed <= crossed))
    while flags != 0:
        lane = lowest(flags)
        flags &= flags - 1
        note_crossing(s, f, w, lane, out, out_length, whose)


@compiled
def follow_product(s, f, w, lanes, good, time, h):  # type: ignore[no-untyped-def]
    """Note the most productive time: where product over cycle time is highest, after the last feed."""
    earliest = load(lanes, at.L_EARLIEST) * (1.0 - CLOSE)
    counted = good & (time + h >= earliest)
    if bits(counted) == 0:
        return
    y0, y1, p, q, r = weigh(s, f, w, entry(s, at.AT_PRODUCT))
    turnaround, rise = load(lanes, at.L_TURNAROUND), y1 - y0
    start, end = time + turnaround, time + h + turnaround
    turns = counted & (time >= earliest) & ((rise + p) * start > h * y0) & ((rise - p - q - r) * end < h * y1)
    flags = bits(turns)
    any_turns = flags != 0
    store(lanes, at.L_THETA, 1.0)
    while flags != 0:
        shift = 8 * lowest(flags)
        flags &= flags - 1
        place = lanes + shift
        path = path_of_sum(s, f, w, shift, entry(s, at.AT_PRODUCT))
        keep(place, at.L_THETA, most_productive(path, of_lane(place, at.L_TIME), of_lane(place, at.L_STEP), of_lane(place, at.L_TURNAROUND)))
    theta = load(lanes, at.L_THETA)
    when = time + theta * h
    value = on_path((y0, y1, p, q, r), theta) / (when + turnaround)
    better = counted & (when + turnaround > 0.0) & (value > load(lanes, at.L_BEST))
    if bits(better) != 0:
        store(lanes, at.L_BEST, where(better, value, load(lanes, at.L_BEST)))
        store(lanes, at.L_BEST_TIME, where(better, when, load(lanes, at.L_BEST_TIME)))
        best, new = row(s, w, at.W_BEST), row(s, w, at.W_NEW)
        for i in range(entry(s, at.N_ROWS)):
            state = load(new, i)
            if any_turns:
                state = on_path(path_of_row(s, w, i), theta)
            store(best, i, where(better, state, load(best, i)))


@compiled
def follow_temperature(s, w, lanes, live, time, h, until):  # type: ignore[no-untyped-def]
    """Raise the highest temperature by the step just made, up to a fraction of it."""
    nz = entry(s, at.N_STATES)
    path = path_of_row(s, w, nz)
    end, highest = on_path(path, until), load(lanes, at.L_T_MAX)
    higher = live & (end > highest)
    highest = where(higher, end, highest)
    store(lanes, at.L_T_MAX, highest)
    store(lanes, at.L_T_MAX_TIME, where(higher, time + until * h, load(lanes, at.L_T_MAX_TIME)))
    early, middle, late = inner_heights(path)
    flags = bits(live & ((early > highest) | (middle > highest) | (late > highest)))
    while flags != 0:
        shift = 8 * lowest(flags)
        flags &= flags - 1
        place = lanes + shift
        theta, T = path_peak(path_of_state(s, w, shift, nz), of_lane(place, at.L_THETA))
        if of_lane(place, at.L_T_MAX) < T:
            keep(place, at.L_T_MAX, T)
            keep(place, at.L_T_MAX_TIME, of_lane(place, at.L_TIME) + theta * of_lane(place, at.L_STEP))


@compiled
def work_out(s, f, w, k, start, h, y0, y1, hint, order):  # type: ignore[no-untyped-def]
    """Raise the highest heat release (k = 0), duty (1) or dT/dt (2) by its values on the dense output of a step from `start`, h long (s).

    y0, y1: addresses of the states at its ends; hint: (mask, theta, height, rise, bend) of a peak, evaluated there and once more,
    corrected. A value that rises above both ends by less than half or more than one and a half times what the hint says is none: where a
    step is far longer than what drives the quantity, neither slopes nor dense output mean anything between the ends.
    """
    hinted, theta, height, rise, bend = hint
    lanes, state, n = row(s, w, at.W_LANE), row(s, w, at.W_K), entry(s, at.N_ROWS)
    ps, qs, rs = row(s, w, at.W_P), row(s, w, at.W_Q), row(s, w, at.W_DENSE)
    theta = where(hinted, theta, 0.5)
    for _ in range(2):
        for i in range(n):
            store(state, i, on_path((load(y0, i), load(y1, i), load(ps, i), load(qs, i), load(rs, i)), theta))
        when = start + theta * h
        right_side(s, f, w, state, when, state + n * STRIDE)
        value, highest = load(lanes, at.L_HEAT_NOW + k), load(lanes, at.L_HEAT_MAX + k)
        hinted = hinted & (size(value - height) <= 0.5 * rise)
        higher = hinted & (value > highest)
        store(lanes, at.L_HEAT_MAX + k, where(higher, value, highest))
        if k == 2:
            store(lanes, at.L_RATE_MAX_TIME, where(higher, when, load(lanes, at.L_RATE_MAX_TIME)))
        theta = where(hinted, corrected(theta, height, bend, value, order), 0.5)


@compiled
def look_back(s, f, w, live, time):  # type: ignore[no-untyped-def]
    """At a step's start (time, s) raise the highest heat release, duty and dT/dt by peaks inside the step before.

    Only now are the slopes at both its ends known. Where they hint at a peak, the balances are worked out on that step's dense output.
    """
    lanes = row(s, w, at.W_LANE)
    length = load(lanes, at.L_STEP_BEFORE)
    pending = live & (load(lanes, at.L_PENDING) > 0.5) & (load(lanes, at.L_BATCH_OVER) < 0.5)
    for k in range(3):
        hint = peak_between(lanes + (at.L_HEAT + 4 * k) * STRIDE, pending, length, load(lanes, at.L_HEAT_MAX + k))
        if bits(hint[0]) != 0:
            work_out(s, f, w, k, time - length, length, row(s, w, at.W_BEFORE), row(s, w, at.W_Y), hint, 2.0)


@compiled
def look_at_end(s, f, w, ending, time, h):  # type: ignore[no-untyped-def]
    """The same for the step just made where it is a segment's last (mask): what follows has other slopes, so none are waited for."""
    lanes = row(s, w, at.W_LANE)
    ends = row(s, w, at.W_K) + 2 * entry(s, at.N_ROWS) * STRIDE  # the values at the end, which working one out overwrites
    for k in range(3):
        store(ends, k, load(lanes, at.L_HEAT_NOW + k))
    for k in range(3):
        hint = peak_at_end(lanes + (at.L_HEAT + 4 * k) * STRIDE, load(ends, k), ending, h, load(lanes, at.L_HEAT_MAX + k))
        if bits(hint[0]) != 0:
            work_out(s, f, w, k, time, h, row(s, w, at.W_Y), row(s, w, at.W_NEW), hint, 1.0)


@compiled
def follow_heat(lanes, live, last, time, h, until):  # type: ignore[no-untyped-def]
    """Raise the highest heat release, duty and dT/dt by their values at the step's start, and where no step follows that counts (mask
    `last`) at its end; sum up heat and duty by their size.

    At the end they are those of the last stage, which in a step far longer than what drives them is not damped as the new state is. A
    value at the start that falls away within a small part of the step is what the step before left of a transient far below its
    tolerance (a trace of a fast reactant): it is none of the batch's.
    """
    for k in range(3):
        followed, highest = lanes + (at.L_HEAT + 4 * k) * STRIDE, load(lanes, at.L_HEAT_MAX + k)
        start = load(followed, 0)
        end = start + until * (load(lanes, at.L_HEAT_NOW + k) - start)
        rises = last & (end > start)
        peak = where(rises, end, start)
        lasting = -h * load(followed, SLOPE) <= BRIEF * size(start)
        higher = live & (rises | lasting) & (peak > highest)
        store(lanes, at.L_HEAT_MAX + k, where(higher, peak, highest))
        carry_over(followed, live)
        if k == 2:
            when = where(rises, time + until * h, time)
            store(lanes, at.L_RATE_MAX_TIME, where(higher, when, load(lanes, at.L_RATE_MAX_TIME)))
        else:
            total = load(lanes, at.L_SUM_HEAT + k)
            store(lanes, at.L_SUM_HEAT + k, where(live, total + 0.5 * until * h * (size(start) + size(end)), total))
    store(lanes, at.L_STEP_BEFORE, where(live, h, load(lanes, at.L_STEP_BEFORE)))
    store(lanes, at.L_PENDING, where(live, 1.0, load(lanes, at.L_PENDING)))


@compiled
def follow(s, f, w, good, time, h, times, n_times, samples, out, out_length, whose):  # type: ignore[no-untyped-def]
    """Take accepted steps into account. good: mask; time, h: start and length of the steps (s); the rest as in `march`."""
    lanes = row(s, w, at.W_LANE)
    follow_target(s, f, w, lanes, good, h, out, out_length, whose)
    follow_product(s, f, w, lanes, good, time, h)
    live = good & (load(lanes, at.L_BATCH_OVER) < 0.5)
    reached, end = time + h, load(lanes, at.L_BATCH_END)
    ends = live & (end <= reached * (1.0 + CLOSER))
    until = where(ends, (end - time) / h, 1.0)
    until = where(until > 0.0, where(until < 1.0, until, 1.0), 0.0)
    store(lanes, at.L_THETA, until)
    follow_temperature(s, w, lanes, live, time, h, until)
    stop = load(lanes, at.L_SEGMENT_END)
    lands = stop - reached <= LANDED * size(stop)
    hot = load(row(s, w, at.W_NEW), entry(s, at.N_STATES)) > load(lanes, at.L_TOO_HOT)
    follow_heat(lanes, live, ends | lands | hot, time, h, until)
    flags = bits(ends)
    while flags != 0:
        lane = lowest(flags)
        flags &= flags - 1
        end_batch(s, w, lane, out, out_length, whose)
    limit = where(lands, stop, reached)
    if bits(live & lands) != 0:
        look_at_end(s, f, w, live & lands & (until >= 1.0), time, h)
    flags = bits(good & (load(lanes, at.L_SAMPLE_TIME) <= limit))
    store(lanes, at.L_THETA, limit)
    while flags != 0:
        lane = lowest(flags)
        flags &= flags - 1
        take_samples(s, w, lane, times, n_times, samples, whose)
