"""A run from study to answers: the schema, what is resumed, and what a study need not ask for."""

import json
from functools import partial
from importlib.resources import files

import jsonschema
import pandas as pd
import pytest

import sweep
import sweep.workflow.run as workflow
from sweep.analysis.set_point import look_at_set_point
from sweep.study import read_text
from sweep.workflow.run import run
from tests.texts import SMALL, isothermal

QUICK = SMALL.replace("levels = 20", "levels = 3").replace("levels = 30", "levels = 3")


@pytest.fixture(scope="module")
def schema():
    return json.loads(files("sweep.workflow").joinpath("summary.schema.json").read_text())


def _cut(text, *headings):
    """Return a study without some of its sections."""
    for heading in headings:
        start = text.index(heading)
        end = text.find("\n[", start + 1)
        text = text[:start] + (text[end + 1 :] if end > 0 else "")
    return text


UNCERTAIN = """
[uncertain]
k = { of = "reactions.main.rate_constant.value", distribution = "lognormal", relative_sd = 0.2 }
E = { of = "reactions.main.rate_constant.activation_energy", distribution = "normal", sd = "2 kJ/mol" }
U = { of = "vessel.U", distribution = "triangular", low = "200 W/m2/K", high = "320 W/m2/K" }
[[correlations]]
between = ["k", "E"]
rank = 0.5
[risk]
draws = 64
rare_draws = 100
[sensitivity]
trajectories = 4
blocks = 16
draws = 32
"""
DECIDE = """
[ranges]
points = 16
[optimum]
maximise = "productivity"
generations = 2
population = 8
"""
CHANCE = """
[ranges]
probability = 0.5
draws = 16
points = 16
[optimum]
minimise = ["cycle_time", "per_product_S"]
probability = 0.5
draws = 16
verify = 64
generations = 1
population = 8
[risk.map]
steps = 10
draws = 16
"""
MILD = _cut(QUICK, "[failure]").replace('mtsr = { at_most = "85 degC" }', "")  # without the figures of a failure: quick to march
WHOLE = {
    "decisions": QUICK + DECIDE,
    "decisions with a probability": MILD + UNCERTAIN + CHANCE,
    "decisions without limits": _cut(QUICK, "[limits]", "[target]", "[batch_time]") + DECIDE.replace('"productivity"', '"heat_release"'),
    "nothing to decide": MILD.replace("62 degC", "26 degC") + DECIDE,
    "nothing to decide with a probability": MILD.replace("62 degC", "26 degC") + UNCERTAIN + CHANCE,
    "uncertain": QUICK + UNCERTAIN,
    "uncertain without target": _cut(QUICK, "[target]", "[batch_time]") + UNCERTAIN,
    "uncertain without limits": _cut(QUICK, "[limits]", "[target]", "[batch_time]") + UNCERTAIN,
    "uncertain to target": QUICK.replace('batch_time = "6 h"', 'batch_time = "to target"') + UNCERTAIN,
    "uncertain runaway": QUICK.replace('"-80 kJ/mol"', '"-3000 kJ/mol"') + UNCERTAIN,
    "uncertain and never reached": QUICK.replace("conversion = 0.9", "conversion = 0.999999") + UNCERTAIN,
    "whole": QUICK,
    "without target": _cut(QUICK, "[target]", "[batch_time]"),
    "without failure": _cut(QUICK, "[failure]").replace('mtsr = { at_most = "85 degC" }', ""),
    "without limits": _cut(QUICK, "[limits]"),
    "without window": _cut(QUICK, "[window]"),
    "without variables": _cut(QUICK, "[window]", "[variables]"),
    "one variable": "\n".join(line for line in _cut(QUICK, "[window]").splitlines() if not line.startswith("start = ")),
    "never reached": QUICK.replace("conversion = 0.9", "conversion = 0.999999").replace('longest = "24 h"', 'longest = "6 h"'),
    "to target": QUICK.replace('batch_time = "6 h"', 'batch_time = "to target"'),
    "bare isothermal": isothermal("A -> R | 1e-3 1/s"),
    "nothing asked": _cut(isothermal("A -> R | 1e-3 1/s"), "[target]"),
    "runaway": QUICK.replace('"-80 kJ/mol"', '"-3000 kJ/mol"'),
}


@pytest.mark.parametrize("name", WHOLE)
def test_summary_keeps_its_schema_whatever_is_asked(tmp_path, schema, name):
    found = run(read_text(WHOLE[name]), tmp_path, workers=1, figures=False)
    written = json.loads((tmp_path / "summary.json").read_text())
    jsonschema.validate(written, schema)
    assert written["points"]["planned"] == sum(len(t) for t in found.points())
    assert written["not_assessed"]


def test_decisions_are_the_same_bytes_whatever_interrupts_them(tmp_path, monkeypatch):
    """Cut off in each long search, and gone on with: the answers of an undisturbed run, and nothing of the searches is left."""
    study = read_text(MILD + UNCERTAIN + CHANCE)
    run(study, tmp_path / "whole", workers=1, figures=False)
    calls = {"count": 0}

    def cut_off(find):
        def found(study, evaluate, memory):
            def sometimes(points):
                calls["count"] += 1
                if calls["count"] % 7 == 0:
                    raise KeyboardInterrupt
                return evaluate(points)

            return find(study, sometimes, memory)

        return found

    for name in ("assess_map", "assess_ranges", "assess_optimum"):
        monkeypatch.setattr(f"sweep.workflow.run.{name}", cut_off(getattr(workflow, name)))
    for _ in range(200):
        try:
            run(study, tmp_path / "cut", workers=1, figures=False)
            break
        except KeyboardInterrupt:
            continue
    assert calls["count"] > 14
    assert (tmp_path / "whole" / "summary.json").read_bytes() == (tmp_path / "cut" / "summary.json").read_bytes()
    for name in ("ranges", "ranges_corners", "optimum_search", "optimum_front", "probability_map"):
        assert (tmp_path / "whole" / "analyses" / f"{name}.csv").read_bytes() == (tmp_path / "cut" / "analyses" / f"{name}.csv").read_bytes()
    assert not (tmp_path / "cut" / "searches").exists()


