"""Risk and sensitivity on the page and in figures: what is said of them, and what is said where they are missing."""

from pathlib import Path
from typing import Any

import numpy as np
import pytest

from sweep.report import draw, draw_chance, prepare_chance
from sweep.report.answers import probability, stated
from sweep.report.curves import Absent, Facets, Ranking, Rankings
from sweep.report.results import Results, read
from sweep.report.wording import input_name
from tests.report import chance_folder, folder
from tests.report.test_page import page


def results(path: Path, change: Any = lambda summary, tables: None) -> Results:
    summary, manifest, tables = folder.whole()
    change(summary, tables)
    return read(folder.write(path, summary, manifest, tables))


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> str:
    return page(tmp_path_factory.mktemp("whole"), folder.whole()).text


@pytest.mark.parametrize(
    "said",
    [
        "all limits hold with a probability of 92.7 % (95 % interval 91.9 % to 93.5 %)",
        "least sure: conversion, 92.7 %",
        "95 % of batches reach the target within 6.1 h (at most 6.12 h with 95 % confidence)",
        "k acylation: with half its spread the probability that all limits hold rises by 4.2 percentage points",
        "MTSR: k acylation + Ea acylation has 95.7 % of its variance",
        "from 4,096 draws of 4 uncertain inputs (latin-hypercube)",
        "MTSR at most 80 °C 4,096 of 4,096 above 99.906 % 99.906 % to 100 % too few draws fail to tell",
        "conversion at least 98.5 % 3,799 of 4,096 92.7 % 91.9 % to 93.5 % k acylation low, control error of charge temperature low",
        "MTSR 3.2 × 10⁻⁵ 1.1 × 10⁻⁵ to 9.3 × 10⁻⁵ 4,600",
        "any limit – 0 to 2 × 10⁻⁸ 7,300 No failure down to 1e-08.",
        "Measuring k acylation better buys most",
        "rises from 92.8 % to 97.1 %",
        "Criticality class: undefined, the response does not move",
        "Distance: how far two distributions are apart.",
        "5 of 4096 draws could not be computed",
        "MTSR 70.75 °C 71.05 °C 71.75 °C 72.15 °C 72.55 °C 73.25 °C 73.65 °C 6",
    ],
)
def test_what_the_page_says(whole: str, said: str) -> None:
    assert said in whole


def test_no_draw_that_failed_is_not_never(tmp_path: Path) -> None:
    summary, manifest, tables = folder.whole()
    summary["risk"]["all_hold"] = {**summary["risk"]["all_hold"], "holding": 4096, "probability": 1.0, "low": 0.99906, "high": 1.0}
    text = page(tmp_path, (summary, manifest, tables)).text
    assert "all limits hold with a probability of above 99.906 %" in text
    assert "No draw failed, which is not never: the probability of failing is at most 0.094 %." in text


def test_a_target_that_no_batch_time_reaches(tmp_path: Path) -> None:
    summary, manifest, tables = folder.whole()
    reason = "205 of 4096 draws never reach the target within the time marched"
    summary["risk"]["batch_time"] |= {"time_s": None, "bound_s": None, "reason": reason}
    assert f"no batch time reaches the target in 95 % of batches: {reason}" in page(tmp_path, (summary, manifest, tables)).text


def test_not_assessed(tmp_path: Path) -> None:
    summary, manifest, tables = folder.whole()
    for block in ("risk", "sensitivity"):
        folder.without(summary, tables, block, f"the study has no [{block}]")
    text = page(tmp_path, (summary, manifest, tables)).text
    assert "Not assessed: The study has no [risk]." in text and "Not assessed: The study has no [sensitivity]." in text
    assert "How probable it is to lie beyond a value: the study has no [risk]." in text


def test_nothing_buys_certainty(tmp_path: Path) -> None:
    summary, manifest, tables = folder.whole()
    for one in summary["sensitivity"]["halved_spread"]["inputs"]:
        one["rise_low"] = -0.01
    text = page(tmp_path, (summary, manifest, tables)).text
    assert "no input whose halved spread would raise" in text and "Halving the spread of any one input would not raise" in text


