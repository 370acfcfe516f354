"""Isothermal batches against their closed forms (formulas of Levenspiel, 3rd ed. 1999, ch. 3; numbers recomputed from them)."""

import pandas as pd
import pytest

from sweep.plant import evaluate, profile
from sweep.study import read_text
from tests.texts import isothermal

TOLERANCE = 1e-6  # relative, at accuracy.relative = 1e-9


@pytest.mark.parametrize(
    ("reaction", "expected"),
    [
        ("A -> R | 1e-3 mol/L/s | orders = { A = 0 }", 1980.0),
        ("A -> R | 1e-3 mol^0.5/L^0.5/s | orders = { A = 0.5 }", 2545.5844122716),
        ("A -> R | 1e-3 1/s", 4605.1701859881),
        ("A -> R | 1e-3 L^0.5/mol^0.5/s | orders = { A = 1.5 }", 12727.922061358),
        ("A -> R | 1e-3 L/mol/s | orders = { A = 2 }", 49500.0),
    ],
)
def test_time_to_conversion_of_simple_orders(set_point, reaction, expected):
    assert expected == pytest.approx(set_point(isothermal(reaction))["time_to_target_s"], rel=TOLERANCE)


def test_third_order(set_point):
    text = isothermal("A -> R | 1e-3 L^2/mol^2/s | orders = { A = 3 }", batch_time="20 d")
    assert 1249875.0 == pytest.approx(set_point(text)["time_to_target_s"], rel=TOLERANCE)


@pytest.mark.parametrize(("ratio", "expected"), [(1.2, 7155.5022023237), (1.0 + 1e-7, 49499.750026667)])
def test_two_reactants(set_point, ratio, expected):
    charge = f'A = "2 mol/L", B = "{2.0 * ratio!r} mol/L"'
    text = isothermal("A + B -> R | 1e-3 L/mol/s", species="A B R", charge=charge)
    assert expected == pytest.approx(set_point(text)["time_to_target_s"], rel=TOLERANCE)


def test_zero_order_stops_cleanly(set_point):
    found = set_point(isothermal("A -> R | 1e-3 mol/L/s | orders = { A = 0 }"))
    assert 1.0 == pytest.approx(found["conversion"], abs=1e-8)
    assert "done" == found["status"]


def test_reversible_first_order(set_point):
    reaction = 'A <=> R | 2e-3 1/s | equilibrium_constant = { value = "4" }'
    text = isothermal(reaction.replace('"4"', "4"), conversion=0.75)
    assert 1109.0354888959 == pytest.approx(set_point(text)["time_to_target_s"], rel=TOLERANCE)
    line = profile(read_text(text), {}, [600.0]).iloc[0]
    assert 0.62149587188126 == pytest.approx(line["conversion"], rel=TOLERANCE)


def test_equilibrium_below_the_target_is_a_null_with_its_reason(set_point):
    found = set_point(isothermal("A <=> R | 2e-3 1/s | equilibrium_constant = { value = 4 }", conversion=0.9))
    assert found["time_to_target_s"] != found["time_to_target_s"]
    assert "never reached" in found["reason"]
    assert 0.8 == pytest.approx(found["highest_conversion"], rel=TOLERANCE)


def test_reversible_second_order(set_point):
    reaction = "A + B <=> R + S | 1e-3 L/mol/s | equilibrium_constant = { value = 4 }"
    text = isothermal(reaction, species="A B R S", charge='A = "2 mol/L", B = "2 mol/L"', conversion=0.6)
    found = set_point(text)
    assert 972.95507452766 == pytest.approx(found["time_to_target_s"], rel=TOLERANCE)
    assert 2.0 / 3.0 == pytest.approx(found["highest_conversion"], rel=TOLERANCE)


@pytest.mark.parametrize(
    ("ratio", "when", "highest", "left"),
    [
        (0.1, 2558.4278811045, 0.77426368268113, 0.077426368268113),
        (0.5, 1386.2943611199, 0.5, 0.25),
        (1.0, 1000.0, 0.36787944117144, 0.36787944117144),
        (2.0, 693.14718055995, 0.25, 0.5),
        (10.0, 255.84278811045, 0.077426368268113, 0.77426368268113),
    ],
)
def test_intermediate_of_a_series(ratio, when, highest, left):
    text = isothermal(f"A -> R | 1e-3 1/s\nR -> S | {1e-3 * ratio!r} 1/s", species="A R S")
    lines = profile(read_text(text), {}, [0.99 * when, when, 1.01 * when])
    assert highest == pytest.approx(lines["n_R_mol"].iloc[1] / 2000.0, rel=TOLERANCE)
    assert left == pytest.approx(lines["n_A_mol"].iloc[1] / 2000.0, rel=TOLERANCE)
    assert lines["n_R_mol"].iloc[1] == lines["n_R_mol"].max()


@pytest.mark.parametrize(
    ("kappa", "left", "intermediate"),
    [
        (0.1, 0.077426368268113, 0.77426368268113),
        (0.5, 0.25, 0.5),
        (1.0, 0.36787944117144, 0.36787944117144),
        (2.0, 0.5, 0.25),
        (0.1, 0.5, 0.48114776837423),
    ],
)
def test_series_and_parallel(set_point, kappa, left, intermediate):
    """A + B -> R, R + B -> S: R over A is free of time and of B; the last row is not at the maximum."""
    text = isothermal(
        f"A + B -> R | 1e-3 L/mol/s\nR + B -> S | {1e-3 * kappa!r} L/mol/s",
        species="A B R S",
        charge='A = "2 mol/L", B = "5 mol/L"',
        conversion=1.0 - left,
    )
    line = profile(read_text(text), {}, [set_point(text)["time_to_target_s"]]).iloc[0]
    assert intermediate == pytest.approx(line["n_R_mol"] / 2000.0, rel=TOLERANCE)


