"""The methods beside the kernel's have the order they claim: a wrong digit would make one lose that should not."""

import numpy as np
import pytest

from tests.benchmarks.tableaux import TABLEAUX


@pytest.mark.parametrize("name", list(TABLEAUX))
def test_order_conditions(name):
    """Hairer and Wanner, Solving ODEs II, IV.7, table 7.1, to order 4."""
    alpha, gamma, b = TABLEAUX[name].classical()
    a, beta = alpha.sum(axis=1), alpha + gamma
    s = beta.sum(axis=1)
    conditions = [
        (1, b.sum(), 1), (2, b @ s, 2), (3, b @ a**2, 3), (3, b @ beta @ s, 6),
        (4, b @ a**3, 4), (4, b @ (a * (alpha @ s)), 8), (4, b @ beta @ a**2, 12), (4, b @ beta @ beta @ s, 24),
    ]  # fmt: skip
    left = np.array([value - 1.0 / density for order, value, density in conditions if order <= TABLEAUX[name].order])
    assert np.zeros(left.size) == pytest.approx(left, abs=1e-12)
