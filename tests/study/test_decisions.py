"""What is to be decided, as it is read: [ranges], [optimum] and the map of [risk], and every fault with its place."""

import pytest

from sweep.base.errors import StudyError
from sweep.study import read_text
from sweep.study.enough import least_draws
from sweep.study.settings import Assurance, MapSettings, Objective
from tests.texts import SMALL

UNCERTAIN = '[uncertain]\nk = { of = "reactions.main.rate_constant.value", distribution = "lognormal", relative_sd = 0.2 }\n'


def study(extra, text=SMALL):
    return read_text(text + extra, "slow.toml")


def test_ranges_take_all_variables_and_hold_nominally():
    found = study("[ranges]\n").ranges
    assert ("dose", "start") == found.variables
    assert found.assurance.probability is None


def test_ranges_with_a_probability():
    found = study(UNCERTAIN + '[ranges]\nprobability = 0.9\ndraws = 128\nconfidence = 0.8\nvariables = ["start"]\npoints = 32\n').ranges
    assert (Assurance(0.9, 128, 0.8), ("start",), 32) == (found.assurance, found.variables, found.points)


def test_map():
    assert MapSettings(20, 64, 0.9) == study(UNCERTAIN + "[risk.map]\nsteps = 20\ndraws = 64\nconfidence = 0.9\n").map
    assert MapSettings(40, 512, 0.95) == study(UNCERTAIN + "[risk]\nmap = {}\n").map
    assert study(UNCERTAIN + "[risk]\n").map is None


def test_objectives_stand_in_their_order():
    found = study('[optimum]\nmaximise = "productivity"\nminimise = "per_product_S"\n').optimum
    assert [("productivity", "maximise"), ("per_product_S", "minimise")] == [(one.name, one.sense) for one in found.objectives]
    assert Objective("productivity", "maximise", "response", "productivity_kg_per_m3_s", "kg/m^3/s") == found.objectives[0]


def test_prices_are_per_mol_and_second():
    found = study('[optimum]\nminimise = "cost"\nprices = { A = "4 EUR/kg", water = "18 EUR/kmol", vessel_time = "180 EUR/h" }\n').optimum
    assert pytest.approx({"A": 0.4, "water": 0.018, "vessel_time": 0.05}) == dict(found.prices)
    assert ("EUR", "EUR/kg") == (found.currency, found.objectives[0].unit)


def test_an_objective_can_ask_for_a_cooling_failure():
    text = SMALL.replace("[failure]\nmtt", "[optimum]\nminimise = 'tmr_ad'\n#").replace('mtsr = { at_most = "85 degC" }', "")
    assert read_text(text).asks_failure


