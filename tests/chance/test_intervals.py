"""Binomial intervals and order statistics: published values, and coverage."""

import numpy as np
import pytest
from scipy import stats

from sweep.chance import change, clopper_pearson, enough_draws, share, upper_rank, wilson


@pytest.mark.parametrize(
    ("count", "draws", "low", "high"),
    [
        (81, 263, 0.2552885199, 0.3662095770),
        (15, 148, 0.0623863995, 0.1604872417),
        (0, 20, 0.0, 0.1611251581),
        (1, 29, 0.0061132143, 0.1717552188),
    ],
)
def test_wilson_as_published(count, draws, low, high):
    """Newcombe, Stat. Med. 17 (1998) 857, table I, method 3: 0.2553-0.3662, 0.0624-0.1605, 0-0.1611, 0.0061-0.1718; more digits computed."""
    assert pytest.approx((low, high), abs=1e-9) == wilson(count, draws)


@pytest.mark.parametrize(
    ("count", "draws", "low", "high"),
    [
        (81, 263, 0.2527367456, 0.3676219226),
        (15, 148, 0.0578440101, 0.1616504903),
        (0, 20, 0.0, 0.1684334710),
        (1, 29, 0.0008726469, 0.1776442955),
        (5, 1000, 0.0016254195, 0.0116294706),
        (0, 100, 0.0, 0.0362166926),
    ],
)
def test_clopper_pearson(count, draws, low, high):
    """The same cases; beta quantiles."""
    assert pytest.approx((low, high), abs=1e-9) == clopper_pearson(count, draws)


def test_one_sided_bound_of_none_in_59():
    assert pytest.approx(0.0495076099, abs=1e-9) == clopper_pearson(0, 59, 0.90)[1]


def test_symmetry_and_width():
    for interval in (wilson, clopper_pearson):
        low, high = interval(7, 50)
        assert pytest.approx((1.0 - high, 1.0 - low)) == interval(43, 50)
        assert interval(0, 4096)[1] > 0.0 and interval(4096, 4096)[0] < 1.0
        assert interval(7, 50, 0.99)[0] < low < high < interval(7, 50, 0.99)[1]


def test_a_share_of_none_is_never_zero():
    found = share(np.ones(4096, dtype=bool), 0.95, "clopper-pearson")
    assert (4096, 1.0, 1.0) == (found.count, found.value, found.high)
    assert pytest.approx(1.0 - 0.025 ** (1.0 / 4096), abs=1e-12) == 1.0 - found.low


@pytest.mark.parametrize("p", [0.02, 0.1, 0.5, 0.93])
def test_coverage_is_exact_sum(p):
    """Over all counts, weighted by their probability: Clopper-Pearson at least 95 %, Wilson near it."""
    draws = 200
    weights = stats.binom.pmf(np.arange(draws + 1), draws, p)

    def coverage(interval):
        inside = [low <= p <= high for low, high in (interval(k, draws) for k in range(draws + 1))]
        return float(weights @ np.array(inside, dtype=float))

    assert coverage(clopper_pearson) >= 0.95
    assert abs(coverage(wilson) - 0.95) < 0.03


@pytest.mark.parametrize("flips", [(0.05, 0.01), (0.004, 0.004)])
def test_coverage_of_a_change(flips):
    up, down = flips
    generator, draws, hits = np.random.default_rng(5), 1000, 0
    for _ in range(400):
        u = generator.random(draws)
        before = u >= up
        after = (u < up) | (u < 1.0 - down)
        rise, low, high = change(before, after)
        assert low <= rise <= high
        hits += low <= up - down <= high
    assert 0.93 <= hits / 400 <= 0.99


def test_no_change_leaves_a_width():
    rise, low, high = change(np.ones(100, dtype=bool), np.ones(100, dtype=bool))
    assert 0.0 == rise and low < 0.0 < high


def test_wilks_sizes():
    """Orders 1 to 6 at 95/95, two-sided, and 99/95 (Wilks, Ann. Math. Stat. 12 (1941) 91; the sizes from memory, recomputed)."""
    assert [59, 93, 124, 153, 181, 208] == [enough_draws(0.95, 0.95, order) for order in range(1, 7)]
    assert (93, 299) == (enough_draws(0.95, 0.95, 1, 2), enough_draws(0.99, 0.95))
    assert pytest.approx(0.048494525249, abs=1e-12) == 0.95**59


def test_rank_is_that_of_wilks():
    assert (None, 59, 92, 92) == tuple(upper_rank(n, 0.95, 0.95) for n in (58, 59, 92 + 1, 93))
    assert [124 - 2, 153 - 3, 181 - 4, 208 - 5] == [upper_rank(n, 0.95, 0.95) for n in (124, 153, 181, 208)]


def test_coverage_of_the_bound():
    """The order statistic lies above the true quantile at least 95 times in 100."""
    generator, rank = np.random.default_rng(8), upper_rank(500, 0.95, 0.95)
    above = [np.sort(generator.exponential(size=500))[rank - 1] >= -np.log(0.05) for _ in range(1000)]
    assert 0.94 <= np.mean(above) <= 0.98
