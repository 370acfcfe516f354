"""From results to plain numbers and labels, before anything is drawn."""

from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from sweep.report import prepare_batch, prepare_failure, prepare_window
from sweep.report.curves import Absent, ContourMap, Curves, WindowMap
from sweep.report.results import Results, read
from tests.report import folder

Change = Callable[[dict[str, Any], dict[str, Any]], None]


def results(tmp_path: Path, change: Change | None = None) -> Results:
    summary, manifest, tables = folder.whole()
    if change is not None:
        change(summary, tables)
    return read(folder.write(tmp_path, summary, manifest, tables))


def curves(found: Curves | Absent) -> Curves:
    assert isinstance(found, Curves), found
    return found


def test_the_profile_stands_in_hours_degrees_and_kilowatt(tmp_path: Path) -> None:
    found = curves(prepare_batch.profile(results(tmp_path)))
    assert ["Temperature (°C)", "Conversion (%)", "Heat flow (kW)", "Accumulation (%)"] == [panel.label for panel in found.panels]
    assert (0.0, 6.0) == (found.x[0], found.x[-1])
    assert 45.0 == pytest.approx(found.panels[0].lines[0].y[0], abs=1e-9)
    assert 48.9 == pytest.approx(found.panels[2].lines[0].y.max(), rel=1e-2)
    assert [(70.0, True)] == [(pytest.approx(level.value), level.limit) for level in found.panels[0].levels]
    assert [(98.5, False)] == [(pytest.approx(level.value), level.limit) for level in found.panels[1].levels]
    assert ["target reached, 5.6\u00a0h", "batch ends, 6\u00a0h"] == [moment.name for moment in found.moments]
    assert "time (h)" == found.numbers.columns[0]
    assert len(found.x) == len(found.numbers)


def test_a_short_batch_stands_in_minutes(tmp_path: Path) -> None:
    def shorten(summary: dict[str, Any], tables: dict[str, Any]) -> None:
        tables["set_point_profile"]["time_s"] /= 4.0
        summary["batch_time"] |= {"batch_time_s": 5400.0, "time_to_target_s": 5000.0}

    found = curves(prepare_batch.profile(results(tmp_path, shorten)))
    assert 90.0 == pytest.approx(found.x[-1])
    assert "(min)" in found.x_label


def test_a_target_reached_after_the_end_is_said_and_not_marked(tmp_path: Path) -> None:
    found = curves(prepare_batch.profile(results(tmp_path, lambda summary, _: summary["batch_time"].update(time_to_target_s=30000.0))))
    assert ["batch ends, 6\u00a0h"] == [moment.name for moment in found.moments]
    assert "after the batch's end, at 8.333\u00a0h" in found.caption


def test_what_was_marched_beyond_the_batchs_end_is_not_drawn(tmp_path: Path) -> None:
    found = curves(prepare_batch.profile(results(tmp_path, lambda summary, _: summary["batch_time"].update(batch_time_s=18000.0))))
    assert 5.0 == pytest.approx(found.x[-1], abs=0.02)
    assert found.numbers.iloc[-1, 0] <= 5.0


def test_a_batch_without_batch_times_ends_by_its_cycle_and_keeps_its_target(tmp_path: Path) -> None:
    def bare(summary: dict[str, Any], tables: dict[str, Any]) -> None:
        del summary["batch_time"]
        summary["set_point"]["responses"]["time_to_target_s"] = 15000.0
        summary["set_point"]["responses"]["cycle_time_s"] = 30600.0
        tables["inputs"].loc[len(tables["inputs"])] = ["recipe.turnaround", "3.5 h", 12600.0, "s", ""]

    found = curves(prepare_batch.profile(results(tmp_path, bare)))
    assert 5.0 == pytest.approx(found.x[-1], abs=0.02)
    assert ["target reached, 4.17\u00a0h", "batch ends, 5\u00a0h"] == [moment.name for moment in found.moments]
    assert [98.5] == pytest.approx([level.value for level in found.panels[1].levels])


def test_a_quantity_that_is_missing_takes_only_its_panel_away(tmp_path: Path) -> None:
    def drop(_: dict[str, Any], tables: dict[str, Any]) -> None:
        tables["set_point_profile"] = (
            tables["set_point_profile"].drop(columns=["heat_release_W", "cooling_duty_W"]).assign(jacket_temperature_K=np.nan)
        )

    found = curves(prepare_batch.profile(results(tmp_path, drop)))
    assert ["Temperature (°C)", "Conversion (%)", "Accumulation (%)"] == [panel.label for panel in found.panels]
    assert ["contents"] == [line.name for line in found.panels[0].lines]


