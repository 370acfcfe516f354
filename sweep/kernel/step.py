"""One trial step of RODAS on LANES batches, each with its own time and step; the error it made; its dense output."""

from sweep.kernel import layout as at
from sweep.kernel.balance import right_side, row
from sweep.kernel.linear import solve
from sweep.kernel.method import DENSE, GAMMA, SLOPES, STAGES, TIMES, A, C
from sweep.kernel.vector import STRIDE, compiled, integer, load, number, size, spread, store, where

(N_ROWS, N_SPECIES, N_STATES, AT_AMOUNTS, W_Y, W_NEW, W_F, W_SLOPE, W_K, W_X, W_N, W_BLOCK, BLOCK_BASE) = (
    at.N_ROWS, at.N_SPECIES, at.N_STATES, at.AT_AMOUNTS, at.W_Y, at.W_NEW, at.W_F, at.W_SLOPE, at.W_K, at.W_X, at.W_N, at.W_BLOCK,
    at.BLOCK_BASE,
)  # fmt: skip
GAIN, RESET_INVERSE = at.GAIN, at.RESET_INVERSE

_A = tuple(tuple(float(x) for x in line) for line in A)
_C = tuple(tuple(float(x) for x in line) for line in C)
_TIMES = tuple(float(x) for x in TIMES)
_SLOPES = tuple(float(x) for x in SLOPES)
_P = tuple(float(x) for x in DENSE[0])
_Q = tuple(float(x) for x in DENSE[1])
_KELVIN = 100.0  # K; a temperature's error is measured against this


@compiled
def stages(s, f, w, time, h):  # type: ignore[no-untyped-def]
    """From the state, its slope and the LU factors write the six stages and the new state."""
    n = integer(s + 8 * N_ROWS)
    y, new, slope_y, by_time = row(s, w, W_Y), row(s, w, W_NEW), row(s, w, W_F), row(s, w, W_SLOPE)
    k, x = row(s, w, W_K), row(s, w, W_X)
    inverse = 1.0 / h
    for stage in range(STAGES):
        if stage > 0:
            for i in range(n):
                total = load(y + i * STRIDE)
                for j in range(stage):
                    total = total + _A[stage][j] * load(k + (j * n + i) * STRIDE)
                store(new + i * STRIDE, total)
            right_side(s, f, w, new, time + h * _TIMES[stage], slope_y)
        for i in range(n):
            total = load(slope_y + i * STRIDE) + (h * _SLOPES[stage]) * load(by_time + i * STRIDE)
            for j in range(stage):
                total = total + (inverse * _C[stage][j]) * load(k + (j * n + i) * STRIDE)
            store(x + i * STRIDE, total)
        solve(s, w, x)
        for i in range(n):
            store(k + (stage * n + i) * STRIDE, load(x + i * STRIDE))
    for i in range(n):
        store(new + i * STRIDE, load(new + i * STRIDE) + load(x + i * STRIDE))


@compiled
def error_of_step(s, f, w, tolerance, atol):  # type: ignore[no-untyped-def]
    """Return the largest error over its allowance: amounts (relative and absolute), temperatures, the controller's opening."""
    n, nz, p = integer(s + 8 * N_ROWS), integer(s + 8 * N_STATES), integer(s + 8 * AT_AMOUNTS)
    block = row(s, w, W_BLOCK)
    error = row(s, w, W_K) + 5 * n * STRIDE
    worst = spread(0.0)
    for i in range(integer(s + 8 * N_SPECIES)):
        count = integer(s + 8 * p)
        p += 1
        wrong, now = spread(0.0), load(row(s, w, W_N) + i * STRIDE)
        for _ in range(count):
            wrong = wrong + number(f + 8 * p) * load(error + integer(s + 8 * p) * STRIDE)
            p += 1
        ratio = size(wrong) / (size(now) + atol)
        worst = where(ratio <= worst, worst, ratio)
    for i in range(nz, nz + 2):
        ratio = size(load(error + i * STRIDE)) * (1.0 / _KELVIN)
        worst = where(ratio <= worst, worst, ratio)
    opened = load(block + GAIN * STRIDE) * load(block + RESET_INVERSE * STRIDE)
    ratio = 0.1 * opened * size(load(error + (nz + 2) * STRIDE))
    worst = where(ratio <= worst, worst, ratio)
    return worst * (1.0 / tolerance)


@compiled
def dense(s, w, i, theta):  # type: ignore[no-untyped-def]
    """Return state i at a fraction theta of the step just made."""
    n = integer(s + 8 * N_ROWS)
    k = row(s, w, W_K) + i * STRIDE
    y0, y1 = load(row(s, w, W_Y) + i * STRIDE), load(row(s, w, W_NEW) + i * STRIDE)
    p, q = spread(0.0), spread(0.0)
    for j in range(5):
        kj = load(k + j * n * STRIDE)
        p, q = p + _P[j] * kj, q + _Q[j] * kj
    return (1.0 - theta) * y0 + theta * (y1 + (1.0 - theta) * (p + theta * q))


@compiled
def lane_cubic(s, w, i, lane):  # type: ignore[no-untyped-def]
    """Return y0, y1, p, q of state i in one lane: y(theta) = (1-theta) y0 + theta (y1 + (1-theta)(p + theta q))."""
    n, shift = integer(s + 8 * N_ROWS), 8 * lane + i * STRIDE
    y0, y1 = number(row(s, w, W_Y) + shift), number(row(s, w, W_NEW) + shift)
    k = row(s, w, W_K) + shift
    p, q = 0.0, 0.0
    for j in range(5):
        kj = number(k + j * n * STRIDE)
        p += _P[j] * kj
        q += _Q[j] * kj
    return y0, y1, p, q


@compiled
def on_cubic(cubic, theta):  # type: ignore[no-untyped-def]
    """Return the value of such a cubic."""
    y0, y1, p, q = cubic
    return (1.0 - theta) * y0 + theta * (y1 + (1.0 - theta) * (p + theta * q))


GAMMA_INVERSE = 1.0 / GAMMA
