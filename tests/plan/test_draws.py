"""Draws: their distributions, correlations, strata, and that a name and a seed say all."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy import stats

from sweep.base.errors import SweepError
from sweep.base.seeds import stream
from sweep.plan import Draws, dimensions_of, draw, groups_of, inputs_of, set_point
from sweep.plan.draws import cube
from sweep.study import read_text

TEXT = (Path(__file__).parents[1] / "study" / "fedbatch.toml").read_text()
K, E, U = "reactions.acylation.rate_constant.value", "reactions.acylation.rate_constant.activation_energy", "vessel.U"
ENTRIES = f"""
[uncertain]
k = {{ of = "{K}", distribution = "lognormal", log_sd = 0.3 }}
E = {{ of = "{E}", distribution = "normal", sd = "2 kJ/mol" }}
U = {{ of = "{U}", distribution = "triangular", low = "240 W/m2/K", mode = "310 W/m2/K", high = "340 W/m2/K" }}
inlet = {{ of = "cooling.inlet", distribution = "truncated-normal", sd = "2 K", low = "2 degC", high = "12 degC" }}
flow = {{ of = "cooling.flow", distribution = "uniform", relative_low = 0.8, relative_high = 1.0 }}
"""
HELD = TEXT.replace("levels = 15 }\ndosing", 'levels = 15, tolerance = { sd = "0.5 K" } }\ndosing').replace(
    '"6 h", levels = 15', '"6 h", levels = 15, tolerance = { relative_plus_minus = 0.05 }'
)
STUDY = read_text(HELD + ENTRIES)


def correlated(kind, value):
    return read_text(HELD + ENTRIES + f'[[correlations]]\nbetween = ["k", "E"]\n{kind} = {value}\n')


def exact(name):
    """Return the distribution of a column, from SciPy."""
    k, e = STUDY.values[K], STUDY.values[E]
    inlet = STUDY.values["cooling.inlet"]
    flow = STUDY.values["cooling.flow"]
    return {
        "k": stats.lognorm(0.3, scale=k), "E": stats.norm(e, 2000.0), "U": stats.triang(0.7, 240.0, 100.0),
        "inlet": stats.truncnorm((275.15 - inlet) / 2.0, (285.15 - inlet) / 2.0, inlet, 2.0), "flow": stats.uniform(0.8 * flow, 0.2 * flow),
        "variables.charge_temperature.error": stats.norm(0.0, 0.5), "variables.dosing_time.error": stats.uniform(-540.0, 1080.0),
    }[name]  # fmt: skip


def test_columns():
    errors = ("variables.charge_temperature.error", "variables.dosing_time.error")
    assert ("k", "E", "U", "inlet", "flow", *errors) == inputs_of(STUDY)
    assert [*set_point(STUDY), *inputs_of(STUDY)] == list(draw(STUDY, 16, "random").at(set_point(STUDY)).columns)


@pytest.mark.parametrize("name", inputs_of(STUDY))
def test_distribution(name):
    """Every quantile, against SciPy's own distributions; 2,048 points of a Latin hypercube lie within a stratum of them."""
    found = np.sort(draw(STUDY, 2048, "latin-hypercube", "test").at(set_point(STUDY))[name])
    levels = exact(name).cdf(found)
    assert np.abs(levels - (np.arange(2048) + 0.5) / 2048).max() <= 0.5 / 2048 + 1e-9


def test_lognormal_as_tabulated():
    """Mean over median 1.0460278599087 and 95 % factor 1.800364591747 for sigma = 0.3 (closed forms exp(s^2/2), exp(1.96 s))."""
    level = (np.arange(200_000) + 0.5) / 200_000
    from sweep.plan.draws import quantile

    found = quantile(STUDY.uncertain[0], level) / STUDY.values[K]
    assert pytest.approx(1.0460278599087, rel=1e-5) == found.mean()
    assert pytest.approx(1.800364591747, rel=1e-10) == quantile(STUDY.uncertain[0], np.array([0.975]))[0] / STUDY.values[K]


def test_relative_sd_of_a_lognormal_is_that_of_its_mean():
    study = read_text(TEXT + f'[uncertain]\nk = {{ of = "{K}", distribution = "lognormal", relative_sd = 0.4 }}')
    found = draw(study, 1 << 14, "sobol").at()["k"]
    assert pytest.approx(0.4, rel=0.01) == found.std() / found.mean()
    assert pytest.approx(study.values[K], rel=1e-3) == found.median()


