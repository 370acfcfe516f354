"""What happens to one lane between steps: taking a point, ending a step, a segment, a batch, and leaving results.

Scalar code, on one lane of the scratch rows. Inside a step the method's own dense output finds the crossing of the target, the
highest temperature and the most productive time; heat and duty peaks come from the cubic through values and slopes.
"""

import math

from sweep.base.status import RUNAWAY, STEP_TOO_SMALL, TOO_MANY_STEPS
from sweep.kernel import layout as at
from sweep.kernel.balance import row
from sweep.kernel.peaks import crossing, cubic_peak, hermite_peak
from sweep.kernel.step import lane_cubic, on_cubic
from sweep.kernel.vector import STRIDE, compiled, integer, number, put, put_integer

(N_ROWS, N_STATES, BLOCK_LENGTH, W_BLOCK, W_Y, W_NEW, W_LANE, AT_TARGET, AT_PRODUCT) = (
    at.N_ROWS, at.N_STATES, at.BLOCK_LENGTH, at.W_BLOCK, at.W_Y, at.W_NEW, at.W_LANE, at.AT_TARGET, at.AT_PRODUCT,
)  # fmt: skip
(T_END, T_START, JACKET_SET, JACKET_START, N_CONSTANTS, TURNAROUND, ATOL_AMOUNT, TOO_HOT, DELTA, T_FINAL) = (
    at.T_END, at.T_START, at.JACKET_SET, at.JACKET_START, at.N_CONSTANTS, at.TURNAROUND, at.ATOL_AMOUNT, at.TOO_HOT, at.DELTA, at.T_FINAL,
)  # fmt: skip
(END_FIXED, END_EARLIEST, TARGET_AMOUNT) = (at.END_FIXED, at.END_EARLIEST, at.TARGET_AMOUNT)
(L_TIME, L_STEP, L_BATCH_OVER, L_HEAT, L_HEAT_SLOPE, L_DUTY, L_DUTY_SLOPE, L_HEAT_NOW, L_DUTY_NOW, L_T_MAX, L_T_MAX_TIME) = (
    at.L_TIME, at.L_STEP, at.L_BATCH_OVER, at.L_HEAT, at.L_HEAT_SLOPE, at.L_DUTY, at.L_DUTY_SLOPE, at.L_HEAT_NOW, at.L_DUTY_NOW,
    at.L_T_MAX, at.L_T_MAX_TIME,
)  # fmt: skip
(L_HEAT_MAX, L_DUTY_MAX, L_TARGET, L_TURNAROUND, L_ATOL, L_TOO_HOT, L_DELTA, L_NEXT_SAMPLE, L_REACTED_MAX, L_OLD_STEP) = (
    at.L_HEAT_MAX, at.L_DUTY_MAX, at.L_TARGET, at.L_TURNAROUND, at.L_ATOL, at.L_TOO_HOT, at.L_DELTA, at.L_NEXT_SAMPLE,
    at.L_REACTED_MAX, at.L_OLD_STEP,
)  # fmt: skip
(L_FAILED_LAST, L_CROSSED, L_BEST, L_BEST_TIME, L_END_FIXED, L_EARLIEST, L_SUM_HEAT, L_SUM_BOUNDARY, L_PEND_HEAT, L_PEND_HEAT_SLOPE) = (
    at.L_FAILED_LAST, at.L_CROSSED, at.L_BEST, at.L_BEST_TIME, at.L_END_FIXED, at.L_EARLIEST, at.L_SUM_HEAT, at.L_SUM_BOUNDARY,
    at.L_PEND_HEAT, at.L_PEND_HEAT_SLOPE,
)  # fmt: skip
(L_PEND_DUTY, L_PEND_DUTY_SLOPE, L_PENDING, L_END_TIME, L_SEGMENT, L_STEPS, L_REJECTED, L_STATUS, L_PEND_STEP, L_TFINAL, L_SEG_END) = (
    at.L_PEND_DUTY, at.L_PEND_DUTY_SLOPE, at.L_PENDING, at.L_END_TIME, at.L_SEGMENT, at.L_STEPS, at.L_REJECTED, at.L_STATUS,
    at.L_PEND_STEP, at.L_TFINAL, at.L_SEG_END,
)  # fmt: skip
(OUT_STATUS, OUT_STEPS, OUT_REJECTED, OUT_TIME, OUT_CROSSED, OUT_T_MAX, OUT_T_MAX_TIME, OUT_HEAT_MAX, OUT_DUTY_MAX, OUT_BEST) = (
    at.OUT_STATUS, at.OUT_STEPS, at.OUT_REJECTED, at.OUT_TIME, at.OUT_CROSSED, at.OUT_T_MAX, at.OUT_T_MAX_TIME, at.OUT_HEAT_MAX,
    at.OUT_DUTY_MAX, at.OUT_BEST,
)  # fmt: skip
(L_RATE, L_RATE_SLOPE, L_PEND_RATE, L_PEND_RATE_SLOPE, L_RATE_MAX, L_RATE_MAX_TIME, OUT_RATE_MAX, OUT_RATE_MAX_TIME) = (
    at.L_RATE, at.L_RATE_SLOPE, at.L_PEND_RATE, at.L_PEND_RATE_SLOPE, at.L_RATE_MAX, at.L_RATE_MAX_TIME, at.OUT_RATE_MAX,
    at.OUT_RATE_MAX_TIME,
)  # fmt: skip
(OUT_BEST_TIME, OUT_REACTED_MAX, OUT_HEAT_SUM, OUT_BOUNDARY_SUM, OUT_END_TIME, OUT_STATES) = (
    at.OUT_BEST_TIME, at.OUT_REACTED_MAX, at.OUT_HEAT_SUM, at.OUT_BOUNDARY_SUM, at.OUT_END_TIME, at.OUT_STATES,
)  # fmt: skip

