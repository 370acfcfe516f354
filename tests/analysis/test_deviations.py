"""The deviation table: figures, time to act, interlocks, verdict, and the order of its lines."""

import json
import math
from pathlib import Path

import jsonschema
import pandas as pd
import pytest

from sweep.analysis.deviations import look_at_deviations
from sweep.plan import set_point
from sweep.plant import evaluate
from sweep.study import read_text
from sweep.workflow.batch import batch

TEXT = Path("studies/acylation.toml").read_text(encoding="utf-8")
DRAINED = 'events = [{ time = "0 s", set = { "cooling.kind" = "adiabatic" } }]'
MORE = f"""
[[events]]
when = {{ temperature = {{ above = "53 degC" }} }}
set  = {{ "recipe.feeds.anhydride.rate_factor" = 0 }}
[scenarios.drained]
at = "1 h"
{DRAINED}
[scenarios.flood]
set = {{ "recipe.charge.volume" = {{ times = 1.9 }} }}
[scenarios.colder]
set = {{ "recipe.charge.temperature" = {{ plus = "-5 K" }} }}
[scenarios.wide_open]
set = {{ "recipe.feeds.anhydride.rate_factor" = {{ times = 50 }} }}
"""
STUDY = read_text(TEXT.replace('max_temperature     = { at_most = "70 degC" }', 'max_temperature = { at_most = "60 degC" }') + MORE)


@pytest.fixture(scope="module")
def lines():
    return look_at_deviations(STUDY, set_point(STUDY)).lines()


def _of(lines, name):
    return next(line for line in lines if line["scenario"] == name)


def test_the_most_dangerous_first(lines):
    names = [line["scenario"] for line in lines]
    assert "flood" == names[0]  # it cannot be carried out
    margins = [line["margin_K"] for line in lines[1:]]
    assert sorted(margins) == margins
    assert {"as written", "drained", "flood", "colder", "wide_open"} == set(names)


def test_figures_are_those_of_the_sweep(lines):
    row = evaluate(STUDY, pd.DataFrame(index=[0])).iloc[0]
    for name in ("drained", "colder", "wide_open"):
        line = _of(lines, name)
        assert row[f"{name}.max_temperature_K"] == line["max_temperature_K"]
        assert row[f"{name}.conversion"] == line["conversion"]
        assert 333.15 - line["max_temperature_K"] == pytest.approx(line["margin_K"])
    assert row["mtsr_K"] == _of(lines, "as written")["mtsr_K"]
    assert _of(lines, "drained")["mtsr_K"] >= row["mtsr_K"] - 10.0


def test_what_the_interlock_did_and_when_a_limit_is_reached(lines):
    wide = _of(lines, "wide_open")
    [interlock] = wide["events"]
    assert "temperature above 53 degC" == interlock["cause"]
    assert 600.0 < interlock["acts_s"] < 1200.0
    [mtt, limit] = wide["reaches"]
    assert {"MTT", "limit max_temperature"} == {mtt["name"], limit["name"]}
    assert limit["after_s"] is not None
    assert interlock["acts_s"] < limit["after_s"] < 1500.0
    assert "max_temperature" in wide["broken"]
    assert not wide["holds"]
    assert _of(lines, "as written")["events"][0]["acts_s"] is None
    assert [None, None] == [entry["after_s"] for entry in _of(lines, "colder")["reaches"]]


def test_time_to_act_counts_from_the_deviation(lines):
    """From an hour on without a jacket: against a batch that has this event in its recipe, sampled every second."""
    from sweep.plant import profile

    drained = _of(lines, "drained")
    assert 3600.0 == drained["begins_s"]
    lost = '[[events]]\ntime = "1 h"\nset = { "cooling.kind" = "adiabatic" }\n'
    alone = read_text(TEXT.replace("[target]", lost + "[target]") + MORE.split("[scenarios")[0])
    column = profile(alone, {}, range(3600, 21_600))["temperature_K"]
    above = column >= 333.15
    expected = float(above.idxmax()) if above.any() else math.inf
    after = next(entry["after_s"] for entry in drained["reaches"] if entry["name"] == "limit max_temperature")
    assert (after is None) == math.isinf(expected)
    if after is not None:
        assert expected == pytest.approx(after, abs=1.0)


def test_a_scenario_that_cannot_be_carried_out_says_why(lines):
    flood = _of(lines, "flood")
    assert "failed" == flood["status"]
    assert "vessel.volume" in flood["reason"]
    assert not flood["holds"]
    assert flood["max_temperature_K"] is None


def test_a_limit_of_its_own_takes_the_place_of_the_recipe_s():
    own = TEXT.replace("[limits]", '[limits]\n"drained.max_temperature" = { at_most = "90 degC" }') + MORE
    found = look_at_deviations(read_text(own), set_point(STUDY))
    drained = _of(found.lines(), "drained")
    assert 363.15 - drained["max_temperature_K"] == pytest.approx(drained["margin_K"])
    assert "max_temperature" not in drained["broken"]


def test_batch_writes_the_table_and_prints_it(tmp_path, capsys):
    from sweep.cli.main import main

    file = tmp_path / "odd.toml"
    file.write_text(STUDY.text, encoding="utf-8")
    assert 0 == main(["batch", str(file), "--out", str(tmp_path / "out"), "--no-figures"])
    printed = capsys.readouterr().out
    assert "Deviations, the most dangerous first" in printed
    assert "flood: failed" in printed
    assert "interlocks that acted: temperature above 53 degC" in printed
    table = pd.read_csv(tmp_path / "out/batch/analyses/deviations.csv")
    assert 5 == len(table)
    assert {"scenario", "margin_K", "after_MTT_s", "events", "does_not_hold"} <= set(table.columns)
    block = json.loads((tmp_path / "out/batch/summary.json").read_text())["deviations"]
    schema = json.loads(Path("sweep/workflow/summary.schema.json").read_text())["properties"]["deviations"]
    jsonschema.validate(block, schema)


def test_the_report_shows_the_table(tmp_path):
    from sweep.report.deviations import section
    from sweep.report.results import read

    batch(STUDY, out=tmp_path, figures=False)
    found = section(read(tmp_path / "batch", whole=False))
    dangers, outcomes, words = found.blocks
    for table, columns in ((dangers, 9), (outcomes, 4)):
        assert 5 == len(table.rows)
        assert columns == len(table.head) == len(table.rows[0])
        assert "flood" == table.rows[0][0].text
    assert {"yes", "no", "failed"} == {row[1].text for row in dangers.rows}
    assert all((row[2].text == "–") == (row[1].text == "yes") for row in dangers.rows)
    assert any("wide open: from the start" in text for text in words.sentences)


def test_without_scenarios_the_section_says_so(tmp_path):
    from sweep.report.deviations import section
    from sweep.report.results import read

    batch(read_text(TEXT), out=tmp_path, figures=False)
    [words] = section(read(tmp_path / "batch", whole=False)).blocks
    assert "no [scenarios]" in words.sentences[0]
