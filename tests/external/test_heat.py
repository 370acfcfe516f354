"""Heating, jackets and reaction heat against their closed forms (recomputed; jacket forms: Kern 1950, ch. 18, from memory)."""

import math

import pandas as pd
import pytest

from sweep.plant import evaluate, profile
from sweep.study import read_text

WATER = """
[species.water]
molar_mass = "18 g/mol"
heat_capacity = "{cp}"
density = "1 kg/L"
{reactions}
[vessel]
volume = "2 m3"
U = "{U}"
area = "5 m2"
[cooling]
{cooling}
[recipe]
batch_time = "{batch_time}"
[recipe.charge]
temperature = "{start}"
amount = {{ water = "1000 kg" }}
[accuracy]
relative = 1e-9
"""


COOLANT = 'coolant = { density = "1000 kg/m3", heat_capacity = "4180 J/kg/K" }'


def water(cooling: str, U: str = "500 W/m2/K", start: str = "20 degC", batch_time: str = "3 h", cp: str = "4.18 kJ/kg/K") -> str:
    """Return a vessel of water without reactions."""
    return WATER.format(cooling=cooling, U=U, start=start, batch_time=batch_time, cp=cp, reactions="")


def test_heating_up_by_a_constant_coolant():
    """m 1000 kg, c 4180 J/kg/K, UA 2500 W/K, 20 to 120 degC: T(1800 s) = 85.923255844138 degC."""
    study = read_text(water('kind = "coolant"\ntemperature = "120 degC"'))
    line = profile(study, {}, [1800.0, 2690.9801895898]).set_index("time_s")["temperature_K"]
    assert 85.923255844138 + 273.15 == pytest.approx(line.iloc[0], abs=1e-5)
    assert 373.15 == pytest.approx(line.iloc[1], abs=1e-5)


def test_well_mixed_jacket_with_a_small_hold_up():
    """W c 6270 W/K: effective UA W UA/(W + UA) = 1787.3432155074 W/K once the jacket is quasi-steady (hold-up 1 mL)."""
    flow = 6270.0 / (1000.0 * 4180.0)
    cooling = f'kind = "jacket"\ninlet = "120 degC"\nflow = "{flow!r} m3/s"\nhold_up = "1e-6 m3"\n{COOLANT}'
    line = profile(read_text(water(cooling)), {}, [3600.0]).iloc[0]
    effective = 6270.0 * 2500.0 / (6270.0 + 2500.0)
    expected = 120.0 - 100.0 * math.exp(-3600.0 * effective / (1000.0 * 4180.0))
    assert expected + 273.15 == pytest.approx(line["temperature_K"], abs=1e-4)


def test_isolated_jacket_and_contents_share_their_heat():
    """Two stirred bodies without flow come to the mean weighted by heat capacity (first law)."""
    cooling = f'kind = "jacket"\ninlet = "5 degC"\nflow = "0 m3/h"\nhold_up = "0.5 m3"\nstart = "80 degC"\n{COOLANT}'
    line = profile(read_text(water(cooling, batch_time="20 d")), {}, [20 * 86400.0]).iloc[0]
    assert (20.0 * 1.0 + 80.0 * 0.5) / 1.5 + 273.15 == pytest.approx(line["temperature_K"], abs=1e-5)


def test_a_kind_of_cooling_that_changes_is_landed_on():
    """Heating for 1800 s, then adiabatic: the temperature stays (B5c's value)."""
    text = water('kind = "coolant"\ntemperature = "120 degC"') + '\n[[events]]\ntime = "1800 s"\nset = { "cooling.kind" = "adiabatic" }\n'
    line = profile(read_text(text), {}, [1800.0, 9000.0])["temperature_K"]
    assert 85.923255844138 + 273.15 == pytest.approx(line.iloc[0], abs=1e-5)
    assert line.iloc[0] == pytest.approx(line.iloc[1], abs=1e-9)


DOSING = """
[species.A]
molar_mass = "100 g/mol"
heat_capacity = "200 J/mol/K"
density = "1e6 kg/L"
[species.B]
molar_mass = "100 g/mol"
heat_capacity = "200 J/mol/K"
density = "1e6 kg/L"
[species.R]
molar_mass = "200 g/mol"
heat_capacity = "400 J/mol/K"
[reactions.r]
equation = "A + B -> R"
rate_constant = {{ value = "{k} m3/mol/s" }}
heat = {{ value = "-100 kJ/mol", at = "25 degC" }}
[vessel]
volume = "2 m3"
[cooling]
kind = "isothermal"
[recipe]
batch_time = "{batch_time} s"
[recipe.charge]
temperature = "60 degC"
volume = "1 m3"
amount = {{ A = "1000 mol" }}
[recipe.feeds.B]
amount = {{ B = {{ equivalents = {excess}, of = "A" }} }}
temperature = "60 degC"
duration = "1000 s"
[target]
species = "A"
conversion = 0.5
product = "R"
[accuracy]
relative = 1e-9
"""


@pytest.mark.parametrize(
    ("da", "expected"),
    [
        (10.0, [0.15067473518042, 0.36578046618107, 0.57003626358724, 0.74772072251633]),
        (100.0, [0.23710336089141, 0.48134960328742, 0.71772552023361, 0.92021154391971]),
    ],
)
def test_second_order_dosing_at_constant_volume(da, expected):
    """dX/dth = Da (1 - X)(E th - X), closed form in error functions; the feed's volume is made negligible."""
    text = DOSING.format(k=da / 1000.0 / 1000.0, excess=1.0, batch_time=2000)
    line = profile(read_text(text), {}, [250.0, 500.0, 750.0, 1000.0])
    assert expected == pytest.approx(line["conversion"].tolist(), rel=1e-6)


@pytest.mark.parametrize(("a", "expected"), [(1.0, 0.68392199507327), (10.0, 0.25227927748367), (100.0, 0.079788456080287)])
def test_accumulation_at_the_stoichiometric_point(a, expected):
    """X_acc = sqrt(2/(pi a)) / (erf(sqrt(a/2)) + sqrt(2/(pi a)) exp(-a/2)), a = Da/E; equimolar dosing ends there."""
    text = DOSING.format(k=a / 1000.0 / 1000.0, excess=1.0, batch_time=2000)
    line = profile(read_text(text), {}, [1000.0]).iloc[0]
    assert expected == pytest.approx(line["accumulation"], rel=1e-6)
    found = evaluate(read_text(text), pd.DataFrame(index=[0])).iloc[0]
    assert expected == pytest.approx(found["accumulation"], rel=1e-6)
    assert 1e-6 > found["energy_balance_error"]
