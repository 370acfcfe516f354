"""Draws of what is uncertain: a stratified cube, correlated by a Gaussian copula, through inverse distribution functions to SI.

N: draws; D: dimensions of the cube, one for each uncertain input, file of draws and control error.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from sweep.base.errors import SweepError
from sweep.base.seeds import stream
from sweep.study.model import Study, Tolerance, Uncertain

if TYPE_CHECKING:
    import pandas as pd

_Floats = NDArray[np.float64]
_EDGE = 2.0**-53  # a probability is at least so far from 0 and 1, so that no draw is infinite


def inputs_of(study: Study) -> tuple[str, ...]:
    """Return the columns that are drawn: the uncertain inputs, then the control errors of the variables that have a tolerance."""
    return (*(one.name for one in study.uncertain), *(v.error for v in study.variables if v.tolerance is not None))


def dimensions_of(study: Study) -> tuple[tuple[str, ...], ...]:
    """Return for each dimension of the cube the columns that it moves: one, or all that are drawn from one file."""
    found: dict[str, list[str]] = {}
    for one in study.uncertain:
        found.setdefault(f"file {one.file}" if one.file else one.name, []).append(one.name)
    errors = [(v.error,) for v in study.variables if v.tolerance is not None]
    return (*(tuple(names) for names in found.values()), *errors)


def groups_of(study: Study) -> tuple[tuple[int, ...], ...]:
    """Return the dimensions that belong together because their inputs are correlated, each dimension once; a single one for most."""
    sets = [{k} for k in range(len(dimensions_of(study)))]
    place = {name: k for k, names in enumerate(dimensions_of(study)) for name in names}
    for one in study.correlations:
        if one.value == 0.0:
            continue
        a, b = (next(s for s in sets if place[name] in s) for name in one.between)
        if a is not b:
            a |= b
            sets.remove(b)
    return tuple(tuple(sorted(s)) for s in sorted(sets, key=min))


def cube(kind: str, count: int, dimensions: int, generator: np.random.Generator) -> _Floats:
    """Return points of the unit cube, (N, D): "latin-hypercube", "sobol" (scrambled; a power of two), or "random" (independent)."""
    if kind == "random" or dimensions == 0:
        return generator.random((count, dimensions))
    from scipy.stats import qmc

    if kind == "latin-hypercube":
        return np.asarray(qmc.LatinHypercube(dimensions, rng=generator).random(count))
    if count & (count - 1):
        raise SweepError(f"a Sobol' sequence is drawn in powers of two, not {count}")
    return np.asarray(qmc.Sobol(dimensions, scramble=True, rng=generator).random(count))


@dataclass(frozen=True)
class Draws:
    """N draws of what is uncertain in a study; unit (N, D): where they lie in the cube, before correlation."""

    study: Study
    unit: _Floats

    def __len__(self) -> int:
        return len(self.unit)

    @cached_property
    def probabilities(self) -> _Floats:
        """Where each draw stands in its own distribution, (N, D), correlated."""
        from scipy.special import ndtr, ndtri

        found = np.clip(self.unit, _EDGE, 1.0 - _EDGE)
        names = dimensions_of(self.study)
        for group in groups_of(self.study):
            if len(group) > 1:
                root = _root(self.study, [names[k][0] for k in group])
                found[:, group] = np.clip(ndtr(ndtri(found[:, group]) @ root.T), _EDGE, 1.0 - _EDGE)
        return found

    @property
    def scores(self) -> _Floats:
        """Each draw's place in its own distribution as a standard normal score, (N, D)."""
        from scipy.special import ndtri

        return np.asarray(ndtri(self.probabilities))

    def at(self, point: Mapping[str, float] | None = None, spread: Mapping[str, float] | None = None) -> pd.DataFrame:
        """Return the draws at a design point (name -> SI; default: as written), a row a draw; `spread` as in `paired`."""
        import pandas as pd

        given = pd.DataFrame({name: np.full(len(self), value) for name, value in (point or {}).items()}, index=pd.RangeIndex(len(self)))
        return self.paired(given, np.arange(len(self)), spread)

    def paired(self, points: pd.DataFrame, which: NDArray[np.intp], spread: Mapping[str, float] | None = None) -> pd.DataFrame:
        """Return design points (K rows, a column per variable or path, SI), each with the draw numbered `which` (K,), ready to evaluate.

        spread: column -> factor by which its draws lie nearer to (below 1) their median, 0 for the median itself; on the scale of logarithms
        for a lognormal. Other columns keep their draws, so that differences are of the spread alone.
        """
        import pandas as pd

        levels, factors = self.probabilities, spread or {}  # each draw once, however many points it meets
        for name in factors:
            if name not in inputs_of(self.study):
                raise SweepError(f"{name} is not drawn in this study; drawn are {', '.join(inputs_of(self.study)) or 'none'}")
        place = {name: k for k, names in enumerate(dimensions_of(self.study)) for name in names}
        columns: dict[str, _Floats] = {}
        for one in self.study.uncertain:
            columns[one.name] = _drawn(one, levels[:, place[one.name]], factors.get(one.name, 1.0))[which]
        for v in self.study.variables:
            if v.tolerance is not None:
                chosen = points[v.name].to_numpy(dtype=np.float64) if v.name in points else self.study.values[v.sets[0]]
                columns[v.error] = _missed(v.tolerance, levels[:, place[v.error]], factors.get(v.error, 1.0))[which] * (
                    np.abs(chosen) if v.tolerance.relative else 1.0
                )
        return pd.concat([points.reset_index(drop=True), pd.DataFrame(columns, index=pd.RangeIndex(len(points)))], axis=1)


