"""Child streams of random numbers from one seed, told apart by name: no stream depends on another having been drawn."""

import hashlib
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    import numpy as np


def stream(seed: int, *names: str | int) -> "np.random.Generator":
    """Return the generator of a named child stream; same seed and names, same numbers."""
    import numpy as np

    key = tuple(int.from_bytes(hashlib.sha256(repr(name).encode()).digest()[:4], "little") for name in names)
    return np.random.Generator(np.random.PCG64DXSM(np.random.SeedSequence(entropy=seed, spawn_key=key)))
