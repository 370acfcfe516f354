"""A published adiabatic batch: Fogler, Elements of Chemical Reaction Engineering, 3rd ed., example 9-1.

Hydrolysis of propylene oxide, first order in the oxide. Printed (pp. 538 to 540): 833 s, 582 degR at X = 0.515, and a table of temperatures.
Kinetic and thermal inputs from memory; they give every printed entry to its digits. The exact integral of the same equations is
835.170840808 s (recomputed); the book's 833 s is a Simpson rule on rounded temperatures.
"""

import math

import numpy as np
import pytest

from sweep.plant import profile
from sweep.study import read_text

RANKINE = 5.0 / 9.0  # K
MOLAR = 1055.05585262 / 453.59237  # J/mol in a Btu/lbmol
ENERGY = 32400.0 / 1.987 * RANKINE * 8.31446261815324  # J/mol; the book's own gas constant is 1.987
K535 = 16.96e12 / 3600.0 * math.exp(-32400.0 / (1.987 * 535.0))  # 1/s

STUDY = f"""
[species.oxide]
heat_capacity = "{35.0 * MOLAR / RANKINE!r} J/mol/K"
[species.water]
heat_capacity = "{18.0 * MOLAR / RANKINE!r} J/mol/K"
[species.methanol]
role = "solvent"
heat_capacity = "{19.5 * MOLAR / RANKINE!r} J/mol/K"
[species.glycol]
heat_capacity = "{46.0 * MOLAR / RANKINE!r} J/mol/K"
[reactions.hydrolysis]
equation = "oxide + water -> glycol"
orders = {{ oxide = 1 }}
rate_constant = {{ value = "{K535!r} 1/s", at = "535 degR", activation_energy = "{ENERGY!r} J/mol" }}
heat = {{ value = "{-36400.0 * MOLAR!r} J/mol", at = "528 degR" }}
[cooling]
kind = "adiabatic"
[recipe]
batch_time = "1000 s"
[recipe.charge]
temperature = "535 degR"
volume = "1 m3"
amount = {{ oxide = "1 kmol", water = "18.65 kmol", methanol = "1.670 kmol" }}
[target]
species = "oxide"
conversion = 0.515
[accuracy]
relative = 1e-9
"""


def test_time_and_temperature(set_point):
    found = set_point(STUDY)
    assert 833.0 == pytest.approx(found["time_to_target_s"], rel=0.005)
    assert 835.170840808 == pytest.approx(found["time_to_target_s"], rel=1e-7)
    line = profile(read_text(STUDY), {}, [835.170840808]).iloc[0]
    assert 582.0 == pytest.approx(line["temperature_K"] / RANKINE, abs=0.5)
    assert 581.968 == pytest.approx(line["temperature_K"] / RANKINE, abs=1e-3)


def test_printed_table():
    """X, T (degR), k (1e-4 1/s) as printed; temperatures there are rounded to a degree and k follows from the rounded ones."""
    lines = profile(read_text(STUDY), {}, np.linspace(0.0, 836.0, 837))
    for conversion, temperature, constant in [(0.1288, 547.0, 5.33), (0.2575, 558.0, 9.59), (0.3863, 570.0, 17.7), (0.515, 582.0, 32.0)]:
        found = float(np.interp(conversion, lines["conversion"], lines["temperature_K"])) / RANKINE
        assert temperature == pytest.approx(found, abs=0.51)
        k = 1e4 * K535 * math.exp(-32400.0 / 1.987 * (1.0 / found - 1.0 / 535.0))
        assert constant == pytest.approx(k, rel=0.03)
