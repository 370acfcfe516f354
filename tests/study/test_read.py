"""A study read whole, and each fault with its line, key and reason."""

import pickle
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from sweep.base.errors import StudyError, SweepError
from sweep.study import Study, read_study, read_text

FILE = Path(__file__).with_name("fedbatch.toml")
TEXT = FILE.read_text()
HEAD = TEXT.split("[target]")[0]


def faults(*changes: tuple[str, str], text: str = TEXT) -> list[tuple[str, str, str, str]]:
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    with pytest.raises(StudyError) as caught:
        read_text(text)
    return [(f.key, f.found, f.expected, f.because) for f in caught.value.faults]


def test_whole_study():
    study = read_study(FILE)
    assert ("amine", "amide") == (study.target.species, study.target.product)
    assert (200.0, 0.2, 0.0, 0.0) == pytest.approx(study.species[3].heat_capacity)
    assert {"amine": -1.0, "anhydride": -1.0, "amide": 1.0, "acid": 1.0} == study.reactions[0].stoichiometry
    assert 2.6e-6 == pytest.approx(study.values["reactions.acylation.rate_constant.value"], rel=1e-12)
    assert 1.7 * 92.1 == pytest.approx(study.values["species.solvent.heat_capacity"], rel=1e-12)
    assert 318.15 == study.values["cooling.set_point"]
    assert ("recipe.charge.temperature", "cooling.set_point", "cooling.start") == study.paths_of("charge_temperature")
    assert study.asks_failure
    assert {"cooling.set_point": 333.15} == study.events[0].sets
    assert study == pickle.loads(pickle.dumps(study))


def test_digest_ignores_layout_only():
    assert read_text(TEXT).digest == read_text("# remark\n" + TEXT.replace(" = ", "=")).digest
    assert read_text(TEXT).digest != read_text(TEXT.replace('"58 kJ/mol"', '"59 kJ/mol"')).digest


def test_quantity_and_paths():
    study = read_text(TEXT)
    assert 7200.0 == study.quantity("dosing_time", "2 h")
    assert 333.15 == study.quantity("recipe.charge.temperature", "60 degC")
    with pytest.raises(SweepError, match="dosing_time: found '20 K', expected a time"):
        study.quantity("dosing_time", "20 K")
    with pytest.raises(SweepError, match="did you mean dosing_time"):
        study.paths_of("dosing_tme")


