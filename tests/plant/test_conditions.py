"""Events by condition in whole studies: the same as a recipe with the times written, for any cut of the table, and seen by every figure."""

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.plant import evaluate, events_of, failure_times, profile
from sweep.study import read_text

TEXT = Path("studies/acylation.toml").read_text(encoding="utf-8")
STOP = """
[[events]]
when = { temperature = { above = "48.6 degC" } }
set  = { "recipe.feeds.anhydride.rate_factor" = 0, "cooling.inlet" = "0 degC" }
[[events]]
when  = { temperature = { below = "47.5 degC" } }
delay = "3 min"
once  = false
hysteresis = "0.2 K"
set   = { "recipe.feeds.anhydride.rate_factor" = 1 }
"""
CONDITIONS = TEXT.replace("[target]", STOP + "[target]")


def _points(study, count: int = 40) -> pd.DataFrame:
    rng = np.random.default_rng(7)
    return pd.DataFrame({v.name: rng.uniform(v.low, v.high, count) for v in study.variables})


def test_equal_to_a_recipe_with_the_times_written():
    study = read_text(CONDITIONS)
    found = [one for one in events_of(study) if one.acts is not None]
    assert {0, 1, 2} == {one.event for one in found}
    written = ""
    for one in found:
        sets = {0: STOP.split("set  = ")[1].split("\n")[0], 1: STOP.split("set   = ")[1].split("\n")[0]}.get(one.event)
        if sets:
            written += f'[[events]]\ntime = "{one.acts!r} s"\nset = {sets}\n'
    plain = read_text(TEXT.replace("[target]", written + "[target]"))
    pd.testing.assert_frame_equal(evaluate(plain, pd.DataFrame(index=[0])), evaluate(study, pd.DataFrame(index=[0])), check_exact=True)


def test_results_do_not_depend_on_the_cut_of_the_table():
    study = read_text(CONDITIONS)
    points = _points(study)
    whole = evaluate(study, points)
    pieces = pd.concat([evaluate(study, points.iloc[a:b]) for a, b in ((0, 1), (1, 18), (18, 40))])
    pd.testing.assert_frame_equal(whole, pieces, check_exact=True)
    assert {"done"} == set(whole["status"])
    assert whole["energy_balance_error"].max() < 1e-6


def test_failure_figures_see_the_batch_as_it_went():
    """A feed stopped for good leaves less to react: the highest MTSR is that of the moments before."""
    once = CONDITIONS.split("[[events]]\nwhen  =")[0] + "[target]" + CONDITIONS.split("[target]")[1]
    study, plain = read_text(once), read_text(TEXT)
    [stop] = [one for one in events_of(study) if one.event == 0]
    times = [0.5 * stop.met, stop.met, 1.3 * stop.met]
    cut, whole = failure_times(study, {}, times), failure_times(plain, {}, times)
    assert whole["mtsr_K"][:2].tolist() == pytest.approx(cut["mtsr_K"][:2].tolist(), abs=1e-3)
    fed = profile(study, {}, [stop.met, 20_000.0])
    made = fed[["n_amide_mol", "n_diamide_mol", "n_tar_mol"]].sum(axis=1) + fed["n_anhydride_mol"] + fed["n_diamide_mol"]
    assert made[0] == pytest.approx(made[1], rel=1e-9)  # nothing more came in
    last = failure_times(study, {}, [2.0 * stop.met])
    left, hot = last["accumulation"][0], last["mtsr_K"][0] - last["temperature_K"][0]
    assert left < 0.03
    assert left * evaluate(study, pd.DataFrame(index=[0]))["adiabatic_rise_synthesis_K"][0] == pytest.approx(hot, rel=0.05)


def test_a_level_may_be_a_variable():
    study = read_text(CONDITIONS)
    frame = pd.DataFrame({"events.0.when.temperature.above": [319.15, 321.75, 340.0]})
    column = evaluate(study, frame)["max_temperature_K"]
    assert column[0] < column[1] <= column[2]


