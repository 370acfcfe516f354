"""The five kinds of cooling, each with what it needs and without."""

from pathlib import Path

import pytest

from sweep.base.errors import StudyError
from sweep.study import read_text

TEXT = Path(__file__).with_name("fedbatch.toml").read_text()
START, END = TEXT.index("[cooling]"), TEXT.index("[recipe]")
PLAIN = TEXT[:START] + "{cooling}\n" + TEXT[END : TEXT.index("[[events]]")]
KINDS = {
    "adiabatic": "",
    "isothermal": "",
    "duty": 'duty = "100 kW"\nset_point = "45 degC"',
    "coolant": 'temperature = "5 degC"',
    "jacket": 'inlet = "5 degC"\nflow = "9 m3/h"\nhold_up = "0.6 m3"',
}


@pytest.mark.parametrize("kind", KINDS)
def test_kind(kind):
    study = read_text(PLAIN.replace("{cooling}", f'[cooling]\nkind = "{kind}"\n{KINDS[kind]}'))
    assert kind == study.cooling_kind
    assert (998.0 if kind == "jacket" else None) == study.values.get("cooling.coolant.density")


@pytest.mark.parametrize("kind", ["duty", "coolant", "jacket"])
def test_kind_without_what_it_needs(kind):
    with pytest.raises(StudyError) as caught:
        read_text(PLAIN.replace("{cooling}", f'[cooling]\nkind = "{kind}"'))
    expected = {f"cooling.{line.split(' = ')[0]}" for line in KINDS[kind].split("\n")}
    assert expected == {f.key for f in caught.value.faults}


def test_unknown_kind():
    with pytest.raises(StudyError, match=r'"adiabatic" or "isothermal"'):
        read_text(PLAIN.replace("{cooling}", '[cooling]\nkind = "ice"'))


def test_an_event_switches_the_kind_and_brings_its_own_needs():
    switch = '[[events]]\ntime = "2 h"\nset = { "cooling.kind" = "duty" }\n'
    cooling = f'[cooling]\nkind = "adiabatic"\n{switch}'
    with pytest.raises(StudyError, match=r"cooling\.set_point"):
        read_text(PLAIN.replace("{cooling}", cooling))
    whole = cooling.replace(switch, KINDS["duty"] + "\n" + switch)
    assert {"cooling.kind": "duty"} == read_text(PLAIN.replace("{cooling}", whole)).events[0].sets


def test_to_target_needs_a_target():
    text = PLAIN.replace("{cooling}", '[cooling]\nkind = "adiabatic"').replace('"6 h"', '"to target"')
    with pytest.raises(StudyError, match=r'a batch "to target" has a target'):
        read_text(text)
    assert read_text(text + '[target]\nspecies = "amine"\nconversion = 0.9\n').batch_to_target


def test_charge_by_volume_and_mass():
    charge = 'amount = { amine = "107.2 kg", solvent = "1 m3" }'
    text = PLAIN.replace("{cooling}", '[cooling]\nkind = "adiabatic"').replace('concentration = { amine = "2.2 mol/L" }', charge)
    text = text.replace('balance       = "solvent"', "").replace('volume        = "2.0 m3"', "")
    study = read_text(text)
    assert 1000.0 == pytest.approx(study.values["recipe.charge.amount.amine"], rel=1e-12)
    assert 870.0 / 0.0921 == pytest.approx(study.values["recipe.charge.amount.solvent"], rel=1e-12)