def test_autocatalysis(set_point):
    """Autocatalysis in closed form; 100 kJ/mol makes the largest rate, 1e-3 mol/L/s, a heat of 100 kW in 1 m3."""
    reaction = 'A + R -> 2 R | 1e-3 L/mol/s | heat = { value = "-100 kJ/mol" }'
    text = isothermal(reaction, charge='A = "1.98 mol/L", R = "0.02 mol/L"', conversion=0.9) + '[cooling]\nkind = "isothermal"\n'
    found = set_point(text)
    assert 3401.7526288042 == pytest.approx(found["time_to_target_s"], rel=TOLERANCE)
    assert 1.0e5 == pytest.approx(found["heat_release_W"], rel=TOLERANCE)
    line = profile(read_text(text), {}, [2297.5599250673]).iloc[0]
    assert (1000.0, 1000.0) == pytest.approx((line["n_A_mol"], line["n_R_mol"]), rel=TOLERANCE)


def test_rate_constant_follows_arrhenius():
    """Arrhenius: the times of one conversion stand as the rate constants."""
    rate = '[reactions.r0]\nequation = "A -> R"\nrate_constant = {{ value = "1e-3 1/s", at = "{at} K", activation_energy = "{energy} J/mol" }}\n'
    text = isothermal("A -> R | 1 1/s", conversion=0.5)
    start, end = text.index("[reactions.r0]"), text.index("[recipe]")
    for at, energy, low, high, ratio in [(300.0, 80e3, 300.0, 350.0, 97.690469104873), (298.15, 52948.86216572, 298.15, 308.15, 2.0)]:
        study = read_text(text[:start] + rate.format(at=at, energy=energy) + text[end:])
        slow, fast = evaluate(study, pd.DataFrame({"recipe.charge.temperature": [low, high]}))["time_to_target_s"]
        assert 693.14718055995 == pytest.approx(slow, rel=TOLERANCE)
        assert ratio == pytest.approx(slow / fast, rel=TOLERANCE)


@pytest.mark.parametrize(
    "value",
    ["3e-4 L^0.75/mol^0.75/s", "1.8e-2 L^0.75/mol^0.75/min", "3e-4 (L/mol)**0.75/s", "1.6870239755710471e-06 m^2.25/mol^0.75/s"],
)
def test_fractional_orders_and_their_units(set_point, value):
    """A + B -> R of orders 1.3 and 0.45, equimolar: order 1.75 in A. dc/dt = -k c^1.75, so k t = (c^-0.75 - c0^-0.75)/0.75."""
    reaction = f"A + B -> R | {value} | orders = {{ A = 1.3, B = 0.45 }}"
    text = isothermal(reaction, species="A B R", charge='A = "2 mol/L", B = "2 mol/L"', conversion=0.9)
    expected = (0.2**-0.75 - 2.0**-0.75) / 0.75 / 3e-4
    assert expected == pytest.approx(set_point(text)["time_to_target_s"], rel=TOLERANCE)


def test_parallel_orders(set_point):
    text = isothermal("A -> R | 1e-3 1/s\nA -> S | 2e-3 L/mol/s | orders = { A = 2 }", species="A R S", conversion=0.95)
    assert 1568.6159179138 == pytest.approx(set_point(text)["time_to_target_s"], rel=TOLERANCE)
    line = profile(read_text(text), {}, [1568.6159179138]).iloc[0]
    assert 713.55817782007 == pytest.approx(line["n_R_mol"], rel=TOLERANCE)
    assert 0.37555693569478 == pytest.approx(line["n_R_mol"] / (2000.0 - line["n_A_mol"]), rel=TOLERANCE)


@pytest.mark.parametrize(("k_td", "k_t", "conversion"), [(0.1, 0.41622116142502, 0.34046560921221), (1.0, 1.1461932206206, 0.68215556710063)])
def test_most_productive_batch_time_with_turnaround(set_point, k_td, k_t, conversion):
    """First order: e^x = 1 + x + k td at x = k t (roots recomputed)."""
    found = set_point(isothermal("A -> R | 1e-3 1/s", turnaround=f"{1000.0 * k_td} s", batch_time="10000 s"))
    assert 1000.0 * k_t == pytest.approx(found["most_productive_time_s"], rel=1e-4)
    assert conversion == pytest.approx(found["most_productive_conversion"], rel=1e-4)


def test_robertson_problem_as_a_study():
    """Mazzia and Magherini, Test Set for IVP Solvers, rel. 2.4 (2008), ROBER; values at t = 40 recomputed there in 113 bits."""
    text = isothermal(
        "A -> B | 0.04 1/s\n2 B -> B + R | 3e4 m3/mol/s\nB + R -> A + R | 10 m3/mol/s",
        species="A B R",
        charge='A = "1000 mol/m3"',
        batch_time="1000 s",
        conversion=0.9,
        relative=1e-9,
    )
    line = profile(read_text(text), {}, [0.4, 40.0]).iloc[1]
    assert 7.158270687194050905e-1 == pytest.approx(line["n_A_mol"] / 1000.0, rel=1e-6)
    assert 9.185534764557763904e-6 == pytest.approx(line["n_B_mol"] / 1000.0, rel=1e-6)
    assert 2.841637457458303518e-1 == pytest.approx(line["n_R_mol"] / 1000.0, rel=1e-6)