CASES = {
    "wrong dimension": (
        '"58 kJ/mol"',
        '"58 kJ"',
        "reactions.acylation.rate_constant.activation_energy",
        "measures something else",
    ),
    "unknown unit": ('"3 h"', '"3 hx"', "recipe.feeds.anhydride.duration", "unknown unit"),
    "unknown key": ('batch_time = "6 h"', 'batch_tme = "6 h"', "recipe.batch_tme", "the key is not known here"),
    "unknown species": (
        "amide -> tar",
        "amid -> tar",
        "reactions.decomposition.equation",
        "[species.amid] is not written",
    ),
    "unbalanced": (
        "amine + anhydride -> amide + acid",
        "amine + anhydride -> amide",
        "reactions.acylation.equation",
        "mass is conserved",
    ),
    "missing constant": (
        'value = "8e-6 1/s", ',
        "",
        "reactions.decomposition.rate_constant.value",
        "a reaction has a rate",
    ),
    "missing heat": (
        'heat     = { value = "-70 kJ/mol", at = "25 degC" }',
        "",
        "reactions.overacylation.heat.value",
        "balance",
    ),
    "missing reference": (
        'at = "45 degC", activation_energy = "58',
        'activation_energy = "58',
        "reactions.acylation.rate_constant.at",
        "moves",
    ),
    "upside down": (
        'from = "30 degC", to = "65 degC"',
        'from = "65 degC", to = "30 degC"',
        "variables.charge_temperature.to",
        "upside down",
    ),
    "absolute zero": ('"20 degC"\nstart', '"-300 degC"\nstart', "recipe.feeds.anhydride.temperature", "below it"),
    "negative duration": (
        'duration    = "3 h"',
        'duration    = "-3 h"',
        "recipe.feeds.anhydride.duration",
        "a feed takes time",
    ),
    "zero duration": (
        'duration    = "3 h"',
        'duration    = "0 h"',
        "recipe.feeds.anhydride.duration",
        "a feed takes time",
    ),
    "infinite": (
        "equivalents = 1.06",
        "equivalents = inf",
        "recipe.feeds.anhydride.amount.anhydride.equivalents",
        "nothing can be computed",
    ),
    "not a number": ('"3 kW"', '"nan kW"', "vessel.stirrer_power", "a quantity is a number and its unit"),
    "decimal comma": ('"2.2 mol/L"', '"2,2 mol/L"', "recipe.charge.concentration.amine", "a comma is not read"),
    "bare number": ('"6 h"\nturn', "6\nturn", "recipe.batch_time", "a bare number is dimensionless"),
    "conversion": ("conversion = 0.985", "conversion = 1.2", "target.conversion", "a conversion is a share"),
    "molar mass": ('"107.2 g/mol"', '"0 g/mol"', "species.amine.molar_mass", "weighs something"),
    "overfull": ('volume        = "2.0 m3"', 'volume        = "3.8 m3"', "vessel.volume", "above the vessel's volume"),
    "overfull in a corner": ('"4 m3"\nheat', '"2.5 m3"\nheat', "vessel.volume", "above the vessel's volume"),
    "sets nothing": (
        '"recipe.feeds.anhydride.duration"',
        '"recipe.feeds.anhydrid.duration"',
        "variables.dosing_time.sets",
        "sets nothing",
    ),
    "sets the same": (
        '"recipe.feeds.anhydride.duration"',
        '"cooling.start"',
        "variables.dosing_time.sets",
        "charge_temperature sets it already",
    ),
    "no decomposition": ('purpose  = "decomposition"', "", "limits.tmr_ad", "not assessed"),
    "beyond the horizon": ('"24 h" }', '"60 d" }', "limits.tmr_ad.at_least", "beyond the horizon"),
    "no product": ('product    = "amide"', "", "limits.per_product_diamide", "it counts on the product"),
    "unknown limit": ("cooling_duty  ", "coling_duty  ", "limits.coling_duty", "no response has this name"),
    "later section": ("[accuracy]", "[vessels]\n[accuracy]", "vessels", "not available yet"),
    "later limit": (
        "[limits]",
        '[limits]\nmax_pressure = { at_most = "2 bar" }',
        "limits.max_pressure",
        "not available yet",
    ),
    "never brought in": ('species    = "amine"', 'species    = "tar"', "target.species", "cannot be converted"),
    "unused cooling key": ('kind      = "jacket"', 'kind      = "adiabatic"', "cooling.flow", "does not use it"),
    "no flow": ('flow      = "9 m3/h"', "", "cooling.flow", "kind jacket needs it"),
    "syntax": ("[accuracy]", "[accuracy", "syntax", "Expected ']'"),
    "axis": ('["charge_temperature", "dosing_time"]', '["charge_temperature", "nothing"]', "window.axes", "two axes"),
    "levels": ('"6 h", levels = 15', '"6 h"', "variables.dosing_time.levels", "a factorial plan counts levels"),
    "temperature as coulomb": ('inlet     = "5 degC"', 'inlet     = "5 C"', "cooling.inlet", "not what it seems"),
    "feed without density": (
        'density       = "1.08 kg/L"',
        "",
        "species.anhydride.density",
        "feed anhydride adds its volume",
    ),
    "no room": ('"2.2 mol/L" }', '"12 mol/L" }', "recipe.charge.balance", "nothing is left"),
}


@pytest.mark.parametrize("case", CASES)
def test_fault(case):
    old, new, key, because = CASES[case]
    found = faults((old, new))
    assert any(k == key and because in b for k, _, _, b in found), found


def test_every_fault_at_once_with_its_line():
    text = TEXT.replace('"3 h"', '"20 K"').replace("conversion = 0.985", "conversion = -1").replace('"107.2 g/mol"', '"x"')
    with pytest.raises(StudyError) as caught:
        read_text(text, "slow.toml")
    lines = {f.key: f.line for f in caught.value.faults}
    numbers = {
        key: 1 + text[: text.index(part)].count("\n")
        for key, part in [
            ("recipe.feeds.anhydride.duration", '"20 K"'),
            ("target.conversion", "conversion = -1"),
            ("species.amine.molar_mass", '"x"'),
        ]
    }
    assert numbers == {key: lines[key] for key in numbers}
    assert f"slow.toml:{numbers['target.conversion']}  target.conversion\n  found     -1" in str(caught.value)
    assert str(caught.value).endswith(f"{len(caught.value.faults)} faults")