def test_uncertain_answers_are_the_same_bytes_for_any_number_of_workers(tmp_path):
    for workers in (1, 2):
        run(read_text(QUICK + UNCERTAIN), tmp_path / str(workers), workers=workers, figures=False)
    names = sorted(path.relative_to(tmp_path / "1") for path in (tmp_path / "1").rglob("*") if path.suffix in (".csv", ".parquet"))
    assert {"risk_limits.csv", "sensitivity_shares.csv", "sensitivity_spread.csv"} <= {path.name for path in names}
    for name in [*names, "summary.json"]:
        assert (tmp_path / "1" / name).read_bytes() == (tmp_path / "2" / name).read_bytes(), name


def test_an_interrupted_risk_goes_on_to_the_same_answer(tmp_path, monkeypatch):
    whole = run(read_text(QUICK + UNCERTAIN), tmp_path / "whole", workers=1, figures=False)
    monkeypatch.setattr("sweep.workflow.run.assess_sensitivity", lambda *_: (_ for _ in ()).throw(KeyboardInterrupt))
    with pytest.raises(KeyboardInterrupt):
        run(read_text(QUICK + UNCERTAIN), tmp_path / "cut", workers=1, figures=False)
    monkeypatch.undo()
    monkeypatch.setattr("sweep.workflow.run.assess_risk", lambda *_: pytest.fail("what is done is kept"))
    assert whole.summary == run(read_text(QUICK + UNCERTAIN), tmp_path / "cut", workers=1, figures=False).summary
    assert (tmp_path / "whole" / "summary.json").read_bytes() == (tmp_path / "cut" / "summary.json").read_bytes()


@pytest.mark.parametrize(
    ("nearest", "text"),
    [
        ("max_temperature", QUICK.replace('batch_time = "6 h"', 'batch_time = "to target"').replace('"62 degC"', '"54 degC"')),
        ("conversion", _cut(WHOLE["to target"], "[limits]")),
        ("conversion", WHOLE["never reached"].replace('batch_time = "6 h"', 'batch_time = "to target"')),
    ],
    ids=["another limit", "no other", "not reached"],
)
def test_target_at_which_a_batch_is_ended_is_not_its_nearest_limit(nearest, text):
    study = read_text(text)
    assert nearest == look_at_set_point(study, partial(sweep.simulate, study, workers=1)).nearest()["name"]


def test_report_stands_whatever_is_asked(tmp_path):
    for name in ("without target", "without variables", "nothing asked", "runaway"):
        run(read_text(WHOLE[name]), tmp_path / name, workers=1)
        assert (tmp_path / name / "report.html").stat().st_size > 5000


def test_public_names_do_what_they_say(tmp_path):
    study = tmp_path / "study.toml"
    study.write_text(QUICK)
    found = sweep.run(sweep.read_study(study), out=tmp_path / "out", workers=1, figures=False)
    assert found.summary["set_point"]["status"] == "done"
    assert 9 == sum(len(table) for table in found.points())
    table = sweep.simulate(sweep.read_study(study), pd.DataFrame({"dose": [1000.0]}))
    assert 1000.0 == table["dose"][0]
    assert [0.0, 60.0] == sweep.profile(sweep.read_study(study), {"dose": 1000.0}, [0.0, 60.0])["time_s"].tolist()
    with pytest.raises(sweep.SweepError, match="neither a variable"):
        sweep.simulate(sweep.read_study(study), pd.DataFrame({"none": [1.0]}))
    with pytest.raises(AttributeError):
        _ = sweep.nothing


def test_analyses_that_are_done_are_not_done_again(tmp_path, monkeypatch):
    study, told = read_text(QUICK), []
    run(study, tmp_path, workers=1, figures=False)
    answers = (tmp_path / "summary.json").read_bytes()
    (tmp_path / "analyses" / "window_grid.csv").write_text("damaged")
    run(study, tmp_path, workers=1, figures=False, tell=told.append)
    assert ["operating window"] == told
    assert answers == (tmp_path / "summary.json").read_bytes()


def test_every_study_kept_here_reads_without_a_fault():
    from pathlib import Path

    for file in Path("studies").glob("*.toml"):
        study = sweep.read_study(file)
        assert () == study.warnings, file


def test_window_of_each_demo_is_bounded_by_four_limits():
    """A demo is worth reading: its set-point holds every limit, and four different ones end its window."""
    from functools import partial
    from pathlib import Path

    from sweep.analysis.window import window
    from sweep.plant import limits, margins

    for file in Path("studies").glob("*.toml"):
        study = sweep.read_study(file).judged()
        block = window(study, partial(sweep.simulate, study), margins, limits(study)).summary()
        assert block["set_point"]["holds"], file
        assert len(block["limits_binding"]) >= 4, (file, block["limits_binding"])
        assert block["marches"] <= 4040
