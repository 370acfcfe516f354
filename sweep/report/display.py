"""SI numbers as an engineer reads them: units for display, digits, signs. The only computing in the report."""

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sweep.base.units import from_si

Array = NDArray[np.float64]
ZERO_CELSIUS = 273.15  # K, exact by definition
NONE = "–"


@dataclass(frozen=True)
class Scale:
    """From SI to a unit for display: shown = factor * SI + offset; differences take the factor only."""

    unit: str
    factor: float = 1.0
    offset: float = 0.0
    difference_unit: str = ""

    def of(self, value: Any) -> Array:
        """Return SI values (any shape) in this unit."""
        return np.asarray(value, dtype=np.float64) * self.factor + self.offset

    def one(self, value: float) -> float:
        """Return one SI value in this unit."""
        return float(value) * self.factor + self.offset

    @property
    def step(self) -> str:
        """The unit of differences: K where values are in degrees Celsius."""
        return self.difference_unit or self.unit

    def text(self, value: float | None, decimals: int | None = None, digits: int = 4) -> str:
        """Return an SI value with its unit."""
        return NONE if value is None or not math.isfinite(value) else with_unit(number(self.one(value), decimals, digits), self.unit)

    def change(self, value: float | None, decimals: int | None = None, digits: int = 4) -> str:
        """Return an SI difference with its unit."""
        return NONE if value is None or not math.isfinite(value) else with_unit(number(value * self.factor, decimals, digits), self.step)


CELSIUS = Scale("°C", 1.0, -ZERO_CELSIUS, "K")
PERCENT = Scale("%", 100.0, 0.0, "percentage points")
KILOWATT = Scale("kW", 1e-3)
SECONDS, MINUTES, HOURS, DAYS = Scale("s"), Scale("min", 1 / 60), Scale("h", 1 / 3600), Scale("d", 1 / 86400)
_FIXED = {
    "W": KILOWATT, "Pa": Scale("bar", 1e-5), "kg/m^3/s": Scale("kg/m³/h", 3600.0), "mol/m^3/s": Scale("mol/m³/h", 3600.0),
}  # fmt: skip
_SHARES = ("conversion", "yield_", "accumulation")
_TEMPERATURES = ("temperature", "mtsr", "td24", "mtt")  # what else is in K is a difference, such as an adiabatic rise


def pretty(unit: str) -> str:
    """Return a unit with raised powers and a degree sign."""
    for plain, shown in (("delta_deg", "deg"), ("deg", "°"), ("**", "^"), ("^3", "³"), ("^2", "²"), ("m3", "m³"), ("m2", "m²"), ("*", "·")):
        unit = unit.replace(plain, shown)
    return unit


def times(reach: float) -> Scale:
    """Return the unit of a time axis or table that reaches so far (s): minutes below two hours, else hours, days above four."""
    if not math.isfinite(reach) or reach >= 96 * 3600:
        return DAYS
    return HOURS if reach >= 2 * 3600 else MINUTES if reach >= 120 else SECONDS


def axis_times(span: float) -> Scale:
    """Return the unit of a batch's time axis: hours, or minutes where the whole span (s) is below two hours."""
    return HOURS if span >= 2 * 3600 else MINUTES


def scale_for(unit: str, name: str = "", reach: float = math.inf) -> Scale:
    """Return how a response in an SI unit is shown; times by how far they reach (s)."""
    plain = name.rsplit(".", 1)[-1]
    unit = "" if unit == "1" else unit.replace("m3", "m^3")
    if unit == "s":
        return times(abs(reach))
    if unit == "K":
        return CELSIUS if any(part in plain for part in _TEMPERATURES) else Scale("K")
    if unit == "" and any(part in plain for part in _SHARES):
        return PERCENT
    return _FIXED.get(unit, Scale(pretty(unit)))


def scale_as_written(own: str, unit: str) -> Scale:
    """Return the study's own unit of a variable, such as "degC"; its SI unit where it is written in none."""
    if not own:
        return Scale("" if unit == "1" else pretty(unit))
    try:
        offset, far = from_si(0.0, own), from_si(1e4, own)
    except Exception:  # pint raises many kinds; a unit that cannot be read back is shown in SI
        return Scale(pretty(unit))
    factor = float(f"{(far - offset) / 1e4:.12g}")
    shown = pretty(own)
    difference = "K" if shown in ("°C", "K") else f"{shown} (difference)" if offset else ""
    return Scale(shown, factor, float(f"{offset:.12g}") + 0.0, difference)


def with_unit(number: str, unit: str) -> str:
    """Return number and unit, held together by a no-break space."""
    return f"{number}\u00a0{unit}" if unit else number


def decimals_for(value: float, digits: int) -> int:
    """Return the decimals that show so many significant digits of a value, at least none."""
    return max(0, digits - 1 - math.floor(math.log10(abs(value)))) if value and math.isfinite(value) else 0


def number(value: float, decimals: int | None = None, digits: int = 4) -> str:
    """Return a number with sensible digits: fixed decimals where asked, else significant digits without idle zeros."""
    if not math.isfinite(value):
        return NONE
    size = abs(value)
    if value and (size < 1e-3 or size >= 1e6) and (decimals is None or size < 0.5 * 10.0**-decimals or size >= 1e6):
        mantissa, power = f"{value:.{max(1, digits - 1)}e}".split("e")
        return f"{_sign(mantissa.rstrip('0').rstrip('.'))} × 10{_raised(int(power))}"
    if decimals is None:
        decimals = min(decimals_for(value, digits), 6)
        text = f"{value:.{decimals}f}"
        return _sign(text.rstrip("0").rstrip(".") if "." in text else text)
    return _sign(f"{value:.{decimals}f}")


def _sign(text: str) -> str:
    return text.replace("-", "−") if float(text) else text.replace("-", "")


def _raised(power: int) -> str:
    return str(power).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))


def duration(seconds: float | None, at_least: bool = False, digits: int = 4) -> str:
    """Return a time in the unit it reads best in; with `at_least`, said to be a lower bound."""
    if seconds is None or not math.isfinite(seconds):
        return NONE
    text = times(abs(seconds)).text(seconds, None, digits)
    return f"at least {text}" if at_least else text


def reach(seconds: float | None, at_least: bool = False) -> str:
    """Return a time to act: hours, which criteria are written in, with days beside them where there are many."""
    if seconds is None or not math.isfinite(seconds) or abs(seconds) < 96 * 3600:
        return duration(seconds, at_least)
    text = f"{HOURS.text(seconds)} ({DAYS.text(seconds, digits=3)})"
    return f"at least {text}" if at_least else text


def conversion(value: float | None) -> str:
    """Return a conversion in per cent to a hundredth."""
    return PERCENT.text(value, 2)


def temperature(kelvin: float | None, at_least: bool = False) -> str:
    """Return a temperature in degrees Celsius to a tenth; with `at_least`, said to be a lower bound."""
    text = CELSIUS.text(kelvin, 1)
    return f"at least {text}" if at_least and text != NONE else text


def kelvins(difference: float | None) -> str:
    """Return a temperature difference in K to a tenth."""
    return Scale("K").text(difference, 1)


def share(value: float | None) -> str:
    """Return a share as per cent."""
    return NONE if value is None else with_unit(number(100.0 * value, None, 3), "%")
