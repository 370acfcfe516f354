"""Slow, obvious twins of the compiled kernel, in plain NumPy, one batch at a time: written from the equations, not from the kernel.

`dydt` and `jacobian` follow DEVELOPERS.md, section Equations. `Rodas` is the method as Hairer and Wanner state it (Solving Ordinary
Differential Equations II, IV.7, transformed form), with dense linear algebra; only the tableau is shared with the kernel.
"""

from collections.abc import Callable
from typing import NamedTuple

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel import method
from sweep.kernel.program import Program

REFERENCE = 298.15  # K
BAND = 1e-3


class Batch(NamedTuple):
    """One segment of one point: the tables' structure, its block (block,), delta (mol/m3)."""

    program: Program
    block: np.ndarray
    delta: float

    def part(self, first: int, last: int, width: int) -> np.ndarray:
        """Return a part of the block as rows of `width`."""
        head = self.program.integers
        return self.block[head[first] : head[last]].reshape(-1, width)


def moles(batch: Batch, y: np.ndarray, t: float) -> np.ndarray:
    """n = base + feed (t - t_start) + M z, mol."""
    b, structure = batch.block, batch.program.structure
    nz = structure.sources.shape[0]
    feed, base = batch.part(at.BLOCK_FEED, at.BLOCK_BASE, 1)[:, 0], batch.part(at.BLOCK_BASE, at.BLOCK_RATE, 1)[:, 0]
    return base + feed * (t - b[at.T_START]) + structure.amounts @ y[:nz]


def volume(batch: Batch, t: float) -> float:
    """V, m3."""
    return batch.block[at.VOLUME] + batch.block[at.VOLUME_RATE] * (t - batch.block[at.T_START])


def reaction_rates(batch: Batch, c: np.ndarray, T: float) -> np.ndarray:
    """r_j, mol/m3/s: sum over directions of sign k(T) prod c^power (|c| + delta)^extra, continued oddly below zero."""
    coefficients = batch.part(at.BLOCK_RATE, at.BLOCK_HEAT, batch.program.structure.rate_terms)
    r, k = np.zeros(len(batch.program.structure.reactions)), 0
    for j, terms in enumerate(batch.program.structure.reactions):
        for term in terms:
            a = np.concatenate([coefficients[k], np.zeros(6)])[:6]
            rate = np.exp(a[0] + a[1] / T + a[2] * np.log(T) + a[3] * T + a[4] * T**2 + a[5] * T**3)
            for factor in term.factors:
                rate = rate * c[factor.species] ** factor.power * (abs(c[factor.species]) + batch.delta) ** factor.extra
            if any(c[factor.species] < 0.0 for factor in term.factors):
                rate = -abs(rate)
            r[j] += term.sign * rate
            k += 1
    return r


def _polynomial(coefficients: np.ndarray, T: float) -> float:
    return sum(a * T**k for k, a in enumerate(coefficients))


def energy_flows(batch: Batch, n: np.ndarray, r: np.ndarray, V: float, T: float, Tj: float) -> dict[str, float]:
    """Heat of reaction, through the wall, from all but the cooling (W), capacity (J/K), dT/dt (K/s), duty (W)."""
    b, structure = batch.block, batch.program.structure
    heats = batch.part(at.BLOCK_HEAT, at.BLOCK_CP, structure.heat_terms)
    cp = batch.part(at.BLOCK_CP, at.BLOCK_LENGTH, structure.cp_terms)
    heat = sum(V * r[j] * -_polynomial(heats[j], T) for j in range(r.size))
    capacity = sum(n[i] * _polynomial(cp[i], T) for i in range(n.size)) + b[at.WALL]
    fed = sum(b[at.FEED_CP + k] * T ** (k + 1) / (k + 1) for k in range(4)) - b[at.FEED_HEAT]
    wall = (b[at.UA_CONSTANT] + b[at.UA_PER_VOLUME] * V) * (T - Tj)
    gained = heat - fed + b[at.STIRRER] - b[at.LOSS] * (T - b[at.AMBIENT])
    if b[at.FREE] == 0.0:
        slope, duty = 0.0, gained
    elif b[at.DUTY_ON]:
        slope = min(max((b[at.SET_POINT] - T) * b[at.HOLD_RATE], (gained - b[at.DUTY]) / capacity), gained / capacity)
        duty = gained - capacity * slope
    else:
        slope, duty = (gained - wall) / capacity, wall
    return {"heat": heat, "wall": wall, "gained": gained, "capacity": capacity, "slope": slope, "duty": duty}


