"""Events by condition against roots of closed forms. A vessel of water, first-order decay, a feed of one inert liquid: all recomputed here."""

import math

import numpy as np
import pandas as pd
import pytest

from sweep.plant import evaluate, events_of, profile
from sweep.study import read_text
from tests.external.test_heat import water

COOLANT = 'kind = "coolant"\ntemperature = "120 degC"\n'
TAU = 1000.0 * 4180.0 / 2500.0  # s


def event(cause: str, *sets: str) -> str:
    return f"[[events]]\n{cause}\nset = {{ {', '.join(sets)} }}\n"


def heated(*events: str, cooling: str = COOLANT, batch_time: str = "3 h") -> str:
    return water(cooling, batch_time=batch_time) + "\n" + "\n".join(events)


def fired(text: str) -> list[tuple[int, float, float]]:
    return [(one.event, one.met, one.acts) for one in events_of(read_text(text)) if one.met is not None]


def test_heat_up_until_a_temperature():
    """1000 kg of water, UA 2500 W/K, jacket at 120 degC: 100 degC after tau ln 5; then the jacket is cold."""
    text = heated(event('when = { temperature = { above = "100 degC" } }', '"cooling.temperature" = "20 degC"'))
    [(_, met, acts)] = fired(text)
    assert 2690.9801895898 == pytest.approx(met, rel=1e-8)
    assert met == acts
    study, later = read_text(text), 4000.0
    expected = 293.15 + 80.0 * math.exp(-(later - met) / TAU)
    assert expected == pytest.approx(profile(study, {}, [later])["temperature_K"][0], abs=1e-5)
    row = evaluate(study, pd.DataFrame(index=[0])).iloc[0]
    assert 373.15 == pytest.approx(row["max_temperature_K"], abs=1e-6)
    assert row["energy_balance_error"] < 1e-6


def test_a_delay_lets_the_temperature_run_on():
    [(_, met, acts)] = fired(heated(event('when = { temperature = { above = "100 degC" } }\ndelay = "5 min"', '"cooling.temperature" = "20 degC"')))
    assert 2690.9801895898 == pytest.approx(met, rel=1e-8)
    assert met + 300.0 == pytest.approx(acts, rel=1e-15)
    text = heated(event('when = { temperature = { above = "100 degC" } }\ndelay = "5 min"', '"cooling.temperature" = "20 degC"'))
    row = evaluate(read_text(text), pd.DataFrame(index=[0])).iloc[0]
    assert 393.15 - 100.0 * math.exp(-acts / TAU) == pytest.approx(row["max_temperature_K"], abs=1e-5)


def test_a_thermostat_with_hysteresis():
    """Hot above 60 degC: cold jacket; below 50: hot jacket again. Each stretch is one exponential."""
    text = heated(
        event('when = { temperature = { above = "60 degC" } }\nonce = false\nhysteresis = "1 K"', '"cooling.temperature" = "20 degC"'),
        event('when = { temperature = { below = "50 degC" } }\nonce = false\nhysteresis = "1 K"', '"cooling.temperature" = "120 degC"'),
    )
    found = [(k, met) for k, met, _ in fired(text)]
    up, down, again = TAU * math.log(100.0 / 60.0), TAU * math.log(40.0 / 30.0), TAU * math.log(70.0 / 60.0)
    expected, time = [(1, 0.0), (0, up)], up  # at the start it is below 50 degC: the second event holds there already
    while True:
        time += down
        if time > 10_800.0:
            break
        expected.append((1, time))
        time += again
        if time <= 10_800.0:
            expected.append((0, time))
    assert len(expected) > 20
    assert [k for k, _ in expected] == [k for k, _ in found]
    assert [t for _, t in expected] == pytest.approx([t for _, t in found], rel=1e-6)