AT_END, AT_CROSSING, AT_BEST, AT_LAST = 0, 1, 2, 3
_FIRST_STEP = 1e-3  # of a segment's length
_NEVER = 1e300


@compiled
def get(place, name):  # type: ignore[no-untyped-def]
    """Return one of a lane's own numbers."""
    return number(place + name * STRIDE)


@compiled
def keep(place, name, value):  # type: ignore[no-untyped-def]
    """Set one of a lane's own numbers."""
    put(place + name * STRIDE, value)


@compiled
def begin_segment(s, w, lane, blocks, point, segment, segments):  # type: ignore[no-untyped-def]
    """Copy a segment's block into the lane and set the step with which it starts."""
    place, length = row(s, w, W_LANE) + 8 * lane, integer(s + 8 * BLOCK_LENGTH)
    source, target = blocks + 8 * length * (point * segments + segment), row(s, w, W_BLOCK) + 8 * lane
    for k in range(length):
        put(target + k * STRIDE, number(source + 8 * k))
    if number(source + 8 * JACKET_SET) > 0.5:
        put(row(s, w, W_Y) + 8 * lane + (integer(s + 8 * N_STATES) + 1) * STRIDE, number(source + 8 * JACKET_START))
    end = number(source + 8 * T_END)
    keep(place, L_SEG_END, end)
    keep(place, L_STEP, (end - get(place, L_TIME)) * _FIRST_STEP)
    keep(place, L_PENDING, 0.0)
    keep(place, L_SEGMENT, 1.0 * segment)


