"""A published cooling failure: Fogler, Elements of Chemical Reaction Engineering, 3rd ed., example 9-2 (pp. 542 to 546).

Amination of nitrochlorobenzene. Held at 448 K for 45 min, then ten minutes without cooling, then the cooling is back: with the large charge the
batch runs away, with the normal one it does not. Printed: X(45 min) 0.033, T(55 min) 467.992 K, X 0.0423866, heat given off 6591 and taken
away 6093 kcal/min, dT/dt 0.2 K/min, runaway after "119 min". Recomputed with the rate law as printed: see each check.
"""

import math

import pytest

from sweep.plant import events_of, profile
from sweep.study import read_text

CAL = 4.184  # J
MINUTE = 60.0  # s
SCALE = 2504.0 / (9.0448 * 40.0 + 33.0 * 8.38 + 103.7 * 18.0)  # the book's sum of heat capacities is 2504 kcal/K
CP = {"oncb": 40.0 * SCALE, "ammonia": 8.38 * SCALE, "water": 18.0 * SCALE, "aniline": 28.38 * SCALE, "salt": 28.38 * SCALE}  # cal/mol/K
ENERGY = 11273.0 / 1.987 * 8.31446261815324  # J/mol; the book's own gas constant is 1.987
UA = 35.83 * CAL * 1000.0 / MINUTE  # W/K

STUDY = """
{species}
[reactions.amination]
equation = "oncb + 2 ammonia -> aniline + salt"
orders = {{ oncb = 1, ammonia = 1 }}
rate_constant = {{ value = "{k!r} m3/kmol/min", at = "461 K", activation_energy = "{energy!r} J/mol" }}
heat = {{ value = "{heat!r} J/mol", at = "25 degC" }}
[vessel]
U = "{ua!r} W/m2/K"
area = "1 m2"
[cooling]
kind = "{kind}"
temperature = "298 K"
[recipe]
batch_time = "3 h"
[recipe.charge]
temperature = "448 K"
volume = "{volume} m3"
amount = {{ {amounts} }}
[target]
species = "oncb"
conversion = 0.9
[accuracy]
relative = 1e-9
{events}
"""
LOST = '[[events]]\ntime = "45 min"\nset = { "cooling.kind" = "adiabatic" }\n'
BACK = '[[events]]\ntime = "{at}"\nset = {{ "cooling.kind" = "coolant" }}\n'
ALARMS = "".join(
    f'[[events]]\nwhen = {{ temperature = {{ above = "{T} K" }} }}\nset = {{ "vessel.stirrer_power" = "0 W" }}\n' for T in (573, 773)
)


K461 = 0.00017  # m3/kmol/min


def incident(
    oncb: float, ammonia: float, kind: str, events: str, reacted: float = 0.0, k: float = K461, volume: float = 5.119
) -> str:
    """Return the study with a charge in kmol of which some is reacted already."""
    amounts = {"oncb": oncb - reacted, "ammonia": ammonia - 2.0 * reacted, "water": 103.7, "aniline": reacted, "salt": reacted}
    return STUDY.format(
        species="\n".join(f'[species.{s}]\nheat_capacity = "{c * CAL!r} J/mol/K"' for s, c in CP.items()), energy=ENERGY, k=k,
        heat=-590.0 * CAL * 1000.0, ua=UA, kind=kind, amounts=", ".join(f'{s} = "{n!r} kmol"' for s, n in amounts.items()),
        volume=volume, events=events.replace("vessel.stirrer_power", "vessel.U").replace('"0 W"', f'"{UA!r} W/m2/K"'),
    )  # fmt: skip


def kcal_per_min(watt: float) -> float:
    return watt / CAL / 1000.0 * MINUTE


