"""Faults of a study beyond the first list: each with its line, key, what was found, what is expected, and why."""

from pathlib import Path

import pytest

from sweep.base.errors import Fault, StudyError
from sweep.study import read_text
from tests.texts import isothermal

TEXT = Path(__file__).with_name("fedbatch.toml").read_text()


def faults(old: str, new: str, text: str = TEXT) -> tuple[Fault, ...]:
    assert 1 <= text.count(old), old
    with pytest.raises(StudyError) as caught:
        read_text(text.replace(old, new, 1), "slow.toml")
    return caught.value.faults


AMINE = '"recipe.charge.concentration.amine", from = "1.2 mol/L", to = "2.8 mol/L"'
TAR = '"amide -> tar"'
CASES = {  # old, new, then the fault: the line's text, key, found, expected, because
    "balance that is charged": (
        'balance       = "solvent"',
        'balance       = "amine"',
        "balance  ",
        "recipe.charge.balance",
        "amine",
        "a species without its own concentration",
        "would not count",
    ),
    "equivalents of nothing": (
        'of = "amine"',
        'of = "tar"',
        "equivalents",
        "recipe.feeds.anhydride.amount.anhydride.of",
        "'tar'",
        "a species that is charged, or fed by an amount",
        "equivalents of nothing are nothing",
    ),
    "target of nothing": (
        '"2.2 mol/L" }',
        '"0 mol/L" }',
        "species    =",
        "target.species",
        "0 mol of amine at the set-point",
        "an amount above zero",
        "what is never brought in cannot be converted",
    ),
    "target of nothing in a corner": (
        'from = "1.2 mol/L"',
        'from = "0 mol/L"',
        "species    =",
        "target.species",
        "0 mol of amine at amine = 0 (SI)",
        "an amount above zero",
        "what is never brought in cannot be converted",
    ),
    "product that is the target": (
        'product    = "amide"',
        'product    = "amine"',
        "product  ",
        "target.product",
        "amine",
        "another species",
        "not its own product",
    ),
    "limit on a solvent": (
        "[limits]",
        "[limits]\nyield_solvent = { at_least = 0.1 }",
        "yield_solvent",
        "limits.yield_solvent",
        "yield_solvent",
        "yield_",
        "no response has this name",
    ),
    "limit on the product per product": (
        "[limits]",
        "[limits]\nper_product_amide = { at_least = 0.1 }",
        "per_product_amide",
        "limits.per_product_amide",
        "per_product_amide",
        "per_product_diamide",
        "no response has this name",
    ),
    "event on what is not written": (
        '"cooling.set_point" = "60 degC"',
        '"cooling.reset_time" = "60 s"',
        "set  =",
        "events.0.set.cooling.reset_time",
        "cooling.reset_time",
        "cooling.reset_time written in its section too",
        "before the event it has no value",
    ),
    "event out of bounds": (
        '"cooling.set_point" = "60 degC"',
        '"cooling.flow" = "-5 m3/h"',
        "set  =",
        "events.0.set.cooling.flow",
        "-0.00138889 (SI)",
        "at least 0",
        "not negative",
    ),
    "event below absolute zero": (
        '"cooling.set_point" = "60 degC"',
        '"cooling.set_point" = "-600 degC"',
        "set  =",
        "events.0.set.cooling.set_point",
        "'-600 degC'",
        "above absolute zero",
        "below it",
    ),
    "variable with a response's name": (
        "amine              = {",
        "conversion         = {",
        "conversion         =",
        "variables.conversion",
        "conversion",
        "another name",
        "a response has this name",
    ),
    "variable of the method": (
        AMINE,
        '"accuracy.relative", from = 1e-7, to = 1e-5',
        "amine   ",
        "variables.amine.sets",
        "accuracy.relative",
        "a quantity of the batch",
        "cannot differ from point to point",
    ),
    "variable of the question": (
        AMINE,
        '"limits.mtsr.at_most", from = "60 degC", to = "90 degC"',
        "amine   ",
        "variables.amine.sets",
        "limits.mtsr.at_most",
        "a quantity of the batch",
        "cannot differ from point to point",
    ),
    "variable of a molar mass": (
        AMINE,
        '"species.amide.molar_mass", from = "149 g/mol", to = "150 g/mol"',
        "amine   ",
        "variables.amine.sets",
        "species.amide.molar_mass",
        "a quantity of the batch",
        "cannot differ from point to point",
    ),
    "variable below absolute zero": (
        'from = "30 degC"',
        'from = "-300 degC"',
        "charge_temperature =",
        "variables.charge_temperature.from",
        "'-300 degC'",
        "above absolute zero",
        "below it",
    ),
    "variable with a negative duration": (
        'from = "1 h"',
        'from = "-1 h"',
        "dosing_time  ",
        "variables.dosing_time.from",
        "-3600 (SI)",
        "between 0.001 and 1e+12",
        "a feed takes time",
    ),
    "two dimensions in one variable": (
        '"cooling.set_point", "cooling.start"]',
        '"cooling.set_point", "cooling.flow"]',
        "charge_temperature =",
        "variables.charge_temperature.sets",
        "cooling.flow",
        "a temperature",
        "recipe.charge.temperature is a temperature",
    ),
    "variable in the wrong dimension": (
        'from = "1 h"',
        'from = "20 K"',
        "dosing_time  ",
        "variables.dosing_time.from",
        "'20 K'",
        "a time",
        "recipe.feeds.anhydride.duration is a time; K measures something else",
    ),
    "equilibrium constant of zero": (
        TAR,
        '"amide <=> tar"\nequilibrium_constant = { value = 0, at = "25 degC" }',
        "equilibrium_constant",
        "reactions.decomposition.equilibrium_constant.value",
        "0 (SI)",
        "above 0",
        "positive",
    ),
    "negative reverse order": (
        TAR,
        '"amide <=> tar"\norders = { amide = 0.5, tar = 0 }\nequilibrium_constant = { value = 4, at = "25 degC" }',
        "orders",
        "reactions.decomposition.orders",
        "amide: 0.5",
        "at least 1",
        "negative order",
    ),
    "negative forward order": (
        TAR,
        '"amide -> tar"\norders = { amide = -1 }',
        "orders",
        "reactions.decomposition.orders",
        "-1",
        "{ species = order, ... }",
        "zero or above",
    ),
    "equilibrium constant one way": (
        TAR,
        '"amide -> tar"\nequilibrium_constant = { value = 4 }',
        "equilibrium_constant",
        "reactions.decomposition.equilibrium_constant",
        "an equilibrium constant",
        "<=> in the equation",
        "-> runs one way",
    ),
    "negative rate constant": (
        '"8e-6 1/s"',
        '"-8e-6 1/s"',
        "8e-6",
        "reactions.decomposition.rate_constant.value",
        "-8e-06 (SI)",
        "at least 0",
        "not negative",
    ),
    "wrong order of a rate constant": (
        '"8e-6 1/s"',
        '"8e-6 L/mol/s"',
        "8e-6",
        "reactions.decomposition.rate_constant.value",
        "'8e-6 L/mol/s'",
        "a quantity in 1/s",
        "measures something else",
    ),
    "rate constant in words of its own": (
        '"2.6e-3 L/mol/s"',
        '"2.6e-3 1/s"',
        "2.6e-3",
        "reactions.acylation.rate_constant.value",
        "'2.6e-3 1/s'",
        "a quantity in m^3/mol/s",
        "measures something",
    ),
    "unknown species, with the nearest": (
        '"amide -> tar"',
        '"amid -> tar"',
        "amid -> tar",
        "reactions.decomposition.equation",
        "amid",
        "amide",
        "[species.amid] is not written",
    ),
    "heat capacity that turns negative": (
        "coefficients = [200, 0.2]",
        "coefficients = [200, -0.6]",
        "coefficients",
        "species.amide.heat_capacity",
        "J/mol/K at 333.65 K",
        "above 0 from 278.15 to 353.15 K",
        "positive",
    ),
    "charge beyond the model": (
        'temperature   = "45 degC"',
        'temperature   = "45000 degC"',
        "45000",
        "recipe.charge.temperature",
        "45273.2 (SI)",
        "between 0 and 1500",
        "the model does not hold",
    ),
    "event beyond the model": (
        '"60 degC"',
        '"6000 degC"',
        "set  =",
        "events.0.set.cooling.set_point",
        "6273.15 (SI)",
        "between 0 and 1500",
        "the model does not hold",
    ),
    "barrier of no reaction": (
        '"135 kJ/mol"',
        '"135 MJ/mol"',
        "135 MJ",
        "reactions.decomposition.rate_constant.activation_energy",
        "1.35e+08 (SI)",
        "between -2e+06 and 2e+06",
        "no reaction",
    ),
    "area upside down": ('"8.2 m2"', '"1.2 m2"', "area  ", "vessel.area.full", "1.2 m2", "at least the bottom, 1.5 m2", "more liquid wets more wall"),
    "endless batch": ('batch_time = "6 h"', 'batch_time = "6e20 h"', "6e20", "recipe.batch_time", "(SI)", "between 0 and 1e+12", "and ends"),
    "heat capacity of zero": ('"205 J/mol/K"', '"0 J/mol/K"', "0 J/mol/K", "species.amine.heat_capacity", "0 (SI)", "above 0", "positive"),
    "density of zero": ('"0.98 kg/L"', '"0 kg/L"', '"0 kg/L"', "species.amine.density", "0 (SI)", "above 0", "a density"),
    "range of validity upside down": (
        TAR,
        '"amide -> tar"\nvalid = ["90 degC", "20 degC"]',
        "valid",
        "reactions.decomposition.valid",
        "90 degC",
        "the lower temperature first",
        "upside down",
    ),
    "limit upside down": (
        'mtsr                = { at_most = "80 degC" }',
        'mtsr = { at_least = "90 degC", at_most = "80 degC" }',
        "mtsr",
        "limits.mtsr",
        "363.15 to 353.15 (SI)",
        "the lower bound first",
        "upside down",
    ),
    "limit below absolute zero": (
        '"70 degC" }\nmtsr',
        '"-700 degC" }\nmtsr',
        "max_temperature",
        "limits.max_temperature.at_most",
        "'-700 degC'",
        "above absolute zero",
        "below it",
    ),
    "conversion of one": ("conversion = 0.985", "conversion = 1", "conversion = 1", "target.conversion", "1 (SI)", "between 0 and 1", "a share"),
    "conversion of zero": ("conversion = 0.985", "conversion = 0", "conversion = 0", "target.conversion", "0 (SI)", "between 0 and 1", "a share"),
    "conversion that is not a number": (
        "conversion = 0.985",
        "conversion = nan",
        "conversion = nan",
        "target.conversion",
        "nan",
        "a finite number",
        "nothing",
    ),
    "size of a factorial plan": (
        'kind = "factorial"',
        'kind = "factorial"\npoints = 9',
        "points",
        "plan.points",
        "points",
        "no such key",
        "does not use it",
    ),
    "window at a place that cannot be": (
        '"dosing_time"]\n',
        '"dosing_time"]\nat = { amine = "-5 mol/L" }\n',
        "at = {",
        "window.at.amine",
        "-5000 (SI)",
        "at least 0",
        "less than nothing",
    ),
    "window at an axis": (
        '"dosing_time"]\n',
        '"dosing_time"]\nat = { dosing_time = "2 h" }\n',
        "at = {",
        "window.at.dosing_time",
        "dosing_time",
        "no axis",
        "the other variables",
    ),
    "nothing is charged": (
        'concentration = { amine = "2.2 mol/L" }\nbalance       = "solvent"',
        "",
        "[recipe.charge]",
        "recipe.charge",
        "nothing",
        "a concentration, an amount, or a balance",
        "made of something",
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_fault(case):
    old, new, line, key, found, expected, because = CASES[case]
    seen = [f for f in faults(old, new) if f.key == key and because in f.because]
    assert seen, [(f.key, f.because) for f in faults(old, new)]
    assert (True, True) == (found in seen[0].found, expected in seen[0].expected), seen[0]
    assert line in TEXT.replace(old, new, 1).split("\n")[seen[0].line - 1], seen[0]
    assert "slow.toml" == seen[0].file


LATER = {
    "fit": "[fit]",
}


@pytest.mark.parametrize("section", LATER)
def test_sections_of_later_work(section):
    found = faults("[accuracy]", LATER[section] + "\n[accuracy]")
    line = TEXT[: TEXT.index("[accuracy]")].count("\n") + 1
    assert [(section, line, section, "a study without it", "not available yet")] == [(f.key, f.line, f.found, f.expected, f.because) for f in found]


@pytest.mark.parametrize(
    ("old", "new", "key"),
    [
        ('turnaround = "3.5 h"', 'turnaround = "3.5 h"\nphases = []', "recipe.phases"),
        ('purpose  = "decomposition"', 'purpose  = "decomposition"\nrate = "k * amide"', "reactions.decomposition.rate"),
        ("[limits]", '[limits]\nmax_pressure = { at_most = "2 bar" }', "limits.max_pressure"),
    ],
)
def test_keys_of_later_work(old, new, key):
    assert [(key, "not available yet")] == [(f.key, f.because) for f in faults(old, new)]


def test_mtsr_without_heats():
    text = isothermal("A -> R | 1e-3 1/s") + '[limits]\nmtsr = { at_most = "80 degC" }\n'
    found = {(f.key, f.because) for f in faults("[limits]", "[limits]", text)}
    assert ("reactions.r0.heat.value", "cooling failure needs an energy balance") in found
    assert ("species.A.heat_capacity", "cooling failure needs an energy balance") in found


def test_tmr_ad_without_a_decomposition():
    text = isothermal("A -> R | 1e-3 1/s") + '[limits]\ntmr_ad = { at_least = "24 h" }\n'
    assert any(f.key == "limits.tmr_ad" and "not assessed" in f.because for f in faults("[limits]", "[limits]", text))


def test_a_fault_is_said_once():
    """What follows from a fault elsewhere is not said again."""
    assert ["recipe.charge.temperature"] == [f.key for f in faults('temperature   = "45 degC"', 'temperature   = "-300 degC"')]
    assert ["variables.charge_temperature.from"] == [f.key for f in faults('from = "30 degC"', 'from = "x"')]
    assert ["reactions.decomposition.equation"] == [f.key for f in faults('"amide -> tar"', '"amide > tar"')]
    assert ["recipe.feeds.anhydride.duration"] == [f.key for f in faults('duration    = "3 h"', 'duration    = "3 hh"')]


def test_many_at_once_in_the_order_of_the_file():
    text = TEXT
    for case in ("density of zero", "wrong order of a rate constant", "equivalents of nothing", "limit upside down", "window at an axis"):
        old, new, *_ = CASES[case]
        text = text.replace(old, new, 1)
    with pytest.raises(StudyError) as caught:
        read_text(text)
    keys = [f.key for f in caught.value.faults]
    assert {CASES[c][3] for c in ("density of zero", "wrong order of a rate constant", "equivalents of nothing", "limit upside down")} <= set(keys)
    lines = [f.line for f in caught.value.faults]
    assert sorted(lines) == lines


def test_heat_of_an_isothermal_batch_that_moves_needs_its_temperature():
    reaction = 'A -> R | 1e-3 1/s | heat = { value = "-50 kJ/mol" }'
    text = isothermal(reaction) + '[cooling]\nkind = "isothermal"\n'
    for cp, expected in (("100", []), ("90", ["reactions.r0.heat.at"])):
        full = text.replace("[species.A]", '[species.A]\nheat_capacity = "100 J/mol/K"')
        full = full.replace("[species.R]", f'[species.R]\nheat_capacity = "{cp} J/mol/K"')
        found = [f.key for f in faults("[cooling]", "[cooling]", full)] if expected else []
        assert expected == found
        if not expected:
            assert "isothermal" == read_text(full).cooling_kind


def test_constants_of_a_reaction_with_a_wrong_equation_are_read_too():
    text = TEXT.replace('activation_energy = "135 kJ/mol"', 'activation_energy = "135 kW"', 1)
    assert text != TEXT
    seen = {f.key for f in faults(TAR, '"amide -> nothing"', text)}
    assert {"reactions.decomposition.equation", "reactions.decomposition.rate_constant.activation_energy"} <= seen
