"""The benchmark's fed-batch as a user of SciPy writes it: LSODA, one batch at a time, with a NumPy and with a numba right-hand side.

Written from the balances alone; the numbers are those of fedbatch.toml. State: moles of the five species, T, jacket T, controller
integral. Two ways to LSODA: `odeint` runs LSODA's own loop and calls back only for the right-hand side, the fastest that SciPy has;
`stepped` is the loop of `solve_ivp` without its bookkeeping, one step of SciPy's LSODA class after another. Neither can run for ever:
the first is bounded by its `mxstep`, the second by counting.
"""

from collections.abc import Callable
from typing import NamedTuple

import numba
import numpy as np
from scipy.integrate import LSODA, odeint

R = 8.31446261815324
CP = np.array([210.0, 180.0, 380.0, 540.0, 360.0])
NU = np.array([[-1.0, -1.0, 1.0, 0.0, 0.0], [0.0, -1.0, -1.0, 1.0, 0.0], [0.0, 0.0, -1.0, 0.0, 1.0]])
K_REF = np.array([3.0e-7, 9.0e-9, 5e-6])
T_REF = np.array([323.15, 323.15, 393.15])
ENERGY = np.array([62e3, 80e3, 130e3])
HEAT = np.array([-105e3, -80e3, -240e3])
DELTA_CP = NU @ CP
END, FEED_START, VOLUME = 28800.0, 600.0, 2.0
MOST_STEPS = 20_000  # for each output; beyond it LSODA gives up


class Point(NamedTuple):
    """The three variables of the study: temperature of charge and set-point (K), dosing time (s), substrate (mol/m3)."""

    temperature: float
    dosing: float
    substrate: float


def right_side(y: np.ndarray, t: float, rate: float, fed_before: float, since: float, set_point: float) -> np.ndarray:
    """dy/dt with NumPy; rate (mol/s) of the reagent's feed, fed_before (mol) by the time `since` (s)."""
    n, T, Tj, integral = y[:5], y[5], y[6], y[7]
    V = VOLUME + (fed_before + rate * (t - since)) * 0.095 / 1060.0
    k = K_REF * np.exp(-ENERGY / R * (1.0 / T - 1.0 / T_REF))
    c = n / V
    r = k * np.array([c[0] * c[1], c[2] * c[1], c[2]])
    dn = V * (r @ NU)
    dn[1] += rate
    ua = 320.0 * (1.4 + (8.4 - 1.4) * V / 4.0)
    through = ua * (T - Tj)
    heat = V * (r @ -(HEAT + DELTA_CP * (T - 298.15)))
    dT = (heat - through - rate * 180.0 * (T - 293.15) + 2500.0 - 10.0 * (T - 293.15)) / (n @ CP + 4.0e6)
    error = T - set_point
    u = 0.05 * (error + integral / 3600.0)
    beyond = max(u - 1.0, -u, 0.0)
    flow = min(max(u, 0.0), 1.0) * 8.0 / 3600.0
    dTj = flow / 0.6 * (281.15 - Tj) + through / (998.0 * 0.6 * 4180.0)
    dI = max(1.0 - beyond / 1e-3, 0.0) * error
    return np.array([*dn, dT, dTj, dI])


