"""One trial step of Rodas5P on LANES batches, each with its own time and step; the error it made; its dense output."""

import math

from sweep.kernel import layout as at
from sweep.kernel.balance import right_side
from sweep.kernel.layout import STRIDE
from sweep.kernel.linear import solve
from sweep.kernel.memory import coefficient, entry, load, row, store
from sweep.kernel.method import FRESH, GAMMA, STAGES
from sweep.kernel.vector import compiled, size, spread, where

GAMMA_INVERSE = 1.0 / GAMMA
_TIME, _SLOPE, _A, _C, _STAGE = 0, 1, 2, 1 + STAGES, 2 * STAGES  # of a stage's line in the tableau, and its length
_DENSE = STAGES * _STAGE
_KELVIN_INVERSE = 0.01  # 1/K; a temperature's error is measured against 100 K
_OPENING = 1.0  # the controller's integral counts by what it opens
_LARGEST = 1e300
_SHARE = 0.5  # of the tolerance that the estimate may fill; what is left is for kinks, where an order 5 takes long steps and errs more


@compiled
def stages(s, f, w, time, h):  # type: ignore[no-untyped-def]
    """From the state, its slope and the LU factors of J - I/(h gamma) write the stages and the new state."""
    n, line = entry(s, at.N_ROWS), entry(s, at.AT_METHOD)
    y, new, now, by_time, k = row(s, w, at.W_Y), row(s, w, at.W_NEW), row(s, w, at.W_F), row(s, w, at.W_SLOPE), row(s, w, at.W_K)
    inverse = 1.0 / h
    share = h * coefficient(f, line + _SLOPE)
    for i in range(n):
        store(k, i, -(load(now, i) + share * load(by_time, i)))
    solve(s, w, k)
    for stage in range(1, STAGES):
        line += _STAGE
        this, last = k + stage * n * STRIDE, k + (stage - 1) * n * STRIDE
        for i in range(n):
            state, before = load(y, i), spread(0.0)
            for j in range(stage):
                kj = load(k, j * n + i)
                state, before = state + coefficient(f, line + _A + j) * kj, before + coefficient(f, line + _C + j) * kj
            if stage >= FRESH:
                state = load(new, i) + load(last, i)
            store(new, i, state)
            store(this, i, before)
        right_side(s, f, w, new, time + h * coefficient(f, line + _TIME), now)
        share = h * coefficient(f, line + _SLOPE)
        for i in range(n):
            store(this, i, -(load(now, i) + share * load(by_time, i) + inverse * load(this, i)))
        solve(s, w, this)
    for i in range(n):
        store(new, i, load(new, i) + load(k, (STAGES - 1) * n + i))


@compiled
def error_of_step(s, f, w, tolerance):  # type: ignore[no-untyped-def]
    """Return the largest error over its allowance: amounts (relative and absolute), temperatures, the controller's opening.

    Infinite where any of them is not a number.
    """
    n, nz, p = entry(s, at.N_ROWS), entry(s, at.N_STATES), entry(s, at.AT_AMOUNTS)
    block, amounts, atol = row(s, w, at.W_BLOCK), row(s, w, at.W_N), load(row(s, w, at.W_LANE), at.L_ATOL)
    error = row(s, w, at.W_K) + (STAGES - 1) * n * STRIDE
    opened = _OPENING * load(block, at.GAIN) * load(block, at.RESET_INVERSE)
    worst, allowed = opened * size(load(error, nz + 2)), spread(1.0)  # as a fraction, so that only one division is needed
    sound = worst
    for i in range(nz, nz + 2):
        wrong = size(load(error, i)) * _KELVIN_INVERSE
        worst, sound = where(wrong > worst, wrong, worst), sound + wrong
    for i in range(entry(s, at.N_SPECIES)):
        wrong = spread(0.0)
        end = p + 1 + entry(s, p)
        for q in range(p + 1, end):
            wrong = wrong + coefficient(f, q) * load(error, entry(s, q))
        p = end
        wrong, scale = size(wrong), size(load(amounts, i)) + atol
        worse = wrong * allowed > worst * scale
        worst, allowed, sound = where(worse, wrong, worst), where(worse, scale, allowed), sound + wrong
    return where(sound <= _LARGEST, worst / (allowed * (_SHARE * tolerance)), math.inf)


@compiled
def dense_output(s, f, w, good):  # type: ignore[no-untyped-def]
    """Write p, q and r of every state, and y0, of lanes whose step is good (mask); they stand until the next good step.

    y(theta) = (1 - theta) y0 + theta (y1 + (1 - theta) (p + theta (q + theta r))) inside the step.
    """
    y, before = row(s, w, at.W_Y), row(s, w, at.W_BEFORE)
    n, k, line = entry(s, at.N_ROWS), row(s, w, at.W_K), entry(s, at.AT_METHOD) + _DENSE
    ps, qs, rs = row(s, w, at.W_P), row(s, w, at.W_Q), row(s, w, at.W_DENSE)
    for i in range(n):
        p, q, r = spread(0.0), spread(0.0), spread(0.0)
        for j in range(STAGES):
            kj = load(k, j * n + i)
            p, q = p + coefficient(f, line + j) * kj, q + coefficient(f, line + STAGES + j) * kj
            r = r + coefficient(f, line + 2 * STAGES + j) * kj
        store(ps, i, where(good, p, load(ps, i)))
        store(qs, i, where(good, q, load(qs, i)))
        store(rs, i, where(good, r, load(rs, i)))
        store(before, i, where(good, load(y, i), load(before, i)))
