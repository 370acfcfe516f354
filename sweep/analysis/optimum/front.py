"""Two objectives: the settings that nothing betters in both, by NSGA-II (Deb, Pratap, Agarwal and Meyarivan, IEEE Trans. Evol. Comput. 6 (2002) 182,
from memory) as optuna has it, asked and told in whole batches.
"""

import warnings
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sweep.analysis.optimum.aims import Bools, Floats, Problem
from sweep.base.seeds import stream
from sweep.plan.sides import snapped


def spread_out(problem: Problem, centre: Floats, population: int, generations: int, seed: int) -> int:
    """Search by batches of one population each; settings are round from the start. Return how many batches there were.

    The sampler is seeded anew before each batch, so that a search that goes on asks what an undisturbed one would; what was asked before an
    interruption is answered from memory.
    """
    import optuna

    optuna.logging.set_verbosity(optuna.logging.ERROR)
    size = len(centre)
    names = [f"x{k}" for k in range(size)]
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        study = optuna.create_study(directions=["minimize", "minimize"], sampler=_sampler(population, 1))
        study.enqueue_trial(dict(zip(names, np.clip(centre, 0.0, 1.0).tolist(), strict=True)))
        for batch in range(generations + 1):
            fresh = int(stream(seed, "optimum", "front", batch).integers(1, 2**31))
            study.sampler = _sampler(population, fresh)
            trials = [study.ask() for _ in range(population)]
            asked = np.array([[trial.suggest_float(name, 0.0, 1.0) for name in names] for trial in trials])
            numbers = problem.look(snapped(problem.sides, asked))
            costs, missed = problem.costs[numbers], np.maximum(-problem.least[numbers], 0.0)
            bad = np.nanmax(np.where(np.isfinite(costs), costs, np.nan), axis=0, initial=0.0)
            for trial, cost, miss in zip(trials, np.where(np.isfinite(costs), costs, bad), missed, strict=True):
                trial.set_constraint("limits", float(miss))
                study.tell(trial, cost.tolist())
    return generations + 1


def _sampler(population: int, seed: int) -> Any:
    """Return the sampler; simulated binary crossover, because swapping values alone makes no new ones."""
    from optuna.samplers import NSGAIISampler
    from optuna.samplers.nsgaii import SBXCrossover

    return NSGAIISampler(population_size=population, seed=seed, crossover=SBXCrossover(eta=10.0))


def front_of(costs: Floats, acceptable: Bools) -> NDArray[np.int64]:
    """Return the numbers of the acceptable points (M, 2) that no acceptable point betters in one objective without losing in the other, in order of
    the first objective; of several alike the first."""
    numbers = np.flatnonzero(acceptable)
    order = numbers[np.lexsort((numbers, costs[numbers, 1], costs[numbers, 0]))]
    found, least = list[int](), np.inf
    for k in order:  # a running minimum: as many steps as the search had points
        if costs[k, 1] < least:
            found.append(int(k))
            least = float(costs[k, 1])
    return np.array(found, dtype=np.int64)
