"""Cooling failure through the study file: MTSR against the time of failure, time to maximum rate, T_D24."""

import numpy as np
import pandas as pd
import pytest
from scipy.special import expi

from sweep.plant import evaluate, failure_times
from sweep.study import read_text

R = 8.31446261815324

DOSING = """
[species.A]
heat_capacity = "100 J/mol/K"
[species.B]
molar_mass = "100 g/mol"
density = "{density} kg/m3"
heat_capacity = "{cp_B} J/mol/K"
[species.P]
heat_capacity = "{cp_P} J/mol/K"
[species.S]
role = "solvent"
heat_capacity = "200 J/mol/K"
[reactions.synthesis]
equation = "A + B -> P"
rate_constant = {{ value = "{k} m3/mol/s", at = "60 degC", activation_energy = "50 kJ/mol" }}
heat = {{ value = "{heat} J/mol", at = "60 degC" }}
[vessel]
volume = "2 m3"
[cooling]
kind = "isothermal"
[recipe]
batch_time = "{end} s"
[recipe.charge]
temperature = "60 degC"
volume = "1 m3"
amount = {{ A = "1000 mol", S = "8000 mol" }}
[recipe.feeds.B]
amount = {{ B = "1000 mol" }}
temperature = "60 degC"
duration = "10000 s"
[target]
species = "A"
conversion = 0.999
[failure]
[accuracy]
relative = {relative}
"""


def _dosing(da: float, eps: float, rise: float = 150.0, end: float = 10000.0, relative: float = 1e-8) -> str:
    """Return second-order dosing with growing volume: C4 of the dimensionless form, in SI."""
    capacity = 1000 * 100.0 + 8000 * 200.0
    cp_B = eps * capacity / 1000.0
    return DOSING.format(
        density=1000 * 0.1 / eps, cp_B=cp_B, cp_P=100.0 + cp_B, k=da / (1000.0 * 10000.0), heat=-rise * capacity * (1 + eps) / 1000.0,
        end=end, relative=relative,
    )  # fmt: skip


@pytest.mark.parametrize(
    ("da", "eps", "half", "whole"),
    [(10, 0.2, 0.35810260313313, 0.72791317961727), (20, 0.4, 0.4115798297666, 0.79315897761819), (50, 0.5, 0.45756573602956, 0.86393015420462)],
)
def test_dosing_with_growing_volume(da, eps, half, whole):
    """dX/dth = Da (1-X)(th-X)/(1+eps th), 25-digit Taylor series (computed reference, not published)."""
    from sweep.plant import profile

    lines = profile(read_text(_dosing(da, eps)), {}, [5000.0, 10000.0])
    assert half == pytest.approx(lines["conversion"][0], rel=1e-6)
    assert whole == pytest.approx(lines["conversion"][1], rel=1e-6)


def test_mtsr_against_the_time_of_failure():
    """MTSR(th) = Tp + acc dTad (1+eps)/(1+eps th); definition after Stoessel, semi-batch (from memory)."""
    expected = [69.1114936699, 71.7746876807, 75.4735297908, 81.3131177198, 91.0261533573]
    found = failure_times(read_text(_dosing(20, 0.4)), {}, [1000.0, 2500.0, 5000.0, 7500.0, 10000.0])
    assert pytest.approx(expected, abs=0.003) == (found["mtsr_K"] - 273.15).tolist()


def test_worst_moment_and_its_mtsr_at_default_accuracy():
    found = evaluate(read_text(_dosing(20, 0.4, end=20000.0, relative=1e-6)), pd.DataFrame(index=[0])).iloc[0]
    assert 91.0261533573 + 273.15 == pytest.approx(found["mtsr_K"], abs=0.02)
    assert 10000.0 == pytest.approx(found["mtsr_time_s"], abs=200.0)


@pytest.mark.parametrize("excess", [0.8, 1.0, 1.25])
def test_worst_moment_is_where_a_dense_scan_finds_it(excess):
    """The stoichiometric point is a kink inside the batch: found to 1 % of the batch time, its MTSR to 0.02 K."""
    text = _dosing(30, 0.3, end=16000.0, relative=1e-6).replace('amount = { B = "1000 mol" }', f'amount = {{ B = "{1000 * excess} mol" }}')
    study = read_text(text)
    scan = failure_times(study, {}, np.linspace(0.0, 16000.0, 2001))
    worst = scan["mtsr_K"].idxmax()
    found = evaluate(study, pd.DataFrame(index=[0])).iloc[0]
    assert scan["mtsr_K"][worst] == pytest.approx(found["mtsr_K"], abs=0.02)
    assert scan["time_s"][worst] == pytest.approx(found["mtsr_time_s"], abs=160.0)


DECOMPOSING = """
[species.P]
heat_capacity = "{cp} J/mol/K"
[species.tar]
heat_capacity = "{cp} J/mol/K"
[reactions.decomposition]
equation = "P -> tar"
purpose = "decomposition"
rate_constant = {{ value = "{k} {unit}", at = "{at} K", activation_energy = "{energy} J/mol" }}
heat = {{ value = "{heat} J/mol", at = "298.15 K" }}
{extra}
[vessel]
volume = "2 m3"
[cooling]
kind = "isothermal"
[recipe]
batch_time = "1 s"
[recipe.charge]
temperature = "{T0} K"
volume = "1 m3"
amount = {{ P = "1000 mol" }}
[failure]
mtt = "600 K"
[accuracy]
relative = {relative}
"""