@pytest.mark.parametrize("name", ["conversion", "c_amide", "n_amine"])
def test_conditions_on_what_reacts(name):
    """Met exactly at the level, in amounts too, where feeds come in."""
    level = {"conversion": "0.5", "c_amide": '"0.5 mol/L"', "n_amine": '"2 kmol"'}[name]
    sense = "below" if name == "n_amine" else "above"
    event = f'[[events]]\nwhen = {{ {name} = {{ {sense} = {level} }} }}\nset = {{ "vessel.U" = {{ times = 0.9 }} }}\n'
    study = read_text(TEXT.replace("[target]", event + "[target]"))
    one = next(one for one in events_of(study) if one.event == 0)
    line = profile(study, {}, [one.met]).iloc[0]
    value = {"conversion": line["conversion"], "c_amide": line["n_amide_mol"] / line["volume_m3"], "n_amine": line["n_amine_mol"]}[name]
    assert {"conversion": 0.5, "c_amide": 500.0, "n_amine": 2000.0}[name] == pytest.approx(value, rel=1e-6)


def test_a_kind_of_cooling_switched_by_a_condition():
    """Adiabatic until 47 degC, then a cold jacket that starts at its own temperature; its warming is looked for from there on."""
    events = (
        '[[events]]\nname = "warm"\nwhen = { temperature = { above = "47 degC" } }\n'
        'set = { "cooling.kind" = "jacket", "cooling.start" = "10 degC" }\n'
        '[[events]]\nafter = "warm"\nwhen = { jacket_temperature = { above = "14 degC" } }\nset = { "vessel.U" = { times = 0.5 } }\n'
        '[[events]]\nwhen = { cooling_duty = { above = "20 kW" } }\nset = { "vessel.stirrer_power" = "1 kW" }\n'
    )
    text = TEXT.replace('kind      = "jacket"', 'kind      = "adiabatic"').replace("[target]", events + "[target]")
    text = text.replace('flow      = "9 m3/h"', 'flow      = "0.5 m3/h"')
    study = read_text(text)
    met = {one.event: one.met for one in events_of(study) if one.met is not None}
    assert {0, 1, 2, 3} == set(met)
    assert met[0] <= met[2] < met[1]
    lines = profile(study, {}, [met[0], met[1], met[2] - 1e-3, met[2] + 60.0])
    assert 320.15 == pytest.approx(lines["temperature_K"][0], abs=1e-6)
    assert 283.15 == pytest.approx(lines["jacket_temperature_K"][0], abs=1e-6)
    assert 287.15 == pytest.approx(lines["jacket_temperature_K"][1], abs=1e-5)
    assert evaluate(study, pd.DataFrame(index=[0]))["energy_balance_error"][0] < 1e-6


def test_every_condition_of_the_demo_is_met_at_its_level():
    """Under each of its scenarios: what the search found is what the batch, marched as it went, has at that moment."""
    from sweep.plant import deviations_of

    text = Path("studies/nitration.toml").read_text(encoding="utf-8").replace("usual = true", 'usual = true\nat = "4.25 h"')
    study = read_text(text)
    plain = replace(study.without_failure(), scenarios=study.scenarios)
    seen = 0
    for one in deviations_of(plain):
        for fired in one.fired:
            event = one.study.events[fired.event]
            if event.when is None or fired.met is None or one.scenario is None or one.scenario.sets or one.scenario.worst or one.scenario.feed:
                continue
            line = profile(plain.under(one.scenario), {}, [fired.met]).iloc[0]
            value = {"temperature": line["temperature_K"], "conversion": line["conversion"]}[event.when.quantity]
            level = study.values[event.when.path]
            inside = value >= level - 1e-6 if event.when.sense == "above" else value <= level + 1e-6
            assert inside, (one.scenario.name, event)
            seen += abs(value - level) < 1e-5 * level
    assert seen >= 8
