"""The march: LANES batches side by side, each with its own time, step and recipe segment; a lane that ends takes the next point.

Nothing here waits for another lane, so a point's result does not depend on its neighbours. Work is bounded by steps.
"""

from sweep.kernel import layout as at
from sweep.kernel.control import accepted, move_on, next_step
from sweep.kernel.events import follow, look_back
from sweep.kernel.jacobian import start_of_step
from sweep.kernel.lane import begin_point, leave, settle
from sweep.kernel.layout import LANES
from sweep.kernel.linear import factorise
from sweep.kernel.memory import entry, integer, load, row, store
from sweep.kernel.step import GAMMA_INVERSE, dense_output, error_of_step, stages
from sweep.kernel.vector import bits, compiled, lowest, mask_of, where
from sweep.kernel.watch import watch_for


@compiled
def march(s, f, blocks, starts, constants, points, segments, times, n_times, levels, out, out_length, samples, w, whose, tolerance, most_steps):  # type: ignore[no-untyped-def]
    """March every point through its segments; write `out` and `samples`.

    blocks (points, segments, block), starts (points, rows), constants (points, 8), times (points, n_times) ascending, levels
    (points, watches), out (points, out_length), samples (points, n_times, rows): addresses of C-contiguous doubles; w: scratch; whose (LANES,):
    integers, which point a lane carries. Until a lane has a point it carries the first, without being run.
    """
    lanes, y, new = row(s, w, at.W_LANE), row(s, w, at.W_Y), row(s, w, at.W_NEW)
    n, nz = entry(s, at.N_ROWS), entry(s, at.N_STATES)
    for lane in range(LANES):
        begin_point(s, f, w, lane, points - 1, blocks, starts, constants, segments, times, n_times, levels, whose)
    following, running, free = 0 * points, 0, (1 << LANES) - 1  # a plain 0 would be a type of its own and compile `begin_point` twice
    while True:
        while free != 0 and following < points:
            lane = lowest(free)
            if begin_point(s, f, w, lane, following, blocks, starts, constants, segments, times, n_times, levels, whose) == 1:
                leave(s, w, lane, out, out_length, whose)
            else:
                free &= free - 1
                running |= 1 << lane
            following += 1
        if running == 0:
            break
        live, time, h = mask_of(running), load(lanes, at.L_TIME), load(lanes, at.L_STEP)
        start_of_step(s, f, w, time)
        factorise(s, w, GAMMA_INVERSE / h)
        look_back(s, f, w, live, time)
        stages(s, f, w, time, h)
        wrong, T_new = error_of_step(s, f, w, tolerance), load(new, nz)
        fine = accepted(lanes, wrong, T_new)
        good, rejected = live & fine, live & ~fine
        wanted, met = next_step(lanes, wrong, fine, h), 0 * running
        if bits(good) != 0:
            dense_output(s, f, w, good)
            follow(s, f, w, good, time, h, times, n_times, samples, out, out_length, whose)
            if entry(s, at.N_WATCHES) > 0:
                met = watch_for(s, f, w, good, time, h)
        landed, short = move_on(lanes, good, rejected, time, h, wanted)
        for i in range(n):
            store(y, i, where(good, load(new, i), load(y, i)))
        hot = good & (T_new > load(lanes, at.L_TOO_HOT))
        worn = load(lanes, at.L_STEPS) + load(lanes, at.L_REJECTED) >= 1.0 * most_steps
        flags, at_end, too_hot, too_short = bits(live & (hot | landed | short | worn)) | met, bits(landed), bits(hot), bits(short)
        while flags != 0:
            lane = lowest(flags)
            flags &= flags - 1
            one = 1 << lane
            point = integer(whose, lane)
            broken, burnt, ended, stuck = met & one != 0, too_hot & one != 0, at_end & one != 0, too_short & one != 0
            if settle(s, w, lane, blocks, point, segments, broken, burnt, ended, stuck, most_steps) == 1:
                leave(s, w, lane, out, out_length, whose)
                running &= ~one
                free |= one
    return following
