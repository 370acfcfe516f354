"""Morris screening and Sobol' indices of what was evaluated, whole blocks with failures left out; sampling plans and estimators are SALib's."""

from dataclasses import dataclass
from typing import Any

import numpy as np
import pandas as pd
from numpy.random import Generator
from numpy.typing import NDArray

from sweep.analysis.sensitivity.space import Space, still

_Floats = NDArray[np.float64]
LEVELS = 4  # of the screening's grid
RESAMPLES = 200  # bootstrap, for the intervals
FEWEST = 8  # blocks; fewer say nothing
LOST = 0.5  # of the blocks; what is left is no sample of the whole any more


@dataclass(frozen=True)
class Found:
    """One response: a row a group (columns by the method), blocks used and planned, and why there is no answer."""

    rows: pd.DataFrame
    used: int
    planned: int
    undefined: str | None


def seed_from(generator: Generator) -> int:
    """Return a seed above zero: SALib takes zero for none."""
    return int(generator.integers(1, 2**31 - 1))


def screening_cube(space: Space, trajectories: int, seed: int) -> _Floats:
    """Return the points of Morris' trajectories, (trajectories (G + 1), D) (Morris, Technometrics 33 (1991) 161, from memory)."""
    from SALib.sample import morris

    return np.asarray(morris.sample(space.problem(), trajectories, num_levels=LEVELS, seed=seed), dtype=np.float64)


def shares_cube(space: Space, blocks: int, seed: int) -> _Floats:
    """Return the points of the variance shares, (blocks (G + 2), D) (Saltelli et al., Comput. Phys. Commun. 181 (2010) 259, from memory)."""
    from SALib.sample import sobol

    return np.asarray(sobol.sample(space.problem(), blocks, calc_second_order=False, scramble=True, seed=seed), dtype=np.float64)


def _whole_blocks(value: _Floats, size: int, tolerance: float) -> tuple[NDArray[np.bool_], int, int, str | None]:
    """Return which rows belong to blocks without a failure, how many such blocks there are, of how many, and why they do not do."""
    good = np.isfinite(value).reshape(-1, size).all(axis=1)
    kept, used, planned = np.repeat(good, size), int(good.sum()), good.size
    if used < FEWEST or used < LOST * planned:
        return kept, used, planned, f"only {used} of {planned} blocks are without a failed point or a null"
    if still(value[kept], tolerance):
        return kept, used, planned, "the response does not move beyond the march's tolerance"
    return kept, used, planned, None


def screen(space: Space, cube: _Floats, value: _Floats, confidence: float, seed: int, tolerance: float) -> Found:
    """Return mean absolute effect, mean effect and standard deviation of effects for each group (in the response's unit, over the whole range)."""
    from SALib.analyze import morris

    kept, used, planned, why = _whole_blocks(value, len(space.labels) + 1, tolerance)
    if why is not None:
        return Found(pd.DataFrame(), used, planned, why)
    found = morris.analyze(
        space.problem(), cube[kept], value[kept], num_resamples=RESAMPLES, conf_level=confidence, num_levels=LEVELS, seed=seed
    )  # fmt: skip
    columns = {"mean_size": "mu_star", "mean_size_interval": "mu_star_conf", "mean": "mu", "deviation": "sigma"}
    single = np.array([space.group.count(g) == 1 for g in range(len(space.labels))])
    rows = {name: _ordered(found, key) for name, key in columns.items()}
    for name in ("mean", "deviation"):  # of a group that moves in several directions there is no signed effect
        rows[name] = np.where(single, rows[name], np.nan)
    return Found(pd.DataFrame({"input": space.labels, **rows}), used, planned, None)


def _ordered(found: Any, key: str) -> _Floats:
    """Return one of SALib's columns in the order of the groups: names sort as they are numbered."""
    return np.ma.filled(np.ma.asarray(found[key], dtype=np.float64), np.nan)


def variance_shares(space: Space, value: _Floats, confidence: float, seed: int, tolerance: float) -> Found:
    """Return first and total order shares of the variance with their intervals for each group; never clipped: small ones scatter around zero."""
    from SALib.analyze import sobol

    kept, used, planned, why = _whole_blocks(value, len(space.labels) + 2, tolerance)
    if why is not None:
        return Found(pd.DataFrame(), used, planned, why)
    found = sobol.analyze(
        space.problem(), value[kept], calc_second_order=False, num_resamples=RESAMPLES, conf_level=confidence, seed=seed
    )  # fmt: skip
    rows: dict[str, Any] = {}
    for name, key in (("first", "S1"), ("total", "ST")):
        at, half = np.asarray(found[key], dtype=np.float64), np.asarray(found[f"{key}_conf"], dtype=np.float64)
        rows |= {name: at, f"{name}_low": at - half, f"{name}_high": at + half}
    return Found(pd.DataFrame({"input": space.labels, **rows}), used, planned, None)
