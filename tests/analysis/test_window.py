"""The window of a made-up study: responses in closed form, so that every figure is known."""

import dataclasses
import json
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.analysis.window import NotAssessed, Window, window
from sweep.analysis.window.slice import Axis, nearest
from sweep.base.errors import SweepError
from sweep.study import Study, read_study

STUDY = Path(__file__).parents[2] / "studies" / "acylation.toml"


@dataclass(frozen=True)
class Row:
    """A limit as an analysis reads it."""

    label: str
    unit: str
    column: str
    sign: float
    bound: float


ROWS = (
    Row("max_temperature", "K", "max_temperature_K", -1.0, 333.15),
    Row("cooling_duty", "W", "cooling_duty_W", -1.0, 1e5),
    Row("conversion", "", "conversion", 1.0, 0.9),
)


@pytest.fixture(scope="module")
def study() -> Study:
    """The demonstration study: 303.15 to 338.15 K, 3600 to 21600 s, 1200 to 2800 mol/m3; set-point 318.15 K, 10800 s, 2200 mol/m3."""
    return read_study(STUDY)


def evaluate(points: pd.DataFrame) -> pd.DataFrame:
    """The hottest is the charge temperature; duty: 120 kW at one hour of dosing, falling as one over it; conversion: 1 below 330 K."""
    temperature, dosing = points["charge_temperature"].to_numpy(), points["dosing_time"].to_numpy()
    amine = points["amine"].to_numpy() if "amine" in points else np.full(len(points), 2200.0)
    return pd.DataFrame(
        {
            "status": np.where(temperature < 308.15, "failed", "done"),
            "max_temperature_K": temperature,
            "cooling_duty_W": 2.0 * 120e3 * 3600.0 / dosing * amine / 2200.0,
            "conversion": np.full(len(points), 0.95),
        }
    )


def margins(study: Study, table: pd.DataFrame) -> np.ndarray:
    found = np.column_stack([row.sign * (table[row.column] - row.bound) for row in ROWS])
    found[(table["status"] != "done").to_numpy()] = np.nan
    return found


@pytest.fixture(scope="module")
def found(study: Study) -> Window:
    result = window(study, evaluate, margins, ROWS)
    assert isinstance(result, Window)
    return result


def test_summary(found: Window):
    """Safe from 308.15 to 333.15 K of 35 K, from 8640 to 21600 s of 18000 s."""
    block = found.summary()
    assert ["charge_temperature", "dosing_time"] == block["axes"]
    assert {"amine": 2200.0} == block["at"]
    assert 25.0 / 35.0 * 12960.0 / 18000.0 == pytest.approx(block["safe_share"], abs=3e-3)
    assert (1, 0, 0.005) == (block["pieces"], block["holes"], block["resolution"])
    assert 4040 + 700 >= block["marches"]
    assert {"max_temperature": 0.72, "failed or runaway": 0.72, "cooling_duty": 25.0 / 35.0} == pytest.approx(
        {one["name"]: one["share"] * (0.72 * 2 + 25.0 / 35.0) for one in block["limits_binding"]}, abs=0.02
    )
    assert block == json.loads(json.dumps(block, allow_nan=False))


def test_set_point(found: Window):
    point = found.summary()["set_point"]
    assert (True, None) == (point["holds"], point["reason"])
    assert [("max_temperature", "K"), ("cooling_duty", "W"), ("conversion", "")] == [(one["name"], one["unit"]) for one in point["margins"]]
    assert [15.0, 20e3, 0.05] == pytest.approx([one["margin"] for one in point["margins"]])
    ways = {(one["axis"], one["direction"]): one for one in point["distances"]}
    assert 15.0 == pytest.approx(ways["charge_temperature", "up"]["distance"], abs=35e-4)
    assert 10.0 == pytest.approx(ways["charge_temperature", "down"]["distance"], abs=35e-4)
    assert 2160.0 == pytest.approx(ways["dosing_time", "down"]["distance"], abs=1.8)
    assert (None, None) == (ways["dosing_time", "up"]["distance"], ways["dosing_time", "up"]["limit"])
    limits = {way: one["limit"] for way, one in ways.items() if one["limit"]}
    assert {
        ("charge_temperature", "up"): "max_temperature",
        ("charge_temperature", "down"): "failed or runaway",
        ("dosing_time", "down"): "cooling_duty",
    } == limits
    assert ["K", "K", "s", "s"] == [one["unit"] for one in point["distances"]]


