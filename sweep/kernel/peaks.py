"""Extremes and crossings inside one step: on the step's own cubic in one lane, and by values and slopes in all lanes at once."""

import math

from sweep.kernel.memory import load, store
from sweep.kernel.vector import bits, compiled, root, where

NOW, SLOPE, BEFORE, SLOPE_BEFORE = 0, 1, 2, 3  # of the four rows that a followed quantity has (layout.L_HEAT and so on)


@compiled
def on_cubic(cubic, theta):  # type: ignore[no-untyped-def]
    """Return y(theta) = (1 - theta) y0 + theta (y1 + (1 - theta) (p + theta q)), cubic = (y0, y1, p, q)."""
    y0, y1, p, q = cubic
    return (1.0 - theta) * y0 + theta * (y1 + (1.0 - theta) * (p + theta * q))


@compiled
def cubic_peak(cubic, until):  # type: ignore[no-untyped-def]
    """Return (theta, value) of the highest point of y(theta) for theta from 0 to `until`."""
    y0, y1, p, q = cubic
    best, value = 0.0, y0
    end = on_cubic(cubic, until)
    if end > value:
        best, value = until, end
    a, b, c = -3.0 * q, 2.0 * (q - p), y1 - y0 + p
    spread = b * b - 4.0 * a * c
    if spread > 0.0:
        half = -0.5 * (b + math.copysign(math.sqrt(spread), b))
        for k in range(2):
            place = -1.0
            if k == 0 and a != 0.0:
                place = half / a
            if k == 1 and half != 0.0:
                place = c / half
            if 0.0 < place < until:
                here = on_cubic(cubic, place)
                if here > value:
                    best, value = place, here
    return best, value


@compiled
def crossing(cubic, level):  # type: ignore[no-untyped-def]
    """Return the fraction of the step at which a cubic that ends at or above a level first reaches it, by bisection."""
    low, high = 0.0, 1.0
    if on_cubic(cubic, 0.0) >= level:
        return 0.0
    for _ in range(52):
        middle = 0.5 * (low + high)
        if on_cubic(cubic, middle) >= level:
            high = middle
        else:
            low = middle
    return high


@compiled
def first_reach(cubic):  # type: ignore[no-untyped-def]
    """Return the least fraction of the step at which a cubic is not below zero; 2 where it is below all along.

    Between its extremes a cubic rises or falls throughout, so that one which comes up and goes back inside the step is not missed.
    """
    y0, y1, p, q = cubic
    if y0 >= 0.0:
        return 0.0
    a, b, c = -3.0 * q, 2.0 * (q - p), y1 - y0 + p
    early, late = 2.0, 2.0
    spread = b * b - 4.0 * a * c
    if spread > 0.0:
        half = -0.5 * (b + math.copysign(math.sqrt(spread), b))
        early = half / a if a != 0.0 else 2.0
        late = c / half if half != 0.0 else 2.0
        if early > late:
            early, late = late, early
    low = 0.0
    for k in range(3):
        high = early if k == 0 else (late if k == 1 else 1.0)
        if low < high <= 1.0:
            if on_cubic(cubic, high) >= 0.0:
                for _ in range(60):
                    middle = 0.5 * (low + high)
                    if on_cubic(cubic, middle) >= 0.0:
                        high = middle
                    else:
                        low = middle
                return high
            low = high
    return 2.0


@compiled
def productivity_slope(cubic, theta, time, h, turnaround):  # type: ignore[no-untyped-def]
    """Return the sign-giving part of d(P / (t + turnaround))/dt, times h."""
    y0, y1, p, q = cubic
    slope = (y1 - y0) + (1.0 - 2.0 * theta) * p + (2.0 * theta - 3.0 * theta * theta) * q
    return slope * (time + theta * h + turnaround) - h * on_cubic(cubic, theta)


@compiled
def most_productive(cubic, time, h, turnaround):  # type: ignore[no-untyped-def]
    """Return the fraction of the step at which P / (t + turnaround) turns from rising to falling, by bisection."""
    low, high = 0.0, 1.0
    for _ in range(40):
        middle = 0.5 * (low + high)
        if productivity_slope(cubic, middle, time, h, turnaround) > 0.0:
            low = middle
        else:
            high = middle
    return 0.5 * (low + high)


@compiled
def peak_between(followed, pending, h, highest):  # type: ignore[no-untyped-def]
    """Return (mask, theta): the lanes in which the quantity seems to pass a peak above `highest` between the starts of the last two
    steps, h apart, and where, on the cubic through both values with their slopes.

    followed: address of the quantity's four rows; pending: mask of lanes that have a step before. Only a hint: where a step is far
    longer than what drives the quantity, its slopes say nothing, so the value there has to be worked out.
    """
    q0, m0 = load(followed, BEFORE), load(followed, SLOPE_BEFORE) * h
    q1, m1 = load(followed, NOW), load(followed, SLOPE) * h
    early, late = q0 + m0 * (1.0 / 3.0), q1 - m1 * (1.0 / 3.0)
    turns = pending & (m0 > 0.0) & (m1 < 0.0) & (where(early > late, early, late) > highest)  # no cubic rises above its Bezier points
    theta = m0
    if bits(turns) != 0:
        a, b = 2.0 * (q0 - q1) + m0 + m1, 3.0 * (q1 - q0) - 2.0 * m0 - m1
        inner = b * b - 3.0 * a * m0
        below = root(where(inner > 0.0, inner, 0.0)) - b
        theta = m0 / below
        value = q0 + theta * (m0 + theta * (b + theta * a))
        turns = turns & (inner > 0.0) & (below > 0.0) & (theta < 1.0) & (value > highest) & (value > q0) & (value > q1)
    return turns, theta


@compiled
def carry_over(followed, done):  # type: ignore[no-untyped-def]
    """Where a step is done, make the quantity's value and slope at its start those of the step before."""
    store(followed, BEFORE, where(done, load(followed, NOW), load(followed, BEFORE)))
    store(followed, SLOPE_BEFORE, where(done, load(followed, SLOPE), load(followed, SLOPE_BEFORE)))