def _decomposing(T0, energy, q0, cp, rise, order=1, at=None, relative=1e-9):
    """Return 1000 mol of 1 kg/mol in a vessel, giving off q0 W/kg at `at`, with a whole rise."""
    k = q0 / (cp * rise)  # 1/s: rate at `at` over the amount
    unit, value, extra = ("1/s", k, "") if order == 1 else ("mol/m3/s", k * 1000.0, "orders = { P = 0 }")
    return DECOMPOSING.format(cp=cp, k=repr(value), unit=unit, at=at or T0, energy=energy, heat=-cp * rise, extra=extra, T0=T0, relative=relative)


CASES = [
    (373.15, 1e5, 10, 2000, 100, 2315.42689009, 2937.78067924),
    (373.15, 1e5, 10, 2000, 200, 2315.42689009, 2671.98132808),
    (373.15, 1e5, 10, 2000, 500, 2315.42689009, 2544.67558155),
    (353.15, 8e4, 1, 1800, 150, 23331.0951237, 28715.2604351),
    (433.15, 1.4e5, 5, 1700, 400, 3788.45125699, 4134.47078227),
    (298.15, 6e4, 0.1, 2000, 300, 246367.012792, 285250.553666),
    (423.15, 1e5, 10, 1800, 1000, 2679.75679353, 2944.4400182),
]


@pytest.mark.parametrize(("T0", "energy", "q0", "cp", "rise", "closed", "exact"), CASES)
def test_time_to_maximum_rate_of_first_order(T0, energy, q0, cp, rise, closed, exact):
    """closed form (Townsend & Tou, Thermochim. Acta 37 (1980) 1, from memory) and the exact first-order integral to the
    temperature of the largest rate (computed with mpmath)."""
    found = evaluate(read_text(_decomposing(T0, energy, q0, cp, rise)), pd.DataFrame(index=[0])).iloc[0]
    # one second of isothermal batch passes before the latest failure; the least over the batch is at its start or end within q0/(cp rise)
    assert exact == pytest.approx(found["tmr_ad_s"], rel=3e-5)
    assert closed == pytest.approx(found["tmr_ad_closed_form_s"], rel=3e-5)
    assert not found["tmr_ad_censored"]


@pytest.mark.parametrize(("T0", "energy", "q0", "cp", "rise"), [c[:5] for c in CASES[:3]])
def test_time_to_maximum_rate_of_zero_order(T0, energy, q0, cp, rise):
    """exact Arrhenius zero order from T0 to T0 + rise, t = [G(T) - G(T0)] / (rate / k), G = T e^(x/T) - x Ei(x/T), x = E/R."""
    x, T1 = energy / R, T0 + rise

    def G(T):
        return T * np.exp(x / T - x / T0) - x * expi(x / T) * np.exp(-x / T0)

    exact = (G(T1) - G(T0)) / (q0 / cp)
    found = evaluate(read_text(_decomposing(T0, energy, q0, cp, rise, order=0)), pd.DataFrame(index=[0])).iloc[0]
    assert exact == pytest.approx(found["tmr_ad_s"], rel=1e-4)


def test_t_d24_with_exact_kinetics():
    """Exact first-order kinetics and a rise of 300 K: 375.6346917 K (computed); its closed form alone gives 374.187 K."""
    text = _decomposing(350.0, 1e5, 10, 1800, 300, at=423.15)
    found = evaluate(read_text(text), pd.DataFrame(index=[0])).iloc[0]
    assert 375.6346917 == pytest.approx(found["td24_K"], abs=0.003)
    assert not found["td24_censored"]
    assert 300.0 == pytest.approx(found["adiabatic_rise_decomposition_K"], rel=1e-5)


def test_small_rise_without_acceleration_is_censored():
    """a rise below 50 K whose rate falls at once is no runaway; the horizon stands as a lower bound."""
    found = evaluate(read_text(_decomposing(450.0, 6e4, 10, 2000, 5)), pd.DataFrame(index=[0])).iloc[0]
    assert found["tmr_ad_censored"]
    assert 2_592_000.0 == found["tmr_ad_s"]


def test_large_rise_that_falls_at_once_has_no_time_left():
    found = evaluate(read_text(_decomposing(500.0, 2e4, 500, 2000, 60)), pd.DataFrame(index=[0])).iloc[0]
    assert not found["tmr_ad_censored"]
    assert 0.0 == found["tmr_ad_s"]


def test_cold_decomposition_is_censored_at_the_horizon():
    found = evaluate(read_text(_decomposing(290.0, 1.5e5, 10, 2000, 300, at=500.0)), pd.DataFrame(index=[0])).iloc[0]
    assert found["tmr_ad_censored"]
    assert 2_592_000.0 == found["tmr_ad_s"]
