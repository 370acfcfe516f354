"""Rare failures against closed forms, and what drives failures."""

import numpy as np
import pandas as pd
import pytest
from scipy.special import ndtr

from sweep.chance import drivers, rare_failure


def linear(beta):
    """Fails with probability Phi(-beta), whatever the number of inputs."""
    return lambda score: beta - score.sum(axis=1) / np.sqrt(score.shape[1])


@pytest.mark.parametrize(("beta", "dimensions"), [(3.2, 1), (3.5, 3), (4.0, 6), (4.75, 20)])
def test_linear_limit(beta, dimensions):
    found = rare_failure(linear(beta), dimensions, 1000, 0.95, np.random.default_rng(1))
    exact = ndtr(-beta)
    assert found.low <= exact <= found.high
    assert 0.3 < found.probability / exact < 3.0
    assert found.draws <= 1000 + 900 * (found.levels - 1)


def test_coverage_by_repetition():
    """The interval holds the truth at least 95 times in 100, and the mean of the estimates is the truth."""
    exact, trials = ndtr(-3.7), [rare_failure(linear(3.7), 4, 500, 0.95, np.random.default_rng(k)) for k in range(200)]
    assert np.mean([one.low <= exact <= one.high for one in trials]) >= 0.95
    assert pytest.approx(exact, rel=0.1) == np.mean([one.probability for one in trials])


def test_failures_on_two_sides():
    exact, trials = 2.0 * ndtr(-3.8), [rare_failure(lambda z: 3.8 - np.abs(z[:, 0]), 3, 1000, 0.95, np.random.default_rng(k)) for k in range(40)]
    assert sum(one.low <= exact <= one.high for one in trials) >= 36


def test_null_is_a_failure():
    def margin(score):
        return np.where(score[:, 0] > 3.3, np.nan, 10.0 - score[:, 0])

    found = rare_failure(margin, 2, 2000, 0.95, np.random.default_rng(3))
    assert found.low <= ndtr(-3.3) <= found.high


def test_what_is_not_rare_takes_one_level():
    found = rare_failure(linear(0.5), 2, 1000, 0.95, np.random.default_rng(1))
    assert (1, 1000) == (found.levels, found.draws)
    assert found.low <= ndtr(-0.5) <= found.high


def test_margins_that_are_all_one():
    """A bound, such as a horizon, that every draw shares: no step nearer to failing can be told from another."""
    found = rare_failure(lambda z: np.full(len(z), 3.0), 2, 500, 0.95, np.random.default_rng(1))
    assert (None, 0.0, 1.0) == (found.probability, found.low, found.high)
    assert "share one margin" in found.reason


def test_what_never_fails():
    found = rare_failure(lambda z: 30.0 - z[:, 0], 2, 200, 0.95, np.random.default_rng(1))
    assert found.probability is None and found.low == 0.0 and 0.0 < found.high < 1e-5
    assert "no failure down to" in found.reason


def test_same_stream_same_answer():
    one, two = (rare_failure(linear(3.5), 3, 300, 0.95, np.random.default_rng(9)) for _ in range(2))
    assert one == two


def test_an_input_that_decides_alone():
    generator = np.random.default_rng(2)
    table = pd.DataFrame({"a": generator.random(4000), "b": generator.random(4000)})
    found = drivers(table, (table["b"] < 0.5).to_numpy())
    assert ["b", "a"] == [one.input for one in found]
    assert pytest.approx(1.0) == found[0].distance
    assert pytest.approx(np.sqrt(2.0 / np.pi), rel=0.05) == found[0].shift  # mean of a half normal
    assert found[1].distance < found[1].noise and abs(found[1].shift) < 0.05


def test_failures_at_both_ends_have_no_shift_but_a_distance():
    a = np.linspace(0.0, 1.0, 2001)
    (found,) = drivers(pd.DataFrame({"a": a}), np.abs(a - 0.5) < 0.4)
    assert pytest.approx(0.5, abs=0.01) == found.distance and abs(found.shift) < 1e-6


def test_equal_values_are_one_step():
    """A table's rows come many times: their order among themselves says nothing."""
    table = pd.DataFrame({"a": np.repeat([1.0, 2.0], 500), "b": np.zeros(1000)})
    found = {one.input: one.distance for one in drivers(table, np.tile([True, False], 500))}
    assert pytest.approx({"a": 0.0, "b": 0.0}) == found


def test_too_few_on_one_side():
    table = pd.DataFrame({"a": np.arange(100.0)})
    assert () == drivers(table, np.arange(100) > 8)
    assert 1 == len(drivers(table, np.arange(100) > 9))