def test_strata_of_a_latin_hypercube():
    """floor(n u) is a permutation of 0..n-1 in every column."""
    found = np.floor(300 * cube("latin-hypercube", 300, 6, stream(1, "x"))).astype(int)
    for column in found.T:
        assert list(range(300)) == sorted(column)


def test_a_scrambled_sequence_is_a_net():
    """Every elementary interval of 1/64 of the square's first two coordinates holds one of 64 points (Sobol' t = 0 in two dimensions)."""
    found = cube("sobol", 64, 2, stream(7, "x"))
    for power in range(7):
        a, b = 1 << power, 64 >> power
        boxes = np.floor(found * [a, b]).astype(int)
        assert 64 == len({tuple(box) for box in boxes})


def test_the_sequence_under_the_scrambling():
    """First eight points with the direction numbers of Joe and Kuo (SIAM J. Sci. Comput. 30 (2008) 2635, from memory)."""
    from scipy.stats import qmc

    expected = [(0, 0, 0), (4, 4, 4), (6, 2, 2), (2, 6, 6), (3, 3, 5), (7, 7, 1), (5, 1, 7), (1, 5, 3)]
    assert (np.array(expected) / 8.0).tolist() == qmc.Sobol(3, scramble=False).random(8).tolist()


def test_strata_fill_better_than_chance():
    from scipy.stats import qmc

    found = {kind: qmc.discrepancy(cube(kind, 256, 4, stream(3, kind)), method="L2-star") for kind in ("random", "latin-hypercube", "sobol")}
    assert found["sobol"] < found["latin-hypercube"] < found["random"]


def test_discrepancy_as_published():
    """Centred L2 discrepancy of two designs: 0.0081 and 0.0105 in Fang, Li and Sudjianto, Design and Modeling for Computer Experiments
    (2006), sec. 3.2 (from memory); all digits from SciPy's documentation of `qmc.discrepancy`."""
    from scipy.stats import qmc

    one = np.array([[1, 3], [2, 6], [3, 2], [4, 5], [5, 1], [6, 4]])
    two = np.array([[1, 5], [2, 4], [3, 3], [4, 2], [5, 1], [6, 6]])
    assert pytest.approx(0.008142039609053464, abs=1e-12) == qmc.discrepancy((one - 0.5) / 6.0)
    assert pytest.approx(0.010456854423869011, abs=1e-12) == qmc.discrepancy((two - 0.5) / 6.0)


@pytest.mark.parametrize("rank", [-0.95, 0.6, 1.0])
def test_correlation_of_rank(rank):
    study = correlated("rank", rank)
    found = draw(study, 1 << 13, "sobol").at()
    assert pytest.approx(rank, abs=2e-3) == stats.spearmanr(found["k"], found["E"])[0]
    assert ((0, 1), (2,), (3,), (4,), (5,), (6,)) == groups_of(study)


def test_a_correlated_input_keeps_its_distribution():
    study = correlated("linear", 0.8)
    found = draw(study, 1 << 13, "sobol").at()
    for name in ("k", "E"):
        assert stats.kstest(found[name], exact(name).cdf).statistic < 5e-3


def test_correlation_of_zero_is_none():
    assert pytest.approx(draw(STUDY, 64, "random", 1).unit, abs=0.0) == draw(correlated("rank", 0.0), 64, "random", 1).probabilities


def test_correlated_arrhenius_constants():
    """sd ln A = 0.7, sd E = 2000 J/mol, correlation 0.999, 350 K: sd ln k = 0.033529337280747, sqrt(a^2 + b^2 - 2 r a b) with b = sd E/(R T)."""
    entries = f'[uncertain]\nA = {{ of = "{K}", distribution = "lognormal", log_sd = 0.7 }}\n'
    entries += f'E = {{ of = "{E}", distribution = "normal", sd = "2000 J/mol" }}\n[[correlations]]\nbetween = ["A", "E"]\nlinear = 0.999'
    study = read_text(TEXT + entries)
    from sweep.plan.draws import _root

    slope = np.array([0.7, -2000.0 / (8.31446261815324 * 350.0)])
    assert pytest.approx(0.033529337280747, rel=1e-10) == np.linalg.norm(slope @ _root(study, ["A", "E"]))
    found = draw(study, 1 << 15, "sobol").at()
    ln_k = np.log(found["A"]) - found["E"] / (8.31446261815324 * 350.0)
    assert pytest.approx(0.033529337280747, rel=0.01) == ln_k.std()


