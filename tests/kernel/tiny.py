"""Functions that compile in a moment, to try the way from a function to an object file and back."""

import sys

import numpy as np

from sweep.kernel.code import kept
from sweep.kernel.compiler import object_code
from sweep.kernel.vector import compiled


@compiled
def shares(count, whole):  # type: ignore[no-untyped-def]
    """Return the whole part of a sum of shares."""
    total = 0.0
    for k in range(count):
        total += whole / (k + 1.0)
    return int(total)


@compiled
def only_positive(count):  # type: ignore[no-untyped-def]
    """Raise, as no kernel function does."""
    if count <= 0:
        raise ValueError("not positive")
    return count


@compiled
def allocates(count):  # type: ignore[no-untyped-def]
    """Call numba's own memory."""
    return np.zeros(count).size


if __name__ == "__main__":  # a process of its own
    sys.stdout.write(f"{kept('shares.o', 'qd', lambda: object_code(shares, 'qd'))(10, 1000.0)}")
