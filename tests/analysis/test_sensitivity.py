"""Sensitivities of published functions with exact answers, through a study; failures, constants, correlations, halved spreads."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import ndtr

import sweep
from sweep.analysis.sensitivity import assess_sensitivity
from sweep.study import read_text
from tests.analysis.made_up import evaluating, normal, study_of, uniform
from tests.texts import SMALL


def found_of(entries, function, extra="[sensitivity]", correlations="", seed=7, **made):
    study = study_of(entries, extra, correlations=correlations, seed=seed)
    return assess_sensitivity(study, evaluating(study, function, **made))


def shares(found, column="total", response="conversion"):
    rows = found.shared[response].rows.set_index("input")
    return [float(rows.loc[name, column]) for name in found.space.labels]


def test_ishigami():
    """a = 7, b = 0.1 on (-pi, pi): exact first and total shares (Ishigami and Homma 1990, closed form; from memory, recomputed)."""

    def ishigami(x):
        return np.sin(x[:, 0]) + 7.0 * np.sin(x[:, 1]) ** 2 + 0.1 * x[:, 2] ** 4 * np.sin(x[:, 0])

    found = found_of([uniform(-np.pi, np.pi)] * 3, ishigami, "[sensitivity]\nblocks = 16384")
    assert pytest.approx([0.31390519114781, 0.44241114479004, 0.0], abs=0.01) == shares(found, "first")
    assert pytest.approx([0.55758885520996, 0.44241114479004, 0.24368366406215], abs=0.01) == shares(found)
    rows = found.shared["conversion"].rows
    assert ((rows["first_low"] <= [0.31390519, 0.44241114, 0.0]) & ([0.31390519, 0.44241114, 0.0] <= rows["first_high"])).all()


def test_product_of_many():
    """Sobol' G function, a = (0, 1, 4.5, 9, 99, 99, 99, 99), exact shares in closed form (Saltelli and Sobol' 1995; from memory, recomputed)."""
    a = np.array([0.0, 1.0, 4.5, 9.0, 99.0, 99.0, 99.0, 99.0])

    def product(x):
        return np.prod((np.abs(4.0 * x - 2.0) + a) / (1.0 + a), axis=1)

    found = found_of([uniform(0.0, 1.0)] * 8, product, "[sensitivity]\nblocks = 8192")
    assert pytest.approx([0.7161921689, 0.1790480422, 0.02367577418, 0.007161921689, *[7.161921689e-5] * 4], abs=0.01) == shares(found, "first")
    assert pytest.approx([0.7871441267, 0.2421981928, 0.03431691015, 0.01046038707, *[1.049490519e-4] * 4], abs=0.01) == shares(found)


def test_sum_of_normals():
    """X1 + 2 X2 + 3 X3: 1/14, 4/14, 9/14, first and total alike; unbounded inputs."""
    found = found_of([normal(1.0)] * 3, lambda x: x @ [1.0, 2.0, 3.0], "[sensitivity]\nblocks = 4096")
    for column in ("first", "total"):
        assert pytest.approx([1 / 14, 4 / 14, 9 / 14], abs=0.02) == shares(found, column)


def test_product_of_two():
    """X1 X2 on (0, 1): 3/7 each, 1/7 between them."""
    found = found_of([uniform(0.0, 1.0)] * 2, lambda x: x[:, 0] * x[:, 1], "[sensitivity]\nblocks = 4096")
    assert pytest.approx([3 / 7, 3 / 7], abs=0.01) == shares(found, "first")
    assert pytest.approx([4 / 7, 4 / 7], abs=0.01) == shares(found)


def test_screening_of_a_sum_is_exact():
    found = found_of([uniform(0.0, 1.0)] * 3, lambda x: x @ [1.0, -2.0, 3.0])
    rows = found.screened["conversion"].rows
    assert pytest.approx([1.0, 2.0, 3.0]) == rows["mean_size"].to_list()
    assert pytest.approx([1.0, -2.0, 3.0]) == rows["mean"].to_list()
    assert pytest.approx([0.0, 0.0, 0.0], abs=1e-9) == rows["deviation"].to_list()


def test_screening_of_a_product():
    """x1 x2 on four levels: mean effect 1/2, standard deviation sqrt(5/36)."""
    found = found_of([uniform(0.0, 1.0)] * 2, lambda x: x[:, 0] * x[:, 1], "[sensitivity]\ntrajectories = 4000")
    rows = found.screened["conversion"].rows
    assert pytest.approx([0.5, 0.5], abs=0.02) == rows["mean_size"].to_list()
    assert pytest.approx([np.sqrt(5.0 / 36.0)] * 2, abs=0.01) == rows["deviation"].to_list()


def test_screening_keeps_clear_of_infinity():
    found = found_of([normal(1.0)] * 2, lambda x: x.sum(axis=1))
    assert np.isfinite(found.screened["conversion"].rows["mean_size"]).all()


def test_intervals_hold_the_truth():
    """By repetition over seeds: 95 % intervals of the total shares of X1 X2 hold 4/7 in at least 53 of 60 trials (bootstrap, 256 blocks)."""
    study = study_of([uniform(0.0, 1.0)] * 2, "[sensitivity]\nblocks = 256\ntrajectories = 4\ndraws = 16")
    hits = 0
    for seed in range(60):
        one = replace(study, seed=seed)
        row = assess_sensitivity(one, evaluating(one, lambda x: x[:, 0] * x[:, 1])).shared["conversion"].rows.iloc[0]
        hits += row["total_low"] <= 4.0 / 7.0 <= row["total_high"]
    assert hits >= 53


def test_failures_take_their_whole_block():
    """One failed point in a hundred: blocks are dropped whole and counted, shares stay near the exact ones."""

    def status(x):
        return np.where((np.abs(1e4 * x[:, 0]) % 1.0) < 0.01, "failed", "done")

    found = found_of([normal(1.0)] * 3, lambda x: x @ [1.0, 2.0, 3.0], "[sensitivity]\nblocks = 4096", status=status)
    one = found.shared["conversion"]
    assert (4096, None) == (one.planned, one.undefined)
    assert 0.93 < one.used / one.planned < 0.99
    assert pytest.approx([1 / 14, 4 / 14, 9 / 14], abs=0.03) == shares(found)
    summary = found.summary()
    assert one.used == next(r["used"] for r in summary["responses"] if r["response"] == "conversion")


def test_nulls_are_failures_and_too_many_leave_no_answer():
    found = found_of([normal(1.0)] * 2, lambda x: np.where(x[:, 0] > 0.0, np.nan, x[:, 1]))
    (one,) = (r for r in found.summary()["responses"] if r["response"] == "conversion")
    assert [] == one["shares"] and "blocks are without a failed point or a null" in one["undefined"]
    assert any("were left out" in caution for caution in found.summary()["cautions"])


def test_a_constant_is_undefined():
    found = found_of([normal(1.0)] * 2, lambda x: np.full(len(x), 0.7) + 1e-9 * x[:, 0])
    for method in (found.shared, found.screened):
        assert "does not move" in method["conversion"].undefined
    assert not (found.tables()["sensitivity_shares"]["response"] == "conversion").any()


def test_correlated_inputs_stand_together():
    """x0 and x1 correlated by 0.8, x2 alone: the variance of x0 + x1 + x2 is 1 + 1 + 1.6 of the pair, 1 of the other."""
    pair = '[[correlations]]\nbetween = ["x0", "x1"]\nlinear = 0.8'
    found = found_of([normal(1.0)] * 3, lambda x: x.sum(axis=1), "[sensitivity]\nblocks = 4096", correlations=pair)
    assert ("x0 + x1", "x2") == found.space.labels
    assert pytest.approx([3.6 / 4.6, 1.0 / 4.6], abs=0.02) == shares(found, "first")
    assert pytest.approx([3.6 / 4.6, 1.0 / 4.6], abs=0.02) == shares(found)
    assert np.isnan(found.screened["conversion"].rows["mean"][0]) and found.screened["conversion"].rows["mean_size"][0] > 0.0
    assert any("varied together" in caution for caution in found.summary()["cautions"])


def test_one_group_decides_alone():
    pair = '[[correlations]]\nbetween = ["x0", "x1"]\nlinear = 0.8'
    found = found_of([normal(1.0)] * 2, lambda x: x.sum(axis=1), correlations=pair)
    assert {"all inputs are correlated: one group, which decides alone"} == {r["undefined"] for r in found.summary()["responses"]}
    assert ["x0", "x1"] == sorted(found.spread[1]["input"])


def test_one_input_alone():
    found = found_of([normal(1.0)], lambda x: 3.0 * x[:, 0], "[sensitivity]\nblocks = 1024")
    assert pytest.approx([1.0], abs=0.02) == shares(found)


def test_order_of_the_groups():
    """A group that is written between others keeps its place in every table."""
    pair = '[[correlations]]\nbetween = ["x0", "x11"]\nlinear = 0.5'
    weights = np.arange(1.0, 13.0)
    found = found_of([uniform(0.0, 1.0)] * 12, lambda x: x @ weights, correlations=pair)
    rows = found.screened["conversion"].rows.set_index("input")["mean_size"]
    assert pytest.approx(weights[1:11]) == [rows[f"x{k}"] for k in range(1, 11)]


def test_slopes_at_the_set_point():
    study = study_of([normal(2.0), uniform(-1.0, 3.0)], "[sensitivity]")
    table = assess_sensitivity(study, evaluating(study, lambda x: 1.0 + 3.0 * x[:, 0] - x[:, 1])).tables()["sensitivity_local"]
    rows = table[table["response"] == "conversion"].set_index("input")
    assert pytest.approx([3.0, -1.0]) == rows["slope"].to_list()
    assert pytest.approx([6.0, -4.0 * (ndtr(1.0) - 0.5)]) == rows["by_one_spread"].to_list()
    assert rows["elasticity"].isna().all()  # around zero there is no relative change


def test_which_constant_should_be_measured_better():
    """1.5 + x0 + x1 at least 0.5: Phi(1/sqrt(1.25)); with x0 halved Phi(1/sqrt(0.5)), with x1 halved Phi(1/sqrt(1.0625))."""
    found = found_of([normal(1.0), normal(0.5)], lambda x: 1.5 + x.sum(axis=1), "[sensitivity]\ndraws = 8192")
    base, table = found.spread
    exact = ndtr(1.0 / np.sqrt(1.25))
    assert base.low <= exact <= base.high
    assert ["x0", "x1"] == table["input"].to_list()
    for row, after in zip(table.itertuples(), (ndtr(1.0 / np.sqrt(0.5)), ndtr(1.0 / np.sqrt(1.0625))), strict=True):
        assert row.rise_low <= after - exact <= row.rise_high
        assert pytest.approx(after, abs=0.01) == row.probability


def test_same_seed_same_answer_and_zero_is_a_seed():
    for seed in (0, 7):
        one, two = (found_of([normal(1.0)] * 2, lambda x: x.sum(axis=1), seed=seed).summary() for _ in range(2))
        assert one == two


TEXT = SMALL + """
[uncertain]
k = { of = "reactions.main.rate_constant.value", distribution = "lognormal", relative_sd = 0.2 }
E = { of = "reactions.main.rate_constant.activation_energy", distribution = "normal", sd = "2 kJ/mol" }
[sensitivity]
trajectories = 4
blocks = 16
draws = 64
"""


def test_marched_the_same_for_any_number_of_workers():
    study = read_text(TEXT)
    one, two = (assess_sensitivity(study, lambda points, n=n: sweep.simulate(study, points, n)).summary() for n in (1, 2))
    assert one == two
    assert 4 * 3 + 16 * 4 + 9 + 64 * 3 == one["marches"]
    assert {"conversion", "max_temperature_K", "mtsr_K", "time_to_target_s", "productivity_kg_per_m3_s"} == {r["response"] for r in one["responses"]}


def test_over_the_variables():
    study = read_text(TEXT.replace("[sensitivity]", '[sensitivity]\nover = "variables"'))
    found = assess_sensitivity(study, lambda points: sweep.simulate(study, points, 1))
    assert ("dose", "start") == found.space.labels
    assert "no uncertainty" in found.summary()["halved_spread"]["not_assessed"]
    assert "sensitivity_spread" not in found.tables()
