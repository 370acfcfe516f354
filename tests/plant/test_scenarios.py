"""Scenarios: each the same as its recipe written out, to the last digit; what has failed is not repaired by an interlock; worst moments."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.base.errors import StudyError
from sweep.plant import evaluate, limits, margins, responses
from sweep.study import read_text

TEXT = Path("studies/acylation.toml").read_text(encoding="utf-8").partition("[uncertain]")[0]  # what is uncertain counts in equivalents
ONE = pd.DataFrame(index=[0])
AMOUNT = 'amount      = { anhydride = { equivalents = 1.06, of = "amine" } }'
CHARGED = '[recipe.charge]\ntemperature   = "{} degC"'
RESOLVED = 'amount      = { anhydride = "4664 mol" }'


def _beside(scenario: str, name: str = "odd") -> pd.DataFrame:
    """Return the columns of a scenario of the demo, as those of a study of its own."""
    study = read_text(TEXT + f"\n[scenarios.{name}]\n{scenario}\n")
    table = evaluate(study, ONE)
    mine = [c for c in table.columns if c.startswith(f"{name}.")]
    return table[mine].rename(columns=lambda c: c.removeprefix(f"{name}."))


def _alone(*replaced: tuple[str, str], events: str = "") -> pd.DataFrame:
    text = TEXT
    for old, new in replaced:
        assert 1 == text.count(old)
        text = text.replace(old, new)
    if RESOLVED in text:  # an uncertain input of the demo acts on the equivalents
        text = text.replace("amount.anhydride.equivalents", "amount.anhydride")
    study = read_text(text.replace("[target]", events + "[target]"))
    return evaluate(study.without_failure(), ONE)


def _event(cause: str, sets: str) -> str:
    return f"[[events]]\n{cause}\nset = {{ {sets} }}\n"


LOST = '"cooling.flow" = "0 m3/h"'
DRAINED = '"cooling.kind" = "adiabatic"'
UNSTIRRED = '"vessel.U" = "93 W/m2/K", "vessel.stirrer_power" = "0 W", "reactions.acylation.rate_constant.value" = "1e-4 L/mol/s"'
STIRRED = '"vessel.U" = "310 W/m2/K", "vessel.stirrer_power" = "3 kW", "reactions.acylation.rate_constant.value" = { times = 1 }'
RESTORED = '"vessel.U" = "restored", "vessel.stirrer_power" = "restored", "reactions.acylation.rate_constant.value" = "restored"'
SAME = {
    "coolant lost, jacket standing": (f'events = [{{ time = "2 h", set = {{ {LOST} }} }}]', (), _event('time = "2 h"', LOST)),
    "counted from a moment": (f'at = "90 min"\nevents = [{{ time = "30 min", set = {{ {LOST} }} }}]', (), _event('time = "2 h"', LOST)),
    "counted from the end of a feed": (
        f'at = {{ end_of = "anhydride" }}\nevents = [{{ time = "10 min", set = {{ {LOST} }} }}]', (), _event('time = "200 min"', LOST),
    ),
    "jacket drained": (f'events = [{{ time = "2 h", set = {{ {DRAINED} }} }}]', (), _event('time = "2 h"', DRAINED)),
    "coolant warm": ('set = { "cooling.inlet" = "20 degC" }', (('"5 degC"', '"20 degC"'),), ""),
    "coolant warmer by": ('set = { "cooling.inlet" = { plus = "15 K" } }', (('"5 degC"', '"20 degC"'),), ""),
    "stirrer stopped and started": (
        f'events = [{{ time = "2 h", set = {{ {UNSTIRRED} }} }}, {{ time = "150 min", set = {{ {RESTORED} }} }}]', (),
        _event('time = "2 h"', UNSTIRRED) + _event('time = "150 min"', STIRRED),
    ),
    "feed too fast": (
        'set = { "recipe.feeds.anhydride.rate_factor" = 2 }', (), _event('time = "0 s"', '"recipe.feeds.anhydride.rate_factor" = 2'),
    ),
    "feed that does not stop": (
        'set = { "recipe.feeds.anhydride.amount.anhydride" = { times = 1.25 }, "recipe.feeds.anhydride.duration" = { times = 1.25 } }',
        ((AMOUNT, AMOUNT.replace("1.06", repr(1.06 * 1.25))), ('"3 h"', '"225 min"')), "",
    ),
    "no feed": (
        'set = { "recipe.feeds.anhydride.rate_factor" = 0 }', (), _event('time = "0 s"', '"recipe.feeds.anhydride.rate_factor" = 0'),
    ),
    "wrong temperature": (
        'set = { "recipe.charge.temperature" = { plus = "10 K" } }', ((CHARGED.format(45), CHARGED.format(55)),), "",
    ),
    "overcharge": (
        'set = { "recipe.charge.concentration.amine" = "2.5 mol/L" }', (('amine = "2.2 mol/L"', 'amine = "2.5 mol/L"'), (AMOUNT, RESOLVED)), "",
    ),
    "more of the whole charge": ('set = { "recipe.charge.volume" = "2.2 m3" }', (('"2.0 m3"', '"2.2 m3"'), (AMOUNT, RESOLVED)), ""),
    "late initiation": (
        'events = [{ time = "0 s", set = { "reactions.acylation.rate_constant.value" = { times = 0.02 } } },'
        ' { time = "30 min", set = { "reactions.acylation.rate_constant.value" = "restored" } }]', (),
        _event('time = "0 s"', '"reactions.acylation.rate_constant.value" = { times = 0.02 }')
        + _event('time = "30 min"', '"reactions.acylation.rate_constant.value" = { times = 1 }'),
    ),
    "insulation lost": ('set = { "vessel.heat_loss.UA" = "60 W/K" }', (('UA = "12 W/K"', 'UA = "60 W/K"'),), ""),
    "an interlock of its own": (
        f'events = [{{ when = {{ temperature = {{ above = "48 degC" }} }}, delay = "2 min", set = {{ {LOST} }} }}]', (),
        _event('when = { temperature = { above = "48 degC" } }\ndelay = "2 min"', LOST),
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", list(SAME))
def test_the_same_as_the_recipe_written_out(name):
    scenario, replaced, events = SAME[name]
    found, expected = _beside(scenario), _alone(*replaced, events=events)
    pd.testing.assert_frame_equal(expected, found, check_exact=True)
    plain = evaluate(read_text(TEXT).without_failure(), ONE)
    assert not plain.equals(found)
    assert found["energy_balance_error"][0] < 1e-6


INTERLOCK = _event('when = { temperature = { above = "49 degC" } }', '"cooling.flow" = "20 m3/h", "recipe.feeds.anhydride.rate_factor" = 0')


def test_an_interlock_does_not_repair_what_failed():
    """Coolant lost: opening the valve further does nothing, stopping the feed does; a stuck feed is not stopped, and the coolant helps."""
    text = TEXT.replace("[target]", INTERLOCK + "[target]") + (
        f'\n[scenarios.lost]\nevents = [{{ time = "12 min", set = {{ {LOST} }} }}]\n'
        '[scenarios.stuck]\nset = { "recipe.feeds.anhydride.rate_factor" = 1 }\n'
        '[scenarios.fast]\nset = { "recipe.feeds.anhydride.rate_factor" = { times = 2 } }\n'
    )
    found = evaluate(read_text(text), ONE).iloc[0]
    only_stop = _event('when = { temperature = { above = "49 degC" } }', '"recipe.feeds.anhydride.rate_factor" = 0')
    expected = _alone(events=_event('time = "12 min"', LOST) + only_stop).iloc[0]
    assert expected["max_temperature_K"] == pytest.approx(found["lost.max_temperature_K"], abs=1e-9)
    assert found["conversion"] < 0.9
    assert found["stuck.conversion"] > 0.98
    assert found["fast.conversion"] < 0.9  # a pump that is too fast can still be stopped


def test_the_worst_moment_is_found():
    """Against a dense scan of moments."""
    study = read_text(TEXT + f'\n[scenarios.lost]\nat = "worst"\nevents = [{{ time = "0 s", set = {{ {DRAINED} }} }}]\n')
    found = evaluate(study, ONE).iloc[0]
    times = np.linspace(0.0, 21_600.0, 217)
    scan = read_text(TEXT + f'\n[scenarios.lost]\nat = "0 s"\nevents = [{{ time = "0 s", set = {{ {DRAINED} }} }}]\n')
    column = evaluate(scan, pd.DataFrame({"scenarios.lost.at": times}))["lost.max_temperature_K"]
    assert column.max() - 0.02 <= found["lost.max_temperature_K"]
    assert times[int(column.argmax())] == pytest.approx(found["lost.at_s"], abs=300.0)


def test_limits_on_a_scenario():
    limit = '"lost.max_temperature" = { at_most = "60 degC" }\nlost.tmr_ad = { at_least = "24 h" }\n'
    lost = f'\n[scenarios.lost]\nevents = [{{ time = "1 h", set = {{ {DRAINED} }} }}]\n'
    study = read_text(TEXT.replace("[limits]", "[limits]\n" + limit) + lost)
    table = evaluate(study, ONE)
    rows = limits(study)
    assert ["lost.max_temperature", "lost.tmr_ad"] == [row.name for row in rows if "." in row.name]
    margin = dict(zip([row.name for row in rows], margins(study, table)[0], strict=True))
    assert 333.15 - table["lost.max_temperature_K"][0] == pytest.approx(margin["lost.max_temperature"])
    assert table["lost.tmr_ad_s"][0] - 86_400.0 == pytest.approx(margin["lost.tmr_ad"])
    assert [r.column for r in responses(study)] == list(table.columns)


def test_a_scenario_that_cannot_be_carried_out_fails_alone():
    study = read_text(TEXT + '\n[scenarios.flood]\nset = { "recipe.charge.volume" = { times = 1.9 } }\n')
    points = pd.DataFrame({"dosing_time": [3600.0, 7200.0]})
    table = evaluate(study, points)
    assert ["done", "done"] == table["status"].tolist()
    assert ["failed", "failed"] == table["flood.status"].tolist()
    assert "under this scenario: vessel.volume" in table["flood.reason"][0]
    assert table["flood.max_temperature_K"].isna().all()


def test_scenarios_do_not_depend_on_the_cut_of_the_table():
    study = read_text(TEXT + "\n[deviations]\nusual = true\n")
    rng = np.random.default_rng(3)
    points = pd.DataFrame({v.name: rng.uniform(v.low, v.high, 24) for v in study.variables})
    whole = evaluate(study, points)
    pieces = pd.concat([evaluate(study, points.iloc[a:b]) for a, b in ((0, 5), (5, 6), (6, 24))])
    pd.testing.assert_frame_equal(whole, pieces, check_exact=True)
    worst = [column for column in whole.columns if column.endswith(".energy_balance_error")]
    assert len(worst) >= 14
    assert whole[worst].max().max() < 1e-6


WRONG = {
    "nothing": ("", "scenarios.odd", "deviates in something"),
    "what is not written": ('set = { "vessel.fouling" = 2 }', "scenarios.odd.set.vessel.fouling", "not known here"),
    "an event on what does not exist": (
        'events = [{ time = "1 h", set = { "recipe.feeds.amine.rate_factor" = 0 } }]', "scenarios.odd.events.0.set.recipe.feeds.amine.rate_factor",
        "not known here",
    ),
    "a feed that is not there": (
        'at = { end_of = "acid" }\nevents = [{ time = "0 s", set = { "vessel.U" = { times = 0.5 } } }]', "scenarios.odd.at", "of this recipe",
    ),
    "worst for no response": (
        'at = "worst"\nworst_for = "drama"\nevents = [{ time = "0 s", set = { "vessel.U" = { times = 0.5 } } }]', "scenarios.odd.worst_for",
        "no response has this name",
    ),
    "a moment of nothing": ('at = "1 h"\nset = { "vessel.U" = { times = 0.5 } }', "scenarios.odd.at", "nothing of it happens at a moment"),
    "restored at the start": ('set = { "vessel.U" = "restored" }', "scenarios.odd.set", "nothing has failed yet"),
    "a unit of something else": ('set = { "vessel.U" = "5 K" }', "scenarios.odd.set.vessel.U", "measures something else"),
}  # fmt: skip


@pytest.mark.parametrize("name", list(WRONG))
def test_wrong_scenarios(name):
    scenario, key, because = WRONG[name]
    with pytest.raises(StudyError) as caught:
        read_text(TEXT + f"\n[scenarios.odd]\n{scenario}\n")
    assert [key] == [f.key for f in caught.value.faults]
    assert because in caught.value.faults[0].because


def test_a_limit_on_a_scenario_that_is_not_there():
    with pytest.raises(StudyError, match=r"\[scenarios.lost\] is not written"):
        read_text(TEXT.replace("[limits]", '[limits]\n"lost.max_temperature" = { at_most = "60 degC" }'))


def test_sizes_of_the_usual_deviations_can_be_changed():
    sizes = '\n[deviations]\nusual = true\nat = "1 h"\nwarmer_coolant = "3 K"\n'
    study = read_text(TEXT + sizes + '[scenarios.charge_colder]\nset = { "vessel.U" = "300 W/m2/K" }\n')
    assert 3.0 == study.values["scenarios.coolant_warm.set.cooling.inlet.plus"]
    assert 3600.0 == study.values["scenarios.coolant_lost.at"]
    [own] = [s for s in study.scenarios if s.name == "charge_colder"]  # a scenario of the study's own counts, not the usual one of its name
    assert not own.sets
    with pytest.raises(StudyError, match="measures something else"):
        read_text(TEXT + '\n[deviations]\nusual = true\nwarmer_coolant = "3 min"\n')


def test_a_size_of_a_scenario_may_be_a_variable():
    """The longest outage that is tolerable: where the margin of a limit on the scenario changes its sign."""
    text = TEXT.replace("[limits]", '[limits]\n"outage.max_temperature" = { at_most = "55 degC" }').replace(
        "[window]", 'outage = { sets = "scenarios.outage.events.1.time", from = "1 min", to = "5 h", levels = 3 }\n[window]'
    )  # fmt: skip
    back = '{ time = "10 min", set = { "cooling.kind" = "restored" } }'
    text += f'\n[scenarios.outage]\nat = "1 h"\nevents = [{{ time = "0 s", set = {{ {DRAINED} }} }}, {back}]\n'
    study = read_text(text)
    table = evaluate(study, pd.DataFrame({"outage": [60.0, 600.0, 6000.0, 18_000.0]}))
    column = table["outage.max_temperature_K"]
    assert column.is_monotonic_increasing
    margin = margins(study, table)[:, [row.name for row in limits(study)].index("outage.max_temperature")]
    assert margin[0] > 0.0 > margin[-1]
    assert ["outage"] == [s.name for s in study.judged().scenarios]