def draw(study: Study, count: int, kind: str, *names: str | int) -> Draws:
    """Return N draws from the study's seed; `names` tell streams apart, and the same names give the same draws."""
    return Draws(study, cube(kind, count, len(dimensions_of(study)), stream(study.seed, "draws", *names)))


def _root(study: Study, names: list[str]) -> _Floats:
    """Return a lower triangle L with L L' the correlations of normal scores, (D, D); by eigenvalues where the matrix is singular."""
    from sweep.study.nearest import matrix_of

    matrix = matrix_of(names, tuple(one for one in study.correlations if set(one.between) <= set(names)))
    try:
        return np.asarray(np.linalg.cholesky(matrix))
    except np.linalg.LinAlgError:
        values, vectors = np.linalg.eigh(matrix)
        root = np.linalg.qr((vectors * np.sqrt(np.maximum(values, 0.0))).T)[1].T
        return np.asarray(root * np.where(np.diag(root) < 0.0, -1.0, 1.0))


def quantile(one: Uncertain, level: _Floats) -> _Floats:
    """Return the inverse distribution function of an uncertain input at probabilities, SI, same shape."""
    from scipy.special import ndtr, ndtri

    at = one.parameters
    if one.distribution == "normal":
        found = one.centre + at["sd"] * ndtri(level)
    elif one.distribution == "lognormal":
        found = one.centre * np.exp(log_sd(one) * ndtri(level))
    elif one.distribution == "uniform":
        found = at["low"] + (at["high"] - at["low"]) * level
    elif one.distribution == "triangular":
        found = _triangular(at["low"], at["mode"], at["high"], level)
    elif one.distribution == "truncated-normal":
        low, high = at.get("low", -np.inf), at.get("high", np.inf)
        begin, end = ndtr((low - one.centre) / at["sd"]), ndtr((high - one.centre) / at["sd"])
        found = np.clip(one.centre + at["sd"] * ndtri(begin + (end - begin) * level), low, high)
    else:
        rows = np.minimum((level * len(one.table)).astype(np.intp), len(one.table) - 1)
        found = np.asarray(one.table, dtype=np.float64)[rows]
    return np.asarray(found, dtype=np.float64)


def log_sd(one: Uncertain) -> float:
    """Return the standard deviation of a lognormal's logarithm: as written, or of its relative one, sqrt(ln(1 + relative^2))."""
    at = one.parameters
    return at["log_sd"] if "log_sd" in at else float(np.sqrt(np.log1p(at["relative_sd"] ** 2)))


def _triangular(low: float, mode: float, high: float, level: _Floats) -> _Floats:
    turn = (mode - low) / (high - low)
    rising = low + np.sqrt(level * (high - low) * (mode - low))
    falling = high - np.sqrt((1.0 - level) * (high - low) * (high - mode))
    return np.where(level < turn, rising, falling)


def _drawn(one: Uncertain, level: _Floats, factor: float) -> _Floats:
    """Return draws, nearer to their median by a factor."""
    found = quantile(one, level)
    if factor == 1.0:
        return found
    middle = float(np.median(one.table)) if one.table else float(quantile(one, np.array([0.5]))[0])
    if one.distribution == "lognormal":
        return np.asarray(middle * (found / middle) ** factor)
    return np.asarray(middle + factor * (found - middle))


def _missed(tolerance: Tolerance, level: _Floats, factor: float) -> _Floats:
    """Return control errors, SI or as a share of what was chosen."""
    from scipy.special import ndtri

    size = factor * tolerance.size
    return np.asarray(size * ndtri(level) if tolerance.distribution == "normal" else size * (2.0 * level - 1.0))