def test_productivity_is_per_hour_and_marks_the_choices(tmp_path: Path) -> None:
    given = results(tmp_path)
    found = curves(prepare_batch.productivity(given))
    assert given.tables["batch_time"]["productivity_kg_per_m3_s"].max() * 3600.0 == pytest.approx(found.panels[1].lines[0].y.max())
    assert 3 == len(found.moments)


def test_the_diagram_marks_the_worst_moment_and_the_levels(tmp_path: Path) -> None:
    found = curves(prepare_failure.diagram(results(tmp_path)))
    assert [(pytest.approx(3.12), pytest.approx(72.11)), (pytest.approx(3.12), None)] == [(moment.x, moment.y) for moment in found.moments]
    assert "worst moment 3.12\u00a0h: MTSR 72.1\u00a0°C" == found.moments[0].name
    assert [70.0, 80.0, 110.0, 99.27] == pytest.approx([level.value for level in found.panels[0].levels])
    assert 283.3 == pytest.approx(found.numbers["TMRad (h)"].min(), rel=1e-2)
    assert {"yes", "no"} == set(found.numbers["TMRad is a lower bound"])


def test_a_level_far_above_the_curves_is_named_instead_of_drawn(tmp_path: Path) -> None:
    found = curves(prepare_failure.diagram(results(tmp_path, lambda summary, _: summary["failure"].update(td24_K=573.15, td24_censored=True))))
    assert "Above the figure: T_D24 at least 300.0\u00a0°C." in found.caption
    assert all("T_D24" not in level.name for level in found.panels[0].levels)


def test_a_censored_tmrad_is_a_bound_and_has_no_moment(tmp_path: Path) -> None:
    change = {"tmr_ad_s": 2592000.0, "tmr_ad_censored": True}
    found = curves(prepare_failure.diagram(results(tmp_path, lambda summary, _: summary["failure"].update(change))))
    assert 1 == len(found.moments)
    assert "TMRad is at least 30\u00a0d" in found.caption


def test_a_path_far_above_all_marks_runs_out_of_the_figure_and_says_so(tmp_path: Path) -> None:
    def hot(_: dict[str, Any], tables: dict[str, Any]) -> None:
        end = tables["failure_path"].iloc[[-1, -1, -1]].assign(time_after_failure_s=[1.03e6, 1.04e6, 1.05e6], temperature_K=[623.15] * 3)
        tables["failure_path"] = pd.concat([tables["failure_path"], end.assign(stage="synthesis")])

    found = curves(prepare_failure.path(results(tmp_path, hot)))
    assert 170.15 == pytest.approx(found.panels[0].top)
    assert "The path runs on above the figure, to 350.0\u00a0°C." in found.caption
    assert 1.03e6 / 3600.0 == pytest.approx(found.x[-1])  # at rest afterwards
    assert not np.isfinite(found.panels[0].lines[0].y[50:]).any()  # where nothing is left to react, nothing leads


def test_the_path_is_logarithmic_in_hours_and_its_stages_join(tmp_path: Path) -> None:
    found = curves(prepare_failure.path(results(tmp_path)))
    assert found.logarithmic
    assert 1.02e6 / 3600.0 == pytest.approx(found.x[-1])
    synthesis, decomposition = (np.isfinite(line.y) for line in found.panels[0].lines)
    assert 1 == int((synthesis & decomposition).sum())
    assert (synthesis | decomposition).all()
    assert ["limit on highest temperature", "MTT", "maximum rate"] == [moment.name.split(",")[0] for moment in found.moments]


def test_what_is_not_reached_is_not_marked(tmp_path: Path) -> None:
    found = curves(prepare_failure.path(results(tmp_path, lambda summary, _: summary["failure"]["path"]["reaches"][1].update(after_s=None))))
    assert 2 == len(found.moments)


def test_the_window_is_in_the_studys_own_units(tmp_path: Path) -> None:
    found = prepare_window.window(results(tmp_path))
    assert isinstance(found, WindowMap)
    assert ("charge temperature (°C)", "dosing time (h)") == found.ground.labels
    assert (45.0, 3.0) == pytest.approx(found.ground.set_point)
    assert [30.0, 65.0, 1.0, 6.0] == pytest.approx([found.ground.x[0], found.ground.x[-1], found.ground.y[0], found.ground.y[-1]])
    assert [(0, True, 53.5), (0, False, 41.26), (1, True, 5.7275), (1, False, 1.3644)] == [
        (r.axis, r.up, pytest.approx(r.edge, rel=1e-4)) for r in found.reaches
    ]
    assert ["+8.5\u00a0K", "−3.74\u00a0K", "+2.73\u00a0h", "−1.64\u00a0h"] == [reach.label for reach in found.reaches]
    assert (15, 15, 6) == found.margins.shape