NO_WINDOW = SMALL.replace('[window]\naxes = ["dose", "start"]\n', "")
NO_PRODUCT = SMALL.replace('product = "R"\n', "")
LEAST = "[optimum]\nminimise = 'cycle_time'\n"
COST = "[optimum]\nminimise = 'cost'\nprices = { A = '4 EUR/kg' }\n"
FAULTS = {
    "unknown key of ranges": ("[ranges]\nprobabilty = 0.9\n", "ranges.probabilty", "'probability'"),
    "unknown key of optimum": ("[optimum]\nminimize = 'cycle_time'\n", "optimum.minimize", "'minimise'"),
    "unknown key of the map": (UNCERTAIN + "[risk.map]\nlevels = 3\n", "risk.map.levels", "one of steps"),
    "map without window": (UNCERTAIN + "[risk.map]\n", "risk.map", "[window] with its axes", NO_WINDOW),
    "steps not of ten": (UNCERTAIN + "[risk.map]\nsteps = 25\n", "risk.map.steps", "a multiple of ten, such as 30"),
    "too many steps": (UNCERTAIN + "[risk.map]\nsteps = 300\n", "risk.map.steps", "at most 200"),
    "too many draws": (UNCERTAIN + "[risk.map]\ndraws = 100000\n", "risk.map.draws", "at most 65536"),
    "certainty": (UNCERTAIN + "[ranges]\nprobability = 1.0\n", "ranges.probability", "a number between 0 and 1"),
    "probability in words": (UNCERTAIN + "[ranges]\nprobability = '95 %'\n", "ranges.probability", "a number between 0 and 1"),
    "probability of nothing": ("[ranges]\nprobability = 0.9\n", "ranges.probability", "[uncertain], or a variable with a tolerance"),
    "draws without probability": (UNCERTAIN + "[ranges]\ndraws = 100\n", "ranges.draws", "probability beside it"),
    "confidence without probability": (UNCERTAIN + LEAST + "confidence = 0.9\n", "optimum.confidence", "probability beside it"),
    "verify without probability": (UNCERTAIN + LEAST + "verify = 64\n", "optimum.verify", "probability beside it"),
    "too few draws": (UNCERTAIN + "[ranges]\nprobability = 0.99\ndraws = 100\n", "ranges.draws", "at least 268"),
    "unknown variable": ("[ranges]\nvariables = ['dosse']\n", "ranges.variables", "dose"),
    "variable twice": ("[ranges]\nvariables = ['dose', 'dose']\n", "ranges.variables", "each variable once"),
    "variables no list": ("[ranges]\nvariables = 'dose'\n", "ranges.variables", "a list of variables"),
    "few points": ("[ranges]\npoints = 3\n", "ranges.points", "a whole number from 16"),
    "no objective": ("[optimum]\n", "optimum", "minimise = \"cycle_time\""),
    "three objectives": ("[optimum]\nminimise = ['cycle_time', 'accumulation', 'heat_release']\n", "optimum", "one or two"),
    "one objective twice": ("[optimum]\nminimise = 'cycle_time'\nmaximise = 'cycle_time'\n", "optimum", "two different objectives"),
    "unknown objective": ("[optimum]\nminimise = 'cicle_time'\n", "optimum.minimise", "cycle_time"),
    "objective no word": ("[optimum]\nminimise = 3\n", "optimum.minimise", '"cycle_time"'),
    "unknown margin": ("[optimum]\nmaximise = 'margin_mtrs'\n", "optimum.maximise", "margin_mtsr"),
    "cost without prices": ("[optimum]\nminimise = 'cost'\n", "optimum.minimise", "optimum.prices"),
    "prices without cost": ("[optimum]\nminimise = 'cycle_time'\nprices = { A = '4 EUR/kg' }\n", "optimum.prices", '"cost" as an objective'),
    "price of nobody": ("[optimum]\nminimise = 'cost'\nprices = { B = '4 EUR/kg' }\n", "optimum.prices.B", "a species, or vessel_time"),
    "price without unit": ("[optimum]\nminimise = 'cost'\nprices = { A = '4 EUR' }\n", "optimum.prices.A", '"4.1 EUR/kg"'),
    "price per time of a species": ("[optimum]\nminimise = 'cost'\nprices = { A = '4 EUR/h' }\n", "optimum.prices.A", "kg, t, mol or kmol"),
    "time per kg": ("[optimum]\nminimise = 'cost'\nprices = { vessel_time = '4 EUR/kg' }\n", "optimum.prices.vessel_time", "h, min, s or d"),
    "two currencies": ("[optimum]\nminimise = 'cost'\nprices = { A = '4 EUR/kg', water = '1 CHF/t' }\n", "optimum.prices", "one currency"),
    "productivity without product": ("[optimum]\nmaximise = 'productivity'\n", "optimum.maximise", "[target] with a product", NO_PRODUCT),
    "cost without product": (COST, "optimum.minimise", "[target] with a product", NO_PRODUCT),
    "no variables": ("[ranges]\n", "ranges", "[variables]", SMALL[: SMALL.index("[variables]")]),
}  # fmt: skip


@pytest.mark.parametrize("name", FAULTS)
def test_faults_name_line_key_found_expected_and_because(name):
    extra, key, expected, *text = FAULTS[name]
    with pytest.raises(StudyError) as caught:
        study(extra, text[0] if text else SMALL)
    (fault,) = [one for one in caught.value.faults if one.key == key]
    assert expected in fault.expected
    lines = ((text[0] if text else SMALL) + extra).split("\n")
    word = key.rpartition(".")[2]
    assert word in lines[fault.line - 1], (fault.line, lines[fault.line - 1])
    assert fault.found and fault.because


def test_least_draws_is_where_wilson_s_bound_reaches():
    """With all N holding, the one-sided Wilson bound is N / (N + z^2)."""
    z2 = 1.6448536269514722**2
    for probability in (0.5, 0.9, 0.95, 0.99):
        count = least_draws(probability, 0.95)
        assert count / (count + z2) >= probability > (count - 1) / (count - 1 + z2)
