"""The march: LANES batches side by side, each with its own time, step and recipe segment; a lane that ends takes the next point.

Nothing here waits for another lane, so a point's result does not depend on its neighbours. Work is bounded by steps.
"""

from sweep.kernel import layout as at
from sweep.kernel.balance import composition, heat_capacity, right_side, row
from sweep.kernel.jacobian import jacobian
from sweep.kernel.lane import begin_point, finish_step, give_up, leave
from sweep.kernel.linear import factorise
from sweep.kernel.step import GAMMA_INVERSE, error_of_step, stages
from sweep.kernel.vector import LANES, STRIDE, bits, compiled, integer, load, number, put, root, store, where

(W_Y, W_F, W_LANE, W_NEW, N_STATES) = (at.W_Y, at.W_F, at.W_LANE, at.W_NEW, at.N_STATES)
(L_TIME, L_STEP, L_ATOL, L_TOO_HOT, L_HEAT_NOW, L_DUTY_NOW, L_HEAT, L_DUTY, L_FAILED_LAST) = (
    at.L_TIME, at.L_STEP, at.L_ATOL, at.L_TOO_HOT, at.L_HEAT_NOW, at.L_DUTY_NOW, at.L_HEAT, at.L_DUTY, at.L_FAILED_LAST,
)  # fmt: skip

SAFETY, SHRINK, GROW = 0.9, 0.2, 6.0


@compiled
def march(s, f, blocks, starts, constants, points, segments, times, n_times, out, out_length, samples, w, whose, tolerance, most_steps):  # type: ignore[no-untyped-def]
    """March every point through its segments; write `out` and `samples`.

    blocks (points, segments, block), starts (points, rows), constants (points, 8), times (points, n_times) ascending, out
    (points, out_length), samples (points, n_times, rows): addresses of C-contiguous doubles; w: scratch; whose (LANES,):
    integers, which point a lane carries.
    """
    lane_rows, y, new, nz = row(s, w, W_LANE), row(s, w, W_Y), row(s, w, W_NEW), integer(s + 8 * N_STATES)
    following = 0
    running = 0
    for lane in range(LANES):
        point = following if following < points else points - 1
        begin_point(s, f, w, lane, point, blocks, starts, constants, segments, out, out_length, whose)
        if following < points:
            running |= 1 << lane
            following += 1
    while running != 0:
        time, h = load(lane_rows + L_TIME * STRIDE), load(lane_rows + L_STEP * STRIDE)
        right_side(s, f, w, y, time, row(s, w, W_F))
        volume = composition(s, f, w, y, time)
        T = load(y + nz * STRIDE)
        capacity = heat_capacity(s, w, T)
        store(lane_rows + L_HEAT * STRIDE, load(lane_rows + L_HEAT_NOW * STRIDE))
        store(lane_rows + L_DUTY * STRIDE, load(lane_rows + L_DUTY_NOW * STRIDE))
        jacobian(s, f, w, y, row(s, w, W_F), volume, capacity)
        factorise(s, w, GAMMA_INVERSE / h)
        stages(s, f, w, time, h)
        wrong = error_of_step(s, f, w, tolerance, load(lane_rows + L_ATOL * STRIDE))
        T_new = load(new + nz * STRIDE)
        fine = (wrong <= 1.0) & (T_new > 1.0) & (T_new < load(lane_rows + L_TOO_HOT * STRIDE) * 4.0)
        factor = SAFETY / root(root(where(wrong > 1e-8, wrong, 1e-8)))
        factor = where(factor > GROW, GROW, factor)
        factor = where(factor >= SHRINK, factor, SHRINK)
        factor = where(wrong < 1e200, factor, SHRINK)
        capped = where(factor > 0.5, 0.5, factor)
        again = where(load(lane_rows + L_FAILED_LAST * STRIDE) > 0.5, where(factor > 1.0, 1.0, factor), factor)
        accepted = bits(fine)
        store(lane_rows + L_STEP * STRIDE, h * where(fine, again, capped))
        store(lane_rows + at_old_step() * STRIDE, h)
        for lane in range(LANES):
            if (running >> lane) & 1 == 0:
                continue
            place = lane_rows + 8 * lane
            if (accepted >> lane) & 1 == 1:
                put(place + L_FAILED_LAST * STRIDE, 0.0)
                over = finish_step(s, f, w, lane, blocks, segments, times, n_times, samples, out, out_length, whose, most_steps)
            else:
                put(place + L_FAILED_LAST * STRIDE, 1.0)
                over = give_up(s, w, lane, out, out_length, whose, most_steps)
            if over == 1:
                leave(s, w, lane, out, out_length, whose)
                if following < points:
                    begin_point(s, f, w, lane, following, blocks, starts, constants, segments, out, out_length, whose)
                    following += 1
                else:
                    running &= ~(1 << lane)
    return number(out)


@compiled
def at_old_step():  # type: ignore[no-untyped-def]
    """Return the row that keeps the length of the step just tried."""
    return _OLD


_OLD = at.L_OLD_STEP
