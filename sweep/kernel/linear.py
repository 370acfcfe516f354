"""The sparse LU of J - I/(h gamma) and its solves, as streams of operations made once per study (`sparse`); no pivoting."""

from sweep.kernel import layout as at
from sweep.kernel.memory import entry, load, row, store
from sweep.kernel.vector import compiled


@compiled
def factorise(s, w, diagonal):  # type: ignore[no-untyped-def]
    """Turn the Jacobian in its slots into the LU factors of J - diagonal * I, in place; the pivots' inverses stand on the diagonal."""
    slots, n = row(s, w, at.W_SLOTS), entry(s, at.N_ROWS)
    p = entry(s, at.AT_SLOTS)
    for q in range(p, p + n * n, n + 1):
        store(slots, entry(s, q), load(slots, entry(s, q)) - diagonal)
    p = entry(s, at.AT_FACTOR)
    for _ in range(n):
        pivot = 1.0 / load(slots, entry(s, p))
        store(slots, entry(s, p), pivot)
        rows = entry(s, p + 1)
        p += 2
        for _row in range(rows):
            share = load(slots, entry(s, p)) * pivot
            store(slots, entry(s, p), share)
            end = p + 2 + 2 * entry(s, p + 1)
            for q in range(p + 2, end, 2):
                store(slots, entry(s, q), load(slots, entry(s, q)) - share * load(slots, entry(s, q + 1)))
            p = end


@compiled
def solve(s, w, x):  # type: ignore[no-untyped-def]
    """Replace the right-hand side at x by the solution."""
    slots = row(s, w, at.W_SLOTS)
    p = entry(s, at.AT_FORWARD)
    while entry(s, p) >= 0:
        i = entry(s, p)
        total = load(x, i)
        end = p + 2 + 2 * entry(s, p + 1)
        for q in range(p + 2, end, 2):
            total = total - load(slots, entry(s, q + 1)) * load(x, entry(s, q))
        p = end
        store(x, i, total)
    p = entry(s, at.AT_BACKWARD)
    for _ in range(entry(s, at.N_ROWS)):
        i, pivot = entry(s, p), entry(s, p + 1)
        total = load(x, i)
        end = p + 3 + 2 * entry(s, p + 2)
        for q in range(p + 3, end, 2):
            total = total - load(slots, entry(s, q + 1)) * load(x, entry(s, q))
        p = end
        store(x, i, total * load(slots, pivot))
