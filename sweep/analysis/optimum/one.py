"""One objective: differential evolution over the whole space, then a local method from the best point.

D: variables; S: members of the population.
"""

from typing import Any

import numpy as np

from sweep.analysis.optimum.aims import Floats, Problem
from sweep.base.seeds import stream
from sweep.plan.draws import cube

STEP = 1e-3  # of a range, for slopes
SPARE = 2e-5  # of a margin's spread, so that a point on the edge is inside
_BACK = np.array([0.0, 1e-4, 1e-3, 3e-3, 1e-2, 3e-2, 0.1, 0.3])  # of the way back to the best acceptable point


def evolve(problem: Problem, centre: Floats, population: int, generations: int, seed: int) -> int:
    """Search the whole cube by differential evolution (Storn and Price, J. Global Optim. 11 (1997) 341, from memory); return the generations it took.

    Each generation is one call; members that hold every limit come before those that do not, those by how much they miss.
    """
    from scipy import optimize

    size = len(centre)
    count = 1 << (max(population, 8) - 1).bit_length()
    start = cube("sobol", count, size, stream(seed, "optimum", "start"))
    start[0] = np.clip(centre, 0.0, 1.0)

    def constraints(x: Floats) -> Floats:
        numbers = problem.look(x.reshape(size, -1).T)
        found = problem.values[numbers]
        return found.T if x.ndim == 2 else found[0]

    def objective(x: Floats) -> Floats:
        numbers = problem.look(x.reshape(size, -1).T)
        found = problem.costs[numbers, 0]
        return np.where(np.isnan(found), np.inf, found)

    search: Any = optimize.differential_evolution
    found = search(
        objective, [(0.0, 1.0)] * size, init=start, maxiter=generations, polish=False, vectorized=True, updating="deferred", tol=1e-6,
        mutation=(0.5, 1.0), recombination=0.8, rng=stream(seed, "optimum", "evolution"),
        constraints=optimize.NonlinearConstraint(constraints, 0.0, np.inf),
    )  # fmt: skip
    return int(found.nit)


def polish(problem: Problem, number: int, smooth: bool) -> str:
    """Go downhill from an acceptable point by SLSQP, or where draws make steps of the constraint (smooth: no) by COBYQA; return the method's name."""
    from scipy import optimize

    start, minimize = problem.points[number], optimize.minimize
    method: Any = minimize
    costs = problem.costs[:, 0]
    scale = max(float(np.nanstd(costs[problem.least >= 0.0])), 1e-6 * abs(float(costs[number])), 1e-300)

    first = float(costs[number])

    def objective(x: Floats) -> float:
        at = int(problem.look(x[None, :])[0])
        found = float(problem.costs[at, 0])
        return (found - first) / scale if np.isfinite(found) else 1e3

    def constraints(x: Floats) -> Floats:
        at = int(problem.look(x[None, :])[0])
        return np.asarray(problem.values[at] - SPARE)

    def moved(x: Floats) -> tuple[Floats, Floats, Floats]:
        """Return the steps (D,), and cost and constraints there less those here, all in one call."""
        steps = np.where(x > 0.5, -STEP, STEP)
        places = problem.look(np.concatenate([x[None, :], x + np.diag(steps)]))
        cost = np.nan_to_num(problem.costs[places, 0], nan=first + 1e3 * scale)
        return steps, (cost[1:] - cost[0]) / scale, problem.values[places][1:] - problem.values[places][0]

    def slope(x: Floats) -> Floats:
        steps, change, _ = moved(x)
        return np.asarray(change / steps)

    def slopes(x: Floats) -> Floats:
        steps, _, change = moved(x)
        return np.asarray((change / steps[:, None]).T)

    if smooth:
        found = method(objective, start, jac=slope, bounds=optimize.Bounds(0.0, 1.0), method="SLSQP", options={"maxiter": 40, "ftol": 1e-8},
                       constraints=[{"type": "ineq", "fun": constraints, "jac": slopes}])  # fmt: skip
    else:
        found = method(objective, start, bounds=optimize.Bounds(np.zeros(len(start)), np.ones(len(start))), method="COBYQA",
                       constraints=optimize.NonlinearConstraint(constraints, 0.0, np.inf),
                       options={"maxfev": 40 + 15 * len(start), "initial_tr_radius": 0.05, "final_tr_radius": 1e-5})  # fmt: skip
    ends = np.clip(found.x, 0.0, 1.0)
    if np.isfinite(ends).all():
        problem.look(ends + _BACK[:, None] * (start - ends))
    return "SLSQP" if smooth else "COBYQA"


def come_nearest(problem: Problem) -> None:
    """Where nothing is acceptable, go from the point that comes nearest on to where the worst limit is missed least, by pattern search."""
    number, step = int(problem.least.argmax()), 0.1
    size = len(problem.sides)
    moves = np.concatenate([np.eye(size), -np.eye(size)])
    for _ in range(40):
        if step < STEP:
            break
        numbers = problem.look(problem.points[number] + step * moves)
        best = int(numbers[problem.least[numbers].argmax()])
        better = problem.least[best] > problem.least[number]
        number, step = (best, step) if better else (number, 0.4 * step)