def test_the_numbers_of_the_window_keep_every_margin_in_its_unit(tmp_path: Path) -> None:
    given = results(tmp_path)
    found = prepare_window.window(given)
    assert isinstance(found, WindowMap)
    numbers, grid = found.tables["window_map"], given.tables["window_grid"]
    assert np.allclose(grid["margin_cooling_duty"] / 1000.0, numbers["margin, largest cooling duty (kW)"])
    assert np.allclose(grid["margin_mtsr"], numbers["margin, MTSR (K)"])
    assert np.allclose(grid["margin_conversion"] * 100.0, numbers["margin, conversion (percentage points)"])


def test_an_edge_changes_its_piece_with_its_limit_and_stays_joined(tmp_path: Path) -> None:
    found = prepare_window.window(results(tmp_path))
    assert isinstance(found, WindowMap)
    assert ["conversion", "mtsr", "max_temperature", "per_product_diamide"] == [piece.limit for piece in found.ground.boundaries]
    hot = [piece for piece in found.ground.boundaries if piece.limit in ("mtsr", "max_temperature")]
    assert (hot[0].x[-1], hot[0].y[-1]) == (hot[1].x[0], hot[1].y[0])


def test_no_edge_within_range_is_said(tmp_path: Path) -> None:
    found = prepare_window.window(
        results(tmp_path, lambda summary, _: summary["window"]["set_point"]["distances"][2].update(distance=None, limit=None))
    )
    assert isinstance(found, WindowMap)
    assert (None, "no edge in range") == (found.reaches[2].edge, found.reaches[2].label)


def test_a_point_that_does_not_hold_is_never_shown_as_holding(tmp_path: Path) -> None:
    def contradict(_: dict[str, Any], tables: dict[str, Any]) -> None:
        tables["window_grid"]["holds"] = False

    found = prepare_window.window(results(tmp_path, contradict))
    assert isinstance(found, WindowMap)
    assert not (found.margins >= 0.0).all(axis=-1).any()


def test_contours_take_what_has_values(tmp_path: Path) -> None:
    found = prepare_window.contours(results(tmp_path))
    assert isinstance(found, ContourMap)
    assert [("time to target", "h"), ("productivity at the target", "kg/m³/h")] == [(field.title, field.unit) for field in found.fields]

    def unreached(_: dict[str, Any], tables: dict[str, Any]) -> None:
        tables["batch_time_map"]["time_to_target_s"] = np.nan

    found = prepare_window.contours(results(tmp_path, unreached))
    assert isinstance(found, ContourMap)
    assert ["most productive batch time", "highest productivity"] == [field.title for field in found.fields]


@pytest.mark.parametrize(
    ("prepare", "table"),
    [
        (prepare_batch.profile, "set_point_profile"), (prepare_batch.productivity, "batch_time"), (prepare_failure.diagram, "failure_times"),
        (prepare_failure.path, "failure_path"), (prepare_window.window, "window_grid"), (prepare_window.contours, "batch_time_map"),
    ],
)  # fmt: skip
def test_a_missing_or_empty_table_is_the_reason(tmp_path: Path, prepare: Callable[[Results], Any], table: str) -> None:
    for k, change in enumerate((lambda tables: tables.pop(table), lambda tables: tables.update({table: tables[table].head(0)}))):
        found = prepare(results(tmp_path / str(k), lambda _, tables, change=change: change(tables)))  # type: ignore[misc]
        assert isinstance(found, Absent)
        assert f"analyses/{table}.csv is missing or empty" == found.why


@pytest.mark.parametrize(
    ("prepare", "block"),
    [
        (prepare_batch.productivity, "batch_time"), (prepare_failure.diagram, "failure"), (prepare_failure.path, "failure"),
        (prepare_window.window, "window"), (prepare_window.contours, "window"), (prepare_window.contours, "batch_time"),
    ],
)  # fmt: skip
def test_what_was_not_assessed_is_not_drawn_even_where_a_table_is_left(tmp_path: Path, prepare: Callable[[Results], Any], block: str) -> None:
    found = prepare(results(tmp_path / "said", lambda summary, _: summary.update({block: {"not_assessed": "nobody asked"}})))
    assert isinstance(found, Absent)
    assert "nobody asked" == found.why
    found = prepare(results(tmp_path / "gone", lambda summary, _: summary.pop(block)))
    assert isinstance(found, Absent)
    assert f"the results hold no block named {block}" == found.why


def test_a_grid_of_other_axes_is_refused(tmp_path: Path) -> None:
    found = prepare_window.window(results(tmp_path, lambda summary, _: summary["window"].update(axes=["amine", "dosing_time"])))
    assert isinstance(found, Absent)
    assert "does not span" in found.why
