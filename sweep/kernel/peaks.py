"""Extremes and crossings inside one step: on the step's own dense output in one lane, and by values and slopes in all lanes at once."""

import math

from sweep.kernel.memory import load, store
from sweep.kernel.vector import bits, compiled, root, where

NOW, SLOPE, BEFORE, SLOPE_BEFORE = 0, 1, 2, 3  # of the four rows that a followed quantity has (layout.L_HEAT and so on)


@compiled
def on_path(path, theta):  # type: ignore[no-untyped-def]
    """Return y(theta) = (1 - theta) y0 + theta (y1 + (1 - theta) (p + theta (q + theta r))), path = (y0, y1, p, q, r)."""
    y0, y1, p, q, r = path
    return (1.0 - theta) * y0 + theta * (y1 + (1.0 - theta) * (p + theta * (q + theta * r)))


@compiled
def path_slope(path, theta):  # type: ignore[no-untyped-def]
    """Return dy/dtheta."""
    y0, y1, p, q, r = path
    return (y1 - y0 + p) + theta * (2.0 * (q - p) + theta * (3.0 * (r - q) - 4.0 * theta * r))


@compiled
def inner_heights(path):  # type: ignore[no-untyped-def]
    """Return the inner three Bezier ordinates of y(theta): it rises nowhere above the highest of them and its ends."""
    y0, y1, p, q, r = path
    rise = y1 - y0
    return y0 + 0.25 * (rise + p), y0 + 0.5 * (rise + p) + (q - p) * (1.0 / 6.0), y1 - 0.25 * (rise - p - q - r)


@compiled
def turning(path, low, high):  # type: ignore[no-untyped-def]
    """Return where the slope, positive at `low` and negative at `high`, changes its sign, by bisection."""
    for _ in range(48):
        middle = 0.5 * (low + high)
        if path_slope(path, middle) > 0.0:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


@compiled
def steepest(path, otherwise):  # type: ignore[no-untyped-def]
    """Return the two fractions of the step where the slope is steepest; `otherwise` for what there is not."""
    _, _, p, q, r = path
    a, b, c = -6.0 * r, 3.0 * (r - q), q - p
    spread = b * b - 4.0 * a * c
    first, second = otherwise, otherwise
    if spread > 0.0:
        half = -0.5 * (b + math.copysign(math.sqrt(spread), b))
        first, second = half / a if a != 0.0 else otherwise, c / half if half != 0.0 else otherwise
    return first, second


@compiled
def path_peak(path, until):  # type: ignore[no-untyped-def]
    """Return (theta, value) of the highest point of y(theta) for theta from 0 to `until`.

    Between the places where its slope is steepest the slope only rises or only falls, so that each such piece holds one peak at most.
    """
    best, value = 0.0, path[0]
    end = on_path(path, until)
    if end > value:
        best, value = until, end
    first, second = steepest(path, until)
    low = 0.0
    for k in range(3):
        high = min(first, second) if k == 0 else (max(first, second) if k == 1 else until)
        high = min(max(high, low), until)
        if path_slope(path, low) > 0.0 and path_slope(path, high) < 0.0:
            place = turning(path, low, high)
            here = on_path(path, place)
            if here > value:
                best, value = place, here
        low = high
    return best, value


@compiled
def crossing(path, level):  # type: ignore[no-untyped-def]
    """Return the fraction of the step at which a path that ends at or above a level first reaches it, by bisection."""
    low, high = 0.0, 1.0
    if on_path(path, 0.0) >= level:
        return 0.0
    for _ in range(52):
        middle = 0.5 * (low + high)
        if on_path(path, middle) >= level:
            high = middle
        else:
            low = middle
    return high


@compiled
def reach(path, low, high):  # type: ignore[no-untyped-def]
    """Return where a path that is below zero at `low` and not at `high` first is not, by bisection."""
    for _ in range(60):
        middle = 0.5 * (low + high)
        if on_path(path, middle) >= 0.0:
            high = middle
        else:
            low = middle
    return high


@compiled
def first_reach(path):  # type: ignore[no-untyped-def]
    """Return the least fraction of the step at which a path is not below zero; 2 where it is below all along.

    Between its extremes it rises or falls throughout, so that one which comes up and goes back inside the step is not missed; the extremes
    lie between the places where its slope is steepest, one at most in each such piece.
    """
    y0, y1, p, q, r = path
    if y0 >= 0.0:
        return 0.0
    first, second = steepest(path, 1.0)
    low, begin = 0.0, 0.0
    for k in range(3):
        high = min(first, second) if k == 0 else (max(first, second) if k == 1 else 1.0)
        high = min(max(high, low), 1.0)
        rises, rose = path_slope(path, low) > 0.0, path_slope(path, high) > 0.0
        if rises != rose:
            place = turning(path, low, high) if rises else turning((-y0, -y1, -p, -q, -r), low, high)
            if on_path(path, place) >= 0.0:
                return reach(path, begin, place)
            begin = place
        low = high
    return reach(path, begin, 1.0) if on_path(path, 1.0) >= 0.0 else 2.0


