"""Some points marched in a process of its own: python -m tests.kernel.marching prints whether numba is loaded, and a digest of the results."""

import hashlib
import sys

import pandas as pd

from sweep.plan import points
from sweep.plant import evaluate
from sweep.study import read_text
from tests.texts import SMALL


def marched() -> tuple[str, str]:
    """Return "numba" or "no-numba", and a digest of every response of a study's points."""
    study = read_text(SMALL)
    table = evaluate(study, points(study).iloc[::7])
    return "numba" if "numba" in sys.modules else "no-numba", hashlib.sha256(pd.util.hash_pandas_object(table).to_numpy().tobytes()).hexdigest()


if __name__ == "__main__":
    sys.stdout.write(" ".join(marched()))
