"""Conditions that break a march off: a quantity that rises above a level, or falls below it, found on the dense output of each step.

What is linear in the states (temperatures, amounts, concentrations, volume, conversion) is a polynomial along the step: its first crossing
is found exactly, one up and back inside the step too. Heat release and cooling duty are worked out at five places of the step and, between
two of them, by bisection.
"""

from sweep.kernel import layout as at
from sweep.kernel.balance import right_side
from sweep.kernel.lane import path_of_state
from sweep.kernel.memory import coefficient, entry, keep, load, of_lane, row, store
from sweep.kernel.peaks import first_reach, inner_heights, on_path
from sweep.kernel.vector import bits, compiled, lowest, spread, where

_WEIGHTS = 3  # where the weights begin in a watch's line of the stream
_PLACES = 4  # parts of a step at whose ends heat flows are worked out
_HALVINGS = 48


@compiled
def path_watched(s, f, w, p, k, time, h):  # type: ignore[no-untyped-def]
    """Return sign (quantity - level) of watch k, whose line begins at p, along the step just made: y0, y1, p, q, r."""
    block, y, new = row(s, w, at.W_BLOCK), row(s, w, at.W_Y), row(s, w, at.W_NEW)
    ps, qs, rs = row(s, w, at.W_P), row(s, w, at.W_Q), row(s, w, at.W_DENSE)
    y0, y1, yp, yq, yr = spread(0.0), spread(0.0), spread(0.0), spread(0.0), spread(0.0)
    for i in range(entry(s, at.N_STATES) + 2):
        weight = coefficient(f, p + _WEIGHTS + i)
        y0, y1, yp = y0 + weight * load(y, i), y1 + weight * load(new, i), yp + weight * load(ps, i)
        yq, yr = yq + weight * load(qs, i), yr + weight * load(rs, i)
    elapsed = time - load(block, at.T_START)
    before = load(block, at.VOLUME) + load(block, at.VOLUME_RATE) * elapsed
    after = before + load(block, at.VOLUME_RATE) * h
    y0, y1 = y0 + coefficient(f, p + 2) * before, y1 + coefficient(f, p + 2) * after
    species = entry(s, p + 1)
    if species >= 0:
        feed = load(block, entry(s, at.BLOCK_FEED) + species)
        amount = load(block, entry(s, at.BLOCK_BASE) + species) + feed * elapsed
        y0, y1 = y0 + amount, y1 + amount + feed * h
    level, share, sign = load(row(s, w, at.W_LEVEL), k), coefficient(f, p + 1), coefficient(f, p)
    y0, y1 = y0 - level * (share * before + (1.0 - share)), y1 - level * (share * after + (1.0 - share))
    return sign * y0, sign * y1, sign * yp, sign * yq, sign * yr


@compiled
def linear_reach(s, f, w, p, k, good, time, h):  # type: ignore[no-untyped-def]
    """Write into L_THETA where in the step a linear watch is first met, 2 where it is not."""
    lanes = row(s, w, at.W_LANE)
    path = path_watched(s, f, w, p, k, time, h)
    y0, y1, yp, yq, yr = path
    store(lanes, at.L_THETA, 2.0)
    early, middle, late = inner_heights(path)
    flags = bits(good & ((y0 >= 0.0) | (y1 >= 0.0) | (early >= 0.0) | (middle >= 0.0) | (late >= 0.0)))
    if flags != 0:
        store(lanes, at.L_PATH, y0)
        store(lanes, at.L_PATH + 1, y1)
        store(lanes, at.L_PATH + 2, yp)
        store(lanes, at.L_PATH + 3, yq)
        store(lanes, at.L_PATH + 4, yr)
    while flags != 0:
        place = lanes + 8 * lowest(flags)
        flags &= flags - 1
        ends = of_lane(place, at.L_PATH), of_lane(place, at.L_PATH + 1)
        inner = of_lane(place, at.L_PATH + 2), of_lane(place, at.L_PATH + 3), of_lane(place, at.L_PATH + 4)
        keep(place, at.L_THETA, first_reach(ends + inner))


@compiled
def flow_at(s, f, w, p, k, time, h, theta):  # type: ignore[no-untyped-def]
    """Return sign (heat flow - level) of watch k at a fraction of the step just made."""
    state, y0, y1 = row(s, w, at.W_F), row(s, w, at.W_Y), row(s, w, at.W_NEW)
    ps, qs, rs = row(s, w, at.W_P), row(s, w, at.W_Q), row(s, w, at.W_DENSE)
    for i in range(entry(s, at.N_ROWS)):
        store(state, i, on_path((load(y0, i), load(y1, i), load(ps, i), load(qs, i), load(rs, i)), theta))
    right_side(s, f, w, state, time + theta * h, row(s, w, at.W_K))
    return coefficient(f, p) * (load(row(s, w, at.W_LANE), at.L_HEAT_NOW + entry(s, p) - 1) - load(row(s, w, at.W_LEVEL), k))


@compiled
def flow_reach(s, f, w, p, k, good, time, h):  # type: ignore[no-untyped-def]
    """Write into L_THETA where in the step a watched heat flow is first met, 2 where it is not."""
    low, high = spread(0.0), spread(2.0)
    for n in range(_PLACES + 1):
        theta = spread(n / _PLACES)
        hit = (flow_at(s, f, w, p, k, time, h, theta) >= 0.0) & (high > 1.5)
        high = where(hit, theta, high)
        low = where(high > 1.5, theta, low)
    inside = good & (high < 1.5) & (high > 0.0)
    if bits(inside) != 0:
        for _ in range(_HALVINGS):
            middle = 0.5 * (low + high)
            hit = flow_at(s, f, w, p, k, time, h, where(inside, middle, 0.0)) >= 0.0
            high, low = where(inside & hit, middle, high), where(inside & ~hit, middle, low)
    store(row(s, w, at.W_LANE), at.L_THETA, where(good, high, 2.0))


@compiled
def watch_for(s, f, w, good, time, h):  # type: ignore[no-untyped-def]
    """Return, as bits, the lanes in which a condition is met in the step just made (good: mask; time, h: its start and length, s).

    Notes the earliest one and when; the step's new state becomes that at this moment.
    """
    lanes, p = row(s, w, at.W_LANE), entry(s, at.AT_WATCHES)
    for k in range(entry(s, at.N_WATCHES)):
        if entry(s, p) == 0:
            linear_reach(s, f, w, p, k, good, time, h)
        else:
            flow_reach(s, f, w, p, k, good, time, h)
        theta, best = load(lanes, at.L_THETA), load(lanes, at.L_EVENT_THETA)
        sooner = good & (theta < best)
        store(lanes, at.L_EVENT_THETA, where(sooner, theta, best))
        store(lanes, at.L_EVENT, where(sooner, 1.0 * k, load(lanes, at.L_EVENT)))
        p += _WEIGHTS + entry(s, at.N_STATES) + 2
    theta = load(lanes, at.L_EVENT_THETA)
    met = good & (theta <= 1.0)
    flags = found = bits(met)
    if found != 0:
        store(lanes, at.L_EVENT_TIME, where(met, time + theta * h, load(lanes, at.L_EVENT_TIME)))
    while flags != 0:
        shift = 8 * lowest(flags)
        flags &= flags - 1
        fraction = of_lane(lanes + shift, at.L_EVENT_THETA)
        for i in range(entry(s, at.N_ROWS)):
            keep(row(s, w, at.W_NEW) + shift, i, on_path(path_of_state(s, w, shift, i), fraction))
    return found
