"""Numbers as they are read: units, digits, signs."""

import math

import pytest

from sweep.report.display import (
    CELSIUS,
    KILOWATT,
    PERCENT,
    Scale,
    axis_times,
    conversion,
    duration,
    number,
    pretty,
    reach,
    scale_as_written,
    scale_for,
    share,
    temperature,
)  # fmt: skip
from sweep.report.wording import listed, pieces, sentence, split_unit, words

SPACE = "\u00a0"


@pytest.mark.parametrize(
    ("shown", "value", "decimals"),
    [
        ("0", 0.0, None), ("1500", 1500.0, None), ("0.01621", 0.016207, None), ("−3.4", -3.4, None), ("2.6 × 10⁻⁶", 2.6e-6, None),
        ("1.234 × 10⁷", 12341234.0, None), ("45.0", 45.0, 1), ("0.0", -0.01, 1), ("−0.1", -0.06, 1), ("100", 100.0, None), ("–", math.nan, None),
        ("12346", 12345.6, None), ("0.00050", 0.0005, 5),
    ],
)  # fmt: skip
def test_a_number_has_sensible_digits(shown: str, value: float, decimals: int | None) -> None:
    assert shown == number(value, decimals)


def test_a_temperature_is_in_degrees_and_a_difference_in_kelvin() -> None:
    assert f"45.0{SPACE}°C" == CELSIUS.text(318.15, 1)
    assert f"5.0{SPACE}K" == CELSIUS.change(5.0, 1)
    assert f"at least 99.9{SPACE}°C" == temperature(373.05, at_least=True)


def test_what_has_no_value_is_a_dash_even_where_it_would_be_a_bound() -> None:
    assert ["–"] * 4 == [temperature(None, at_least=True), duration(None, at_least=True), share(None), conversion(None)]
    assert "–" == CELSIUS.text(math.nan)


@pytest.mark.parametrize(("unit", "span"), [("h", 7200.0), ("min", 7199.0), ("h", 400000.0)])
def test_a_time_axis_is_in_hours_unless_the_whole_span_is_below_two(unit: str, span: float) -> None:
    assert unit == axis_times(span).unit


@pytest.mark.parametrize(
    ("text", "seconds"), [("90 s", 90.0), ("26 min", 1560.0), ("6 h", 21600.0), ("95 h", 342000.0), ("5 d", 432000.0), ("0 s", 0.0)]
)
def test_a_duration_is_in_the_unit_it_reads_best_in(text: str, seconds: float) -> None:
    assert text.replace(" ", SPACE) == duration(seconds)


def test_a_long_time_to_act_stands_in_hours_with_days_beside() -> None:
    assert f"at least 720{SPACE}h (30{SPACE}d)" == reach(2592000.0, at_least=True)
    assert f"26{SPACE}min" == reach(1560.0)


@pytest.mark.parametrize(
    ("text", "change", "own", "unit", "value"),
    [
        ("45 °C", "5 K", "degC", "K", 318.15), ("318.1 K", "5 K", "K", "K", 318.15), ("3 h", "0.001389 h", "h", "s", 10800.0),
        ("2.2 mol/L", "0.005 mol/L", "mol/L", "mol/m^3", 2200.0), ("113 °F", "9 °F (difference)", "degF", "K", 318.15),
        ("1.06", "5", "", "1", 1.06), ("12 %", "500 %", "%", "1", 0.12), ("7 furlongish", "5 furlongish", "nonsense", "furlongish", 7.0),
    ],
)  # fmt: skip
def test_a_variable_is_shown_in_the_unit_it_was_written_in(text: str, change: str, own: str, unit: str, value: float) -> None:
    scale = scale_as_written(own, unit)
    assert (text.replace(" ", SPACE, 1), change.replace(" ", SPACE, 1)) == (scale.text(value), scale.change(5.0))


def test_responses_take_the_units_of_the_trade() -> None:
    assert KILOWATT == scale_for("W", "cooling_duty")
    assert PERCENT == scale_for("", "coolant_lost.conversion")
    assert Scale("kg/m³/h", 3600.0) == scale_for("kg/m^3/s", "productivity")
    assert "" == scale_for("1", "per_product_tar").unit
    assert PERCENT == scale_for("1", "conversion") == scale_for("", "highest_conversion")
    assert Scale("kg/m³/h", 3600.0) == scale_for("kg/m3/s")
    assert CELSIUS == scale_for("K", "coolant_lost.max_temperature")
    assert "h" == scale_for("s", "tmr_ad", 86400.0).unit
    assert "kg/m³" == pretty("kg/m^3")


@pytest.mark.parametrize(
    ("said", "name"),
    [
        ("highest temperature", "max_temperature"), ("tar per mole of product", "per_product_tar"),
        ("MTSR, scenario coolant lost", "coolant_lost.mtsr"),
        ("conversion (at least)", "conversion at least"), ("mole fraction of x", "fraction_x"), ("dosing time", "dosing_time"),
    ],
)  # fmt: skip
def test_names_are_said_in_words(said: str, name: str) -> None:
    assert said == words(name)


def test_sentences_and_lists() -> None:
    assert "The end is 5\u00a0°C." == sentence(" the end is 5 degC ")
    assert ["", "a", "a, b and c"] == [listed([]), listed(["a"]), listed(["a", "b", "c"])]
    assert ("mtsr", "K") == split_unit("mtsr_K")
    assert ("per_product_tar", "") == split_unit("per_product_tar")
    assert "The window is in 2 separate pieces, with 1 hole." == pieces({"pieces": 2, "holes": 1})
    assert "There is no window." == pieces({"pieces": 0, "holes": 0})


def test_a_difference_in_kelvin_is_never_shown_as_a_temperature() -> None:
    assert f"92.4{SPACE}K" == scale_for("K", "adiabatic_rise_synthesis").text(92.4)
