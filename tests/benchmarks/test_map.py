"""What a probability map costs beside march and brute force, one worker: `python -m pytest -m benchmark -s tests/benchmarks/test_map.py`."""

import time
from collections.abc import Callable
from dataclasses import replace
from functools import partial
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.analysis.chance_map import assess_map
from sweep.kernel.engine import march
from sweep.plan import draw
from sweep.plant import margins
from sweep.plant.course import charge_plant
from sweep.plant.values import values_of
from sweep.runner import simulate
from sweep.study import read_study
from sweep.study.model import Study
from sweep.study.settings import MapSettings

DEMO = Path(__file__).parents[2] / "studies" / "acylation.toml"
PIECE, ROUNDS = 1024, 3


def _seconds(work: Callable[[], object]) -> float:
    begun = time.perf_counter()
    work()
    return time.perf_counter() - begun


def _study(draws: int, failing: bool) -> Study:
    study = read_study(DEMO)
    return replace(study if failing else study.without_failure(), map=MapSettings(40, draws, 0.95))


@pytest.mark.benchmark
@pytest.mark.parametrize(("failing", "draws"), [(False, 48), (True, 8)], ids=["plain limits", "failure limits"])
def test_map_of_the_demo(capsys, failing, draws):
    """40 x 40 steps: marches per second beside `evaluate` of the same points and, with plain limits, the kernel's own march of them."""
    study = _study(draws, failing)
    seen: list[pd.DataFrame] = []

    def noted(points: pd.DataFrame) -> pd.DataFrame:
        seen.append(points)
        return simulate(study, points, 1)

    assess_map(study, noted)
    points = pd.concat(seen[:2], ignore_index=True)  # with draws; the nominal nodes, which are few, come last
    plants = [charge_plant(study, values_of(study, points.iloc[k : k + PIECE])) for k in range(0, len(points), PIECE)]
    count = {"kernel": len(points), "evaluate": len(points), "map": sum(map(len, seen))}

    def marched() -> None:
        for plant in plants:
            march(plant.program, plant.blocks, plant.starts, plant.constants, None, study.values["accuracy.relative"])

    ways = {"kernel": marched, "evaluate": lambda: simulate(study, points, 1), "map": lambda: assess_map(study, partial(simulate, study, workers=1))}
    taken = {name: np.array([]) for name in ways}
    for _ in range(ROUNDS):
        for name, work in ways.items():
            taken[name] = np.append(taken[name], _seconds(work) / count[name])
    share = float(np.median(taken["evaluate"] / taken["map"]))
    with capsys.disabled():
        print(f"\n40 x 40 map of the demo, {draws} draws, {'failure' if failing else 'plain'} limits, one worker: {count['map']:,} marches")
        for name in ways:
            part = 100.0 * float(np.median(taken["kernel"] / taken[name]))
            print(f"  {name:9} {1.0 / np.median(taken[name]):8,.0f} marches/s, {part:5.1f} % of the kernel's own rate without failure figures")
        print(f"  the map beside evaluate alone: {100.0 * share:.1f} %")
    assert 0.75 <= share


@pytest.mark.benchmark
def test_map_beside_brute_force(capsys):
    """The same draws at every node: at most one draw's difference anywhere, for less than a fifth of the marches."""
    study = _study(48, False)
    evaluate = partial(simulate, study, workers=1)
    found = assess_map(study, evaluate)
    assert study.window is not None
    drawn, names = draw(study, 48, "latin-hypercube", "map"), study.window.axes
    nodes = found.tables()["probability_map"].iloc[:, :2].set_axis(list(names), axis=1)
    held = found.at
    whole = nodes.assign(**held).loc[nodes.index.repeat(48)].reset_index(drop=True)
    truth = np.all(margins(study, evaluate(drawn.paired(whole, np.tile(np.arange(48), len(nodes))))) >= 0.0, axis=1).reshape(41, 41, 48).sum(axis=2)
    ratio = len(whole) / found.marched
    with capsys.disabled():
        apart = np.abs(truth - found.holding).max()
        print(f"\nmap: {found.marched:,} marches in place of {len(whole):,}, {ratio:.1f} times fewer; largest difference {apart} of 48 draws,"
              f" at {100.0 * np.mean(truth != found.holding):.2f} % of the nodes")  # fmt: skip
    assert ratio >= 5.0
    assert np.abs(truth - found.holding).max() <= 1
