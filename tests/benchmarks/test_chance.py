"""What draws at a set-point cost beside the march itself, one worker (`python -m pytest -m benchmark -s tests/benchmarks/test_chance.py`)."""

import time
from collections.abc import Callable
from dataclasses import replace
from functools import partial
from pathlib import Path

import numpy as np
import pytest

from sweep.analysis.risk import assess_risk
from sweep.kernel.engine import march
from sweep.plan import draw, set_point
from sweep.plant.course import charge_plant
from sweep.plant.values import values_of
from sweep.runner import simulate
from sweep.study import read_study

DEMO = Path(__file__).parents[2] / "studies" / "acylation.toml"
DRAWS, PIECE, ROUNDS = 4096, 1024, 5


def _seconds(work: Callable[[], object]) -> float:
    begun = time.perf_counter()
    work()
    return time.perf_counter() - begun


@pytest.mark.benchmark
def test_draws_at_a_set_point(capsys):
    """4,096 draws with plain limits: printed as marches per second and as a share of the kernel's own rate; all that is not `evaluate` (drawing,
    counting, percentiles, curves) takes at most a quarter of it."""
    study = read_study(DEMO).without_failure()
    assert study.risk is not None
    study = replace(study, risk=replace(study.risk, draws=DRAWS, rare="none"))
    points = draw(study, DRAWS, study.risk.sampling, "risk").at(set_point(study))
    plants = [charge_plant(study, values_of(study, points.iloc[k : k + PIECE])) for k in range(0, DRAWS, PIECE)]

    def marched() -> None:
        for plant in plants:
            march(plant.program, plant.blocks, plant.starts, plant.constants, None, study.values["accuracy.relative"])

    def risk() -> None:
        found = assess_risk(study, partial(simulate, study, workers=1))
        found.summary(), found.tables()

    ways = {"kernel": marched, "evaluate": lambda: simulate(study, points, 1), "risk": risk}
    for work in ways.values():
        work()
    taken = {name: np.array([]) for name in ways}
    for _ in range(ROUNDS):
        for name, work in ways.items():
            taken[name] = np.append(taken[name], _seconds(work))
    share = {name: float(np.median(taken["kernel"] / taken[name])) for name in ways}
    with capsys.disabled():
        print(f"\n{DRAWS:,} draws at the set-point, plain limits, one worker:")
        for name in ways:
            print(f"  {name:9} {DRAWS / np.median(taken[name]):8,.0f} marches/s, {100.0 * share[name]:5.1f} % of the kernel's own rate")
    assert 0.75 * share["evaluate"] <= share["risk"]
