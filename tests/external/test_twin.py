"""Whole studies against a twin written from the definitions alone and marched by SciPy's LSODA: profiles, responses, cooling failures."""

import numpy as np
import pandas as pd
import pytest

from sweep.plant import evaluate, failure_path, failure_times, profile
from sweep.study import read_text
from tests.external.twin import Twin

CONTENTS = """
[study]
title = "Invented"
seed = 1
[species]
a = { molar_mass = "100 g/mol", density = "0.95 kg/L", heat_capacity = "1.9 J/g/K" }
b = { molar_mass = "80 g/mol", density = "1.1 kg/L", heat_capacity = { coefficients = [60.0, 0.25, 1e-4, 2e-7], unit = "J/mol/K" } }
c = { molar_mass = "60 g/mol", density = "1.0 kg/L", heat_capacity = "110 J/mol/K" }
p = { molar_mass = "180 g/mol", density = "1.05 kg/L", heat_capacity = { coefficients = [40.0, 0.2], unit = "cal/mol/K" } }
q = { molar_mass = "240 g/mol", density = "1.0 kg/L", heat_capacity = "400 J/mol/K" }
x = { molar_mass = "180 g/mol", density = "1.0 kg/L", heat_capacity = "300 J/mol/K" }
s = { role = "solvent", molar_mass = "92 g/mol", density = "0.87 kg/L", heat_capacity = { coefficients = [100, 0.1, 1e-4], unit = "J/mol/K" } }
[reactions.main]
equation = "a + b -> p"
rate_constant = { value = "0.012 L/mol/min", at = "40 degC", activation_energy = "14 kcal/mol" }
heat = { value = "-95 kJ/mol", at = "40 degC" }
[reactions.side]
equation = "p + c -> q"
orders = { p = 1.5, c = 0.7 }
rate_constant = { value = "1e-6 L^1.2/mol^1.2/s", at = "50 degC", activation_energy = "50 kJ/mol" }
heat = { value = "-40 kJ/mol", at = "25 degC" }
[reactions.decomposition]
equation = "p -> x"
purpose = "decomposition"
rate_constant = { value = "3e-5 1/s", at = "120 degC", activation_energy = "120 kJ/mol" }
heat = { value = "-220 kJ/mol", at = "25 degC" }
[vessel]
volume = "9 m3"
heat_capacity = "0.9 MJ/K"
U = "280 W/m2/K"
area = { full = "9 m2", at_volume = "4.5 m3", bottom = "1.2 m2" }
heat_loss = { UA = "20 W/K", ambient = "18 degC" }
stirrer_power = "2 kW"
"""
RECIPE = """
[recipe]
batch_time = "8 h"
turnaround = "2 h"
[recipe.charge]
temperature = "40 degC"
volume = "2 m3"
concentration = { a = "2 mol/L" }
balance = "s"
[recipe.feeds.first]
amount = { b = { equivalents = 1.1, of = "a" } }
temperature = "15 degC"
start = "20 min"
duration = "3 h"
[recipe.feeds.second]
amount = { c = "100 kg" }
start = "2.5 h"
duration = "2 h"
[target]
species = "a"
conversion = 0.97
product = "p"
[failure]
horizon = "20 d"
"""
JACKET = """
[cooling]
kind = "jacket"
inlet = "3 degC"
flow = "8 m3/h"
hold_up = "0.5 m3"
set_point = "40 degC"
gain = "0.06 1/K"
reset_time = "20 min"
[[events]]
time = "4 h"
set = { "cooling.set_point" = "55 degC" }
[[events]]
time = "6 h"
set = { "cooling.flow" = "2 m3/h" }
"""
SWITCHED = """
[cooling]
kind = "coolant"
temperature = "30 degC"
duty = "60 kW"
set_point = "45 degC"
[[events]]
time = "2 h"
set = { "cooling.kind" = "duty" }
[[events]]
time = "5 h"
set = { "cooling.temperature" = "60 degC", "cooling.kind" = "coolant" }
"""
REVERSIBLE = CONTENTS.replace('"a + b -> p"\n', '"a + b <=> p"\nequilibrium_constant = { value = "8 L/mol", at = "60 degC" }\n')
COLD = RECIPE.replace('c = "100 kg"', 's = "2500 kg", c = "10 kg"').replace('start = "2.5 h"', 'temperature = "-20 degC"\nstart = "2.5 h"')
FAST = CONTENTS.replace("0.012 L/mol/min", "0.5 L/mol/min")
ON = COLD + 'feeds = "run on"\n'
LATE = RECIPE + 'feeds_stop_after = "15 min"\nwall = true\n'


