"""Speed beside SciPy's LSODA at equal error, in one run: python -m tests.benchmarks.measure [points] [rounds]

Error of a point: the largest over the times compared of |n - reference| / amount charged and |T - reference| / 100 K. The reference
is LSODA at a relative tolerance of 1e-12; the kernel at 1e-11 must agree with it. LSODA's tolerance is the loosest of a grid of
eighths of a decade at which its median error does not exceed the project's by more than a quarter.
"""

import sys
import time
import warnings
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
from scipy.integrate import ODEintWarning

from sweep.kernel import layout as at
from sweep.kernel.engine import march
from sweep.plant import evaluate
from sweep.plant.course import charge_plant
from sweep.plant.recipe import Charged
from sweep.plant.values import values_of
from sweep.study import read_study
from tests.benchmarks import peers

STUDY = Path(__file__).with_name("fedbatch.toml")
TOLERANCE = 1e-6  # the project's default
PEERS: dict[str, tuple[Callable[..., np.ndarray], peers.Way]] = {
    "odeint, NumPy": (peers.right_side, peers.by_odeint),
    "odeint, numba": (peers.right_side_compiled, peers.by_odeint),
    "solve_ivp, NumPy": (peers.right_side, peers.stepped),
    "solve_ivp, numba": (peers.right_side_compiled, peers.stepped),
}
CHUNK = 1024  # points a call: what one call touches then stays in the processor's cache
TIMES = np.linspace(0.0, peers.END, 17)


def draw(count: int, seed: int = 5) -> pd.DataFrame:
    """Return points of the study's variables, uniform within their ranges."""
    study = read_study(STUDY)
    low, high = (np.array([getattr(v, end) for v in study.variables]) for end in ("low", "high"))
    return pd.DataFrame(np.random.default_rng(seed).uniform(low, high, (count, low.size)), columns=[v.name for v in study.variables])


def prepare(points: pd.DataFrame) -> Charged:
    """Return the kernel's arrays for these points."""
    study = read_study(STUDY)
    return charge_plant(study, values_of(study, points))


def _point(row: np.ndarray) -> peers.Point:
    return peers.Point(*(float(x) for x in row))


def _times(point: peers.Point) -> np.ndarray:
    """Return the times compared, the feed's ends among them (LSODA stops there)."""
    return np.union1d(TIMES, [peers.FEED_START, peers.FEED_START + point.dosing])


def by_lsoda(points: pd.DataFrame, f: Callable[..., np.ndarray], rtol: float) -> tuple[np.ndarray, int]:
    """Return states (N, K, 8) at TIMES and the number of failures (their rows NaN)."""
    found, failures = np.full((len(points), TIMES.size, 8), np.nan), 0
    for n, row in enumerate(points.to_numpy()):
        point = _point(row)
        times = _times(point)
        states = peers.march_lsoda(point, times, f, rtol)
        if states is None:
            failures += 1
        else:
            found[n] = states[np.isin(times, TIMES)]
    return found, failures


def by_kernel(points: pd.DataFrame, tolerance: float) -> np.ndarray:
    """Return states (N, K, 8) at TIMES: moles, T, jacket, integral."""
    plant = prepare(points)
    samples = march(plant.program, plant.blocks, plant.starts, plant.constants, np.tile(TIMES, (len(points), 1)), tolerance, 200_000).samples
    nz = plant.program.structure.sources.shape[0]
    share = plant.brought.share(np.tile(TIMES, (len(points), 1)))
    fed = np.einsum("nfk,nfi->nki", share, plant.brought.fed)
    moles = plant.brought.charged[:, None] + fed + samples[..., :nz] @ plant.program.structure.amounts.T
    return np.concatenate([moles, samples[..., nz : nz + 3]], axis=2)


def errors(found: np.ndarray, reference: np.ndarray) -> np.ndarray:
    """Return each point's error, (N,)."""
    charged = reference[:, :1, :1]
    gap = np.abs(found - reference)[..., :6] / np.concatenate([np.repeat(charged, 5, axis=2), np.full_like(charged, 100.0)], axis=2)
    return gap.max(axis=(1, 2))


@dataclass(frozen=True)
class Equal:
    """Errors made equal: the project's, LSODA's at its tolerance, and how well two references agree (medians and maxima)."""

    ours: np.ndarray
    theirs: np.ndarray
    rtol: float
    failures: int
    references_apart: float


