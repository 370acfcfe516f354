"""Points on all cores."""

import numpy as np
import pandas as pd
import pytest

from sweep.base.errors import SweepError
from sweep.plan import planned
from sweep.runner import simulate
from sweep.runner.parallel import _pieces, in_order
from sweep.study import read_text
from tests.texts import SMALL


@pytest.fixture(scope="module")
def study():
    return read_text(SMALL)


def test_any_number_of_workers_gives_the_same_table(study):
    points = planned(study).rows(0, 300)
    one = simulate(study, points, workers=1)
    pd.testing.assert_frame_equal(one, simulate(study, points, workers=2), check_exact=True)
    pd.testing.assert_frame_equal(one, simulate(study, points, workers=3), check_exact=True)


def test_index_is_kept(study):
    points = planned(study).rows(0, 5).set_axis([7, 3, 9, 1, 0])
    assert [7, 3, 9, 1, 0] == list(simulate(study, points).index)


def test_frame_without_columns_is_the_set_point_once_per_row(study):
    table = simulate(study, pd.DataFrame(index=["a", "b"]))
    assert ["a", "b"] == list(table.index)
    assert table["conversion"].iloc[0] == table["conversion"].iloc[1] > 0.5


def test_frame_without_rows(study):
    assert 0 == len(simulate(study, planned(study).rows(0, 0)))


@pytest.mark.parametrize("workers", [0, -1])
def test_too_few_workers(study, workers):
    with pytest.raises(SweepError, match="expected 1 or more"):
        simulate(study, planned(study).rows(0, 2), workers)


def test_pieces_cover_every_row_once():
    for count in (0, 1, 127, 2048, 2049, 10_000):
        for workers in (1, 2, 5):
            rows = [k for a, b in _pieces(count, workers) for k in range(a, b)]
            assert list(range(count)) == rows


def test_stretches_come_in_order_and_whole(study):
    plan = planned(study)
    found = list(in_order(study, plan, [0, 200, 400], 200, workers=2))
    assert [0, 200, 400] == [start for start, _ in found]
    np.testing.assert_array_equal(np.arange(plan.size), np.concatenate([t.index for _, t in found]))
