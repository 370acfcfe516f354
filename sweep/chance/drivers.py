"""Which input drives a failure: how differently an input is distributed among the draws that fail."""

from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

LEAST = 10  # draws on either side; fewer say nothing of a distribution
DEFINITION = (
    "distance: the largest difference between the input's cumulative distributions among the draws where the limit fails and among those "
    "where it holds (Kolmogorov-Smirnov; 0 no influence, 1 decides alone); shift: by how many standard deviations of normal scores the input "
    "lies higher among those that fail; noise: the distance that chance alone exceeds once in twenty. Correlated inputs share what drives them."
)


@dataclass(frozen=True)
class Driver:
    """distance: 0 to 1; shift: in standard deviations of normal scores, positive: fails where the input is high; noise: of the distance."""

    input: str
    distance: float
    shift: float
    noise: float


def drivers(inputs: pd.DataFrame, holding: NDArray[np.bool_]) -> tuple[Driver, ...]:
    """Return what drives the failures of N draws, the strongest first; inputs: a column each, holding (N,). Empty with too few on either side."""
    from scipy.special import ndtri

    failing = int(np.count_nonzero(~holding))
    held = holding.size - failing
    if min(failing, held) < LEAST:
        return ()
    noise = 1.3581 * (holding.size / (failing * held)) ** 0.5  # Kolmogorov's asymptotic 95 % point, sqrt(-ln(0.05/2)/2)
    found = []
    for name in inputs.columns:
        order = np.argsort(inputs[name].to_numpy(), kind="stable")
        score = np.empty(holding.size)
        score[order] = ndtri((np.arange(holding.size) + 0.5) / holding.size)
        fails = ~holding[order]
        gap = np.cumsum(fails) / failing - np.cumsum(~fails) / held
        last = np.append(np.diff(inputs[name].to_numpy()[order]) > 0.0, True)  # equal values are one step of both distributions
        found.append(Driver(str(name), float(np.abs(gap[last]).max()), float(score[~holding].mean() - score.mean()), noise))
    return tuple(sorted(found, key=lambda one: -one.distance))