def test_the_first_45_minutes():
    """Heat given off and the most that could be taken away at 448 K; conversion (recomputed 0.0336079 with the rate law as printed)."""
    study = read_text(incident(9.0448, 33.0, "isothermal", LOST + BACK.format(at="55 min")))
    line = profile(study, {}, [45.0 * MINUTE]).iloc[0]
    assert 0.0336079 == pytest.approx(line["conversion"], abs=1e-7)
    rounded = K461 * 1.167e-4 / (K461 * math.exp(11273.0 / 1.987 * (1.0 / 461.0 - 1.0 / 448.0)))  # the book's rounded k at 448 K
    study = read_text(incident(9.0448, 33.0, "isothermal", LOST + BACK.format(at="55 min"), k=rounded))
    line = profile(study, {}, [45.0 * MINUTE]).iloc[0]
    assert 0.033 == pytest.approx(line["conversion"], abs=2e-3)
    assert 0.0329890 == pytest.approx(line["conversion"], abs=1e-7)
    assert 3830.0 == pytest.approx(kcal_per_min(line["heat_release_W"]), rel=0.01)
    assert 3812.0 == pytest.approx(kcal_per_min(line["heat_release_W"]), abs=1.0)
    assert 5378.0 == pytest.approx(35.83 * (448.0 - 298.0), rel=0.01)


def test_ten_minutes_without_cooling_from_the_printed_state():
    study = read_text(incident(9.0448, 33.0, "adiabatic", BACK.format(at="10 min"), 0.033 * 9.0448))
    line = profile(study, {}, [10.0 * MINUTE]).iloc[0]
    assert 467.992 == pytest.approx(line["temperature_K"], abs=0.1)
    assert 468.0447 == pytest.approx(line["temperature_K"], abs=1e-3)
    X = 1.0 - line["n_oncb_mol"] / 9044.8
    assert 0.0423866 == pytest.approx(X, abs=5e-5)
    assert 0.0424055 == pytest.approx(X, abs=1e-6)
    given_off, taken = kcal_per_min(line["heat_release_W"]), 35.83 * (line["temperature_K"] - 298.0)
    assert 6591.0 == pytest.approx(given_off, rel=0.003)
    assert 6093.0 == pytest.approx(taken, rel=0.003)
    assert 0.2 == pytest.approx((given_off - taken) / 2504.0, abs=0.01)


def test_the_large_charge_runs_away_and_the_alarms_say_when():
    study = read_text(incident(9.0448, 33.0, "adiabatic", BACK.format(at="10 min") + ALARMS, 0.033 * 9.0448))
    met = {one.event: one.met for one in events_of(study)}
    first, second = (k for k, event in enumerate(study.events) if event.when is not None)
    assert 116.9 == pytest.approx(45.0 + met[first] / MINUTE, abs=1.0)  # recomputed from a start that is 1e-5 less converted
    assert 4.0 == pytest.approx((met[second] - met[first]) / MINUTE, abs=0.1)
    assert 119.0 == pytest.approx(45.0 + met[first] / MINUTE, abs=3.0)


def test_the_whole_incident_as_one_recipe(set_point):
    found = set_point(incident(9.0448, 33.0, "isothermal", LOST + BACK.format(at="55 min")))
    assert found["max_temperature_K"] > 773.0
    assert found["energy_balance_error"] < 1e-6 or "runaway" == found["status"]


def test_the_normal_charge_does_not_run_away(set_point):
    """3.265 m3 and 3.17 kmol; recomputed: 461.7 K after the ten minutes, 3852 kcal/min given off, 5864 taken away."""
    text = incident(3.17, 43.0, "isothermal", LOST + BACK.format(at="55 min"), volume=3.265)
    found = set_point(text)
    line = profile(read_text(text), {}, [55.0 * MINUTE]).iloc[0]
    assert 461.7 == pytest.approx(line["temperature_K"], abs=0.05)
    assert 3852.0 == pytest.approx(kcal_per_min(line["heat_release_W"]), abs=1.0)
    assert 5864.0 == pytest.approx(35.83 * (line["temperature_K"] - 298.0), abs=1.0)
    assert line["temperature_K"] == pytest.approx(found["max_temperature_K"], abs=1e-6)
    assert found["time_of_max_temperature_s"] == pytest.approx(55.0 * MINUTE, abs=1.0)
    assert found["energy_balance_error"] < 1e-6
