"""What an accepted step tells, for all lanes at once: target reached, batch over, extremes, the most productive time, samples.

Whatever is rare in a lane (a crossing, a peak inside the step, a sample) is found here by a mask and worked out by scalar code.
"""

from sweep.kernel import layout as at
from sweep.kernel.balance import right_side
from sweep.kernel.control import LANDED
from sweep.kernel.lane import cubic_of_state, cubic_of_sum, end_batch, note_crossing, take_samples
from sweep.kernel.layout import STRIDE
from sweep.kernel.memory import coefficient, entry, keep, load, of_lane, row, store
from sweep.kernel.peaks import carry_over, cubic_peak, most_productive, on_cubic, peak_between
from sweep.kernel.vector import bits, compiled, lowest, size, spread, where

CLOSE, CLOSER = 1e-12, 1e-14  # relative; times nearer than this are the same


@compiled
def weigh(s, f, w, weights):  # type: ignore[no-untyped-def]
    """Return a weighted sum over z along the step just made, for all lanes: (y0, y1, p, q) of its cubic."""
    y, new, ps, qs = row(s, w, at.W_Y), row(s, w, at.W_NEW), row(s, w, at.W_P), row(s, w, at.W_Q)
    y0, y1, p, q = spread(0.0), spread(0.0), spread(0.0), spread(0.0)
    for k in range(entry(s, at.N_STATES)):
        weight = coefficient(f, weights + k)
        y0, y1, p, q = y0 + weight * load(y, k), y1 + weight * load(new, k), p + weight * load(ps, k), q + weight * load(qs, k)
    return y0, y1, p, q


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
    y0, y1, p, q = weigh(s, f, w, entry(s, at.AT_PRODUCT))
    turnaround, rise = load(lanes, at.L_TURNAROUND), y1 - y0
    start, end = time + turnaround, time + h + turnaround
    turns = counted & (time >= earliest) & ((rise + p) * start > h * y0) & ((rise - p - q) * end < h * y1)
    flags = bits(turns)
    any_turns = flags != 0
    store(lanes, at.L_THETA, 1.0)
    while flags != 0:
        shift = 8 * lowest(flags)
        flags &= flags - 1
        place = lanes + shift
        cubic = cubic_of_sum(s, f, w, shift, entry(s, at.AT_PRODUCT))
        keep(place, at.L_THETA, most_productive(cubic, of_lane(place, at.L_TIME), of_lane(place, at.L_STEP), of_lane(place, at.L_TURNAROUND)))
    theta = load(lanes, at.L_THETA)
    when = time + theta * h
    value = on_cubic((y0, y1, p, q), theta) / (when + turnaround)
    better = counted & (when + turnaround > 0.0) & (value > load(lanes, at.L_BEST))
    if bits(better) != 0:
        store(lanes, at.L_BEST, where(better, value, load(lanes, at.L_BEST)))
        store(lanes, at.L_BEST_TIME, where(better, when, load(lanes, at.L_BEST_TIME)))
        best, new = row(s, w, at.W_BEST), row(s, w, at.W_NEW)
        for i in range(entry(s, at.N_ROWS)):
            state = load(new, i)
            if any_turns:
                state = on_cubic((load(row(s, w, at.W_Y), i), state, load(row(s, w, at.W_P), i), load(row(s, w, at.W_Q), i)), theta)
            store(best, i, where(better, state, load(best, i)))