@compiled
def begin_point(s, f, w, lane, point, blocks, starts, constants, segments, out, out_length, whose):  # type: ignore[no-untyped-def]
    """Load a point into a lane."""
    put_integer(whose + 8 * lane, point)
    place, n = row(s, w, W_LANE) + 8 * lane, integer(s + 8 * N_ROWS)
    y = row(s, w, W_Y) + 8 * lane
    for i in range(n):
        put(y + i * STRIDE, number(starts + 8 * (point * n + i)))
    for name in range(at_lane_rows()):
        keep(place, name, 0.0)
    c = constants + 8 * point * N_CONSTANTS
    keep(place, L_END_FIXED, number(c + 8 * END_FIXED))
    keep(place, L_EARLIEST, number(c + 8 * END_EARLIEST))
    keep(place, L_TARGET, number(c + 8 * TARGET_AMOUNT))
    keep(place, L_TURNAROUND, number(c + 8 * TURNAROUND))
    keep(place, L_ATOL, number(c + 8 * ATOL_AMOUNT))
    keep(place, L_TOO_HOT, number(c + 8 * TOO_HOT))
    keep(place, L_DELTA, number(c + 8 * DELTA))
    keep(place, L_TFINAL, number(c + 8 * T_FINAL))
    T = number(y + integer(s + 8 * N_STATES) * STRIDE)
    keep(place, L_T_MAX, T)
    keep(place, L_HEAT_MAX, -_NEVER)
    keep(place, L_DUTY_MAX, -_NEVER)
    keep(place, L_RATE_MAX, -_NEVER)
    keep(place, L_CROSSED, math.nan)
    keep(place, L_BEST, -_NEVER)
    keep(place, L_BEST_TIME, math.nan)
    keep(place, L_END_TIME, math.nan)
    keep(place, L_REACTED_MAX, weighed(s, f, y, AT_TARGET))
    begin_segment(s, w, lane, blocks, point, 0, segments)


@compiled
def at_lane_rows():  # type: ignore[no-untyped-def]
    """Return how many numbers a lane has of its own."""
    return _LANE_ROWS


_LANE_ROWS = at.LANE_ROWS


@compiled
def weighed(s, f, y, which):  # type: ignore[no-untyped-def]
    """Return a weighted sum over z of one lane."""
    total, weights = 0.0, f + 8 * integer(s + 8 * which)
    for k in range(integer(s + 8 * N_STATES)):
        total += number(weights + 8 * k) * number(y + k * STRIDE)
    return total


@compiled
def weighed_cubic(s, f, w, lane, which):  # type: ignore[no-untyped-def]
    """Return that weighted sum along the step just made."""
    y0, y1, p, q = 0.0, 0.0, 0.0, 0.0
    weights = f + 8 * integer(s + 8 * which)
    for k in range(integer(s + 8 * N_STATES)):
        weight = number(weights + 8 * k)
        if weight != 0.0:
            a, b, c, d = lane_cubic(s, w, k, lane)
            y0, y1, p, q = y0 + weight * a, y1 + weight * b, p + weight * c, q + weight * d
    return y0, y1, p, q


@compiled
def capture(s, w, lane, target, theta):  # type: ignore[no-untyped-def]
    """Write the state at a fraction of the step just made to an address."""
    for i in range(integer(s + 8 * N_ROWS)):
        put(target + 8 * i, on_cubic(lane_cubic(s, w, i, lane), theta))


@compiled
def state_place(s, out, out_length, point, which):  # type: ignore[no-untyped-def]
    """Return where one of the four states of a point is left."""
    return out + 8 * (point * out_length + OUT_STATES + which * integer(s + 8 * N_ROWS))


@compiled
def rate_peak(place):  # type: ignore[no-untyped-def]
    """Note the largest dT/dt between the beginnings of the step before and of the one just made, and its time."""
    before, theta, rate = get(place, L_PEND_STEP), 0.0, get(place, L_RATE)
    if get(place, L_PENDING) > 0.5:
        theta, rate = hermite_peak(get(place, L_PEND_RATE), get(place, L_PEND_RATE_SLOPE), rate, get(place, L_RATE_SLOPE), before)
        theta -= 1.0
    if rate > get(place, L_RATE_MAX):
        keep(place, L_RATE_MAX, rate)
        keep(place, L_RATE_MAX_TIME, get(place, L_TIME) + theta * before)
    keep(place, L_PEND_RATE, get(place, L_RATE))
    keep(place, L_PEND_RATE_SLOPE, get(place, L_RATE_SLOPE))


