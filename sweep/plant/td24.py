"""T_D24: from which temperature the decomposition of a mixture takes 24 hours to its maximum rate, adiabatically."""

import numpy as np

from sweep.plant import adiabatic
from sweep.plant.rates import closed_form_tmr
from sweep.plant.recipe import Charged
from sweep.plant.values import Floats
from sweep.study.model import Study

DAY = 86_400.0  # s
LOWEST, HIGHEST = 223.15, 773.15  # K; -50 to 500 degC is searched
_MARCHES = 12
_CLOSE = 3e-5  # of ln(time/24 h): some 0.0003 K


def _closed(study: Study, plant: Charged, rows: np.ndarray, block: Floats, state: Floats, T: Floats) -> Floats:
    """Return ln(closed form/24 h) of mixtures (M, R) brought to temperatures T (M,)."""
    nz = plant.program.structure.sources.shape[0]
    moved = state.copy()
    moved[:, nz] = T
    with np.errstate(divide="ignore"):
        return np.log(closed_form_tmr(adiabatic.flow_of(plant, rows, block, moved), adiabatic.purposes(study, "decomposition"), T) / DAY)


def _solve_closed(study: Study, plant: Charged, rows: np.ndarray, block: Floats, state: Floats, wanted: Floats) -> Floats:
    """Return T (M,) at which ln(closed form/24 h) is what is wanted, by bisection in the range searched."""
    low, high = np.full(rows.size, LOWEST), np.full(rows.size, HIGHEST)
    for _ in range(40):
        middle = 0.5 * (low + high)
        slow = _closed(study, plant, rows, block, state, middle) > wanted
        low, high = np.where(slow, middle, low), np.where(slow, high, middle)
    solved: Floats = 0.5 * (low + high)
    return solved


def find_td24(study: Study, plant: Charged, rows: np.ndarray, block: Floats, state: Floats, tolerance: float) -> tuple[Floats, Floats]:
    """Return T_D24 (M,) K and whether it is an end of the range searched, of mixtures (M, R) in blocks (M, block).

    The closed form gives the slope, marches the truth: each march corrects the closed form by the ratio found at the last temperature.
    At the upper end: nothing decomposes that fast up to there (a lower bound). NaN: the search did not settle.
    """
    nz = plant.program.structure.sources.shape[0]
    shift = np.zeros(rows.size)
    T = _solve_closed(study, plant, rows, block, state, shift)
    rise = adiabatic.complete_rise(study, plant, rows, block, state, "decomposition")
    censored = (rise < adiabatic.STILL) | (T >= HIGHEST - 1e-3)
    settled = np.zeros(rows.size, dtype=bool)
    todo = np.flatnonzero(~censored)
    for _ in range(_MARCHES):
        if not todo.size:
            break
        start = state[todo].copy()
        start[:, nz] = T[todo]
        run = adiabatic.run_decomposition(study, plant, rows[todo], block[todo], start, np.full(todo.size, 20.0 * DAY), tolerance)
        exact = np.log(np.maximum(run.tmr, 1.0) / DAY)
        never = run.censored & (rise[todo] < adiabatic.SMALL_RISE)
        censored[todo[never]] = True
        done = ~never & (np.abs(exact) < _CLOSE) & ~run.censored
        settled[todo[done]] = True
        going = ~never & ~done & run.ok
        todo, exact = todo[going], exact[going]
        if not todo.size:
            break
        shift[todo] = _closed(study, plant, rows[todo], block[todo], state[todo], T[todo]) - exact
        T[todo] = _solve_closed(study, plant, rows[todo], block[todo], state[todo], shift[todo])
        gone = T[todo] >= HIGHEST - 1e-3
        censored[todo[gone]] = True
        todo = todo[~gone]
    result = np.where(censored, HIGHEST, np.where(settled, T, np.nan))
    return result, censored.astype(float)
