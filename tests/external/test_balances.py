"""First laws: mass and energy, over every kind of cooling, from the profile alone."""

from pathlib import Path

import numpy as np
import pytest

from sweep.plant import profile
from sweep.study import read_text

TEXT = (Path(__file__).parent / "fed_batch.toml").read_text()
START, END = TEXT.index("[cooling]"), TEXT.index("[recipe]")
COOLING = {
    "adiabatic": 'kind = "adiabatic"',
    "isothermal": 'kind = "isothermal"',
    "duty": 'kind = "duty"\nduty = "60 kW"\nset_point = "45 degC"',
    "coolant": 'kind = "coolant"\ntemperature = "10 degC"',
    "jacket": TEXT[START:END].removeprefix("[cooling]"),
    "jacket with reset": TEXT[START:END].removeprefix("[cooling]") + 'reset_time = "20 min"\n',
    "jacket without control": 'kind = "jacket"\ninlet = "20 degC"\nflow = "2 m3/h"\nhold_up = "0.6 m3"',
}
MOLAR_MASS = {"amine": 107.2, "anhydride": 102.1, "solvent": 92.1, "amide": 149.2, "acid": 60.1, "diamide": 191.2, "tar": 149.2}


def cooled(kind: str, relative: float = 1e-9) -> str:
    """Return the demo's batch with another cooling and a heat capacity that moves; its event only where there is a set-point."""
    recipe = TEXT[END : TEXT.index("[limits]")]
    if "set_point" not in COOLING[kind]:
        recipe = recipe[: recipe.index("[[events]]")] + recipe[recipe.index("[target]") :]
    text = TEXT[:START] + f"[cooling]\n{COOLING[kind]}\n{recipe}[accuracy]\nrelative = {relative}\n"
    return text.replace('heat_capacity = "265 J/mol/K"', 'heat_capacity = { coefficients = [150, 0.5, -4e-4, 1e-7], unit = "J/mol/K" }', 1)


@pytest.mark.parametrize("kind", COOLING)
def test_energy_closes(set_point, kind):
    found = set_point(cooled(kind))
    assert found["status"] in ("done", "runaway")
    assert 1e-6 > found["energy_balance_error"]


@pytest.mark.parametrize("kind", COOLING)
def test_mass_is_conserved(kind):
    lines = profile(read_text(cooled(kind, 1e-6)))
    mass = sum(lines[f"n_{name}_mol"] * m * 1e-3 for name, m in MOLAR_MASS.items())
    fed = 1.06 * 4400.0 * 0.1021 * np.clip((lines["time_s"] - 600.0) / 10800.0, 0.0, 1.0)
    np.testing.assert_allclose(mass, mass.iloc[0] + fed, rtol=1e-12)
    amine = sum(lines[f"n_{name}_mol"] for name in ("amine", "amide", "diamide", "tar"))
    np.testing.assert_allclose(amine, 4400.0, rtol=1e-12)  # what came in as amine is somewhere


def _heat_content(name: str, T: np.ndarray) -> np.ndarray:
    """Return int c_p dT from 298.15 K (J/mol)."""
    plain = {"amine": 205.0, "anhydride": 190.0, "solvent": 157.0, "acid": 123.0, "diamide": 330.0, "tar": 265.0}
    if name in plain:
        return plain[name] * (T - 298.15)
    return sum(c * (T**k - 298.15**k) / k for k, c in enumerate([150.0, 0.5, -4e-4, 1e-7], start=1))


def test_adiabatic_enthalpy_is_what_came_in():
    """Enthalpy with formation, by extents at 298.15 K, against the feed's, the stirrer's work and the loss; nothing of it from the program."""
    text = cooled("adiabatic").replace('UA = "12 W/K"', 'UA = "0 W/K"')
    lines = profile(read_text(text), {}, np.linspace(0.0, 21600.0, 61))
    T = lines["temperature_K"].to_numpy()
    n = {name: lines[f"n_{name}_mol"].to_numpy() for name in MOLAR_MASS}
    overacylated, tarred = n["diamide"], n["tar"]
    acylated = 4400.0 - n["amine"]
    formed = -112e3 * acylated - 70e3 * overacylated - 260e3 * tarred
    content = sum(n[name] * _heat_content(name, T) for name in MOLAR_MASS) + 1.1e6 * (T - 298.15)
    fed = 1.06 * 4400.0 * np.clip((lines["time_s"].to_numpy() - 600.0) / 10800.0, 0.0, 1.0)
    brought = fed * _heat_content("anhydride", np.array(293.15)) + 3000.0 * lines["time_s"].to_numpy()
    gap = content + formed - brought
    assert T.max() > 380.0
    np.testing.assert_allclose(gap, gap[0], atol=1e-6 * np.abs(formed).max())
