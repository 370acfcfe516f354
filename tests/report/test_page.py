"""The page and the files: every answer with its unit, nothing from outside, nothing from the user that breaks it."""

import html
import json
import re
from collections.abc import Callable
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import numpy as np
import pytest

import sweep.report
from sweep.base.errors import SweepError
from sweep.report.page import page as build
from sweep.report.results import read
from sweep.report.write import ALL
from tests.report import folder

Made = tuple[dict[str, Any], dict[str, Any], dict[str, Any]]
VARIANTS = (folder.whole, folder.no_target, folder.not_reached, folder.failed_points, folder.hostile)
FIGURES = {"batch_profile", "batch_time", "window_map", "batch_time_map", "failure_diagram", "failure_path", "exceedance", "variance_shares",
           "spread_halved"}  # fmt: skip


class Reader(HTMLParser):
    """Collects what a page holds, and that every tag is closed."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.ids: list[str] = []
        self.headings: list[int] = []
        self.images: list[dict[str, str | None]] = []
        self.outside: list[str] = []
        self.words: list[str] = []
        self.tags: set[str] = set()
        self.open: list[str] = []
        self.feed(page)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        given = dict(attrs)
        self.tags.add(tag)
        if tag not in ("meta", "img", "br", "link"):
            self.open.append(tag)
        self.ids += [str(given["id"])] if "id" in given else []
        self.headings += [int(tag[1])] if re.fullmatch(r"h[1-6]", tag) else []
        self.images += [given] if tag == "img" else []
        links = [str(given[key]) for key in ("src", "href", "action", "data", "srcset") if key in given]
        self.outside += [link for link in links if not link.startswith(("#", "data:image/svg+xml;base64,"))]
        assert not [key for key in given if key.startswith("on")]

    def handle_endtag(self, tag: str) -> None:
        assert tag == self.open.pop()

    def handle_data(self, data: str) -> None:
        if not self.open or self.open[-1] != "style":
            self.words.append(data)

    @property
    def text(self) -> str:
        return re.sub(r"[ \n]+", " ", " ".join(self.words)).replace("\u00a0", " ")


def drawn(path: Path, made: Made) -> Reader:
    """Return the page with its figures, as `sweep report` makes it."""
    return Reader(sweep.report.make(folder.write(path, *made)).read_text(encoding="utf-8"))


def page(path: Path, made: Made) -> Reader:
    """Return the page with empty figures, which takes a tenth of the time."""
    found = read(folder.write(path, *made))
    figures = [prepare(found) for prepare in ALL]
    return Reader(build(found, figures, {figure.name: b"<svg/>" for figure in figures}))


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> str:
    """The text of the page of a whole run."""
    return page(tmp_path_factory.mktemp("whole"), folder.whole()).text


def changed(change: Callable[[dict[str, Any], dict[str, Any], dict[str, Any]], object]) -> Made:
    summary, manifest, tables = folder.whole()
    change(summary, manifest, tables)
    return summary, manifest, tables


@pytest.mark.parametrize("variant", VARIANTS, ids=lambda variant: variant.__name__)
def test_the_page_stands_alone(tmp_path: Path, variant: Callable[[], Made]) -> None:
    found = drawn(tmp_path, variant())
    raw = (tmp_path / "report.html").read_text(encoding="utf-8")
    assert [] == found.outside == found.open
    assert not {"script", "iframe", "object", "link", "form"} & found.tags
    assert len(found.ids) == len(set(found.ids))
    assert found.headings[0] == 1 == found.headings.count(1)
    assert all(step <= 1 for step in np.diff(found.headings))
    assert all(len(str(image["alt"])) > 40 for image in found.images)
    assert "default-src 'none'" in raw
    assert '<html lang="en">' in raw
    assert "url(" not in raw
    assert "@import" not in raw


def test_the_answers_stand_with_their_units(whole: str) -> None:
    for answer in (
        "All 6 limits hold at the set-point", "charge temperature: 45 °C",
        "dosing time: 3 h", "amine: 2.2 mol/L", "batch time 6 h; with turnaround, a cycle of 9.5 h",
        "target conversion of 98.50 % reached at 5.597 h", "most productive at 3.361 h",
        "margin 0.43 percentage points", "1.8 % of the spread of conversion",
        "MTSR 72.1 °C, failure at 3.12 h", "TMRad 283.3 h (11.8 d)", "criticality class 2", "every limit holds in 41.3 % of the range",
        "17.77 kg/m³/h", "gives away 18.4 % of the highest productivity and takes 2.236 h longer",
        "Found with 1184 batches, the edge to within 0.5 % of each axis.", "gives away 7.45 percentage points of conversion",
        "8.50 K 53.50 °C highest temperature", "1.64 h 1.36 h MTSR",
        "MTT 110.0 °C 226.1 h (9.42 d)", "limit on highest temperature 70.0 °C 56.13 min",
        "Adiabatic rise, synthesis 92.4 K", "99.3 °C TMRad is 24 h from here", "W/m²/K", "runs 3 to 7", "Pressure: no vapour pressure is given.",
        "This program screens; it does not approve.", "Emergency relief is not sized here.", "Version of numba 0.61.2", "3f9a" * 16,
        "Prepared by", "Reviewed by", "Approved by", "2025 points planned",
    ):  # fmt: skip
        assert answer in whole


@pytest.mark.parametrize(
    "row",
    [
        "highest temperature at most 70.0 °C 60.5 °C 9.5 K holds",
        "TMRad at least 24.0 h 283.3 h 259.3 h holds", "largest cooling duty at most 120 kW 61 kW 59 kW holds",
        "diamide per mole of product at most 0.00400 0.00162 0.00238 holds", "conversion at least 98.50 % 98.93 % 0.43 percentage points holds",
    ],
)  # fmt: skip
def test_each_limit_has_bound_value_margin_and_verdict(whole: str, row: str) -> None:
    assert row in whole


def test_limits_that_do_not_hold_are_named_first(tmp_path: Path) -> None:
    text = page(tmp_path, folder.not_reached()).text
    assert "2 of 6 limits do not hold at the set-point: TMRad and conversion." in text
    assert "no value: no decomposition reaction is given – does not hold" in text
    assert "The target is not reached: not enough reactant: The feed brings 0.95 equivalents" in text
    assert "The set-point lies outside" in text


def test_a_margin_too_small_for_the_digits_still_shows(tmp_path: Path) -> None:
    def narrow(summary: dict[str, Any], *_: Any) -> None:
        summary["limits"][0] |= {"value": 343.1534, "margin": -0.0034, "holds": False}

    text = page(tmp_path, changed(narrow)).text
    assert "highest temperature at most 70.0000 °C 70.0034 °C −0.0034 K does not hold" in text


def test_a_target_missed_by_the_points_own_record_is_said_once(tmp_path: Path) -> None:
    summary, manifest, tables = folder.not_reached()
    summary["batch_time"]["why_not"] = {"cause": "too slow", "sentence": "time_to_target: never reached, too slow"}
    text = page(tmp_path, (summary, manifest, tables)).text
    assert "The target is not reached: too slow." in text
    assert "time_to_target" not in text


def test_a_slice_beside_the_set_point_does_not_claim_to_hold_it(tmp_path: Path) -> None:
    def elsewhere(summary: dict[str, Any], *_: Any) -> None:
        summary["window"]["at"] = {"amine": 2500.0}

    text = page(tmp_path, changed(elsewhere)).text
    assert "2.5 mol/L, where the set-point does not lie" in text
    assert "its place on these axes lies inside" in text
    assert "set-point lies inside" not in text.lower()


def test_a_slice_through_the_set_point_says_where_that_lies(whole: str) -> None:
    assert "the set-point lies inside the window of charge temperature and dosing time" in whole


def test_standing_cautions_are_not_said_twice(tmp_path: Path) -> None:
    made = changed(lambda summary, *_: summary.update(cautions=["This program screens; it does not approve. A proposal."]))
    assert 1 == page(tmp_path, made).text.count("does not approve")


def test_every_response_is_shown_in_its_unit(whole: str) -> None:
    for said in ("adiabatic rise of the synthesis 92.4 K", "highest temperature 60.47 °C", "largest heat release 48.9 kW", "yield of amide 98.71 %"):
        assert said in whole


def test_a_censored_time_is_said_to_be_at_least(tmp_path: Path) -> None:
    def censor(summary: dict[str, Any], *_: Any) -> None:
        summary["failure"] |= {"tmr_ad_s": 2592000.0, "tmr_ad_censored": True, "td24_censored": True}
        summary["limits"][2] |= {"value": 2592000.0, "margin": 2505600.0}

    text = page(tmp_path, changed(censor)).text
    assert "TMRad at least 720 h (30 d)" in text
    assert "at least 99.3 °C end of the range searched" in text
    assert "TMRad at least 24.0 h at least 720.0 h at least 696.0 h holds" in text


def test_a_class_that_cannot_be_given_says_why(tmp_path: Path) -> None:
    def unclassed(summary: dict[str, Any], *_: Any) -> None:
        summary["failure"] |= {"criticality_class": None, "class_reason": "MTT lies below the process temperature"}

    assert "Criticality class: none given. MTT lies below the process temperature." in page(tmp_path, changed(unclassed)).text


def test_a_set_point_that_failed_has_no_verdict_but_a_reason(tmp_path: Path) -> None:
    made = changed(lambda summary, *_: summary["set_point"].update(status="runaway", reason="above 1500 K at 3 h"))
    assert "The set-point could not be judged: runaway, above 1500 K at 3 h." in page(tmp_path, made).text


@pytest.mark.parametrize("block", ["window", "failure", "batch_time"])
def test_what_was_not_assessed_is_said_where_it_would_stand_and_in_its_section(tmp_path: Path, block: str) -> None:
    summary, manifest, tables = folder.whole()
    folder.without(summary, tables, block, "the study does not ask for it")
    found = page(tmp_path, (summary, manifest, tables))
    assert "not assessed: the study does not ask for it" in found.text
    assert "Not assessed: The study does not ask for it." in found.text
    gone = {
        "window": {"window_map", "batch_time_map"},
        "failure": {"failure_diagram", "failure_path"},
        "batch_time": {"batch_time", "batch_time_map"},
    }[block]
    assert FIGURES - gone == {path.removeprefix("figure-") for path in found.ids if path.startswith("figure-")}
    assert len(gone) == found.text.count("not drawn. Reason:")


def test_a_figure_that_no_longer_stands_is_removed(tmp_path: Path) -> None:
    summary, manifest, tables = folder.no_target()
    folder.without(summary, tables, "failure", "no decomposition is given")
    folder.without(summary, tables, "window", "no axes are given")
    folder.without(summary, tables, "risk", "nothing is uncertain")
    folder.without(summary, tables, "sensitivity", "nothing is uncertain")
    left = [tmp_path / "figures" / f"failure_diagram.{ending}" for ending in ("svg", "png", "csv")]
    left[0].parent.mkdir(parents=True)
    for path in left:
        path.write_text("of an earlier run")
    drawn(tmp_path, (summary, manifest, tables))
    assert ["batch_profile.csv", "batch_profile.png", "batch_profile.svg"] == sorted(path.name for path in left[0].parent.iterdir())


def test_a_bare_run_makes_a_page(tmp_path: Path) -> None:
    summary = {"schema": 1, "study": {"name": "bare"}, "set_point": {"inputs": {}, "status": "done", "responses": {}}, "limits": []}
    text = page(tmp_path, (summary, {"state": "complete"}, {})).text
    assert "No limits are set" in text
    assert "Figures not drawn, and why:" in text


def test_an_unfinished_run_says_so(tmp_path: Path) -> None:
    made = changed(lambda _, manifest, __: manifest.update(state="running"))
    assert "This run is not complete (state: running)." in page(tmp_path, made).text


def test_results_that_do_not_belong_together_are_called_out(tmp_path: Path) -> None:
    made = changed(lambda _, manifest, __: manifest.update(study_digest="00" * 32))
    assert "these results do not belong together" in page(tmp_path, made).text


def test_failed_points_stand_with_their_reasons_forty_at_most(tmp_path: Path) -> None:
    text = page(tmp_path, folder.failed_points()).text
    assert "3 ran away, 12 failed" in text
    assert 40 == text.count("the step fell below the spacing of numbers")
    assert "The first 40 rows of 60; all in analyses/failed_points.csv." in text
    assert "amine (mol/L)" in text


def test_long_tables_are_thinned_and_name_their_file(whole: str) -> None:
    assert "One row in 11 and the last, of 401; all in figures/batch_profile.csv." in whole


def test_the_same_results_give_the_same_bytes_and_each_figure_has_its_numbers(tmp_path: Path) -> None:
    for name in ("a", "b"):
        drawn(tmp_path / name, folder.whole())
    first, second = ({p.relative_to(tmp_path / n): p.read_bytes() for p in (tmp_path / n).rglob("*.*")} for n in ("a", "b"))
    assert first == second
    for ending in (".svg", ".png", ".csv"):
        assert {path.stem for path in first if path.suffix == ending} >= FIGURES
    assert not [path for path in first if path.name.startswith(".")]


def test_hostile_text_is_shown_and_not_obeyed(tmp_path: Path) -> None:
    found = drawn(tmp_path, folder.hostile())
    raw = (tmp_path / "report.html").read_text(encoding="utf-8")
    assert "alert" in found.text
    assert "{{ 7*7 }}" in found.text
    assert html.escape('<script>alert("x")', quote=False).replace('"', "&#34;") in raw
    assert not re.search(r"[\x00-\x08\x0b-\x1f\u202e]", raw)


@pytest.mark.parametrize(
    ("spoil", "said"),
    [
        (lambda path: (path / "manifest.json").unlink(), "is not a results folder: manifest.json is missing"),
        (lambda path: (path / "summary.json").unlink(), "is not a results folder: summary.json is missing"),
        (lambda path: (path / "summary.json").write_text("{torn"), "cannot be read"),
        (lambda path: (path / "summary.json").write_text("[]"), "holds no table of answers"),
        (lambda path: (path / "analyses" / "window_grid.csv").write_bytes(b"a,b\n\xff\xfe,1\n"), "window_grid.csv cannot be read"),
    ],
)
def test_a_folder_that_cannot_be_read_is_an_error_with_its_place(tmp_path: Path, spoil: Callable[[Path], object], said: str) -> None:
    spoil(folder.write(tmp_path, *folder.whole()))
    with pytest.raises(SweepError, match=re.escape(said)) as caught:
        sweep.report.make(tmp_path)
    assert (2 if "missing" in said else 4) == caught.value.exit_status  # a wrong folder is the call's fault, a damaged one the disk's


def test_one_batch_needs_no_manifest_and_draws_what_it_has(tmp_path: Path) -> None:
    summary, _, tables = folder.whole()
    kept = {name: tables[name] for name in ("set_point_profile", "failure_times")}
    folder.write(tmp_path, summary, None, kept)
    assert ["batch_profile.svg", "failure_diagram.svg"] == [path.name for path in sweep.report.batch(tmp_path)]
    folder.without(summary, tables, "failure", "not asked")
    (tmp_path / "summary.json").write_text(json.dumps(summary))
    assert ["batch_profile.svg"] == [path.name for path in sweep.report.batch(tmp_path)]
    assert not (tmp_path / "figures" / "failure_diagram.svg").exists()