def test_events_in_one_moment_and_one_that_never_fires():
    """Two conditions that are met at once both fire; one that is not is told with no time."""
    text = heated(
        event('when = { temperature = { above = "70 degC" } }', '"cooling.temperature" = "70 degC"'),
        event('when = { temperature = { above = "70 degC" } }', '"vessel.U" = "250 W/m2/K"'),
        event('when = { temperature = { above = "130 degC" } }', '"cooling.temperature" = "20 degC"'),
    )
    found = events_of(read_text(text))
    assert [0, 1, 2] == [one.event for one in found]
    assert TAU * math.log(2.0) == pytest.approx(found[0].met, rel=1e-8)
    assert found[0].met == found[1].met
    assert found[2].met is None
    assert found[2].acts is None


def test_jacket_temperature_of_a_jacket_that_fills_with_heat():
    """A full jacket without flow: contents and jacket meet; the difference falls with one time constant."""
    jacket = (
        'kind = "jacket"\ninlet = "80 degC"\nflow = "0 m3/h"\nhold_up = "0.5 m3"\nstart = "80 degC"\n'
        'coolant = { density = "1000 kg/m3", heat_capacity = "4180 J/kg/K" }\n'
    )
    text = heated(event('when = { jacket_temperature = { below = "70 degC" } }', '"vessel.U" = "0 W/m2/K"'), cooling=jacket)
    hot, cold, k = 500.0 * 4180.0, 1000.0 * 4180.0, 2500.0
    final = 60.0 * hot / (hot + cold)  # K above 20 degC
    expected = -math.log((50.0 - final) / (60.0 - final)) / (k / hot + k / cold)
    [(_, met, _)] = fired(text)
    assert expected == pytest.approx(met, rel=1e-6)
    assert 343.15 == pytest.approx(profile(read_text(text), {}, [10_000.0])["jacket_temperature_K"][0], abs=1e-5)


DECAY = """
[species.A]
heat_capacity = "100 J/mol/K"
[species.R]
heat_capacity = "100 J/mol/K"
[reactions.r]
equation = "A -> R"
rate_constant = {{ value = "1e-3 1/s" }}
heat = {{ value = "-50 kJ/mol" }}
[cooling]
kind = "isothermal"
[recipe]
batch_time = "2 h"
[recipe.charge]
temperature = "50 degC"
volume = "2 m3"
concentration = {{ A = "1 mol/L" }}
[target]
species = "A"
conversion = 0.9
product = "R"
[accuracy]
relative = 1e-9
[[events]]
when = {{ {when} }}
set = {{ "reactions.r.rate_constant.value" = {{ times = 0.0 }} }}
"""


@pytest.mark.parametrize(
    ("when", "left"),
    [
        ('conversion = { above = 0.7 }', 0.3),
        ('c_A = { below = "0.25 mol/L" }', 0.25),
        ('n_R = { above = "1.2 kmol" }', 0.4),
        ('heat_release = { below = "20 kW" }', 0.2),
        ('cooling_duty = { below = "60 kW" }', 0.6),
    ],
)
def test_first_order_decay_stopped_by_what_it_has_reached(when, left):
    """n falls as exp(-k t); the reaction stops when the condition is met, so that its share stays."""
    study = read_text(DECAY.format(when=when))
    [one] = events_of(study)
    assert -math.log(left) / 1e-3 == pytest.approx(one.met, rel=1e-7)
    assert 2000.0 * left == pytest.approx(profile(study, {}, [7000.0])["n_A_mol"][0], rel=1e-7)


FED = """
[species.a]
molar_mass = "100 g/mol"
density = "1 kg/L"
heat_capacity = "200 J/mol/K"
[species.b]
molar_mass = "50 g/mol"
density = "1 kg/L"
heat_capacity = "100 J/mol/K"
[cooling]
kind = "adiabatic"
[recipe]
batch_time = "1 h"
[recipe.charge]
temperature = "60 degC"
amount = { a = "1000 kg" }
[recipe.feeds.b]
amount = { b = "600 kg" }
temperature = "20 degC"
start = "10 min"
duration = "1 h"
[accuracy]
relative = 1e-9
"""


