"""Tables of points: what is refused whole, and what fails its own row only."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.base.errors import SweepError
from sweep.plant import evaluate, profile
from sweep.study import read_study, read_text
from tests.texts import isothermal

STUDY = read_study(Path(__file__).parents[2] / "studies" / "acylation.toml")


@pytest.mark.parametrize(
    ("points", "reason"),
    [
        ({"dosing_tme": [3600.0]}, "dosing_tme is neither a variable, an uncertain input nor a quantity of this study; did you mean dosing_time"),
        ({"recipe.feeds.anhydrid.duration": [3600.0]}, "did you mean recipe.feeds.anhydride.duration"),
        ({"dosing_time": [3600.0, np.nan]}, "points: dosing_time is nan in row 1"),
        ({"dosing_time": [np.inf, 3600.0]}, "points: dosing_time is inf in row 0"),
        ({"dosing_time": [-np.inf]}, "points: dosing_time is -inf in row 0"),
        ({"dosing_time": ["1 h"]}, "points: dosing_time is not a column of numbers"),
        ({"dosing_time": [None]}, "points: dosing_time is nan in row 0"),
        ({"dosing_time": [1.0], "recipe.feeds.anhydride.duration": [1.0]}, "dosing_time and recipe.feeds.anhydride.duration both set"),
        ({"charge_temperature": [320.0], "cooling.start": [320.0]}, "points: columns charge_temperature and cooling.start both set cooling.start"),
        ({"target.conversion": [0.9]}, "points: target.conversion cannot differ from point to point"),
        ({"accuracy.relative": [1e-9]}, "points: accuracy.relative cannot differ from point to point"),
        ({"limits.max_temperature.at_most": [350.0]}, "points: limits.max_temperature.at_most cannot differ from point to point"),
        ({"species.amide.molar_mass": [0.15]}, "points: species.amide.molar_mass cannot differ from point to point"),
    ],
)
def test_refused_whole(points, reason):
    with pytest.raises(SweepError) as caught:
        evaluate(STUDY, pd.DataFrame(points))
    assert reason in str(caught.value)


def test_a_column_named_twice():
    points = pd.DataFrame([[3600.0, 7200.0]], columns=["dosing_time", "dosing_time"])
    with pytest.raises(SweepError, match="columns dosing_time and dosing_time both set"):
        evaluate(STUDY, points)


BAD = [
    ("dosing_time", -3600.0, "recipe.feeds.anhydride.duration is -3600, and should be between 0.001 and 1e+12"),
    ("dosing_time", 0.0, "recipe.feeds.anhydride.duration is 0, and should be between 0.001 and 1e+12"),
    ("amine", -1.0, "recipe.charge.concentration.amine is -1, and should be at least 0"),
    ("amine", 0.0, "target.species: no amine is brought in"),
    ("amine", 12_000.0, "recipe.charge.balance: nothing is left for the balance"),
    ("charge_temperature", 0.0, "recipe.charge.temperature is 0, and should be between 0 and 1500: beyond that the model does not hold"),
    ("charge_temperature", 1600.0, "recipe.charge.temperature is 1600, and should be between 0 and 1500"),
    ("recipe.charge.volume", 3.9, "vessel.volume: the fill is above the vessel's volume"),
    ("events.0.set.cooling.set_point", -5.0, "events.0.set.cooling.set_point is -5, and should be between 0 and 1500"),
    ("events.0.time", -5.0, "events.0.time is -5, and should be between 0 and 1e+12"),
    ("reactions.acylation.rate_constant.value", -1e-6, "reactions.acylation.rate_constant.value is -1e-06, and should be at least 0"),
    ("species.amine.heat_capacity", 0.0, "species.amine.heat_capacity is 0, and should be above 0"),
    ("vessel.U", -1.0, "vessel.U is -1, and should be at least 0"),
]


@pytest.mark.parametrize(("column", "value", "reason"), BAD)
def test_a_point_without_sense_is_a_failed_row_and_its_neighbours_are_not(column, value, reason):
    written = STUDY.values[STUDY.paths_of(column)[0]]
    table = evaluate(STUDY, pd.DataFrame({column: [written, value, written]}, index=[7, 8, 9]))
    assert ["done", "failed", "done"] == table["status"].tolist()
    assert f"an input makes no sense at this point: {reason}" in table.loc[8, "reason"]
    assert value == table.loc[8, column]
    assert table.loc[8].drop([column, "status", "reason"]).isna().all()
    good = evaluate(STUDY, pd.DataFrame({column: [written]}, index=[7]))
    pd.testing.assert_frame_equal(good, table.loc[[7]], check_exact=True)
    with pytest.raises(SweepError, match="this point cannot be computed"):
        profile(STUDY, {column: value})


def test_no_columns_is_the_set_point_once_per_row():
    table = evaluate(STUDY, pd.DataFrame(index=["a", "b"]))
    assert ["a", "b"] == list(table.index)
    assert table.loc["a"].equals(table.loc["b"])
    assert "done" == table.loc["a", "status"]


def test_labels_may_repeat():
    """Rows are told apart by their place: a failed point does not take its namesake along."""
    table = evaluate(STUDY, pd.DataFrame({"dosing_time": [7200.0, -1.0, 7200.0]}, index=[3, 3, 3]))
    assert ["done", "failed", "done"] == table["status"].tolist()
    assert table["conversion"].isna().tolist() == [False, True, False]


def test_no_rows():
    table = evaluate(STUDY, pd.DataFrame({"dosing_time": np.zeros(0)}))
    assert 0 == len(table)
    assert "conversion" in table.columns


def test_nothing_charged():
    study = read_text(isothermal("A -> R | 1e-3 1/s"))
    table = evaluate(study, pd.DataFrame({"recipe.charge.concentration.A": [0.0, 2000.0]}))
    assert ["failed", "done"] == table["status"].tolist()
    assert "nothing is charged" in table.loc[0, "reason"]


def test_whole_numbers_are_numbers():
    same = [evaluate(STUDY, pd.DataFrame({"dosing_time": [value]}))["conversion"][0] for value in (7200, 7200.0, np.float32(7200.0))]
    assert same[0] == same[1] == same[2]
