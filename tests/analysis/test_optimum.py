"""The optimum within limits: known answers, with and without draws, two objectives, what is set, and what is not to be had."""

from functools import partial

import numpy as np
import pandas as pd
import pytest
from scipy.special import ndtri

import sweep
from sweep.analysis.optimum import assess_optimum
from sweep.analysis.optimum.front import front_of
from sweep.plant import limits, margins
from sweep.study import read_text
from sweep.workflow.memory import FolderMemory
from tests.analysis.made_up_space import rows, space
from tests.texts import SMALL, isothermal

LEAST = '[optimum]\nminimise = "cycle_time"\n'
NOISE = 'distribution = "normal", sd = "0.1 J/mol"'


def squares(x, z):
    return (x**2).sum(axis=1)


def first(x, z):
    return x[:, 0]


def found(size, limit, extra=LEAST, at=0.5, memory=None, seed=11, uncertain="", status=None, **aims):
    study = space(size, extra, at=at, seed=seed, uncertain=uncertain)
    return assess_optimum(study, rows(study, limit, status=status, **(aims or {"cycle_time_s": squares})), memory)


def where(setting):
    return [one["value"] for one in setting["inputs"].values()]


def plane(x, z):
    return x[:, 0] + x[:, 1] - 0.8 - z


def test_least_squares_on_a_line():
    """x0^2 + x1^2 least where x0 + x1 >= 0.8: at (0.4, 0.4)."""
    block = found(2, plane).summary()
    assert pytest.approx([0.4, 0.4], abs=1e-3) == where(block["best"])
    assert pytest.approx(0.32, abs=1e-3) == block["best"]["objectives"][0]
    assert "fraction_A" == block["best"]["nearest"]
    assert block["best"]["limits"][1]["holds"] and block["best"]["limits"][1]["margin"] >= 0.0
    assert ("SLSQP", None) == (block["search"]["polished_by"], block["best"]["verified"])


def test_largest_of_a_hill_inside():
    """The summit of a made-up hill at (0.3, 0.7) lies within the limits and is found; maximise turns the sign back."""
    hill = {"cycle_time_s": lambda x, z: 5.0 - (x[:, 0] - 0.3) ** 2 - (x[:, 1] - 0.7) ** 2}
    block = found(2, lambda x, z: np.ones(len(x)), '[optimum]\nmaximise = "cycle_time"\n', **hill).summary()
    assert pytest.approx([0.3, 0.7], abs=2e-3) == where(block["best"])
    assert pytest.approx(5.0, abs=1e-5) == block["best"]["objectives"][0]


def test_a_margin_is_an_objective():
    """The setting farthest from the edge of a made-up tent."""
    tent = lambda x, z: 0.4 - np.abs(x[:, 0] - 0.25)  # noqa: E731
    block = found(1, tent, '[optimum]\nmaximise = "margin_fraction_A"\n').summary()
    assert pytest.approx([0.25], abs=1e-3) == where(block["best"])
    assert "margin_fraction_A" == block["objectives"][0]["name"]


CHANCE = LEAST + "probability = 0.9\ndraws = 1024\n"


def test_chance_constraint_with_a_closed_form():
    """Least x0 with P(x0 >= 0.3 + z) >= 0.9, z normal of 0.1: 0.3 + 0.1 Phi^-1(0.9), plus what the confidence takes."""
    block = found(1, lambda x, z: x[:, 0] - 0.3 - z, CHANCE, uncertain=NOISE, cycle_time_s=first).summary()
    exact = 0.3 + 0.1 * ndtri(0.9)
    assert exact <= where(block["best"])[0] <= exact + 0.015
    verified = block["best"]["verified"]
    assert verified["low"] >= 0.9
    assert 4096 == verified["draws"]
    assert verified["low"] < verified["probability"]


def test_chance_constraint_in_two_variables():
    block = found(2, plane, CHANCE + "generations = 20\n", uncertain=NOISE).summary()
    exact = (0.8 + 0.1 * ndtri(0.9)) / 2.0
    assert pytest.approx([exact + 0.005] * 2, abs=0.012) == where(block["best"])
    assert sum(where(block["best"])) >= 2.0 * exact
    assert "COBYQA" == block["search"]["polished_by"]


def test_fresh_draws_tighten_what_the_search_s_own_took_for_enough():
    """Twenty-five draws, all of which hold: the search leans on them, and fresh ones ask for more."""
    few = LEAST + "probability = 0.9\ndraws = 25\nverify = 4096\n"
    block = found(1, lambda x, z: x[:, 0] - 0.3 - z, few, uncertain=NOISE, cycle_time_s=first).summary()
    verified = block["best"]["verified"]
    assert verified["low"] >= 0.9 or any("do not bear out" in said for said in block["cautions"])


