"""Heat balance and equilibrium that move with temperature, against their closed forms (recomputed)."""

import pandas as pd
import pytest

from sweep.plant import evaluate, profile
from sweep.study import read_text

RISE = """
[species.A]
heat_capacity = "150 J/mol/K"
[species.R]
heat_capacity = "{cp} J/mol/K"
[species.inert]
role = "solvent"
heat_capacity = "300 J/mol/K"
[reactions.r]
equation = "A -> R"
rate_constant = {{ value = "1e-3 1/s" }}
heat = {{ value = "-90 kJ/mol", at = "25 degC" }}
[cooling]
kind = "adiabatic"
[recipe]
batch_time = "30000 s"
[recipe.charge]
temperature = "320 K"
volume = "1 m3"
amount = {{ A = "1 mol", inert = "1 mol" }}
[target]
species = "A"
conversion = {conversion}
[accuracy]
relative = 1e-9
"""


@pytest.mark.parametrize(("conversion", "expected"), [(0.25, 372.4775862069), (0.5, 428.70357142857)])
def test_adiabatic_temperature_at_a_conversion(set_point, conversion, expected):
    """T = (X (-dH) + S T0 + X dCp T_R)/(S + X dCp); S = 450 J/K a mole of A, dCp = -60 J/mol/K."""
    text = RISE.format(cp=90, conversion=conversion)
    when = set_point(text)["time_to_target_s"]
    assert expected == pytest.approx(profile(read_text(text), {}, [when]).iloc[0]["temperature_K"], abs=1e-5)


@pytest.mark.parametrize(("cp", "expected"), [(90, 554.13076923077), (150, 520.0)])
def test_adiabatic_temperature_of_the_whole_rise(set_point, cp, expected):
    found = set_point(RISE.format(cp=cp, conversion=0.5))
    assert expected == pytest.approx(found["max_temperature_K"], abs=1e-5)
    assert 1e-9 > found["energy_balance_error"]


def test_heat_of_reaction_at_the_temperature_it_runs_at(set_point):
    """dH(320 K) = -91311 J/mol by Kirchhoff; the release is largest at once, at k n = 1e-3 mol/s."""
    assert 91.311 == pytest.approx(set_point(RISE.format(cp=90, conversion=0.5))["heat_release_W"], rel=1e-9)


VAN_T_HOFF = """
[species.A]
heat_capacity = "100 J/mol/K"
[species.R]
heat_capacity = "{cp} J/mol/K"
[reactions.r]
equation = "A <=> R"
rate_constant = {{ value = "0.05 1/s" }}
equilibrium_constant = {{ value = 100, at = "25 degC" }}
heat = {{ value = "-50 kJ/mol", at = "25 degC" }}
[cooling]
kind = "isothermal"
[recipe]
batch_time = "20000 s"
[recipe.charge]
temperature = "330 K"
volume = "1 m3"
amount = {{ A = "1 mol" }}
[target]
species = "A"
conversion = 0.999
[accuracy]
relative = 1e-9
"""


@pytest.mark.parametrize(
    ("cp", "expected"),
    [(60, [13.936613888754, 1.5506569486678, 0.19862531598584]), (100, [14.274596812273, 1.7353621520303, 0.25845033968399])],
)
def test_equilibrium_moves_by_van_t_hoff(cp, expected):
    """ln(K2/K1) = ((dH - T_R dCp)/R)(1/T1 - 1/T2) + (dCp/R) ln(T2/T1), K from what is left at the batch's end."""
    study = read_text(VAN_T_HOFF.format(cp=cp))
    found = evaluate(study, pd.DataFrame({"recipe.charge.temperature": [330.0, 373.15, 423.15]}))
    x = found["conversion"]
    assert expected == pytest.approx((x / (1.0 - x)).tolist(), rel=1e-8)


def test_adiabatic_reversible_stops_on_the_equilibrium_line(set_point):
    """Where an adiabatic batch comes to rest, its composition is the equilibrium of the temperature it reached."""
    text = VAN_T_HOFF.format(cp=60).replace('"isothermal"', '"adiabatic"').replace('"330 K"', '"300 K"')
    found = set_point(text.replace('amount = { A = "1 mol" }', 'amount = { A = "1 mol", R = "4 mol" }'))
    x, T = found["conversion"], found["max_temperature_K"]
    assert "done" == found["status"]
    at_T = evaluate(read_text(VAN_T_HOFF.format(cp=60)), pd.DataFrame({"recipe.charge.temperature": [T]})).iloc[0]["conversion"]
    assert at_T / (1.0 - at_T) == pytest.approx((4.0 + x) / (1.0 - x), rel=1e-7)