def test_a_feed_is_stopped_by_the_level_and_goes_on_by_the_clock():
    """1 m3 and 0.6 m3/h from 10 min on: at 1.2 m3 after 30 min. Stopped till 50 min, it ends 20 min late, all of it in."""
    text = FED + event('when = { volume = { above = "1.2 m3" } }', '"recipe.feeds.b.rate_factor" = 0')
    study = read_text(text)
    [one] = events_of(study)
    assert 1800.0 == pytest.approx(one.met, rel=1e-12)
    lines = profile(study, {}, [1200.0, 1800.0, 3000.0, 3600.0])
    assert [1.1, 1.2, 1.2, 1.2] == pytest.approx(lines["volume_m3"].tolist(), rel=1e-12)
    assert 200e3 / 50.0 == pytest.approx(lines["n_b_mol"][3], rel=1e-12)
    assert (1000.0 * 333.15 + 200.0 * 293.15) / 1200.0 == pytest.approx(lines["temperature_K"][3], abs=1e-6)
    again = read_text(text + event('time = "50 min"', '"recipe.feeds.b.rate_factor" = 1'))
    lines = profile(again, {}, [3000.0, 3600.0, 5400.0])
    assert [1.2, 1.3, 1.6] == pytest.approx(lines["volume_m3"].tolist(), rel=1e-12)
    row = evaluate(again, pd.DataFrame(index=[0])).iloc[0]
    assert 5400.0 == pytest.approx(row["cycle_time_s"])  # the batch does not end before its last feed
    assert row["energy_balance_error"] < 1e-6


def test_a_feed_that_runs_faster_ends_sooner():
    study = read_text(FED + event('when = { volume = { above = "1.1 m3" } }', '"recipe.feeds.b.rate_factor" = 2'))
    lines = profile(study, {}, [1200.0, 1500.0, 2700.0, 3600.0])
    assert [1.1, 1.2, 1.6, 1.6] == pytest.approx(lines["volume_m3"].tolist(), rel=1e-12)


def test_dosing_that_follows_the_cooling():
    """A cold feed into warm contents with a heater: fed while above 55 degC, stopped below 54, going on above 56; the course is one of many pieces,
    and mass and energy close over all of them."""
    text = FED.replace('kind = "adiabatic"', 'kind = "coolant"\ntemperature = "60 degC"\n[vessel]\nU = "400 W/m2/K"\narea = "3 m2"')
    text = text.replace('batch_time = "1 h"', 'batch_time = "10 h"') + (
        event('when = { temperature = { below = "54 degC" } }\nonce = false\nhysteresis = "0.5 K"', '"recipe.feeds.b.rate_factor" = 0')
        + event('when = { temperature = { above = "56 degC" } }\nonce = false\nhysteresis = "0.5 K"', '"recipe.feeds.b.rate_factor" = 1')
    )
    study = read_text(text)
    found = [one for one in events_of(study) if one.met is not None]
    assert len(found) >= 6
    assert {0, 1} == {one.event for one in found}
    assert 327.15 == pytest.approx(profile(study, {}, [found[1].met])["temperature_K"][0], abs=1e-6)
    times = np.linspace(0.0, 36_000.0, 2001)
    lines = profile(study, {}, times)
    assert lines["n_b_mol"].iloc[-1] == pytest.approx(600e3 / 50.0, rel=1e-12)
    fed = lines[(lines["n_b_mol"] > 0.0) & (lines["n_b_mol"] < 0.999 * 12_000.0)]
    assert fed["temperature_K"].min() > 327.15 - 1e-3
    assert evaluate(study, pd.DataFrame(index=[0]))["energy_balance_error"][0] < 1e-6