def test_nothing_is_feasible():
    """x0 + x1 >= 2.8 is never met: the corner (1, 1) comes nearest, and the limit is named."""
    block = found(2, lambda x, z: x[:, 0] + x[:, 1] - 2.8).summary()
    assert block["best"] is None
    assert "no setting was found that holds every limit; at the one that comes nearest fraction_A is in the way" == block["reason"]
    assert pytest.approx([1.0, 1.0], abs=1e-6) == where(block["least_bad"])
    assert pytest.approx(-0.8, abs=1e-6) == block["least_bad"]["limits"][1]["margin"]


def test_points_without_an_answer_are_never_best():
    """A corner where the batch fails, and a strip where the objective has no value, would both be better."""
    block = found(
        2, lambda x, z: np.ones(len(x)), status=lambda x: np.where(x[:, 1] < 0.2, "failed", "done"),
        cycle_time_s=lambda x, z: np.where(x[:, 0] < 0.3, np.nan, squares(x, z)),
    ).summary()  # fmt: skip
    assert pytest.approx([0.3, 0.2], abs=6e-3) == where(block["best"])
    assert where(block["best"])[0] >= 0.3 and where(block["best"])[1] >= 0.2


def test_narrow_region():
    """One part in two thousand of the square holds; the set-point does not."""
    block = found(2, lambda x, z: 0.0125**2 - (x[:, 0] - 0.83) ** 2 - (x[:, 1] - 0.21) ** 2).summary()
    assert not block["set_point_acceptable"]
    assert pytest.approx([0.83 - 0.0125 * 0.97, 0.21 - 0.0125 * 0.25], abs=4e-3) == where(block["best"])


@pytest.mark.parametrize("ktd", [0.25, 1.0, 5.0])
def test_most_productive_batch_time_with_turnaround(ktd):
    """First order, through a study: e^x = 1 + x + k td, and the largest productivity over k C0 is 1 - X*."""
    exact = {0.25: (0.63271475258259, 0.46885209316586), 1.0: (1.1461932206206, 0.68215556710063), 5.0: (2.0907174051555, 0.87640156615002)}[ktd]
    text = isothermal("A -> R | 1e-3 1/s", conversion=0.01, turnaround=f"{1000.0 * ktd} s", batch_time="500 s")
    text += '\n[vessel]\nvolume = "1 m3"\n[variables]\nlong = { sets = "recipe.batch_time", from = "100 s", to = "4000 s" }\n'
    text += '[optimum]\nmaximise = "productivity"\n'
    study = read_text(text)
    block = assess_optimum(study, partial(sweep.simulate, study, workers=1)).summary()
    assert pytest.approx(1000.0 * exact[0], abs=15.0) == where(block["best"])[0]
    assert pytest.approx(2000.0 * 1e-3 * (1.0 - exact[1]), rel=2e-5) == block["best"]["objectives"][0]


def test_cost_is_what_a_hand_counts():
    """1.5 kmol of A at 2 EUR/kg and 8 h at 50 EUR/h, over the product made."""
    study = read_text(SMALL + '[optimum]\nminimise = "cost"\ngenerations = 2\nprices = { A = "2 EUR/kg", vessel_time = "50 EUR/h" }\n')
    block = assess_optimum(study, partial(sweep.simulate, study, workers=1)).summary()
    row = sweep.simulate(study, pd.DataFrame(index=[0]), workers=1).iloc[0]
    product = row["productivity_kg_per_m3_s"] * 2.0 * 8.0 * 3600.0
    assert pytest.approx((1500.0 * 0.1 * 2.0 + 8.0 * 50.0) / product, rel=1e-9) == block["set_point"]["objectives"][0]
    assert "EUR/kg" == block["objectives"][0]["unit"]


def test_what_is_to_be_set_is_round_and_holds():
    study = read_text(SMALL + '[optimum]\nmaximise = "productivity"\ngenerations = 6\n')
    block = assess_optimum(study, partial(sweep.simulate, study, workers=1)).summary()
    best = block["best"]
    table = sweep.simulate(study, pd.DataFrame({name: [one["value"]] for name, one in best["inputs"].items()}), workers=1)
    assert (margins(study, table)[0] >= 0.0).all()
    assert len(limits(study)) == len(best["limits"])
    for one in best["inputs"].values():
        number, unit = one["written"].split(" ")
        assert len(number) <= 5, one
        assert pytest.approx(one["value"], rel=1e-12) == study.quantity(next(n for n, v in best["inputs"].items() if v is one), f"{number} {unit}")
    assert block["best"]["objectives"][0] >= block["set_point"]["objectives"][0]


