"""Adiabatic batches against exponential integrals and heat balances (closed forms recomputed with mpmath)."""

import pytest

from tests.texts import ADIABATIC


def adiabatic(k: str, energy: str, T0: float, rise: float, conversion: float, extra: str = "", relative: float = 1e-9) -> str:
    """Return a study whose adiabatic rise is `rise` K: c_p 100 J/mol/K, heat of -100 * rise J/mol."""
    return ADIABATIC.format(
        cp="100 J/mol/K", k=k, at="1e30 K", energy=energy, heat=f"{-100.0 * rise} J/mol", extra=extra, batch_time="2000 s",
        temperature=f"{T0} K", conversion=conversion, relative=relative,
    )  # fmt: skip


@pytest.mark.parametrize(
    ("conversion", "expected"), [(0.1, 549.389670908293), (0.5, 943.317624075954), (0.9, 975.260732795778), (0.99, 983.535968844977)]
)
def test_first_order_time(set_point, conversion, expected):
    found = set_point(adiabatic("1e10 1/s", "80 kJ/mol", 300.0, 100.0, conversion))
    assert expected == pytest.approx(found["time_to_target_s"], rel=1e-7)
    assert 400.0 == pytest.approx(found["max_temperature_K"], abs=1e-4)
    assert 1e-6 > found["energy_balance_error"]


@pytest.mark.parametrize(("conversion", "expected"), [(0.1, 858.603796725458), (0.99, 998.687252084083)])
def test_steep_first_order_time(set_point, conversion, expected):
    found = set_point(adiabatic("1e12 1/s", "100 kJ/mol", 320.0, 200.0, conversion))
    assert expected == pytest.approx(found["time_to_target_s"], rel=1e-7)


def test_zero_order_time(set_point):
    found = set_point(adiabatic("1e13 mol/m3/s", "80 kJ/mol", 300.0, 100.0, 0.5, extra="orders = { A = 0 }"))
    assert 837.115783354461 == pytest.approx(found["time_to_target_s"], rel=1e-6)


def test_default_accuracy_keeps_its_promise(set_point):
    found = set_point(adiabatic("1e12 1/s", "100 kJ/mol", 320.0, 200.0, 0.5, relative=1e-6))
    assert 998.114519810753 == pytest.approx(found["time_to_target_s"], rel=1e-4)
    assert 520.0 == pytest.approx(found["max_temperature_K"], abs=0.01)


def test_runaway_is_a_row_with_its_reason(set_point):
    found = set_point(adiabatic("1e10 1/s", "80 kJ/mol", 300.0, 3000.0, 0.9))
    assert "runaway" == found["status"]
    assert "left the model's range" in found["reason"]