def test_an_event_without_end_is_a_failed_point():
    """Cooling and heating chase each other within a hundredth of a degree: the point fails in words instead of running for ever."""
    text = heated(
        event('when = { temperature = { above = "60.01 degC" } }\nonce = false\nhysteresis = "0.001 K"', '"cooling.temperature" = "20 degC"'),
        event('when = { temperature = { below = "60 degC" } }\nonce = false\nhysteresis = "0.001 K"', '"cooling.temperature" = "120 degC"'),
    )
    row = evaluate(read_text(text), pd.DataFrame(index=[0])).iloc[0]
    assert "failed" == row["status"]
    assert "more than 200 times" in row["reason"]


INSTANT = """
[species.A]
molar_mass = "100 g/mol"
heat_capacity = "180 J/mol/K"
density = "1 kg/L"
[species.B]
molar_mass = "200 g/mol"
heat_capacity = "360 J/mol/K"
density = "1 kg/L"
[species.P]
heat_capacity = "540 J/mol/K"
[reactions.r]
equation = "A + B -> P"
rate_constant = { value = "50 L/mol/s" }
heat = { value = "-120 kJ/mol", at = "60 degC" }
[cooling]
kind = "isothermal"
[recipe]
batch_time = "2 h"
[recipe.charge]
temperature = "60 degC"
amount = { A = "20 kmol" }
[recipe.feeds.B]
amount = { B = "1.8 kmol" }
temperature = "20 degC"
duration = "1 h"
[target]
species = "A"
conversion = 0.05
product = "P"
[failure]
[[events]]
when = { cooling_duty = { above = "50 kW" } }
delay = "30 min"
set = { "recipe.feeds.B.rate_factor" = 0 }
"""


def test_a_fast_reaction_fed_without_accumulation():
    """0.5 mol/s at 120 kJ/mol give off 60 kW, less the feed's own warming (0.5 x 360 x 40 = 7.2 kW); nothing accumulates, MTSR is the process
    temperature. The duty is above 50 kW at once; half an hour later the feed stops, and the heat with it."""
    study = read_text(INSTANT)
    [one] = events_of(study)
    assert 0.0 == pytest.approx(one.met, abs=1.0)
    assert one.met + 1800.0 == pytest.approx(one.acts, rel=1e-12)
    lines = profile(study, {}, [1000.0, 1790.0, 2400.0, 7000.0])
    assert [60e3, 60e3, 0.0, 0.0] == pytest.approx(lines["heat_release_W"].tolist(), rel=1e-4, abs=1e-3)
    assert [52.8e3, 52.8e3, 0.0, 0.0] == pytest.approx(lines["cooling_duty_W"].tolist(), rel=1e-4, abs=1e-3)
    assert 0.5 * one.acts == pytest.approx(lines["n_P_mol"].iloc[-1], rel=1e-9)
    row = evaluate(study, pd.DataFrame(index=[0])).iloc[0]
    assert row["accumulation"] < 1e-3
    assert 333.15 == pytest.approx(row["mtsr_K"], abs=0.02)


def test_one_heated_tank_of_a_series():
    """Cutlip et al., Comput. Appl. Eng. Educ. 6 (1998) 169: 1000 kg, 100 kg/min through, c 2 kJ/kg/K, UA 10 kJ/min/K, inlet 20, steam 250 degC:
    steady at 30.952380952381 degC (recomputed). The stream is a loss of W c to the inlet's temperature. 99 % of the rise: tau ln 100."""
    text = water('kind = "coolant"\ntemperature = "250 degC"\n', U="33.333333333333336 W/m2/K", cp="2 kJ/kg/K")
    text = text.replace("[cooling]", f'heat_loss = {{ UA = "{200e3 / 60.0!r} W/K", ambient = "20 degC" }}\n[cooling]')
    text += event('when = { temperature = { above = "30.84285714285714 degC" } }', '"vessel.U" = { times = 1.0 }')
    study = read_text(text)
    assert 30.952380952381 + 273.15 == pytest.approx(profile(study, {}, [10_800.0])["temperature_K"][0], abs=1e-6)
    [one] = events_of(study)
    assert 1000.0 * 2e3 / (210e3 / 60.0) * math.log(100.0) == pytest.approx(one.met, rel=1e-7)