def equalise(points: pd.DataFrame) -> Equal:
    """Return LSODA's tolerance at equal error on these points."""
    reference, failures = by_lsoda(points, peers.right_side_compiled, 1e-12)
    assert failures == 0
    apart = float(errors(by_kernel(points, 1e-11), reference).max())
    ours = errors(by_kernel(points, TOLERANCE), reference)
    for rtol in 10.0 ** np.arange(-4.0, -10.0, -0.125):
        found, failures = by_lsoda(points, peers.right_side_compiled, rtol)
        theirs = errors(found, reference)
        if np.nanmedian(theirs) <= 1.25 * np.median(ours):
            return Equal(ours, theirs, float(rtol), failures, apart)
    raise AssertionError("LSODA never came as near")


def _seconds(task: Callable[[], object]) -> float:
    """Return the processor time of a task: every way runs in one thread, and waiting for a busy machine is not its own."""
    begin = time.thread_time()
    task()
    return time.thread_time() - begin


@dataclass(frozen=True)
class Speeds:
    """Seconds per point of each way, one column per round, and the failures of LSODA met while timing."""

    seconds: dict[str, np.ndarray]
    failures: int

    def ratio(self, slow: str, fast: str) -> float:
        """Return the median over rounds of how many times faster."""
        return float(np.median(self.seconds[slow] / self.seconds[fast]))


def time_all(points: pd.DataFrame, rtol: float, rounds: int, few: int) -> Speeds:
    """Time every way in every round, one thread, so that a busy machine slows all of them; LSODA on `few` and four times as many."""
    study, chunks = read_study(STUDY), [points.iloc[k : k + CHUNK] for k in range(0, len(points), CHUNK)]
    plants, failures = [prepare(chunk) for chunk in chunks], [0]

    def march_all() -> None:
        for plant in plants:
            march(plant.program, plant.blocks, plant.starts, plant.constants, None, TOLERANCE)

    def evaluate_all() -> None:
        for chunk in chunks:
            evaluate(study, chunk)

    def lsoda(name: str, k: int) -> float:
        f, way = PEERS[name]
        count = few * (4 if f is peers.right_side_compiled else 1)
        chosen = np.resize(np.arange(len(points)), (k + 1) * count)[k * count :]

        def task() -> None:
            for row in points.to_numpy()[chosen]:
                point = _point(row)
                stops = np.array([peers.FEED_START, peers.FEED_START + point.dosing, peers.END])
                failures[0] += peers.march_lsoda(point, stops, f, rtol, way) is None

        return _seconds(task) / count

    seconds: dict[str, list[float]] = {name: [] for name in (*PEERS, "kernel", "evaluate")}
    for k in range(rounds):
        for name in PEERS:
            seconds[name].append(lsoda(name, k))
        seconds["kernel"].append(_seconds(march_all) / len(points))
        seconds["evaluate"].append(_seconds(evaluate_all) / len(points))
    return Speeds({name: np.array(values) for name, values in seconds.items()}, failures[0])


def main(count: int = 20_000, rounds: int = 5) -> None:
    """Print errors, points per second and ratios."""
    warnings.simplefilter("ignore", ODEintWarning)
    points = draw(count)
    march_first = prepare(points.iloc[:1])
    first = _seconds(lambda: march(march_first.program, march_first.blocks, march_first.starts, march_first.constants))
    equal = equalise(points.iloc[:48])
    print(f"first march of this process {first:.2f} s; references apart by {equal.references_apart:.1e}")
    for name, rtol, error in (("project", TOLERANCE, equal.ours), ("LSODA", equal.rtol, equal.theirs)):
        print(f"error   {name:7} at {rtol:.1e}: median {np.nanmedian(error):.1e}, largest {np.nanmax(error):.1e}, failures {np.isnan(error).sum()}")
    plant = prepare(points)
    out = march(plant.program, plant.blocks, plant.starts, plant.constants, None, TOLERANCE).out
    steps, rejected, failed = out[:, at.OUT_STEPS].mean(), out[:, at.OUT_REJECTED].mean(), int((out[:, at.OUT_STATUS] != 0).sum())
    print(f"steps   {steps:.1f} and {rejected:.1f} rejected a point; {failed} failures")
    speeds = time_all(points, equal.rtol, rounds, few=10)
    for name, values in speeds.seconds.items():
        print(f"{name:17} {1.0 / np.median(values):12,.0f} points/s   {1e6 * np.median(values):10,.1f} us/point   least {1e6 * values.min():10,.1f}")
    for fast in ("kernel", "evaluate"):
        print(f"{fast:9} over LSODA by " + ", ".join(f"{slow}: {speeds.ratio(slow, fast):,.0f} x" for slow in PEERS))
    print(f"failures of LSODA while timing: {speeds.failures}")


if __name__ == "__main__":
    main(*(int(x) for x in sys.argv[1:]))
