"""Work and precision of Rosenbrock methods on three batches: python -m tests.benchmarks.work_precision

The benchmark's vessel in plain numba, one batch at a time, with the kernel's error norm and step control and a Jacobian by differences.
Three cases: easy; stiff, a fast reaction under slow dosing; runaway, a cold start that accumulates. Errors of the end state (of the
charge, of 100 K), of the highest temperature (K) and of the time to 95 % conversion (relative), against the reference at 1e-12. Work is
trials times stages and two more for Jacobian and factors, as in the kernel's profile. The numbers are written beside this file.
"""

from pathlib import Path
from typing import NamedTuple

import numba
import numpy as np
import pandas as pd

from tests.benchmarks.peers import ENERGY, K_REF, T_REF, R
from tests.benchmarks.tableaux import TABLEAUX, Tableau

RESULTS = Path(__file__).with_name("work_precision.csv")
CHARGED, END, START = 4400.0, 28800.0, 600.0
SHARE = 0.5  # of the tolerance, as the kernel's


class Case(NamedTuple):
    """Temperature (K), dosing time (s), share of U, factors of the first and the third rate constant."""

    temperature: float
    dosing: float
    u: float
    first: float
    third: float


CASES = {
    "easy": Case(338.15, 10800.0, 1.0, 1.0, 1.0),
    "stiff": Case(323.15, 18000.0, 1.0, 3e3, 1.0),
    "runaway": Case(318.15, 1800.0, 0.5, 1.0, 2e3),
}


@numba.njit(error_model="numpy", cache=False)
def slope(t, y, case, dosed, rate):
    """dy/dt, as peers.right_side_compiled, with the case's factors; dosed: mol by START, rate: mol/s from then."""
    T, Tj, integral = y[5], y[6], y[7]
    V = 2.0 + (dosed + rate * t) * 0.095 / 1060.0
    c0, c1, c2 = y[0] / V, y[1] / V, y[2] / V
    r0 = V * case[3] * K_REF[0] * np.exp(-ENERGY[0] / R * (1.0 / T - 1.0 / T_REF[0])) * c0 * c1
    r1 = V * K_REF[1] * np.exp(-ENERGY[1] / R * (1.0 / T - 1.0 / T_REF[1])) * c2 * c1
    r2 = V * case[4] * K_REF[2] * np.exp(-ENERGY[2] / R * (1.0 / T - 1.0 / T_REF[2])) * c2
    through = case[2] * 320.0 * (1.4 + 7.0 * V / 4.0) * (T - Tj)
    above, error = T - 298.15, T - case[0]
    heat = r0 * (105e3 + 10.0 * above) + r1 * (80e3 + 20.0 * above) + r2 * (240e3 + 20.0 * above)
    capacity = y[0] * 210.0 + y[1] * 180.0 + y[2] * 380.0 + y[3] * 540.0 + y[4] * 360.0 + 4.0e6
    u = 0.05 * (error + integral / 3600.0)
    flow = min(max(u, 0.0), 1.0) * 8.0 / 3600.0
    dT = (heat - through - rate * 180.0 * (T - 293.15) + 2500.0 - 10.0 * (T - 293.15)) / capacity
    frozen = max(1.0 - max(u - 1.0, -u, 0.0) / 1e-3, 0.0)
    return np.array([-r0, rate - r0 - r1, r0 - r1 - r2, r1, r2, dT, flow / 0.6 * (281.15 - Tj) + through / (998.0 * 0.6 * 4180.0), frozen * error])


@numba.njit(error_model="numpy", cache=False)
def differences(t, y, case, dosed, rate):
    """Return the Jacobian and df/dt by central differences."""
    J, by_time = np.empty((8, 8)), np.empty(8)
    for k in range(8):
        a, b, h = y.copy(), y.copy(), 1e-3
        a[k] += h
        b[k] -= h
        J[:, k] = (slope(t, a, case, dosed, rate) - slope(t, b, case, dosed, rate)) / (2.0 * h)
    by_time[:] = (slope(t + 0.01, y, case, dosed, rate) - slope(t - 0.01, y, case, dosed, rate)) / 0.02
    return J, by_time


@numba.njit(error_model="numpy", cache=False)
def crossing(a, b, fa, fb, h, level):
    """Return the fraction of a step at which the cubic through both ends with their slopes falls to a level, by bisection."""
    low, high = 0.0, 1.0
    for _ in range(60):
        x = 0.5 * (low + high)
        value = (1 + 2 * x) * (1 - x) ** 2 * a + x * (1 - x) ** 2 * h * fa + x * x * (3 - 2 * x) * b + x * x * (x - 1) * h * fb
        low, high = (x, high) if value > level else (low, x)
    return high


@numba.njit(error_model="numpy", cache=False)
def highest(a, b, fa, fb, h):
    """Return the highest of a cubic through both ends with their slopes, on a fine grid."""
    best = max(a, b)
    if fa > 0.0 and fb < 0.0:
        for k in range(1, 400):
            x = k / 400.0
            best = max(best, (1 + 2 * x) * (1 - x) ** 2 * a + x * (1 - x) ** 2 * h * fa + x * x * (3 - 2 * x) * b + x * x * (x - 1) * h * fb)
    return best