@compiled
def peaks_of_step(s, w, lane, h, until):  # type: ignore[no-untyped-def]
    """Raise the highest temperature, heat release and duty by the step just made, up to a fraction of it."""
    place, nz = row(s, w, W_LANE) + 8 * lane, integer(s + 8 * N_STATES)
    theta, T = cubic_peak(lane_cubic(s, w, nz, lane), until)
    if T > get(place, L_T_MAX):
        keep(place, L_T_MAX, T)
        keep(place, L_T_MAX_TIME, get(place, L_TIME) + theta * h)
    heat, duty = get(place, L_HEAT), get(place, L_DUTY)
    if get(place, L_PENDING) > 0.5:
        before = get(place, L_PEND_STEP)
        _, heat = hermite_peak(get(place, L_PEND_HEAT), get(place, L_PEND_HEAT_SLOPE), heat, get(place, L_HEAT_SLOPE), before)
        _, duty = hermite_peak(get(place, L_PEND_DUTY), get(place, L_PEND_DUTY_SLOPE), duty, get(place, L_DUTY_SLOPE), before)
    end_heat = get(place, L_HEAT) + until * (get(place, L_HEAT_NOW) - get(place, L_HEAT))
    end_duty = get(place, L_DUTY) + until * (get(place, L_DUTY_NOW) - get(place, L_DUTY))
    keep(place, L_HEAT_MAX, max(get(place, L_HEAT_MAX), max(heat, end_heat)))
    keep(place, L_DUTY_MAX, max(get(place, L_DUTY_MAX), max(duty, end_duty)))
    keep(place, L_PEND_HEAT, get(place, L_HEAT))
    keep(place, L_PEND_HEAT_SLOPE, get(place, L_HEAT_SLOPE))
    keep(place, L_PEND_DUTY, get(place, L_DUTY))
    keep(place, L_PEND_DUTY_SLOPE, get(place, L_DUTY_SLOPE))
    rate_peak(place)
    keep(place, L_PEND_STEP, h)
    keep(place, L_PENDING, 1.0)
    keep(place, L_SUM_HEAT, get(place, L_SUM_HEAT) + 0.5 * until * h * (abs(get(place, L_HEAT)) + abs(end_heat)))
    keep(place, L_SUM_BOUNDARY, get(place, L_SUM_BOUNDARY) + 0.5 * until * h * (abs(get(place, L_DUTY)) + abs(end_duty)))


@compiled
def target_of_step(s, f, w, lane, h, out, out_length, point):  # type: ignore[no-untyped-def]
    """Note the highest amount reacted and, once, the crossing of the target."""
    place = row(s, w, W_LANE) + 8 * lane
    reacted = weighed(s, f, row(s, w, W_NEW) + 8 * lane, AT_TARGET)
    keep(place, L_REACTED_MAX, max(reacted, get(place, L_REACTED_MAX)))
    if math.isnan(get(place, L_CROSSED)) and reacted >= get(place, L_TARGET):
        theta = crossing(weighed_cubic(s, f, w, lane, AT_TARGET), get(place, L_TARGET))
        keep(place, L_CROSSED, get(place, L_TIME) + theta * h)
        capture(s, w, lane, state_place(s, out, out_length, point, AT_CROSSING), theta)


@compiled
def productivity_slope(cubic, theta, time, h, turnaround):  # type: ignore[no-untyped-def]
    """Return the sign-giving part of d(P / (t + turnaround))/dt, times h."""
    y0, y1, p, q = cubic
    slope = (y1 - y0) + (1.0 - 2.0 * theta) * p + (2.0 * theta - 3.0 * theta * theta) * q
    return slope * (time + theta * h + turnaround) - h * on_cubic(cubic, theta)