def test_grid_table(found: Window):
    grid = found.tables()["window_grid"]
    names = ["charge_temperature_K", "dosing_time_s", "margin_max_temperature", "margin_cooling_duty", "margin_conversion", "holds", "binding"]
    assert names == list(grid.columns)
    assert 41 * 41 == len(grid)
    for column, low, high in (("charge_temperature_K", 303.15, 338.15), ("dosing_time_s", 3600.0, 21600.0)):
        assert (low, high) == (grid[column].min(), grid[column].max())
    done = grid["charge_temperature_K"] >= 308.15
    assert (333.15 - grid["charge_temperature_K"])[done].tolist() == grid["margin_max_temperature"][done].tolist()
    assert grid["margin_max_temperature"][~done].isna().all()
    assert {"failed or runaway"} == set(grid["binding"][~done])
    assert (done & (grid["charge_temperature_K"] <= 333.15) & (grid["dosing_time_s"] >= 8640.0)).tolist() == grid["holds"].tolist()
    beyond = grid["margin_cooling_duty"] < 0.0
    assert {"cooling_duty"} == set(grid["binding"][beyond & (grid["margin_max_temperature"] > 0.0)])
    assert {"max_temperature"} == set(grid["binding"][done & ~beyond & (grid["margin_max_temperature"] < 0.0)])


def test_boundary_table(found: Window):
    table = found.tables()["window_boundary"]
    assert ["line", "order", "charge_temperature_K", "dosing_time_s", "limit"] == list(table.columns)
    assert {0} == set(table["line"])
    assert list(range(len(table))) == table["order"].tolist()
    hot, slow = table[table["limit"] == "max_temperature"], table[table["limit"] == "cooling_duty"]
    assert hot["charge_temperature_K"].to_numpy() == pytest.approx(333.15, abs=1e-3)
    assert slow["dosing_time_s"].to_numpy() == pytest.approx(8640.0, abs=1.0)
    cold = table[table["limit"] == "failed or runaway"]["charge_temperature_K"].to_numpy()
    assert 308.15 <= cold.min()
    assert 308.15 + 0.005 * 35.0 >= cold.max()


def test_another_slice(study: Study):
    """Half the amine gives half the heat, so that 4320 s of dosing will do; the set-point is not in that slice and it says so."""
    result = window(study, evaluate, margins, ROWS, at={"amine": 1100.0 + 550.0})
    block = result.summary()
    assert {"amine": 1650.0} == block["at"]
    assert 25.0 / 35.0 * (21600.0 - 6480.0) / 18000.0 == pytest.approx(block["safe_share"], abs=3e-3)
    assert "amine held elsewhere" in block["set_point"]["reason"]
    assert block["set_point"]["holds"]


def test_other_axes(study: Study):
    result = window(study, evaluate_anywhere, margins, ROWS, axes=("amine", "dosing_time"))
    block = result.summary()
    assert (["amine", "dosing_time"], {"charge_temperature": pytest.approx(318.15)}) == (block["axes"], block["at"])
    assert "amine_mol_per_m3" in result.tables()["window_grid"]
    limits = {(one["axis"], one["direction"]): one["distance"] for one in block["set_point"]["distances"]}
    assert 550.0 == pytest.approx(limits["amine", "up"], abs=0.16)


def evaluate_anywhere(points: pd.DataFrame) -> pd.DataFrame:
    return evaluate(points if "charge_temperature" in points else points.assign(charge_temperature=318.15))


def test_slice_of_the_study_file_gives_way_to_an_axis(study: Study):
    held = dataclasses.replace(study, window=dataclasses.replace(study.window, at={"amine": 1650.0}))
    assert {"amine": 1650.0} == window(held, evaluate, margins, ROWS).summary()["at"]
    assert {"amine": 2000.0} == window(held, evaluate, margins, ROWS, at={"amine": 2000.0}).summary()["at"]
    across = window(held, evaluate_anywhere, margins, ROWS, axes=("amine", "dosing_time")).summary()
    assert ["charge_temperature"] == list(across["at"])
    assert across["set_point"]["reason"] is None


def test_variables_that_are_not_held_elsewhere_are_left_as_written(study: Study):
    asked = []

    def watched(points: pd.DataFrame) -> pd.DataFrame:
        asked.append(list(points.columns))
        return evaluate(points)

    window(study, watched, margins, ROWS)
    assert [["charge_temperature", "dosing_time"]] * len(asked) == asked


def with_values(study: Study, **values: float) -> Study:
    return dataclasses.replace(study, values={**study.values, **{path.replace("__", "."): value for path, value in values.items()}})


def test_set_point_outside_the_range(study: Study):
    moved = with_values(study, recipe__feeds__anhydride__duration=25200.0)
    point = window(moved, evaluate, margins, ROWS).summary()["set_point"]
    assert "outside" in point["reason"]
    assert [] == point["distances"]  # none was sought, which is not the same as none found
    assert 1e5 - 2.0 * 120e3 * 3600.0 / 25200.0 == pytest.approx(point["margins"][1]["margin"])
    assert point["holds"]


