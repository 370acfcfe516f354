"""Units: exact definitions (SI brochure; 0 degC = 273.15 K), and the texts that a unit library alone reads wrongly."""

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sweep.base.units import UnitFault, from_si, show, suffix, to_si


@pytest.mark.parametrize(
    ("text", "dimension", "expected"),
    [
        ("25 degC", "temperature", 298.15),
        ("-10 degC", "temperature", 263.15),
        ("1.9 J/g/degC", "specific heat capacity", 1900.0),
        ("310 W/m2/K", "heat transfer coefficient", 310.0),
        ("9 m3/h", "volume flow", 0.0025),
        ("2.2 mol/L", "concentration", 2200.0),
        ("4.4 kmol", "amount", 4400.0),
        ("98.5 %", "dimensionless", 0.985),
        ("1.5", "dimensionless", 1.5),
        ("30 d", "time", 2592000.0),
        ("5 K", "temperature difference", 5.0),
        ("1 mol/dm3", "concentration", 1000.0),
        ("1 kg/dm3", "density", 1000.0),
        ("250 cm3", "volume", 250e-6),
        ("3 mm2", "area", 3e-6),
        ("1 ft3", "volume", 0.3048**3),
        ("2 L/(mol*s)", "mol**(-1)*m**(3)*s**(-1)", 2e-3),
        ("4 (L/mol)^(1/2)/s", "mol**(-0.5)*m**(1.5)*s**(-1)", 4.0 * 1e-3**0.5),
        ("5 J mol^-1 K^-1", "molar heat capacity", 5.0),
        ("20 °C", "temperature", 293.15),
        ("1 kcal/mol", "energy per amount", 4184.0),
        ("1 Btu/lb/degF", "specific heat capacity", 1055.056 / 0.45359237 * 1.8),  # the Btu of ISO 31-4; the IT Btu is 1.4e-7 less
        ("2 L^0.5/mol^0.5/s", "mol**(-0.5)*m**(1.5)*s**(-1)", 2.0 * 1e-3**0.5),
        ("2 L^0.7/mol^0.7/s", "mol**(-0.7)*m**(2.1)*s**(-1)", 2.0 * 1e-3**0.7),  # 3 times 0.7 is 2.1 but for rounding
    ],
)
def test_to_si(text, dimension, expected):
    assert expected == pytest.approx(to_si(text, dimension), rel=1e-12)


@pytest.mark.parametrize(
    ("text", "dimension", "because"),
    [
        ("1,5 L", "volume", "comma"),
        ("5 degC", "temperature difference", "counts from a zero"),
        ("5 °C", "temperature difference", "counts from a zero"),
        ("5 celsius", "temperature difference", "counts from a zero"),
        ("5 delta_degC", "temperature", "signs"),
        ("3 hh", "time", "unknown unit 'hh'"),
        ("3 dd", "time", "unknown unit 'dd'"),
        ("3 mmin", "time", "unknown unit 'mmin'"),
        ("3 kW/kpsi", "power", "unknown unit 'kpsi'"),
        ("25 C", "temperature", "not what it seems"),
        ("5 J/mol/R", "molar heat capacity", "not what it seems"),
        ("1 kJ/ton", "specific heat capacity", "not what it seems"),
        ("2 500 L", "volume", "signs or numbers"),
        ("1 000 kg", "mass", "signs or numbers"),
        ("5 h 30", "time", "signs or numbers"),
        ("5 h 30 min", "time", "signs or numbers"),
        ("1 K**9**9**9", "temperature", "signs or numbers"),
        ("1 m^9^9^9", "time", "signs or numbers"),
        ("1 9**9**9 s", "time", "signs or numbers"),
        ("1 s**999999999", "time", "signs or numbers"),
        ("1" * 20_000 + "\nx\ny", "time", "a number and its unit"),
        ("1 barg", "pressure", "not what it seems"),
        ("12:30", "time", "signs"),
        ("nan K", "temperature", "a number and its unit"),
        ("1e999 K", "temperature", "not finite"),
        ("9**9**9 K", "temperature", ""),
        ('__import__("os")', "time", "a number and its unit"),
        ("5", "time", "with its unit"),
        ("20 K", "time", "measures something else"),
        ("3 hx", "time", "unknown unit 'hx'"),
        ("-1 K", "temperature", "below"),
    ],
)
def test_refused(text, dimension, because):
    with pytest.raises(UnitFault) as caught:
        to_si(text, dimension)
    assert because in caught.value.because


@given(
    st.floats(0.1, 1e6),
    st.sampled_from([("degC", "temperature"), ("h", "time"), ("kmol", "amount"), ("kJ/mol", "energy per amount")]),
)
def test_there_and_back(value, unit):
    text, dimension = unit
    assert value == pytest.approx(from_si(to_si(f"{value!r} {text}", dimension), text), rel=1e-9, abs=1e-9)


@given(st.text(max_size=30))
def test_any_text_is_a_quantity_or_a_fault(text):
    try:
        to_si(text, "time")
    except UnitFault as error:
        assert error.expected


def test_show():
    assert "45 degC" == show(318.15, "degC")
    assert "2.5 h" == show(9000.0, "h")
    assert "0.1235" == show(0.123456, "")


@pytest.mark.parametrize(
    ("unit", "expected"),
    [
        ("K", "_K"),
        ("s", "_s"),
        ("", ""),
        ("m^3", "_m3"),
        ("m3", "_m3"),
        ("mol/m^3", "_mol_per_m3"),
        ("m^3/s", "_m3_per_s"),
        ("W/m^2/K", "_W_per_m2_K"),
        ("1/K", "_per_K"),
        ("mol**(-0.5)*m**(1.5)*s**(-1)", "_m1.5_per_mol0.5_s"),
        ("mol**(0)*s**(-1)", "_per_s"),
        ("kg/m^3/s", "_kg_per_m3_s"),
    ],
)
def test_suffix(unit, expected):
    assert expected == suffix(unit)


def test_powers_that_differ_by_rounding_are_the_same_both_ways():
    dimension = "mol**(-0.7)*m**(2.1)*s**(-1)"
    assert 2.0 == pytest.approx(from_si(to_si("2 L^0.7/mol^0.7/s", dimension), "L^0.7/mol^0.7/s", dimension), rel=1e-12)
    with pytest.raises(UnitFault, match="measures something else"):
        to_si("2 L^0.7/mol^0.6/s", dimension)
