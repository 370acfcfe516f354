"""The sparse LU of I/(h gamma) - J and its solves, as lists of operations made once per study; no pivoting."""

from sweep.kernel import layout as at
from sweep.kernel.balance import row
from sweep.kernel.jacobian import slot
from sweep.kernel.vector import STRIDE, compiled, integer, load, store

(N_ROWS, N_SLOTS, W_SLOTS, AT_FACTOR, AT_FORWARD, AT_BACKWARD, LU_FACTORS, N_LU_FORWARD, N_LU_BACKWARD) = (
    at.N_ROWS, at.N_SLOTS, at.W_SLOTS, at.AT_FACTOR, at.AT_FORWARD, at.AT_BACKWARD, at.LU_FACTORS, at.N_LU_FORWARD, at.N_LU_BACKWARD,
)  # fmt: skip


@compiled
def factorise(s, w, diagonal):  # type: ignore[no-untyped-def]
    """Turn the Jacobian in its slots into the LU factors of diagonal * I - J, in place."""
    base = row(s, w, W_SLOTS)
    for k in range(integer(s + 8 * N_SLOTS)):
        store(base + k * STRIDE, -load(base + k * STRIDE))
    for k in range(integer(s + 8 * N_ROWS)):
        place = slot(s, w, k, k)
        store(place, load(place) + diagonal)
    p = s + 8 * integer(s + 8 * AT_FACTOR)
    for _ in range(integer(s + 8 * LU_FACTORS)):
        kind, a, b = integer(p), base + integer(p + 8) * STRIDE, base + integer(p + 16) * STRIDE
        if kind == 2:
            store(a, load(a) - load(b) * load(base + integer(p + 24) * STRIDE))
        elif kind == 1:
            store(a, load(a) * load(b))
        else:
            store(a, 1.0 / load(a))
        p += 32


@compiled
def solve(s, w, x):  # type: ignore[no-untyped-def]
    """Replace the right-hand side at x by the solution."""
    base = row(s, w, W_SLOTS)
    p = s + 8 * integer(s + 8 * AT_FORWARD)
    for _ in range(integer(s + 8 * N_LU_FORWARD)):
        i, k = x + integer(p) * STRIDE, x + integer(p + 8) * STRIDE
        store(i, load(i) - load(base + integer(p + 16) * STRIDE) * load(k))
        p += 24
    p = s + 8 * integer(s + 8 * AT_BACKWARD)
    for _ in range(integer(s + 8 * N_LU_BACKWARD)):
        i, u = x + integer(p + 8) * STRIDE, base + integer(p + 24) * STRIDE
        if integer(p) == 0:
            store(i, load(i) * load(u))
        else:
            store(i, load(i) - load(u) * load(x + integer(p + 16) * STRIDE))
        p += 32