def test_set_point_on_the_end_of_the_range(study: Study):
    """An end that rounding puts a hair outside is the end."""
    moved = with_values(study, recipe__feeds__anhydride__duration=21600.0 * (1.0 + 1e-15))
    point = window(moved, evaluate, margins, ROWS).summary()["set_point"]
    assert point["reason"] is None
    assert 21600.0 - 8640.0 == pytest.approx(point["distances"][3]["distance"], abs=1.8)


@pytest.mark.parametrize(("temperature", "margin"), [(335.15, -2.0), (304.15, None)])
def test_set_point_that_does_not_hold(study: Study, temperature: float, margin: float | None):
    paths = dict.fromkeys(("recipe__charge__temperature", "cooling__set_point", "cooling__start"), temperature)
    point = window(with_values(study, **paths), evaluate, margins, ROWS).summary()["set_point"]
    assert not point["holds"]
    assert "does not hold" in point["reason"]
    assert [] == point["distances"]
    assert (None if margin is None else pytest.approx(margin)) == point["margins"][0]["margin"]


def test_paths_that_differ_as_written_are_named(study: Study):
    """One variable sets three quantities; where they differ as written, the point judged is not quite the set-point."""
    point = window(with_values(study, cooling__start=300.0), evaluate, margins, ROWS).summary()["set_point"]
    assert "charge_temperature" in point["reason"]


def test_response_without_a_value_names_its_limit(study: Study):
    """A null response of a finished point is that limit's doing, not the point's."""

    def never(study: Study, table: pd.DataFrame) -> np.ndarray:
        return np.where(table[["dosing_time_s"]] < 9000.0, np.nan, 1.0)

    def slow(points: pd.DataFrame) -> pd.DataFrame:
        return pd.DataFrame({"status": "done", "dosing_time_s": points["dosing_time"]})

    block = window(study, slow, never, (Row("conversion", "", "", 1.0, 0.0),)).summary()
    assert [{"name": "conversion", "share": 1.0}] == block["limits_binding"]
    assert 1800.0 == pytest.approx(block["set_point"]["distances"][3]["distance"], abs=1.8)


def test_nothing_holds(study: Study):
    result = window(study, evaluate, lambda study, table: np.full((len(table), 3), np.nan), ROWS)
    block = result.summary()
    assert (0.0, 0, []) == (block["safe_share"], block["pieces"], block["limits_binding"])
    assert 0 == len(result.tables()["window_boundary"])
    assert not result.tables()["window_grid"]["holds"].any()
    assert [None] * 3 == [one["margin"] for one in block["set_point"]["margins"]]


def test_not_assessed(study: Study):
    without = window(dataclasses.replace(study, window=None), evaluate, margins, ROWS)
    assert NotAssessed("the study has no [window]") == without
    unlimited = window(study, evaluate, margins, ())
    assert "no limits" in unlimited.summary()["not_assessed"]
    assert {} == unlimited.tables()


@pytest.mark.parametrize(
    ("margins", "expected"),
    [
        ([[500.0, 0.04, 1.0], [0.0, 0.1, 1.0], [1000.0, 0.0, 1.0]], [1, 0, 1]),  # 500 of 1000 is more than 0.04 of 0.1
        ([[5.0, 1.0], [5.5, 1.0]], [0, 0]),  # further off than its spread, yet there is no other limit
        ([[-3.0, -0.2, 1.0], [7.0, -0.1, 1.0]], [1, 1]),  # both beyond: the one further beyond
        ([[1.0, np.nan, 1.0], [np.nan, np.nan, np.nan], [2.0, -1.0, 1.0]], [1, 2, 1]),
    ],
)
def test_nearest(margins, expected):
    assert expected == nearest(np.array(margins)).tolist()


def test_axis_ends_are_the_range_to_the_last_bit():
    low, high = next((a, b) for a, b in ((k / 10.0, j / 7.0) for k in range(1, 9) for j in range(8, 30)) if a + (b - a) > b)
    axis = Axis("dosing_time", low, high, "s", "dosing_time_s")
    assert [low, high] == axis.value(np.array([0.0, 1.0])).tolist()
    assert [-0.5, 1.5] == pytest.approx([axis.share(value) for value in axis.value(np.array([-0.5, 1.5]))])


@pytest.mark.parametrize(
    ("axes", "at", "text"),
    [
        (("charge_temperature", "speed"), {}, "speed is no variable"),
        (("amine", "amine"), {}, "two axes"),
        (None, {"pressure": 1.0}, "pressure is no variable"),
        (None, {"dosing_time": 7200.0}, "dosing_time is an axis"),
    ],
)
def test_wrong_call(study: Study, axes, at, text):
    with pytest.raises(SweepError, match=text):
        window(study, evaluate, margins, ROWS, axes=axes, at=at)
