"""Isothermal batches against their closed forms (CHECKS: formulas of Levenspiel, 3rd ed. 1999, ch. 3; numbers recomputed from them)."""

import pytest

from sweep.plant import profile
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
    assert 972.95507452766 == pytest.approx(set_point(text)["time_to_target_s"], rel=TOLERANCE)


@pytest.mark.parametrize(("ratio", "when", "highest"), [(0.1, 2558.4278811045, 0.77426368268113), (1.0, 1000.0, 0.36787944117144)])
def test_intermediate_of_a_series(ratio, when, highest):
    text = isothermal(f"A -> R | 1e-3 1/s\nR -> S | {1e-3 * ratio!r} 1/s", species="A R S")
    line = profile(read_text(text), {}, [when]).iloc[0]
    assert highest == pytest.approx(line["n_R_mol"] / 2000.0, rel=TOLERANCE)


def test_autocatalysis(set_point):
    text = isothermal("A + R -> 2 R | 1e-3 L/mol/s", charge='A = "1.98 mol/L", R = "0.02 mol/L"', conversion=0.9)
    assert 3401.7526288042 == pytest.approx(set_point(text)["time_to_target_s"], rel=TOLERANCE)


def test_parallel_orders(set_point):
    text = isothermal("A -> R | 1e-3 1/s\nA -> S | 2e-3 L/mol/s | orders = { A = 2 }", species="A R S", conversion=0.95)
    assert 1568.6159179138 == pytest.approx(set_point(text)["time_to_target_s"], rel=TOLERANCE)


@pytest.mark.parametrize(("k_td", "k_t", "conversion"), [(0.1, 0.41622116142502, 0.34046560921221), (1.0, 1.1461932206206, 0.68215556710063)])
def test_most_productive_batch_time_with_turnaround(set_point, k_td, k_t, conversion):
    """First order: e^x = 1 + x + k td at x = k t (CHECKS G; roots recomputed)."""
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
