"""The quantities of a study for many points at once: what is written, overlaid by each point's columns and by events."""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from sweep.base.errors import SweepError
from sweep.study.model import Study

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Values:
    """Quantities by dotted path (SI): one number for all points, or one per point, shape (N,)."""

    count: int
    given: Mapping[str, float | Floats]

    def has(self, path: str) -> bool:
        """Tell whether a quantity is written."""
        return path in self.given

    def get(self, path: str, default: float | Floats = 0.0) -> Floats:
        """Return a quantity for every point, shape (N,)."""
        return np.broadcast_to(np.asarray(self.given.get(path, default), dtype=np.float64), (self.count,))

    def need(self, path: str) -> Floats:
        """Return a quantity that the question cannot do without; SweepError where it is not written."""
        if path not in self.given:
            raise SweepError(f"{path} is not written in the study, and this question needs it")
        return self.get(path)

    def overlaid(self, sets: Mapping[str, float | Floats]) -> "Values":
        """Return these quantities with some replaced."""
        return Values(self.count, {**self.given, **sets})


def values_of(study: Study, points: pd.DataFrame) -> Values:
    """Return the quantities of each point: columns are variables or dotted paths, SI."""
    sets: dict[str, float | Floats] = {}
    for column in points.columns:
        array = points[column].to_numpy(dtype=np.float64, copy=True)
        for path in study.paths_of(str(column)):
            sets[path] = array
    return Values(len(points), {**study.values, **sets})