def dydt(batch: Batch, y: np.ndarray, t: float) -> np.ndarray:
    """dy/dt of z, T, T_j, controller integral and energy."""
    b, structure = batch.block, batch.program.structure
    nz = structure.sources.shape[0]
    T, Tj, integral = y[nz], y[nz + 1], y[nz + 2]
    n, V = moles(batch, y, t), volume(batch, t)
    r = reaction_rates(batch, n / V, T)
    flows = energy_flows(batch, n, r, V, T, Tj)
    error = T - b[at.SET_POINT]
    u = b[at.OPENING] + b[at.GAIN] * (error + b[at.RESET_INVERSE] * integral)
    beyond = max(u - 1.0, -u, 0.0)
    renewal = b[at.JACKET_RENEWAL] * min(max(u, 0.0), 1.0)
    heats = batch.part(at.BLOCK_HEAT, at.BLOCK_CP, structure.heat_terms)
    at_reference = sum(V * r[j] * -_polynomial(heats[j], REFERENCE) for j in range(r.size))
    brought = b[at.FEED_HEAT] - sum(b[at.FEED_CP + k] * REFERENCE ** (k + 1) / (k + 1) for k in range(4))
    others = b[at.STIRRER] - b[at.LOSS] * (T - b[at.AMBIENT])
    return np.concatenate(
        [
            V * structure.sources @ r,
            [flows["slope"], renewal * (b[at.INLET] - Tj) + b[at.JACKET_CAPACITY_INVERSE] * flows["wall"]],
            [max(1.0 - beyond / BAND, 0.0) * error if b[at.RESET_INVERSE] > 0.0 else 0.0],
            [at_reference + others - flows["duty"] + brought],
        ]
    )


def central(f: Callable[[float], np.ndarray], x: float, step: float) -> np.ndarray:
    """df/dx by central differences, twice and extrapolated (error of order step^4)."""
    wide, narrow = ((f(x + h) - f(x - h)) / (2.0 * h) for h in (step, 0.5 * step))
    return (4.0 * narrow - wide) / 3.0


def jacobian(batch: Batch, y: np.ndarray, t: float, steps: np.ndarray) -> np.ndarray:
    """d(dy/dt)/dy by differences of the naive right-hand side."""
    columns = []
    for k in range(y.size):

        def moved(x: float, k: int = k) -> np.ndarray:
            return dydt(batch, np.where(np.arange(y.size) == k, x, y), t)

        columns.append(central(moved, y[k], steps[k]))
    return np.stack(columns, axis=1)


class Rodas:
    """The method on any y' = f(t, y), with dense LU and a plain step control on the largest error over its allowance."""

    def __init__(self, f: Callable, df: Callable, dfdt: Callable | None = None) -> None:
        self.f, self.df, self.dfdt = f, df, dfdt
        self.steps = self.rejected = 0

    def step(self, t: float, y: np.ndarray, h: float) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return the new state, the error estimate, and the stages (8, n)."""
        matrix = np.eye(y.size) / (h * method.GAMMA) - self.df(t, y)
        by_time = self.dfdt(t, y) if self.dfdt is not None else np.zeros_like(y)
        k = np.zeros((method.STAGES, y.size))
        for i in range(method.STAGES):
            u = y + method.A[i, :i] @ k[:i]
            right = self.f(t + method.TIMES[i] * h, u) + (method.C[i, :i] @ k[:i]) / h + h * method.SLOPES[i] * by_time
            k[i] = np.linalg.solve(matrix, right)
        return u + k[-1], k[-1], k

    def dense(self, y: np.ndarray, new: np.ndarray, k: np.ndarray, theta: float) -> np.ndarray:
        """Return the state at a fraction of a step."""
        p, q, r = method.DENSE @ k
        return (1 - theta) * y + theta * (new + (1 - theta) * (p + theta * (q + theta * r)))

    def fixed(self, y: np.ndarray, end: float, steps: int) -> np.ndarray:
        """March from 0 to `end` in equal steps."""
        y, h = np.array(y, dtype=float), end / steps
        for i in range(steps):
            y = self.step(i * h, y, h)[0]
        return y

    def march(self, y: np.ndarray, end: float, rtol: float, atol: float, first: float = 1e-6) -> np.ndarray:
        """March from 0 to `end` with step control."""
        y, t, h = np.array(y, dtype=float), 0.0, first
        while t < end:
            h = min(h, end - t)
            new, error, _ = self.step(t, y, h)
            size = np.max(np.abs(error) / (atol + rtol * np.maximum(np.abs(y), np.abs(new))))
            if size <= 1.0:
                t, y = (end if h == end - t else t + h), new
                self.steps += 1
            else:
                self.rejected += 1
            h *= min(6.0, max(0.2, 0.9 * max(size, 1e-10) ** -0.2))
            assert self.steps + self.rejected < 200_000
        return y