def test_probabilities_are_told_from_none_and_from_all() -> None:
    expected = ["0 %", "0.0031 %", "0.050 %", "1.25 %", "92.6 %", "99.9 %", "99.9969 %", "100 %"]
    assert expected == [probability(p).replace("\u00a0", " ") for p in (0.0, 3.1e-5, 5e-4, 0.0125, 0.926, 0.999, 0.999969, 1.0)]


def test_none_of_many_is_stated_as_a_bound() -> None:
    counted = {"draws": 4096, "low": 0.0, "high": 9.4e-4}
    assert "below 0.094\u00a0%" == stated({**counted, "holding": 0, "probability": 0.0})
    assert "above 99.906\u00a0%" == stated({**counted, "holding": 4096, "probability": 1.0, "low": 0.99906, "high": 1.0})


def test_names_of_inputs() -> None:
    assert "control error of charge temperature" == input_name("variables.charge_temperature.error")
    assert "k + control error of a b" == input_name("k + variables.a_b.error")


def test_numbers_of_the_exceedance_figure(tmp_path: Path) -> None:
    found = prepare_chance.exceedance(results(tmp_path))
    assert isinstance(found, Facets)
    assert ["MTSR", "Conversion"] == [facet.title for facet in found.facets]
    assert pytest.approx((80.0, 98.5)) == tuple(facet.limit for facet in found.facets)
    assert pytest.approx((100.0, 0.0)) == (found.facets[0].y[0], found.facets[0].y[-1])
    assert "beyond: none, at most 0.094" in found.facets[0].said
    assert {"limit", "value", "unit", "beyond (%)", "low (%)", "high (%)"} == set(found.tables["exceedance"].columns)
    assert 60 == len(found.tables["exceedance"])


def test_numbers_of_the_rankings(tmp_path: Path) -> None:
    found = results(tmp_path)
    shares, halved = prepare_chance.shares(found), prepare_chance.halved(found)
    assert isinstance(shares, Rankings) and isinstance(halved, Rankings)
    assert ("k acylation + Ea acylation", "control error of charge temperature", "U") == shares.panels[0].labels
    assert pytest.approx([95.7, 3.5, 0.1]) == shares.panels[0].size.tolist()
    assert pytest.approx([4.2, 0.1]) == halved.panels[0].size.tolist()
    assert 3 == len(shares.tables["variance_shares"])


@pytest.mark.parametrize(
    ("name", "change", "why"),
    [
        ("exceedance", lambda s, t: t.pop("risk_exceedance"), "risk_exceedance.csv is missing"),
        ("shares", lambda s, t: s["sensitivity"].update(responses=[]), "no response moves"),
        ("halved", lambda s, t: s["sensitivity"].update(halved_spread={"not_assessed": "the study has no limits"}), "the study has no limits"),
    ],
)
def test_figures_that_cannot_be_drawn(tmp_path: Path, name: str, change: Any, why: str) -> None:
    found = getattr(prepare_chance, name)(results(tmp_path, change))
    assert isinstance(found, Absent) and why in found.why


def test_ink_of_extremes(tmp_path: Path) -> None:
    """Bars below zero and a limit far off the curve are drawn without a warning, and nothing lies outside the sheet's scale."""
    panel = Ranking("", ("a", "b" * 60), np.array([-1.0, 0.0]), np.array([-2.0, -0.1]), np.array([0.5, 0.1]))
    low, high = draw_chance._span((panel,))
    assert low < -2.0 and high > 0.5
    facets = prepare_chance.exceedance(results(tmp_path))
    assert isinstance(facets, Facets)
    with draw.style("x"):
        assert draw.finish(draw_chance.draw_rankings(Rankings("x", "", "", "", "", (panel,)))).png
        sheet = draw_chance.draw_facets(facets)
    assert sheet.axes[0].get_xlim()[1] > 80.0 > sheet.axes[0].get_xlim()[0]
    assert chance_folder.RISK["draws"] == 4096