@compiled
def best_of_step(s, f, w, lane, h, out, out_length, point):  # type: ignore[no-untyped-def]
    """Note the most productive time: where product over cycle time is highest, after the last feed."""
    place = row(s, w, W_LANE) + 8 * lane
    time, turnaround = get(place, L_TIME), get(place, L_TURNAROUND)
    if time + h < get(place, L_EARLIEST) * (1.0 - 1e-12):
        return
    cubic = weighed_cubic(s, f, w, lane, AT_PRODUCT)
    theta = 1.0
    inside = time >= get(place, L_EARLIEST) * (1.0 - 1e-12)
    if inside and productivity_slope(cubic, 0.0, time, h, turnaround) > 0.0 > productivity_slope(cubic, 1.0, time, h, turnaround):
        low, high = 0.0, 1.0
        for _ in range(40):
            theta = 0.5 * (low + high)
            if productivity_slope(cubic, theta, time, h, turnaround) > 0.0:
                low = theta
            else:
                high = theta
    when = time + theta * h
    if when + turnaround > 0.0:
        value = on_cubic(cubic, theta) / (when + turnaround)
        if value > get(place, L_BEST):
            keep(place, L_BEST, value)
            keep(place, L_BEST_TIME, when)
            capture(s, w, lane, state_place(s, out, out_length, point, AT_BEST), theta)


@compiled
def batch_end(place, t0, t1, h):  # type: ignore[no-untyped-def]
    """Return the fraction of the step at which the batch ends, or 2 where it goes on."""
    end = get(place, L_END_FIXED)
    if math.isnan(end):
        crossed = get(place, L_CROSSED)
        end = _NEVER if math.isnan(crossed) else max(crossed, get(place, L_EARLIEST))
        end = min(end, get(place, L_TFINAL))
    if end > t1 * (1.0 + 1e-14):
        return 2.0, end
    return min(1.0, max(0.0, (end - t0) / h)), end


@compiled
def finish_step(s, f, w, lane, blocks, segments, times, n_times, samples, out, out_length, whose, most_steps):  # type: ignore[no-untyped-def]
    """Take an accepted step into account; return 1 when the point is over."""
    place, n, point = row(s, w, W_LANE) + 8 * lane, integer(s + 8 * N_ROWS), integer(whose + 8 * lane)
    h, t0 = get(place, L_OLD_STEP), get(place, L_TIME)
    t1, end = t0 + h, get(place, L_SEG_END)
    landed = end - t1 <= 1e-13 * abs(end)
    if landed:
        t1 = end
    target_of_step(s, f, w, lane, h, out, out_length, point)
    best_of_step(s, f, w, lane, h, out, out_length, point)
    if get(place, L_BATCH_OVER) < 0.5:
        until, when = batch_end(place, t0, t1, h)
        peaks_of_step(s, w, lane, h, min(1.0, until))
        if until <= 1.0:
            capture(s, w, lane, state_place(s, out, out_length, point, AT_END), until)
            keep(place, L_BATCH_OVER, 1.0)
            keep(place, L_END_TIME, when)
    k = int(get(place, L_NEXT_SAMPLE))
    while k < n_times and number(times + 8 * (point * n_times + k)) <= t1:
        theta = min(1.0, max(0.0, (number(times + 8 * (point * n_times + k)) - t0) / h))
        capture(s, w, lane, samples + 8 * n * (point * n_times + k), theta)
        k += 1
    keep(place, L_NEXT_SAMPLE, 1.0 * k)
    for i in range(n):
        shift = 8 * lane + i * STRIDE
        put(row(s, w, W_Y) + shift, number(row(s, w, W_NEW) + shift))
    keep(place, L_TIME, t1)
    keep(place, L_STEPS, get(place, L_STEPS) + 1.0)
    if number(row(s, w, W_Y) + 8 * lane + integer(s + 8 * N_STATES) * STRIDE) > get(place, L_TOO_HOT):
        keep(place, L_STATUS, 1.0 * RUNAWAY)
        return 1
    if landed:
        if int(get(place, L_SEGMENT)) + 1 == segments:
            return 1
        begin_segment(s, w, lane, blocks, point, int(get(place, L_SEGMENT)) + 1, segments)
        while get(place, L_SEG_END) <= t1:
            if int(get(place, L_SEGMENT)) + 1 == segments:
                return 1
            begin_segment(s, w, lane, blocks, point, int(get(place, L_SEGMENT)) + 1, segments)
    return still_going(place, most_steps)