@numba.njit(error_model="numpy")
def right_side_compiled(y: np.ndarray, t: float, rate: float, fed_before: float, since: float, set_point: float) -> np.ndarray:
    """The same, compiled, without an array but the result."""
    T, Tj, integral = y[5], y[6], y[7]
    V = 2.0 + (fed_before + rate * (t - since)) * 0.095 / 1060.0
    c0, c1, c2 = y[0] / V, y[1] / V, y[2] / V
    r0 = V * 3.0e-7 * np.exp(-62e3 / R * (1.0 / T - 1.0 / 323.15)) * c0 * c1
    r1 = V * 9.0e-9 * np.exp(-80e3 / R * (1.0 / T - 1.0 / 323.15)) * c2 * c1
    r2 = V * 5e-6 * np.exp(-130e3 / R * (1.0 / T - 1.0 / 393.15)) * c2
    through = 320.0 * (1.4 + (8.4 - 1.4) * V / 4.0) * (T - Tj)
    above = T - 298.15
    heat = r0 * (105e3 + 10.0 * above) + r1 * (80e3 + 20.0 * above) + r2 * (240e3 + 20.0 * above)
    capacity = y[0] * 210.0 + y[1] * 180.0 + y[2] * 380.0 + y[3] * 540.0 + y[4] * 360.0 + 4.0e6
    error = T - set_point
    u = 0.05 * (error + integral / 3600.0)
    beyond = max(u - 1.0, -u, 0.0)
    flow = min(max(u, 0.0), 1.0) * 8.0 / 3600.0
    result = np.empty(8)
    result[0] = -r0
    result[1] = rate - r0 - r1
    result[2] = r0 - r1 - r2
    result[3] = r1
    result[4] = r2
    result[5] = (heat - through - rate * 180.0 * (T - 293.15) + 2500.0 - 10.0 * (T - 293.15)) / capacity
    result[6] = flow / 0.6 * (281.15 - Tj) + through / (998.0 * 0.6 * 4180.0)
    result[7] = max(1.0 - beyond / 1e-3, 0.0) * error
    return result


class Stretch(NamedTuple):
    """Between two changes of the feed: begin, end (s), feed rate (mol/s), fed before (mol), set-point (K)."""

    begin: float
    end: float
    rate: float
    before: float
    set_point: float


Way = Callable[[Callable[..., np.ndarray], np.ndarray, np.ndarray, Stretch, np.ndarray, np.ndarray], np.ndarray | None]


def by_odeint(f: Callable[..., np.ndarray], y: np.ndarray, times: np.ndarray, s: Stretch, rtol: np.ndarray, atol: np.ndarray) -> np.ndarray | None:
    """Return the states (K, 8) at times within a stretch; None where LSODA gave up."""
    arguments = (s.rate, s.before, s.begin, s.set_point)
    states, told = odeint(f, y, np.concatenate([[s.begin], times]), arguments, rtol=rtol, atol=atol, mxstep=MOST_STEPS, full_output=True)
    return states[1:] if told["message"] == "Integration successful." and np.isfinite(states).all() else None


def stepped(f: Callable[..., np.ndarray], y: np.ndarray, times: np.ndarray, s: Stretch, rtol: np.ndarray, atol: np.ndarray) -> np.ndarray | None:
    """Return the state (1, 8) at a stretch's end; None where LSODA gave up or took too many steps."""
    solver = LSODA(lambda t, x: f(x, t, s.rate, s.before, s.begin, s.set_point), s.begin, y, s.end, rtol=rtol, atol=atol)
    for _ in range(MOST_STEPS):
        solver.step()
        if solver.status != "running":
            break
    return solver.y[None] if solver.status == "finished" and np.isfinite(solver.y).all() else None


def march_lsoda(point: Point, times: np.ndarray, f: Callable[..., np.ndarray], rtol: float, way: Way = by_odeint) -> np.ndarray | None:
    """Return the states (K, 8) at ascending times (s) from 0 to END, feed start and end among them; None where LSODA gave up.

    Stretch by stretch, since LSODA may step over a change of the feed. The absolute tolerance is `rtol` of a thousandth of the amount
    charged, of 100 K and of ten times the whole opening's integral, as the project's.
    """
    charged = point.substrate * VOLUME
    atol = rtol * np.array([1e-3 * charged] * 5 + [100.0, 100.0, 10.0 * 3600.0 / 0.05])
    y = np.array([charged, 0.0, 0.0, 0.0, 0.0, point.temperature, point.temperature, 0.0])
    whole, stop = 1.05 * charged, FEED_START + point.dosing
    rtols = np.array([rtol] * 5 + [1e-13] * 3)
    found = [y[None]]
    for begin, end, rate, before in ((0.0, FEED_START, 0.0, 0.0), (FEED_START, stop, whole / point.dosing, 0.0), (stop, END, 0.0, whole)):
        states = way(f, y, times[(times > begin) & (times <= end)], Stretch(begin, end, rate, before, point.temperature), rtols, atol)
        if states is None:
            return None
        y = states[-1]
        found.append(states)
    return np.concatenate(found)