def test_suggestions():
    assert any(e == "'batch_time'" for _, _, e, _ in faults(('batch_time = "6 h"', 'batch_tme = "6 h"')))
    assert any("kJ/mol" in e for _, _, e, _ in faults(('"58 kJ/mol"', '"58 kJ/mool"')))


def warned(*changes: tuple[str, str]) -> list[str]:
    text = TEXT
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    return [w.because for w in read_text(text).warnings]


def test_warnings():
    assert [] == warned()
    assert any("endothermic" in w for w in warned(('"-112 kJ/mol"', '"112 kJ/mol"')))
    assert any("cannot carry the dosing heat" in w for w in warned(('"310 W/m2/K"', '"30 W/m2/K"')))
    assert any("outside the range of dosing_time" in w for w in warned(('"3 h"', '"8 h"')))
    assert any("reference temperature" in w for w in warned(('at = "45 degC", activation', 'at = "200 degC", activation')))
    assert any(
        "validity" in w for w in warned(('purpose  = "dec', 'purpose  = "dec'), ('amide + acid"', 'amide + acid"\nvalid = ["20 degC", "50 degC"]'))
    )
    assert any("flow is what is written" in w for w in warned(('gain      = "0.08 1/K"', "")))


ISOTHERMAL = """
[species.A]
[species.B]
[reactions.r]
equation = "A -> B"
orders = { A = 1.5 }
rate_constant = { value = "0.01 L^0.5/mol^0.5/s" }
[recipe]
batch_time = "1 h"
[recipe.charge]
temperature = "25 degC"
volume = "1 L"
concentration = { A = "2 mol/L" }
"""


def test_isothermal_needs_no_heats():
    study = read_text(ISOTHERMAL)
    assert "isothermal" == study.cooling_kind
    assert 0.01 * 1e-3**0.5 == pytest.approx(study.values["reactions.r.rate_constant.value"], rel=1e-12)
    assert any("cannot be checked" in w.because for w in study.warnings)
    assert not study.asks_failure


def test_cooling_left_out_with_heats():
    text = ISOTHERMAL.replace("[recipe]", '[reactions.r.heat]\nvalue = "-50 kJ/mol"\n[recipe]')
    assert [("cooling", "nothing")] == [f[:2] for f in faults(text=text)]


def test_reversible():
    text = ISOTHERMAL.replace("A -> B", "A <=> B").replace("orders = { A = 1.5 }\n", "").replace("L^0.5/mol^0.5/s", "1/s")
    assert ["reactions.r.equilibrium_constant.value"] == [f[0] for f in faults(text=text)]
    study = read_text(text.replace("[recipe]", "equilibrium_constant = { value = 4 }\n[recipe]", 1))
    assert study.reactions[0].reversible
    assert 4.0 == study.values["reactions.r.equilibrium_constant.value"]


def test_file_that_cannot_be_read(tmp_path):
    with pytest.raises(StudyError, match="No such file"):
        read_study(tmp_path / "none.toml")
    (tmp_path / "raw.toml").write_bytes(b"\xff\xfe")
    with pytest.raises(StudyError, match="UTF-8"):
        read_study(tmp_path / "raw.toml")


def read_anything(text: str) -> None:
    try:
        assert isinstance(read_text(text), Study)
    except StudyError as error:
        assert error.faults


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(st.text(max_size=200))
def test_garbage_is_a_study_error(text):
    read_anything(text)


WORDS = ["1", "-1", "nan", "inf", "true", "[]", "{}", '""', '"1 m"', '"1,5 L"', '"5 degC"', "1e400", "9" * 400, "[[1]]", "1979-05-27",
         '"x"', '"to target"', "0", "{ a = 1 }", '["1 K", "2 K"]']  # fmt: skip
LINES = TEXT.split("\n")


@settings(max_examples=250, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(st.lists(st.tuples(st.integers(0, len(LINES) - 1), st.sampled_from(["", "drop", *WORDS])), max_size=3))
def test_mutated_study_is_a_study_or_a_study_error(changes):
    lines = list(LINES)
    for number, word in changes:
        key, sign, _ = lines[number].partition("=")
        lines[number] = f"{key}= {word}" if sign and word != "drop" else ""
    read_anything("\n".join(lines))
