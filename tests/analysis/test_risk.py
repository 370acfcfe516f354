"""Risk at the set-point: probabilities with known answers, their intervals, and every way in which a draw can have no answer."""

from dataclasses import replace

import numpy as np
import pandas as pd
import pytest
from scipy.special import ndtr

import sweep
from sweep.analysis.risk import assess_risk
from sweep.study import read_text
from tests.analysis.made_up import evaluating, normal, study_of, uniform
from tests.texts import SMALL

TWO = [normal(1.0), normal(0.5)]


def total(inputs):
    return inputs.sum(axis=1)


def risk_of(function=total, extra="[risk]\ndraws = 2048", entries=TWO, seed=7, **made):
    study = study_of(entries, extra, seed=seed)
    return assess_risk(study, evaluating(study, function, **made)).summary()


def test_probability_of_a_sum():
    """x0 + x1 at least 0.5 with standard deviations 1 and 0.5: Phi(-0.5/sqrt(1.25))."""
    (line,) = risk_of()["limits"]
    assert ("conversion", "at_least", 0.5) == (line["name"], line["sense"], line["bound"])
    assert line["low"] <= ndtr(-0.5 / np.sqrt(1.25)) <= line["high"]
    assert pytest.approx(line["holding"] / 2048) == line["probability"]


def test_all_hold_together():
    extra = '[limits]\naccumulation = { at_most = 1 }\n[risk]\ndraws = 4096\nsampling = "sobol"'
    found = risk_of(extra=extra, accumulation=lambda x: -x[:, 0])
    exact = 0.27434, 0.84134  # of the sum above 0.5 (to five digits, tables of the normal), of x0 above -1; together: by the bivariate normal
    from scipy.stats import multivariate_normal as joint

    both = joint.cdf([-0.5, 1.0], cov=[[1.25, 1.0], [1.0, 1.0]], mean=[0.0, 0.0])
    assert found["all_hold"]["low"] <= both <= found["all_hold"]["high"]
    assert [True, True] == [line["low"] <= p <= line["high"] for line, p in zip(found["limits"], (ndtr(-0.5 / np.sqrt(1.25)), exact[1]), strict=True)]
    assert any("Sobol" in caution for caution in found["cautions"])


@pytest.mark.parametrize(("sampling", "interval"), [("random", "wilson"), ("random", "clopper-pearson"), ("latin-hypercube", "wilson")])
def test_coverage_by_repetition(sampling, interval):
    """95 % intervals hold the truth in about 95 of 100 seeds with independent draws, and in more with strata."""
    exact, hits = ndtr(-0.5 / np.sqrt(1.25)), 0
    study = study_of(TWO, f'[risk]\ndraws = 256\nsampling = "{sampling}"\ninterval = "{interval}"\nrare = "none"')
    for seed in range(120):
        one = replace(study, seed=seed)
        (line,) = assess_risk(one, evaluating(one, total)).summary()["limits"]
        hits += line["low"] <= exact <= line["high"]
    assert (0.9 if sampling == "random" else 0.97) <= hits / 120 <= 1.0


def test_failed_draws_do_not_hold():
    def status(x):
        return np.where(x[:, 0] > 1.0, "failed", np.where(x[:, 0] < -2.0, "runaway", "done"))

    found = risk_of(lambda x: np.ones(len(x)), status=status)
    (line,) = found["limits"]
    assert pytest.approx(ndtr(1.0) - ndtr(-2.0), abs=1e-3) == line["probability"]
    assert pytest.approx((2048 * ndtr(-1.0), 2048 * ndtr(-2.0)), abs=1.01) == (found["failed"], found["runaway"])
    assert 2048 == found["done"] + found["failed"] + found["runaway"]
    assert any("count as not holding" in caution for caution in found["cautions"])


def test_null_does_not_hold():
    (line,) = risk_of(lambda x: np.where(x[:, 0] > 0.0, np.nan, 1.0))["limits"]
    assert pytest.approx(0.5, abs=1e-3) == line["probability"]


