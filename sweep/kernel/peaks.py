"""Extremes and crossings inside one step, on the step's own cubic."""

import math

from sweep.kernel.step import on_cubic
from sweep.kernel.vector import compiled


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
    if spread > 0.0 and (c > 0.0 or y1 - y0 - p - q < 0.0):
        half = -0.5 * (b + math.copysign(math.sqrt(spread), b))
        for k in range(2):
            root = -1.0
            if k == 0 and a != 0.0:
                root = half / a
            if k == 1 and half != 0.0:
                root = c / half
            if 0.0 < root < until:
                here = on_cubic(cubic, root)
                if here > value:
                    best, value = root, here
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
def hermite_peak(q0, s0, q1, s1, h):  # type: ignore[no-untyped-def]
    """Return (theta, value) of the highest point of the cubic through two values with their slopes, a step h apart."""
    best, highest = 0.0, q0
    if q1 > q0:
        best, highest = 1.0, q1
    m0, m1 = s0 * h, s1 * h
    if not (m0 > 0.0 and m1 < 0.0):
        return best, highest
    a, b = 2.0 * (q0 - q1) + m0 + m1, 3.0 * (q1 - q0) - 2.0 * m0 - m1
    inner = b * b - 3.0 * a * m0
    if inner <= 0.0 or b - math.sqrt(inner) >= 0.0:
        return best, highest
    theta = m0 / (math.sqrt(inner) - b)
    if 0.0 < theta < 1.0:
        value = q0 + theta * (m0 + theta * (b + theta * a))
        if value > highest:
            best, highest = theta, value
    return best, highest