TWO = '[optimum]\nminimise = ["cycle_time", "heat_release"]\npopulation = 16\ngenerations = 20\n'


def disc(x, z):
    return 0.16 - (x[:, 0] - 0.5) ** 2 - (x[:, 1] - 0.5) ** 2 - 0.1 * z


AIMS = {"cycle_time_s": first, "heat_release_W": lambda x, z: x[:, 1]}


def test_front_of_two_objectives():
    """Both coordinates least within a disc: its lower left quarter."""
    front = found(2, disc, TWO, **AIMS).summary()["front"]
    points = np.array([one["objectives"] for one in front])
    gap = 0.4 - np.hypot(*(points - 0.5).T)
    assert len(front) >= 6
    assert np.all((gap >= 0.0) & (gap <= 0.05)) and np.all(points <= 0.5 + 0.06)
    assert np.all(np.diff(points[:, 0]) > 0.0) and np.all(np.diff(points[:, 1]) < 0.0)


def test_front_with_a_probability_is_verified():
    one = found(2, disc, TWO + "probability = 0.8\ndraws = 64\nverify = 512\n", uncertain=NOISE, **AIMS)
    block = one.summary()
    assert block["front"]
    assert all(setting["share"] >= 0.8 for setting in block["front"])
    assert all(512 == setting["verified"]["draws"] for setting in block["front"][:1])
    assert list(one.tables()["optimum_front"]) == ["x0", "x1", "cycle_time", "heat_release", "share", "probability_at_least"]


def test_front_where_nothing_holds():
    block = found(2, lambda x, z: np.full(len(x), -1.0), TWO, **AIMS).summary()
    assert ([], None) == (block["front"], block["best"])
    assert "fraction_A is in the way" in block["reason"]


def test_front_of_a_handful():
    costs = np.array([[1.0, 5.0], [2.0, 4.0], [2.0, 3.0], [3.0, 3.0], [0.5, 0.5], [4.0, 1.0]])
    assert [0, 2, 5] == front_of(costs, np.array([True, True, True, True, False, True])).tolist()


@pytest.mark.parametrize("extra", [LEAST, TWO], ids=["one objective", "two objectives"])
def test_same_seed_same_answer(extra):
    aims = AIMS if extra is TWO else {"cycle_time_s": squares}
    one, two, other = (found(2, disc, extra, seed=seed, **aims) for seed in (5, 5, 6))
    assert one.summary() == two.summary()
    assert np.array_equal(one.problem.points, two.problem.points)
    assert not np.array_equal(one.problem.points[1:], other.problem.points[1:])


@pytest.mark.parametrize("extra", [CHANCE + "generations = 5\n", TWO], ids=["one objective", "two objectives"])
def test_a_search_that_was_cut_off_ends_where_an_undisturbed_one_does(tmp_path, extra):
    """Whatever call it is cut off at, it goes on from there, and what was computed is not computed again."""
    aims = AIMS if extra is TWO else {"cycle_time_s": squares}
    study = space(2, extra, seed=5, uncertain=NOISE)
    whole = rows(study, disc, **aims)
    undisturbed = assess_optimum(study, whole).summary()
    again = rows(study, disc, **aims)
    calls = 0

    def cut_off(points):
        nonlocal calls
        calls += 1
        if calls in (3, 7, 12):
            raise KeyboardInterrupt
        return again(points)

    for _ in range(3):
        with pytest.raises(KeyboardInterrupt):
            assess_optimum(study, cut_off, FolderMemory(tmp_path / "kept"))
    assert len(list((tmp_path / "kept").iterdir())) > 2
    resumed = assess_optimum(study, cut_off, FolderMemory(tmp_path / "kept")).summary()
    assert undisturbed == resumed


def test_damaged_memory_is_computed_again(tmp_path):
    memory = FolderMemory(tmp_path / "searches" / "one")
    points = np.array([[0.5]])
    assert [[1.0]] == memory.remembered("a", points, lambda: np.array([[1.0]])).tolist()
    assert [[1.0]] == memory.remembered("a", points, lambda: np.array([[2.0]])).tolist()
    assert [[3.0]] == memory.remembered("b", points, lambda: np.array([[3.0]])).tolist()
    for file in memory.folder.iterdir():
        file.write_bytes(file.read_bytes()[:-1] + b"x")
    assert [[4.0]] == memory.remembered("a", points, lambda: np.array([[4.0]])).tolist()
    memory.forget()
    assert not (tmp_path / "searches").exists()