def test_none_of_the_draws_is_not_never():
    (line,) = risk_of(lambda x: np.ones(len(x)), extra='[risk]\ndraws = 2048\nrare = "none"')["limits"]
    assert (2048, 1.0) == (line["holding"], line["probability"])
    assert 0.0 < 1.0 - line["low"] < 2e-3


@pytest.mark.parametrize("rare", ["together", "each"])
def test_rare_failures_with_a_known_answer(rare):
    found = risk_of(lambda x: 0.5 + 4.0 * np.sqrt(1.25) - total(x), extra=f'[risk]\ndraws = 1024\nrare = "{rare}"')
    (line,) = found["rare"]
    assert ("all limits" if rare == "together" else "conversion") == line["label"]
    assert line["low"] <= ndtr(-4.0) <= line["high"]
    assert 0.2 < line["probability"] / ndtr(-4.0) < 5.0 and line["high"] < 1.0 - found["limits"][0]["low"]


def test_a_limit_that_only_holds_or_not_does_not_hide_another():
    """The conversion stands at its target in every draw, as where a batch is ended there; accumulation fails with probability Phi(-4)."""
    extra = "[limits]\naccumulation = { at_most = 4 }\n[risk]\ndraws = 1024"
    (line,) = risk_of(lambda x: np.full(len(x), 0.5), extra=extra, accumulation=lambda x: x[:, 0])["rare"]
    assert line["low"] <= ndtr(-4.0) <= line["high"] < 1e-3


def test_where_nothing_moves_the_draws_own_bound_stands():
    found = risk_of(lambda x: np.full(len(x), 0.5))
    (line,) = found["rare"]
    assert (None, 0.0) == (line["probability"], line["low"])
    assert pytest.approx(1.0 - found["limits"][0]["low"]) == line["high"]


def test_what_is_seen_is_not_sought():
    assert [] == risk_of()["rare"]


def test_time_to_the_target():
    """x0 uniform from 0 to 1, time 1000 (1 + x0): 95 % need at most 1950 s, and the bound is the rank of Wilks."""
    found = risk_of(entries=[uniform(0.0, 1.0)], time_to_target_s=lambda x: 1000.0 * (1.0 + x[:, 0]))["batch_time"]
    assert pytest.approx(1950.0, abs=1.0) == found["time_s"]
    assert (1963, 0) == (found["rank"], found["never"])  # 1945.6 + 1.645 sqrt(2048 x 0.95 x 0.05) = 1961.8 draws may lie below the quantile
    assert pytest.approx(1000.0 * (1.0 + 1962.5 / 2048), abs=0.5) == found["bound_s"] > found["time_s"]


def test_a_target_that_is_not_always_reached():
    found = risk_of(entries=[uniform(0.0, 1.0)], time_to_target_s=lambda x: np.where(x[:, 0] > 0.9, np.nan, 100.0))["batch_time"]
    assert (None, None) == (found["time_s"], found["bound_s"])
    assert "205 of 2048 draws never reach" in found["reason"]


def test_too_few_draws_for_a_bound():
    found = risk_of(extra="[risk]\ndraws = 40", time_to_target_s=lambda x: np.full(len(x), 7.0))["batch_time"]
    assert (7.0, None, "too few draws for a bound") == (found["time_s"], found["bound_s"], found["reason"])


def test_percentiles_and_exceedance():
    study = study_of([uniform(0.0, 1.0)], "[risk]\ndraws = 2000")
    tables = assess_risk(study, evaluating(study, lambda x: np.where(x[:, 0] < 0.1, np.nan, x[:, 0]))).tables()
    row = tables["risk_percentiles"].set_index("response").loc["conversion"]
    assert (1800, 200) == (row["with_value"], row["without"])
    assert pytest.approx([0.109, 0.55, 0.991], abs=2e-3) == [row["p01"], row["p50"], row["p99"]]
    curve = tables["risk_exceedance"]
    assert pytest.approx(curve["value"].to_numpy(), abs=1e-3) == curve["beyond"].to_numpy()  # P(x0 < v), the nulls beyond all
    assert ((curve["low"] <= curve["beyond"]) & (curve["beyond"] <= curve["high"])).all()


