"""Dosing that is fast, and dosing of first order, against their closed forms (recomputed)."""

import math

import pytest

from sweep.plant import profile
from sweep.study import read_text

# 0.5 mol/s of B (1e-4 m3/s of 5000 mol/m3, rho c_p 1.8e6 J/m3/K, at 20 degC) into A at 60 degC; -120 kJ/mol: 60 kW, of which
# the cold feed takes 7.2 kW.
FAST = """
[species.A]
heat_capacity = "200 J/mol/K"
[species.B]
molar_mass = "100 g/mol"
heat_capacity = "360 J/mol/K"
density = "500 kg/m3"
[species.R]
heat_capacity = "560 J/mol/K"
[reactions.r]
equation = "A + B -> R"
rate_constant = {{ value = "{k} m3/mol/s" }}
heat = {{ value = "-120 kJ/mol" }}
[vessel]
U = "600 W/m2/K"
area = "2 m2"
[cooling]
{cooling}
[recipe]
batch_time = "6000 s"
[recipe.charge]
temperature = "60 degC"
volume = "1 m3"
amount = {{ A = "5 kmol" }}
[recipe.feeds.B]
amount = {{ B = "2 kmol" }}
temperature = "20 degC"
duration = "4000 s"
[target]
species = "B"
conversion = 0.5
product = "R"
[accuracy]
relative = 1e-9
"""


@pytest.mark.parametrize("k", [0.01, 1.0])
def test_fast_reaction_at_constant_temperature(set_point, k):
    """The largest duty comes when the cold feed has stopped and what it brought last still reacts: the whole 60 kW."""
    found = set_point(FAST.format(k=k, cooling='kind = "isothermal"'))
    assert 60_000.0 == pytest.approx(found["heat_release_W"], rel=1e-5)
    assert 60_000.0 == pytest.approx(found["cooling_duty_W"], rel=2e-5)
    assert 0.5 * 1.4 / (k * 3000.0) / 2000.0 == pytest.approx(found["accumulation"], rel=1e-4)  # what is left of B: F V/(k n_A), of 2 kmol
    assert 1e-6 > found["energy_balance_error"]
    assert 2000.0 == pytest.approx(found["time_to_target_s"], rel=1e-4)


@pytest.mark.parametrize("k", [10.0, 100.0])
def test_a_reaction_far_faster_than_the_steps_has_no_false_peak(set_point, k):
    found = set_point(FAST.format(k=k, cooling='kind = "isothermal"'))
    assert 60_000.0 == pytest.approx(found["heat_release_W"], rel=1e-4)


def test_fast_reaction_against_a_coolant():
    """UA 1.2 kW/K carries 60 kW less 7.2 kW from 60 degC to 16.0 degC: the temperature stands still."""
    text = FAST.format(k=1.0, cooling='kind = "coolant"\ntemperature = "16 degC"')
    lines = profile(read_text(text), {}, [1000.0, 2000.0, 4000.0])
    assert [333.15] * 3 == pytest.approx(lines["temperature_K"].tolist(), abs=1e-4)


def test_fast_reaction_without_cooling():
    """The adiabatic rise: what is made of B, 120 kJ/mol, warms the contents and the cold feed."""
    text = FAST.format(k=1.0, cooling='kind = "adiabatic"')
    line = profile(read_text(text), {}, [4000.0]).iloc[0]
    charged, fed = 5000.0 * 200.0, 2000.0 * 360.0
    expected = (charged * 333.15 + fed * 293.15 + 2000.0 * 120e3) / (charged + fed)
    assert expected == pytest.approx(line["temperature_K"], abs=1e-4)


FIRST_ORDER = """
[species.A]
[species.B]
molar_mass = "100 g/mol"
density = "1 kg/L"
[species.R]
[reactions.r]
equation = "A + B -> R"
orders = {{ B = 1 }}
rate_constant = {{ value = "{k!r} 1/s" }}
heat = {{ value = "-100 kJ/mol" }}
[cooling]
kind = "isothermal"
[recipe]
batch_time = "{end} s"
[recipe.charge]
temperature = "60 degC"
volume = "1 m3"
amount = {{ A = "2 kmol" }}
[recipe.feeds.B]
amount = {{ B = "1 kmol" }}
duration = "1000 s"
[target]
species = "B"
conversion = 0.99
[accuracy]
relative = 1e-9
"""


@pytest.mark.parametrize(
    ("product", "expected"),
    [(0.5, 0.78693868057473), (1.0, 0.63212055882856), (2.0, 0.43233235838169), (5.0, 0.19865241060018), (10.0, 0.099995460007024), (50.0, 0.02)],
)
def test_accumulation_of_first_order_dosing(set_point, product, expected):
    """at the end of dosing (1 - exp(-k tD))/(k tD), whatever volume the feed adds; there it is largest."""
    text = FIRST_ORDER.format(k=product / 1000.0, end=max(2000.0, math.ceil(12000.0 / product)))
    assert expected == pytest.approx(set_point(text)["accumulation"], rel=1e-7)
    line = profile(read_text(text), {}, [1000.0]).iloc[0]
    assert expected == pytest.approx(line["accumulation"], rel=1e-7)
    assert expected == pytest.approx(line["n_B_mol"] / 1000.0, rel=1e-7)
