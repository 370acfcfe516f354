"""The probability map: exact edges, brute force of the same draws, what it costs, and where nothing can be foreseen."""

import json

import numpy as np
import pytest
from scipy.special import ndtr

from sweep.analysis.chance_map import COARSE, assess_map, foreseen
from sweep.plan import draw
from sweep.plant import LimitRow, margins
from tests.analysis.made_up_space import rows, space

NOISE = 'distribution = "normal", sd = "0.1 J/mol"'
MAP = '[window]\naxes = ["x0", "x1"]\n[risk]\nmap = {{ steps = {steps}, draws = {draws} }}\n'


def mapped(*functions, steps=40, draws=64, size=2, status=None, seed=11):
    study = space(size, MAP.format(steps=steps, draws=draws), uncertain=NOISE, limits=len(functions), seed=seed)
    evaluate = rows(study, *functions, status=status)
    return study, evaluate, assess_map(study, evaluate)


def brute(study, evaluate, steps, draws):
    """March every draw at every node."""
    drawn = draw(study, draws, "latin-hypercube", "map")
    share = np.linspace(0.0, 1.0, steps + 1)
    points = np.stack(np.meshgrid(share, share, indexing="ij"), axis=-1).reshape(-1, 2)
    import pandas as pd

    table = pd.DataFrame({"x0": np.repeat(points[:, 0], draws), "x1": np.repeat(points[:, 1], draws)})
    held = np.all(margins(study, evaluate(drawn.paired(table, np.tile(np.arange(draws), len(points))))) >= 0.0, axis=1)
    return held.reshape(steps + 1, steps + 1, draws).sum(axis=2)


def curved(x, z):
    return 0.8 - x[:, 0] ** 2 - 0.5 * x[:, 1] - z


def steep(x, z):
    return np.exp(8.0 * (x[:, 1] - 0.2 * x[:, 0])) - np.exp(8.0 * 0.3 + 10.0 * z)


def test_probability_has_a_closed_form():
    """x0 + z <= 0.6 with z normal of 0.1: Phi((0.6 - x0) / 0.1), to the draws' own error."""
    _, _, found = mapped(lambda x, z: 0.6 - x[:, 0] - z, draws=512)
    exact = ndtr((0.6 - np.linspace(0.0, 1.0, 41)) / 0.1)
    assert np.abs(found.probability - exact[:, None]).max() <= 0.01
    assert np.array_equal(found.nominal, np.broadcast_to(np.linspace(0.0, 1.0, 41)[:, None] <= 0.6 + 1e-12, (41, 41)))


@pytest.mark.parametrize("functions", [(curved,), (steep,), (curved, steep)], ids=["curved", "steep", "both"])
def test_same_as_brute_force_for_a_fifth_of_its_marches(functions):
    study, evaluate, found = mapped(*functions, draws=128)
    assert np.abs(found.holding - brute(study, evaluate, 40, 128)).max() <= 1
    assert 5 * found.marched <= 41 * 41 * 128
    assert found.marched == evaluate.marches - 41 * 41 * 128


def test_corner_between_two_limits_and_points_without_answer():
    study, evaluate, found = mapped(
        lambda x, z: 0.62 - x[:, 0] - z, lambda x, z: 0.57 - x[:, 1] + z, status=lambda x: np.where(x[:, 0] + x[:, 1] > 1.7, "failed", "done"),
    )  # fmt: skip
    assert np.array_equal(found.holding, brute(study, evaluate, 40, 64))


def test_wrong_forecasts_are_counted_and_said():
    """A failing stripe thinner than the coarse grid, that no margin hints at."""
    stripe = lambda x, z: np.where(np.abs(x[:, 0] - 0.55) < 0.012, -1.0, 1.0)  # noqa: E731
    _, _, found = mapped(stripe, draws=512)
    block = found.summary()
    assert block["wrong"] > 0
    assert any("wrong" in caution for caution in block["cautions"])
    assert not any("wrong" in caution for caution in mapped(curved)[2].summary()["cautions"])


def test_nominal_edge_is_not_where_half_of_the_draws_hold_everywhere():
    """Two limits that fail for opposite draws: where both are at their edge nominally hardly any draw holds both."""
    _, _, found = mapped(lambda x, z: 0.5 - x[:, 0] - z, lambda x, z: x[:, 0] - 0.5 + z, draws=256)
    assert found.nominal[20].all()
    assert found.summary()["least_where_nominal_holds"] < 0.1


def test_summary_and_table_are_plain():
    _, _, found = mapped(curved, steps=10, draws=32)
    block = json.loads(json.dumps(found.summary()))
    assert [0.5, 0.9, 0.95, 0.99] == [one["probability"] for one in block["levels"]]
    assert all(a["share"] >= b["share"] for a, b in zip(block["levels"], block["levels"][1:], strict=False))
    table = found.tables()["probability_map"]
    assert 121 == len(table)
    assert ((table["low"] <= table["probability"]) & (table["probability"] <= table["high"])).all()


def test_same_seed_same_map():
    one, same, other = (mapped(curved, steps=10, draws=32, seed=seed)[2] for seed in (1, 1, 2))
    assert np.array_equal(one.holding, same.holding) and one.summary() == same.summary()
    assert not np.array_equal(one.holding, other.holding)


def test_straight_margins_are_foreseen_exactly():
    row = LimitRow("a", "a", "at_least", -1.0, "", "a")
    x, y = np.meshgrid(np.linspace(0.0, 1.0, COARSE + 1), np.linspace(0.0, 1.0, COARSE + 1), indexing="ij")
    coarse = (0.613 - x - 0.3 * y)[:, :, None, None]
    holds, sure = foreseen(coarse, 4, (row,))
    x, y = np.meshgrid(np.linspace(0.0, 1.0, 41), np.linspace(0.0, 1.0, 41), indexing="ij")
    truth = 0.613 - x - 0.3 * y >= 0.0
    assert np.array_equal(truth[sure[:, :, 0]], holds[:, :, 0][sure[:, :, 0]])
    assert sure.mean() > 0.95