@numba.njit(error_model="numpy", cache=False)
def march(y, end, case, dosed, rate, gamma, A, C, times, slopes, order, tolerance, found):
    """March one segment; found: trials, highest T, time at which the substrate fell to 5 % (NaN before). Returns the state at its end."""
    n, t, h, failed, before, h_before, begun = len(A), 0.0, 1e-3 * end, False, 0.0, 0.0, found[3]
    K = np.zeros((n, 8))
    f = slope(t, y, case, dosed, rate)
    while t < end - 1e-9 and found[0] < 200_000:
        J, by_time = differences(t, y, case, dosed, rate)
        inverse = np.linalg.inv(np.eye(8) / (h * gamma) - J)
        state = y
        for s in range(n):
            state, couplings = y.copy(), np.zeros(8)
            for j in range(s):
                state += A[s, j] * K[j]
                couplings += C[s, j] * K[j] / h
            K[s] = inverse @ (slope(t + times[s] * h, state, case, dosed, rate) + couplings + h * slopes[s] * by_time)
            if not np.abs(K[s, 5]) < 1e3:
                K[n - 1, 5] = 1e9
                break
        new, wrong = state + K[n - 1], max(np.abs(K[n - 1, 5]), np.abs(K[n - 1, 6])) * 0.01
        wrong = max(wrong, np.abs(K[n - 1, 7]) * 0.05 / 3600.0)
        for i in range(5):
            wrong = max(wrong, np.abs(K[n - 1, i]) / (np.abs(new[i]) + 1e-3 * CHARGED))
        wrong = max(wrong / tolerance, 1e-8)
        found[0] += 1
        factor = 0.9 * wrong ** (-1.0 / order)
        if wrong <= 1.0:
            if h_before > 0.0:
                factor = min(factor, 0.9 * h / h_before * (before / wrong**2) ** (1.0 / order))
            after = slope(t + h, new, case, dosed, rate)
            found[1] = max(found[1], highest(y[5], new[5], f[5], after[5], h))
            if np.isnan(found[2]) and new[0] <= 0.05 * CHARGED:
                found[2] = begun + t + h * crossing(y[0], new[0], f[0], after[0], h, 0.05 * CHARGED)
            before, h_before, t, y, f = max(wrong, 0.01), h, t + h, new, after
            factor = min(max(factor, 0.2), 1.0 if failed else 6.0)
        else:
            factor = min(max(factor, 0.2), 0.9)
        failed = wrong > 1.0
        h = min(h * factor, end - t)
    found[3] = begun + end
    return y


def batch(case: Case, tableau: Tableau, tolerance: float) -> tuple[np.ndarray, np.ndarray]:
    """Return the end state (8,), and trials, highest temperature (K), time to the target (s)."""
    alpha, gamma, _ = tableau.classical()
    y, found = np.array([CHARGED, 0, 0, 0, 0, case.temperature, case.temperature, 0.0]), np.array([0.0, 0.0, np.nan, 0.0])
    whole = 1.05 * CHARGED
    for length, dosed, rate in ((START, 0.0, 0.0), (case.dosing, 0.0, whole / case.dosing), (END - START - case.dosing, whole, 0.0)):
        y = march(
            y, length, np.array(case), dosed, rate, tableau.gamma, tableau.A, tableau.C, alpha.sum(1), gamma.sum(1), tableau.order, SHARE * tolerance,
            found,
        )  # fmt: skip
    return y, found[:3]


def table() -> pd.DataFrame:
    """Return errors and work of every method at every tolerance in every case."""
    rows = []
    for name, case in CASES.items():
        exact, (_, hottest, when) = batch(case, TABLEAUX["Rodas5P"], 1e-11)
        print(f"{name}: highest temperature {hottest:.3f} K, 95 % conversion at {when:.1f} s")
        for tried, tableau in TABLEAUX.items():
            for tolerance in 10.0 ** np.arange(-3.0, -8.5, -1.0):
                if tried == "Rodas3" and tolerance < 1e-7:
                    continue
                state, (trials, peak, crossed) = batch(case, tableau, tolerance)
                wrong = np.max(np.abs(state - exact)[:6] / np.array([CHARGED] * 5 + [100.0]))
                work = trials * (len(tableau.A) + 2)
                rows.append((name, tried, tolerance, trials, work, wrong, abs(peak - hottest), abs(crossed / when - 1.0)))
    columns = ["case", "method", "tolerance", "trials", "work", "end state", "highest temperature, K", "time to target"]
    return pd.DataFrame(rows, columns=columns)


if __name__ == "__main__":
    found = table()
    found.to_csv(RESULTS, index=False, float_format="%.3g")
    print(found.to_string(index=False, float_format=lambda x: f"{x:.3g}"))