@compiled
def follow_temperature(s, w, lanes, live, time, h, until):  # type: ignore[no-untyped-def]
    """Raise the highest temperature by the step just made, up to a fraction of it."""
    nz = entry(s, at.N_STATES)
    y0, y1, p, q = load(row(s, w, at.W_Y), nz), load(row(s, w, at.W_NEW), nz), load(row(s, w, at.W_P), nz), load(row(s, w, at.W_Q), nz)
    end, highest = on_cubic((y0, y1, p, q), until), load(lanes, at.L_T_MAX)
    higher = live & (end > highest)
    highest = where(higher, end, highest)
    store(lanes, at.L_T_MAX, highest)
    store(lanes, at.L_T_MAX_TIME, where(higher, time + until * h, load(lanes, at.L_T_MAX_TIME)))
    # a cubic stays below the highest of its Bezier points; only where one of the inner two is higher can a peak hide inside
    early, late = y0 + (y1 - y0 + p) * (1.0 / 3.0), y1 - (y1 - y0 - p - q) * (1.0 / 3.0)
    flags = bits(live & (where(early > late, early, late) > highest))
    while flags != 0:
        shift = 8 * lowest(flags)
        flags &= flags - 1
        place = lanes + shift
        theta, T = cubic_peak(cubic_of_state(s, w, shift, nz), of_lane(place, at.L_THETA))
        if of_lane(place, at.L_T_MAX) < T:
            keep(place, at.L_T_MAX, T)
            keep(place, at.L_T_MAX_TIME, of_lane(place, at.L_TIME) + theta * of_lane(place, at.L_STEP))


@compiled
def look_back(s, f, w, live, time):  # type: ignore[no-untyped-def]
    """At a step's start (time, s) raise the highest heat release, duty and dT/dt by peaks inside the step before.

    Only now are the slopes at both its ends known. Where they hint at a peak, the balances are worked out on that step's dense output.
    """
    lanes = row(s, w, at.W_LANE)
    length = load(lanes, at.L_STEP_BEFORE)
    pending = live & (load(lanes, at.L_PENDING) > 0.5) & (load(lanes, at.L_BATCH_OVER) < 0.5)
    for k in range(3):
        highest = load(lanes, at.L_HEAT_MAX + k)
        hinted, theta = peak_between(lanes + (at.L_HEAT + 4 * k) * STRIDE, pending, length, highest)
        if bits(hinted) != 0:
            theta = where(hinted, theta, 1.0)
            when = time - (1.0 - theta) * length
            state, y0, y1, ps, qs = row(s, w, at.W_NEW), row(s, w, at.W_BEFORE), row(s, w, at.W_Y), row(s, w, at.W_P), row(s, w, at.W_Q)
            for i in range(entry(s, at.N_ROWS)):
                store(state, i, on_cubic((load(y0, i), load(y1, i), load(ps, i), load(qs, i)), theta))
            right_side(s, f, w, state, when, row(s, w, at.W_K))
            value = load(lanes, at.L_HEAT_NOW + k)
            higher = hinted & (value > highest)
            store(lanes, at.L_HEAT_MAX + k, where(higher, value, highest))
            if k == 2:
                store(lanes, at.L_RATE_MAX_TIME, where(higher, when, load(lanes, at.L_RATE_MAX_TIME)))


@compiled
def follow_heat(lanes, live, time, h, until):  # type: ignore[no-untyped-def]
    """Raise the highest heat release, duty and dT/dt by their values at both ends of the step; sum up heat and duty by their size."""
    for k in range(3):
        followed, highest = lanes + (at.L_HEAT + 4 * k) * STRIDE, load(lanes, at.L_HEAT_MAX + k)
        start = load(followed, 0)
        end = start + until * (load(lanes, at.L_HEAT_NOW + k) - start)
        peak = where(end > start, end, start)
        higher = live & (peak > highest)
        store(lanes, at.L_HEAT_MAX + k, where(higher, peak, highest))
        carry_over(followed, live)
        if k == 2:
            when = where(end > start, time + until * h, time)
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
    follow_heat(lanes, live, time, h, until)
    flags = bits(ends)
    while flags != 0:
        lane = lowest(flags)
        flags &= flags - 1
        end_batch(s, w, lane, out, out_length, whose)
    stop = load(lanes, at.L_SEGMENT_END)
    limit = where(stop - reached <= LANDED * size(stop), stop, reached)
    flags = bits(good & (load(lanes, at.L_SAMPLE_TIME) <= limit))
    store(lanes, at.L_THETA, limit)
    while flags != 0:
        lane = lowest(flags)
        flags &= flags - 1
        take_samples(s, w, lane, times, n_times, samples, whose)