@pytest.mark.parametrize("text", [CONTENTS + JACKET + RECIPE, REVERSIBLE + SWITCHED + RECIPE], ids=["controller", "kinds switched"])
def test_profile_and_responses(text):
    study = read_text(text)
    twin, end = Twin(study), 8 * 3600.0
    lines, temperature = twin.march(end), len(twin.names)
    found = evaluate(study.without_failure(), pd.DataFrame(index=[0])).iloc[0]
    highest = {
        "max_temperature_K": lambda look, t, y: y[temperature],
        "heat_release_W": lambda look, t, y: look(t, y)[1],
        "cooling_duty_W": lambda look, t, y: look(t, y)[2],
        "accumulation": lambda look, t, y: twin.accumulation(t, y),
        "conversion": lambda look, t, y: twin.conversion(t, y),
    }
    assert {k: lines.highest(of)[0] for k, of in highest.items()} == pytest.approx(
        {k: found[k if k != "conversion" else "highest_conversion"] for k in highest}, rel=2e-5
    )
    _, last = lines.at(end, True)
    assert last[:temperature] / twin.scale == pytest.approx(twin_amounts(found, study, twin), abs=2e-5)
    times = np.linspace(0.0, end, 25)
    table = profile(study.without_failure(), {}, times.tolist())
    for k, t in enumerate(times):
        look, y = lines.at(t, k == times.size - 1)
        _, heat, duty, _ = look(t, y)
        line = table.iloc[k]
        assert y[temperature] == pytest.approx(line["temperature_K"], abs=1e-3)
        assert [heat, duty] == pytest.approx([line["heat_release_W"], line["cooling_duty_W"]], rel=1e-4, abs=2.0)
        assert twin.fed(t)[1] == pytest.approx(line["volume_m3"], rel=1e-12)
        assert y[:temperature] / twin.scale == pytest.approx([line[f"n_{s}_mol"] / twin.scale for s in twin.names], abs=1e-5)


def twin_amounts(found: pd.Series, study, twin) -> list[float]:
    """Return the amounts that yields speak of, over all that reacts, from the program's row."""
    target = twin.total[twin.names.index(study.target.species)]
    amounts = [found[f"yield_{s}"] * target + total if f"yield_{s}" in found else total for s, total in zip(twin.names, twin.total, strict=True)]
    return [amount / twin.scale for amount in amounts]


@pytest.mark.parametrize(
    "text", [CONTENTS + JACKET + RECIPE, REVERSIBLE + JACKET + RECIPE, FAST + JACKET + ON, CONTENTS + JACKET + LATE],
    ids=["feeds stop", "equilibrium", "cold feeds run on", "late, with the wall"],
)  # fmt: skip
def test_failures_at_some_moments(text):
    study = read_text(text)
    twin = Twin(study)
    times = [0.0, 1200.0, 6000.0, 12000.0, 28800.0]
    lines = twin.march(28800.0)
    table = failure_times(study, {}, times)
    for t, (_, line) in zip(times, table.iterrows(), strict=True):
        mtsr, state, volume = twin.mtsr(t, lines.at(t, True)[1])
        tmr, censored = twin.tmr(state, volume)
        assert mtsr == pytest.approx(line["mtsr_K"], abs=0.002)
        assert tmr == pytest.approx(line["tmr_ad_s"], rel=1e-4)
        assert censored == bool(line["tmr_ad_censored"])


@pytest.mark.parametrize("text", [CONTENTS + JACKET + RECIPE, FAST + JACKET + ON], ids=["feeds stop", "cold feeds run on"])
def test_worst_moment(text):
    """The twin at 13 moments finds nothing worse than the program's worst, and the program's worst is the twin's at that moment."""
    study = read_text(text)
    twin = Twin(study)
    lines = twin.march(28800.0)
    found = evaluate(study, pd.DataFrame(index=[0])).iloc[0]
    for t in np.linspace(0.0, 28800.0, 13):
        mtsr, state, volume = twin.mtsr(t, lines.at(t, True)[1])
        assert mtsr <= found["mtsr_K"] + 0.002
        if mtsr > found["mtsr_K"] - 15.0:
            assert twin.tmr(state, volume)[0] >= found["tmr_ad_s"] * (1.0 - 1e-4)
    _, state, volume = twin.mtsr(found["tmr_ad_time_s"], lines.at(found["tmr_ad_time_s"], True)[1])
    assert twin.tmr(state, volume)[0] == pytest.approx(found["tmr_ad_s"], rel=1e-4)
    assert twin.td24(state, volume) == pytest.approx(found["td24_K"], abs=0.002)
    assert twin.mtsr(found["mtsr_time_s"], lines.at(found["mtsr_time_s"], True)[1])[0] == pytest.approx(found["mtsr_K"], abs=0.002)


@pytest.mark.parametrize("text", [CONTENTS + JACKET + RECIPE, FAST + JACKET + ON], ids=["feeds stop", "cold feeds run on"])
def test_path_after_a_failure(text):
    """When temperatures and the decomposition's largest rate are reached with every reaction running, and how hot it is then."""
    study, start, levels = read_text(text), 1200.0 if text.startswith(FAST) else 12000.0, {"low": 340.0, "high": 375.0}
    twin = Twin(study)
    lines, _ = twin._adiabatic(start, twin.march(28800.0).at(start, True)[1], start + 20 * 86400.0, twin.synthesis | True, twin.stop_of(start), 0.0)
    count, reached = len(twin.names), []

    def rate(look, t, y):
        n, T, volume = y[:count], y[count], twin.fed(min(t, twin.stop_of(start)))[1]
        return twin.heat_of(twin.rates(n, volume, T, ~twin.synthesis), T) / twin.capacity(n, T, 0.0)

    for level in levels.values():
        grid = np.concatenate([np.union1d(piece[3].ts, np.linspace(piece[0], piece[1], 50)) for piece in lines.pieces])
        T = np.array([lines.at(t, True)[1][count] for t in grid])
        k = int(np.argmax(T >= level))
        reached.append(np.interp(level, T[k - 1 : k + 1], grid[k - 1 : k + 1]) - start)
    fastest = lines.highest(rate)[1]
    reached.append(fastest - start)
    path = failure_path(study, {}, start, levels)
    assert reached == pytest.approx([after for _, _, after in path.reaches], rel=1e-3)
    assert lines.at(fastest, True)[1][count] == pytest.approx(path.reaches[-1][1], abs=0.5)
