"""What cooling failure costs beside the plain sweep, and what a second worker brings (`-m benchmark`; a short form in the normal run)."""

import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.plan import Planned, points
from sweep.plant import evaluate
from sweep.runner import simulate
from sweep.runner.parallel import in_order
from sweep.study import read_study, read_text
from sweep.study.model import Study

DEMO = Path(__file__).parents[2] / "studies" / "acylation.toml"


def _studies() -> tuple[Study, Study]:
    """Return the demo without its failure figures, and with MTSR and TMRad but with T_D24 given (its search stands apart)."""
    study = read_study(DEMO)
    return study.without_failure(), read_text(study.text.replace("[failure]", '[failure]\ntd24 = "73 degC"'))


def _seconds(work: Callable[[], object]) -> float:
    begun = time.perf_counter()
    work()
    return time.perf_counter() - begun


def _ratio(first: Callable[[], object], second: Callable[[], object], rounds: int) -> float:
    """Return the median of the times' ratio, taken in pairs, both warm."""
    first()
    second()
    return float(np.median([_seconds(first) / _seconds(second) for _ in range(rounds)]))


def _drawn(study: Study, count: int) -> pd.DataFrame:
    return points(study).sample(count, random_state=3)


def test_cooling_failure_costs_no_order_of_magnitude_more_than_it_may():
    plain, failing = _studies()
    table = _drawn(plain, 256)
    assert 40.0 > _ratio(lambda: evaluate(failing, table), lambda: evaluate(plain, table), 3)


@pytest.mark.benchmark
def test_cooling_failure_costs_at_most_twelve_plain_sweeps(capsys):
    plain, failing = _studies()
    table = _drawn(plain, 1024)
    ratio = _ratio(lambda: evaluate(failing, table), lambda: evaluate(plain, table), 7)
    with capsys.disabled():
        print(f"\nMTSR and TMRad over the sweep: {ratio:.1f} plain sweeps")
    assert 12.0 >= ratio


@pytest.mark.benchmark
def test_two_workers_are_nearly_twice_one(capsys):
    """The chunked run behind `sweep run`; the start of its processes is timed apart."""
    plain, _ = _studies()
    rows = np.tile(points(plain).to_numpy(), (165, 1))
    plan = Planned("tiled", len(rows), tuple(points(plain).columns), lambda start, stop: rows[start:stop])

    def rate_of(workers: int) -> tuple[float, float]:
        """Return the points per second from the first stretch to the last, and the seconds to the first."""
        begun = time.perf_counter()
        stretches = in_order(plain, plan, list(range(0, plan.size, 8192)), 8192, workers)
        next(stretches)
        first = time.perf_counter()
        return sum(len(table) for _, table in stretches) / (time.perf_counter() - first), first - begun

    rate_of(1)
    pairs = [(rate_of(2), rate_of(1)) for _ in range(3)]
    ratio = float(np.median([two[0] / one[0] for two, one in pairs]))
    start = float(np.median([two[1] - one[1] for two, one in pairs]))
    with capsys.disabled():
        print(f"\ntwo warm workers: {ratio:.2f} times one ({pairs[0][1][0]:,.0f} points/s), {len(rows):,} points; start-up {start:.1f} s more")
    assert 1.7 <= ratio



SCENARIOS = "\n[deviations]\nusual = true\n" + "".join(
    f'[scenarios.lost_{k}]\nevents = [{{ time = "{30 * k + 20} min", set = {{ "cooling.flow" = "0 m3/h" }} }}]\n' for k in range(5)
)


def _with_scenarios() -> tuple[Study, Study]:
    """Return the demo without failure figures, and the same with the usual fifteen scenarios and five more."""
    plain = read_study(DEMO).without_failure()
    many = read_text(read_study(DEMO).text + SCENARIOS)
    return plain, replace(many.without_failure(), scenarios=many.scenarios)


def test_twenty_scenarios_cost_no_order_of_magnitude_more_than_they_may():
    plain, many = _with_scenarios()
    assert 20 == len(many.scenarios)
    table = _drawn(plain, 128)
    assert 100.0 > _ratio(lambda: evaluate(many, table), lambda: evaluate(plain, table), 1)


@pytest.mark.benchmark
def test_twenty_scenarios_on_ten_thousand_points_cost_at_most_thirty_plain_sweeps(capsys):
    plain, many = _with_scenarios()
    table = _drawn(plain, 2025)
    table = pd.concat([table] * 5, ignore_index=True).iloc[:10_000]
    ratio = _ratio(lambda: simulate(many, table, workers=1), lambda: simulate(plain, table, workers=1), 3)
    with capsys.disabled():
        print(f"\ntwenty scenarios on 10,000 points: {ratio:.1f} plain sweeps")
    assert 30.0 > ratio