def test_events_that_wait_for_each_other():
    """Phases: heat to 80 degC; then half an hour of hold; then cool; the end of cooling is looked for only then."""
    text = heated(
        event('name = "hot"\nwhen = { temperature = { above = "80 degC" } }', '"cooling.temperature" = "80 degC"'),
        event('name = "held"\nafter = "hot"\ndelay = "30 min"', '"cooling.temperature" = "20 degC"'),
        event('after = "held"\nwhen = { temperature = { below = "50 degC" } }\ndelay = "1 min"', '"cooling.temperature" = "50 degC"'),
    )
    hot = TAU * math.log(100.0 / 40.0)
    cold = hot + 1800.0 + TAU * math.log(60.0 / 30.0)
    found = fired(text)
    assert [0, 1, 2] == [k for k, _, _ in found]
    assert [hot, hot, cold] == pytest.approx([met for _, met, _ in found], rel=1e-8)  # it is cold at the start too, and not looked for
    assert [hot, hot + 1800.0, cold + 60.0] == pytest.approx([acts for _, _, acts in found], rel=1e-8)


def test_an_event_after_a_time():
    """Armed by the clock: only from two hours on is the temperature looked at."""
    text = heated(
        event('name = "two hours"\ntime = "2 h"', '"cooling.temperature" = "60 degC"'),
        event('after = "two hours"\nwhen = { temperature = { below = "80 degC" } }', '"vessel.U" = "1 W/m2/K"'),
    )
    [_, (k, met, _)] = fired(text)
    at_two = 120.0 - 100.0 * math.exp(-7200.0 / TAU)
    assert 0 == k  # events by time stand last
    assert 7200.0 + TAU * math.log((at_two - 60.0) / 20.0) == pytest.approx(met, rel=1e-8)


def test_a_reset_that_is_armed_by_its_trip_each_time():
    """The thermostat again, its second event armed by the first: nothing fires at the cold start."""
    text = heated(
        event('name = "trip"\nwhen = { temperature = { above = "60 degC" } }\nonce = false\nhysteresis = "1 K"', '"cooling.temperature" = "20 degC"'),
        event('after = "trip"\nwhen = { temperature = { below = "50 degC" } }', '"cooling.temperature" = "120 degC"'),
    )
    found = [(k, met) for k, met, _ in fired(text)]
    up, down, again = TAU * math.log(100.0 / 60.0), TAU * math.log(40.0 / 30.0), TAU * math.log(70.0 / 60.0)
    expected = [(0, up), (1, up + down), (0, up + down + again), (1, up + 2.0 * down + again)]
    assert [k for k, _ in expected] == [k for k, _ in found[:4]]
    assert [t for _, t in expected] == pytest.approx([t for _, t in found[:4]], rel=1e-7)


def test_a_batch_that_is_over_takes_no_more_feed():
    """Stopped by the level at 30 min; what would start it again comes only after the batch's end, though the march goes on beyond it."""
    text = FED.replace('kind = "adiabatic"', 'kind = "coolant"\ntemperature = "20 degC"\n[vessel]\nU = "300 W/m2/K"\narea = "1 m2"')
    text = text.replace("[accuracy]", '[batch_time]\nlongest = "9 h"\n[accuracy]') + (
        event('name = "full"\nwhen = { volume = { above = "1.2 m3" } }', '"recipe.feeds.b.rate_factor" = 0')
        + event('after = "full"\nwhen = { temperature = { below = "30 degC" } }', '"recipe.feeds.b.rate_factor" = 1')
    )
    study = read_text(text)
    row = evaluate(study, pd.DataFrame(index=[0])).iloc[0]
    assert 3600.0 == row["cycle_time_s"]
    line = profile(study, {}, [32_000.0]).iloc[0]
    assert line["temperature_K"] < 303.15
    assert 1.2 == pytest.approx(line["volume_m3"], rel=1e-12)