def test_what_drives_a_failure():
    found = risk_of()["limits"][0]["drivers"]
    assert ["x0", "x1"] == [one["input"] for one in found]
    assert found[0]["shift"] < found[1]["shift"] < 0.0  # fails where they are low
    assert [] == risk_of(lambda x: np.ones(len(x)))["limits"][0]["drivers"]


def test_same_seed_same_answer():
    assert risk_of() == risk_of()
    assert risk_of()["limits"][0]["holding"] != risk_of(extra='[risk]\ndraws = 2048\nsampling = "random"', seed=8)["limits"][0]["holding"]


UNCERTAIN = """
[uncertain]
k = { of = "reactions.main.rate_constant.value", distribution = "lognormal", relative_sd = 0.2 }
E = { of = "reactions.bad.rate_constant.activation_energy", distribution = "normal", sd = "3 kJ/mol" }
[risk]
draws = 512
"""


def test_marched_draws_are_the_same_for_any_number_of_workers():
    study = read_text(SMALL + UNCERTAIN)
    one, two = (assess_risk(study, lambda points, n=n: sweep.simulate(study, points, n)) for n in (1, 2))
    assert one.summary() == two.summary()
    for name, table in one.tables().items():
        pd.testing.assert_frame_equal(table, two.tables()[name], check_exact=True)


def test_a_study_without_limits_has_percentiles():
    text = SMALL.replace('max_temperature = { at_most = "62 degC" }\nmtsr = { at_most = "85 degC" }', "")
    text = text.replace('[target]\nspecies = "A"\nconversion = 0.9\nproduct = "R"', "") + UNCERTAIN.replace("512", "64")
    study = read_text(text)
    found = assess_risk(study, lambda points: sweep.simulate(study, points, 1))
    assert ([], None, None, []) == tuple(found.summary()[key] for key in ("limits", "all_hold", "batch_time", "rare"))
    assert "mtsr_K" in set(found.tables()["risk_percentiles"]["response"])
    assert 0 == len(found.tables()["risk_exceedance"])


@pytest.mark.parametrize(("sd", "rare"), [(40.0, False), (20.0, True)])
def test_marched_probability_against_the_root(sd, rare):
    """One uncertain input, in which the highest temperature falls: the probability is that of lying above the root, found apart from any draw."""
    from scipy.optimize import brentq

    text = SMALL.replace('mtsr = { at_most = "85 degC" }', "").replace("[failure]\nmtt = \"100 degC\"", "").replace('"62 degC"', '"51 degC"')
    text = text.replace("conversion = 0.9", "conversion = 0.5").replace('"300 W/m2/K"', '"600 W/m2/K"')
    text += f'[uncertain]\nU = {{ of = "vessel.U", distribution = "normal", sd = "{sd} W/m2/K" }}\n[risk]\ndraws = 1024\nrare_draws = 500\n'
    study = read_text(text)

    def spare(u):
        return float(sweep.simulate(study, pd.DataFrame({"vessel.U": [u]}), 1)["max_temperature_K"].iloc[0]) - 324.15

    failing = ndtr((brentq(spare, 300.0, 1500.0, xtol=1e-6) - 600.0) / sd)
    found = assess_risk(study, lambda points: sweep.simulate(study, points, 1)).summary()
    line = next(one for one in found["limits"] if one["name"] == "max_temperature")
    assert line["low"] <= 1.0 - failing <= line["high"]
    assert rare == (failing < 1e-3) == bool(found["rare"])
    if rare:
        assert found["rare"][0]["low"] <= failing <= found["rare"][0]["high"] < 20.0 * failing
    else:
        assert pytest.approx(1.0 - failing, abs=2.0 / 1024) == line["probability"]  # strata: at most a draw away