def test_perfect_correlation_moves_together():
    found = draw(correlated("linear", -1.0), 500, "random").at()
    score = (np.log(found["k"] / STUDY.values[K]) / 0.3, (found["E"] - STUDY.values[E]) / 2000.0)
    assert pytest.approx(-score[0].to_numpy(), abs=1e-5) == score[1].to_numpy()


def test_same_seed_same_draws():
    one, two = (draw(STUDY, 128, "latin-hypercube", "risk").at(set_point(STUDY)) for _ in range(2))
    assert one.to_numpy().tobytes() == two.to_numpy().tobytes()
    assert not np.array_equal(one["k"], draw(STUDY, 128, "latin-hypercube", "map").at(set_point(STUDY))["k"])
    other = read_text(HELD.replace("seed  = 310", "seed  = 311", 1) + ENTRIES)
    assert 310 == STUDY.seed and other.seed == 311
    assert not np.array_equal(one["k"], draw(other, 128, "latin-hypercube", "risk").at(set_point(STUDY))["k"])


def test_paired_is_at_row_by_row():
    draws = draw(STUDY, 64, "random")
    points = pd.DataFrame({"dosing_time": [7200.0, 14400.0, 7200.0]})
    found = draws.paired(points, np.array([5, 5, 63]))
    whole = draws.at({"dosing_time": 7200.0})
    pd.testing.assert_series_equal(whole.iloc[5], found.iloc[0], check_names=False)
    pd.testing.assert_series_equal(whole.iloc[63], found.iloc[2], check_names=False)
    assert pytest.approx(2.0) == found["variables.dosing_time.error"][1] / found["variables.dosing_time.error"][0]  # a share of what was chosen
    assert found["k"][1] == found["k"][0]


@pytest.mark.parametrize("name", inputs_of(STUDY))
def test_half_the_spread(name):
    draws = draw(STUDY, 1001, "latin-hypercube")
    whole, half = draws.at(set_point(STUDY)), draws.at(set_point(STUDY), {name: 0.5})
    scale = np.log if name == "k" else np.asarray
    a, b = scale(whole[name].to_numpy()), scale(half[name].to_numpy())
    assert pytest.approx(0.5 * a.std(), rel=1e-9) == b.std()
    assert pytest.approx(np.median(a), rel=1e-3, abs=1e-3 * a.std()) == np.median(b)
    pd.testing.assert_frame_equal(whole.drop(columns=name), half.drop(columns=name))


def test_spread_of_what_is_not_drawn():
    with pytest.raises(SweepError, match="amine is not drawn in this study; drawn are k, E"):
        draw(STUDY, 4, "random").at(spread={"amine": 0.5})


def test_a_sequence_in_powers_of_two():
    with pytest.raises(SweepError, match="powers of two, not 100"):
        draw(STUDY, 100, "sobol")


def test_a_table_is_drawn_row_by_row(tmp_path):
    (tmp_path / "fit.csv").write_text(f"{K} [L/mol/s],{E} [kJ/mol]\n" + "".join(f"{1e-3 * (i + 1)},{50 + i}\n" for i in range(8)))
    entries = "[uncertain]\n" + "".join(f'{n} = {{ of = "{p}", distribution = "table", file = "fit.csv" }}\n' for n, p in (("k", K), ("E", E)))
    study = read_text(TEXT + entries + f'U = {{ of = "{U}", distribution = "normal", relative_sd = 0.1 }}', folder=tmp_path)
    assert (("k", "E"), ("U",)) == dimensions_of(study)
    found = draw(study, 800, "latin-hypercube").at()
    assert pytest.approx(found["k"].to_numpy()) == (found["E"].to_numpy() / 1000.0 - 49.0) * 1e-6
    assert [100] * 8 == found["E"].value_counts().tolist()
    edge = Draws(study, np.array([[1.0, 0.5]])).at()
    assert 57_000.0 == edge["E"][0]


def test_nothing_uncertain():
    study = read_text(TEXT)
    assert () == inputs_of(study)
    assert (5, 3) == draw(study, 5, "latin-hypercube").at(set_point(study)).shape