@compiled
def still_going(place, most_steps):  # type: ignore[no-untyped-def]
    """Fit the next step to what is left of the segment; return 1 when steps or their size have run out."""
    left, h = get(place, L_SEG_END) - get(place, L_TIME), get(place, L_STEP)
    if get(place, L_STEPS) + get(place, L_REJECTED) >= most_steps:
        keep(place, L_STATUS, 1.0 * TOO_MANY_STEPS)
        return 1
    if h >= left:
        h = left
    elif h > 0.5 * left:
        h = 0.5 * left
    if not h > 1e-15 * get(place, L_TIME):
        keep(place, L_STATUS, 1.0 * STEP_TOO_SMALL)
        return 1
    keep(place, L_STEP, h)
    return 0


@compiled
def give_up(s, w, lane, out, out_length, whose, most_steps):  # type: ignore[no-untyped-def]
    """Count a rejected step; return 1 when the point must be given up."""
    place = row(s, w, W_LANE) + 8 * lane
    keep(place, L_REJECTED, get(place, L_REJECTED) + 1.0)
    return still_going(place, most_steps)


@compiled
def leave(s, w, lane, out, out_length, whose):  # type: ignore[no-untyped-def]
    """Write what a lane found for its point."""
    place, point, n = row(s, w, W_LANE) + 8 * lane, integer(whose + 8 * lane), integer(s + 8 * N_ROWS)
    target = out + 8 * point * out_length
    put(target + 8 * OUT_STATUS, get(place, L_STATUS))
    put(target + 8 * OUT_STEPS, get(place, L_STEPS))
    put(target + 8 * OUT_REJECTED, get(place, L_REJECTED))
    put(target + 8 * OUT_TIME, get(place, L_TIME))
    put(target + 8 * OUT_CROSSED, get(place, L_CROSSED))
    put(target + 8 * OUT_T_MAX, get(place, L_T_MAX))
    put(target + 8 * OUT_T_MAX_TIME, get(place, L_T_MAX_TIME))
    put(target + 8 * OUT_HEAT_MAX, get(place, L_HEAT_MAX))
    put(target + 8 * OUT_DUTY_MAX, get(place, L_DUTY_MAX))
    put(target + 8 * OUT_BEST, get(place, L_BEST))
    put(target + 8 * OUT_BEST_TIME, get(place, L_BEST_TIME))
    put(target + 8 * OUT_REACTED_MAX, get(place, L_REACTED_MAX))
    put(target + 8 * OUT_HEAT_SUM, get(place, L_SUM_HEAT))
    put(target + 8 * OUT_BOUNDARY_SUM, get(place, L_SUM_BOUNDARY))
    put(target + 8 * OUT_END_TIME, get(place, L_END_TIME))
    put(target + 8 * OUT_RATE_MAX, get(place, L_RATE_MAX))
    put(target + 8 * OUT_RATE_MAX_TIME, get(place, L_RATE_MAX_TIME))
    last = state_place(s, out, out_length, point, AT_LAST)
    for i in range(n):
        put(last + 8 * i, number(row(s, w, W_Y) + 8 * lane + i * STRIDE))
