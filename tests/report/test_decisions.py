"""Ranges, optimum and probability map on the page and in figures: what is said of them, and what is said where there is nothing."""

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from sweep.report import draw, draw_decisions, prepare_decisions
from sweep.report.curves import Absent, ChanceField, Front, RangeBars
from sweep.report.results import Results, read
from tests.report import decisions_folder as made
from tests.report import folder
from tests.report.test_page import page


def run(**blocks: Any) -> tuple[Any, Any, Any]:
    summary, manifest, tables = folder.whole()
    summary |= {"ranges": made.RANGES, "optimum": made.OPTIMUM, "probability_map": made.MAP, **blocks}
    return summary, manifest, tables | made.tables()


def results(path: Path, **blocks: Any) -> Results:
    return read(folder.write(path, *run(**blocks)))


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> str:
    return page(tmp_path_factory.mktemp("whole"), run()).text


@pytest.mark.parametrize(
    "said",
    [
        "charge temperature: 42.5 °C to 47.5 °C",
        "in any combination, every limit holds with a probability of at least 95 % (confidence 95 %, 256 draws)",
        "at the worst setting found 96.5 % of fresh draws hold, at least 95.4 %",
        "charge temperature 45 °C 44.02 °C to 45.98 °C 42.5 °C to 47.5 °C conversion / MTSR 40 °C to 50 °C 30 °C to 65 °C",
        "dosing time 3 h – 2.6 h to 6 h largest cooling duty / range studied 2.2 h to 6 h 1 h to 6 h",
        "4 corners, 64 points on faces, 64 inside, 320 on the way downhill; no counter-example.",
        "Smallest margin met: 0.31 K of MTSR (96.1 % of the draws hold there), at charge temperature 47.5 °C, dosing time 2.6 h.",
        "Do not use the ranges changed alone together: at charge temperature 50 °C, dosing time 2.2 h the margin of MTSR is −2.2 K.",
        "Normal operating range: where the plant holds a setting.",
        "A hunt is evidence, not a proof.",
        "Asked for: least cycle time, with every limit holding with a probability of at least 95 %",
        "charge temperature 48.2 °C, dosing time 2.45 h: cycle time 8.75 h",
        "at the set-point: 9.5 h",
        "96.7 % of 1,024 fresh draws hold, at least 95.3 %",
        "Sought by differential evolution, then COBYQA: 900 settings, 99,000 batches.",
        "95 % 25 %",
        "Nominally every limit holds in 38 % of the plane; within that the probability falls to 47 %.",
        "512 draws at 121 nodes took 9,000 batches in place of 61,952",
    ],
)
def test_what_the_page_says(whole: str, said: str) -> None:
    assert said.replace("\u00a0", " ") in whole.replace("\u00a0", " ")


def test_what_the_page_says_of_a_set_point_that_fails(tmp_path: Path) -> None:
    reason = "the set-point itself does not hold mtsr; there is no range around it to write down"
    text = page(tmp_path, run(ranges={**made.RANGES, "reason": reason, "share_of_space": None})).text
    assert "No ranges: The set-point itself does not hold mtsr; there is no range around it to write down." in text
    assert f"none: {reason}" in text


def test_what_the_page_says_where_nothing_holds(tmp_path: Path) -> None:
    text = page(tmp_path, run(optimum=made.NONE)).text.replace("\u00a0", " ")
    assert "No setting was found that holds every limit; at the one that comes nearest mtsr is in the way." in text
    assert "MTSR −3 K does not hold" in text


def test_a_trade_is_a_table(tmp_path: Path) -> None:
    text = page(tmp_path, run(optimum=made.TWO)).text.replace("\u00a0", " ")
    assert "3 settings trade cost of product against margin of MTSR; see below" in text
    assert "18 EUR/kg 0.4 K 48 °C 2.5 h at least 95.3 %" in text


def test_counter_examples_that_stay_are_said_loudly(tmp_path: Path) -> None:
    searched = {**made.RANGES["searched"], "failing": 3}
    assert "; 3 counter-examples." in page(tmp_path, run(ranges={**made.RANGES, "searched": searched})).text


def test_figures_hold_what_they_show(tmp_path: Path) -> None:
    found = results(tmp_path, optimum=made.TWO)
    field, bars, front = (prepare(found) for prepare in (prepare_decisions.chance_map, prepare_decisions.bars, prepare_decisions.front))
    assert isinstance(field, ChanceField) and isinstance(bars, RangeBars) and isinstance(front, Front)
    assert ((11, 11), (50.0, 90.0, 95.0, 99.0)) == (field.values.shape, field.levels)
    assert pytest.approx((30.0, 65.0)) == (field.ground.x[0], field.ground.x[-1])
    assert pytest.approx((12.5 / 35.0, 17.5 / 35.0)) == bars.rows[0].acceptable
    assert (("2.6 h", "6 h"), None) == (bars.rows[1].ends, bars.rows[1].normal)
    assert np.allclose(front.x, [18.0, 21.0, 25.0]) and np.allclose(front.y, [0.4, 4.0, 7.0])
    assert ("cost of product (EUR/kg)", "margin of MTSR (K)") == front.labels
    inked = {"map": (draw_decisions.draw_chance, field), "bars": (draw_decisions.draw_bars, bars), "front": (draw_decisions.draw_front, front)}
    for name, (make, figure) in inked.items():
        with draw.style(name):
            ink = draw.finish(make(figure))
        assert ink.svg.startswith(b"<?xml") and ink.png.startswith(b"\x89PNG")


def test_a_map_that_is_the_same_everywhere_is_drawn(tmp_path: Path) -> None:
    summary, manifest, tables = run()
    for value in (0.0, 1.0):
        tables["probability_map"] = tables["probability_map"].assign(probability=value, low=value, high=value)
        field = prepare_decisions.chance_map(read(folder.write(tmp_path / str(value), summary, manifest, tables)))
        assert isinstance(field, ChanceField)
        with draw.style("map"):
            assert draw.finish(draw_decisions.draw_chance(field)).svg


def test_figures_without_results_say_why(tmp_path: Path) -> None:
    summary, manifest, tables = folder.whole()
    summary |= {"ranges": {"not_assessed": "the study has no [ranges]"}, "optimum": made.NONE, "probability_map": {"not_assessed": "no map"}}
    found = read(folder.write(tmp_path, summary, manifest, tables))
    whys = [figure.why for prepare in (prepare_decisions.chance_map, prepare_decisions.bars, prepare_decisions.front)
            if isinstance(figure := prepare(found), Absent)]  # fmt: skip
    assert ["no map", "the study has no [ranges]", made.NONE["reason"]] == whys
