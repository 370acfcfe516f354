"""Which points are evaluated: full factorial, Latin hypercube, Sobol' sequence, or a list."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from sweep.base.errors import SweepError
from sweep.base.seeds import stream
from sweep.plan.listed import read_list
from sweep.study.model import Study, Variable

if TYPE_CHECKING:
    import pandas as pd

DEFAULT_POINTS = 1024  # of a Sobol' sequence, where neither a plan nor levels are written
LARGEST = 1_000_000_000  # points of a plan; its files alone are counted in 10^5 then
_Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Planned:
    """A plan: its size, its columns, and the rows from one index to another (SI), index = plan index."""

    kind: str
    size: int
    columns: tuple[str, ...]
    _between: Callable[[int, int], _Floats]

    def rows(self, start: int, stop: int) -> pd.DataFrame:
        """Return the points from `start` up to `stop`."""
        import pandas as pd

        stop = min(stop, self.size)
        return pd.DataFrame(self._between(start, stop), columns=list(self.columns), index=pd.RangeIndex(start, stop))


def planned(study: Study) -> Planned:
    """Return a study's plan; without variables it is the set-point alone. SweepError where it is too large, or its list cannot be read."""
    if study.plan is not None and study.plan.kind == "list" and study.plan.file is not None:
        table = read_list(study, study.plan.file)
        values = table.to_numpy(dtype=np.float64)
        return Planned("list", len(table), tuple(table.columns), lambda start, stop: values[start:stop])
    if not study.variables:
        return Planned("set-point", 1, (), lambda start, stop: np.zeros((stop - start, 0)))
    names = tuple(v.name for v in study.variables)
    counted = all(v.levels is not None for v in study.variables)
    kind = study.plan.kind if study.plan is not None else ("factorial" if counted else "sobol")
    if kind == "factorial":
        levels = [np.linspace(v.low, v.high, v.levels or 2) for v in study.variables]
        size = int(np.prod([len(x) for x in levels], dtype=object))
        if size > LARGEST:
            raise SweepError(f"variables: {size:,} points in a full factorial; at most {LARGEST:,} can be planned: fewer levels, or kind = \"sobol\"")
        return Planned(kind, size, names, lambda start, stop: _factorial(levels, start, stop))
    size = (study.plan.points if study.plan is not None else None) or DEFAULT_POINTS
    return Planned(kind, size, names, _drawn(study, kind, size))


def points(study: Study) -> pd.DataFrame:
    """Return all points of a study's plan (SI), a column per variable."""
    plan = planned(study)
    return plan.rows(0, plan.size)


def set_point(study: Study) -> dict[str, float]:
    """Return the variables' values as written (SI)."""
    return {v.name: study.values[v.sets[0]] for v in study.variables}


def _factorial(levels: list[_Floats], start: int, stop: int) -> _Floats:
    """Return rows of the full factorial, the last variable running fastest."""
    places = np.unravel_index(np.arange(start, stop), [len(x) for x in levels])
    return np.stack([x[i] for x, i in zip(levels, places, strict=True)], axis=1)


def _scaled(variables: tuple[Variable, ...], unit: _Floats) -> _Floats:
    low = np.array([v.low for v in variables])
    high = np.array([v.high for v in variables])
    return np.asarray(low + (high - low) * unit, dtype=np.float64)


def _drawn(study: Study, kind: str, size: int) -> Callable[[int, int], _Floats]:
    """Return how rows of a Latin hypercube or a scrambled Sobol' sequence are drawn from the study's seed."""
    from scipy.stats import qmc

    dimensions = len(study.variables)
    if kind == "latin-hypercube":
        cube = qmc.LatinHypercube(dimensions, rng=stream(study.seed, "plan")).random(size)
        return lambda start, stop: _scaled(study.variables, cube[start:stop])

    def sobol(start: int, stop: int) -> _Floats:
        sequence = qmc.Sobol(dimensions, scramble=True, rng=stream(study.seed, "plan"))
        if start > 0:
            sequence.fast_forward(start)
        parts, left = [], stop - start
        while left > 0:  # in powers of two: SciPy warns about any other size, and the sequence is the same
            parts.append(sequence.random(1 << (left.bit_length() - 1)))
            left -= len(parts[-1])
        return _scaled(study.variables, np.concatenate(parts))

    return sobol