@compiled
def productivity_slope(path, theta, time, h, turnaround):  # type: ignore[no-untyped-def]
    """Return the sign-giving part of d(P / (t + turnaround))/dt, times h."""
    return path_slope(path, theta) * (time + theta * h + turnaround) - h * on_path(path, theta)


@compiled
def most_productive(path, time, h, turnaround):  # type: ignore[no-untyped-def]
    """Return the fraction of the step at which P / (t + turnaround) turns from rising to falling, by bisection."""
    low, high = 0.0, 1.0
    for _ in range(40):
        middle = 0.5 * (low + high)
        if productivity_slope(path, middle, time, h, turnaround) > 0.0:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


@compiled
def peak_between(followed, pending, h, highest):  # type: ignore[no-untyped-def]
    """Return (mask, theta, height, rise, bend): the lanes in which the quantity seems to pass a peak above `highest` between the starts of the
    last two steps, h apart, and where, how high, how far above both and how curved, on the cubic through both values with their slopes.

    followed: address of the quantity's four rows; pending: mask of lanes that have a step before. Only a hint: where a step is far
    longer than what drives the quantity, its slopes say nothing, so the value there has to be worked out.
    """
    q0, m0 = load(followed, BEFORE), load(followed, SLOPE_BEFORE) * h
    q1, m1 = load(followed, NOW), load(followed, SLOPE) * h
    early, late = q0 + m0 * (1.0 / 3.0), q1 - m1 * (1.0 / 3.0)
    turns = pending & (m0 > 0.0) & (m1 < 0.0) & (where(early > late, early, late) > highest)  # no cubic rises above its Bezier points
    theta, height, rise, bend = m0, m0, m0, m0
    if bits(turns) != 0:
        a, b = 2.0 * (q0 - q1) + m0 + m1, 3.0 * (q1 - q0) - 2.0 * m0 - m1
        inner = b * b - 3.0 * a * m0
        below = root(where(inner > 0.0, inner, 0.0)) - b
        theta = m0 / below
        height, bend = q0 + theta * (m0 + theta * (b + theta * a)), 2.0 * b + 6.0 * theta * a
        rise = height - where(q1 > q0, q1, q0)
        turns = turns & (inner > 0.0) & (below > 0.0) & (theta < 1.0) & (height > highest) & (rise > 0.0)
    return turns, theta, height, rise, bend


@compiled
def peak_at_end(followed, now, ending, h, highest):  # type: ignore[no-untyped-def]
    """Return (mask, theta, height, rise, bend) as `peak_between` for a step of length h in lanes where it is a segment's last (mask): the slope
    at its end is unknown, so the hint is the parabola through both values (`now` at the end) with the slope at the start."""
    q0, m0 = load(followed, NOW), load(followed, SLOPE) * h
    bend = 2.0 * (now - q0 - m0)
    turns = ending & (m0 > 0.0) & (m0 + bend < 0.0)
    theta = where(turns, m0 / where(turns, -bend, 1.0), 0.5)
    height = q0 + 0.5 * theta * m0
    rise = height - where(now > q0, now, q0)
    return turns & (height > highest) & (rise > 0.0), theta, height, rise, bend


@compiled
def corrected(theta, height, bend, value, order):  # type: ignore[no-untyped-def]
    """Return where a peak stands that a hint puts at theta, `height` high, where the quantity is in truth `value` high.

    By one step of Newton's method on the hint with what it misses, growing as theta^2 (1 - theta)^order: the same values and slopes at the
    ends as the hint had, order 2 where the slope at the end was known, 1 where it was not.
    """
    miss, rest = value - height, 1.0 - theta
    growth = 2.0 / theta - order / rest
    bend = bend + miss * (growth * growth - 2.0 / (theta * theta) - order / (rest * rest))
    better = where(bend < 0.0, theta - miss * growth / bend, theta)
    return where((better > 0.0) & (better < 1.0), better, theta)


@compiled
def carry_over(followed, done):  # type: ignore[no-untyped-def]
    """Where a step is done, make the quantity's value and slope at its start those of the step before."""
    store(followed, BEFORE, where(done, load(followed, NOW), load(followed, BEFORE)))
    store(followed, SLOPE_BEFORE, where(done, load(followed, SLOPE), load(followed, SLOPE_BEFORE)))
