"""What must not matter: names, the order in which things are written, the units they are written in, and the size of the whole."""

import re
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.plant import evaluate
from sweep.study import read_text
from tests.external.test_stiff_sets import HIRES, study

TEXT = (Path(__file__).parent / "fed_batch.toml").read_text()
NAMES = {"amine": "zz", "anhydride": "b2", "solvent": "A_long_name", "amide": "_x", "acid": "M", "diamide": "a", "tar": "T"}
POINTS = pd.DataFrame({"charge_temperature": [303.0, 318.15, 338.0], "dosing_time": [20000.0, 10800.0, 3700.0], "amine": [1250.0, 2200.0, 2700.0]})


def numbers(text: str, points: pd.DataFrame = POINTS) -> pd.DataFrame:
    """Return the responses that are numbers."""
    table = evaluate(read_text(text), points)
    assert (table["status"] == "done").all()
    return table.select_dtypes("number").drop(columns=["energy_balance_error", *points.columns])


def same(first: pd.DataFrame, second: pd.DataFrame, relative: float = 1e-9) -> None:
    """Compare column by column; times of extremes on flat tops are left out."""
    assert list(first.columns) == list(second.columns)
    for column in first.columns.drop("time_of_max_temperature_s"):
        np.testing.assert_allclose(second[column], first[column], rtol=relative, atol=1e-12, err_msg=column)


def renamed(text: str, names: dict[str, str]) -> str:
    """Return the text with species renamed, keys of feeds, variables and limits included."""
    text = text.replace("per_product_diamide", "per_product_" + names["diamide"])
    text = re.sub(r"[A-Za-z_][A-Za-z0-9_]*", lambda word: names.get(word[0], word[0]), text)
    return text.replace(f'role          = "{names["solvent"]}"', 'role          = "solvent"')


def shuffled(text: str, section: str) -> str:
    """Return the text with the tables of a section in reverse."""
    tables = re.findall(rf"\[{section}\.\w+\]\n(?:[^\[]*\n)*?(?=\[)", text)
    assert len(tables) > 2
    start = text.index(tables[0])
    assert "".join(tables) == text[start : start + len("".join(tables))]
    return text[:start] + "".join(reversed(tables)) + text[start + len("".join(tables)) :]


def test_names_do_not_matter():
    back = {f"{kind}_{new}": f"{kind}_{old}" for old, new in NAMES.items() for kind in ("yield", "per_product", "fraction")}
    points = POINTS.rename(columns=NAMES)
    same(numbers(TEXT), numbers(renamed(TEXT, NAMES), points).rename(columns=back), 0.0)


@pytest.mark.parametrize("section", ["species", "reactions"])
def test_order_does_not_matter(section):
    first, second = numbers(TEXT), numbers(shuffled(TEXT, section))
    same(first, second[list(first.columns)])


def test_order_within_equations_and_of_dependent_reactions():
    """HIRES carries amounts, not extents: its reactions depend on each other."""
    lines = HIRES.strip().splitlines()
    species = [f"y{i}" for i in range(1, 9)]
    turned = "\n".join(re.sub(r"y6 \+ y8", "y8 + y6", line) for line in reversed(lines))
    one = pd.DataFrame(index=[0])
    tables = []
    for order, reactions in ((species, HIRES), (species[::-1], turned)):
        tables.append(evaluate(read_text(study(" ".join(order), reactions, {"y1": 1.0, "y8": 0.0057}, 321.8122)), one))
    for name in species:
        assert tables[0][f"fraction_{name}"][0] == pytest.approx(tables[1][f"fraction_{name}"][0], rel=1e-8)


OTHER_UNITS = [
    ('"107.2 g/mol"', '"0.1072 kg/mol"'), ('"205 J/mol/K"', '"1.9123134328358209 J/g/K"'), ('"0.98 kg/L"', '"980 kg/m3"'),
    ('"2.6e-3 L/mol/s"', '"0.156 L/mol/min"'), ('"58 kJ/mol"', '"58000 J/mol"'), ('"-112 kJ/mol"', '"-26.76864244741874 kcal/mol"'),
    ('at = "45 degC", activation_energy = "74', 'at = "113 degF", activation_energy = "74'), ('"135 kJ/mol"', '"135 J/mmol"'),
    ('"1.1 MJ/K"', '"1100 kJ/K"'), ('"310 W/m2/K"', '"0.310 kW/m2/degC"'), ('"8.2 m2"', '"82000 cm^2"'), ('"12 W/K"', '"43.2 kJ/h/K"'),
    ('"3 kW"', '"3000 J/s"'), ('inlet     = "5 degC"', 'inlet     = "278.15 K"'), ('"9 m3/h"', '"150 L/min"'), ('"0.6 m3"', '"600 L"'),
    ('"4.18 kJ/kg/K"', '"4.18 J/g/degC"'), ('"0.08 1/K"', '"8 %/K"'), ('batch_time = "6 h"', 'batch_time = "360 min"'),
    ('"2.0 m3"', '"2000 L"'), ('amine = "2.2 mol/L"', 'amine = "2.2 kmol/m3"'), ('"10 min"', '"600 s"'), ('"3 h"\n', '"0.125 d"\n'),
    ('time = "4 h"', 'time = "240 min"'), ('conversion = 0.985', 'conversion = "98.5 %"'),
]  # fmt: skip


def test_units_do_not_matter():
    text = TEXT
    for old, new in OTHER_UNITS:
        assert old in text, old
        text = text.replace(old, new, 1)
    same(numbers(TEXT), numbers(text))


def test_size_does_not_matter():
    """A vessel four times as large in every extensive quantity gives the same batch; heats grow with it. Four is exact in binary."""
    text = TEXT
    for old, new in [
        ('volume        = "4 m3"', 'volume        = "16 m3"'), ('"1.1 MJ/K"', '"4.4 MJ/K"'), ('"8.2 m2", at_volume = "4 m3", bottom = "1.5 m2"',
        '"32.8 m2", at_volume = "16 m3", bottom = "6 m2"'), ('"12 W/K"', '"48 W/K"'), ('"3 kW"', '"12 kW"'), ('"9 m3/h"', '"36 m3/h"'),
        ('"0.6 m3"', '"2.4 m3"'), ('volume        = "2.0 m3"', 'volume        = "8.0 m3"'),
    ]:  # fmt: skip
        assert old in text, old
        text = text.replace(old, new, 1)
    large = numbers(text)
    for column in ("cooling_duty_W", "heat_release_W"):
        large[column] /= 4.0
    same(numbers(TEXT), large)


def test_a_feed_in_two_halves_is_the_same_feed():
    feed = TEXT[TEXT.index("[recipe.feeds.anhydride]") : TEXT.index("[[events]]")].replace("1.06", "0.53")
    both = feed + feed.replace("[recipe.feeds.anhydride]", "[recipe.feeds.other]")
    text = TEXT[: TEXT.index("[recipe.feeds.anhydride]")] + both + TEXT[TEXT.index("[[events]]") :]
    text = text.replace('sets = "recipe.feeds.anhydride.duration"', 'sets = ["recipe.feeds.anhydride.duration", "recipe.feeds.other.duration"]')
    same(numbers(TEXT), numbers(text))


def test_an_event_that_changes_nothing_changes_little():
    """A new segment makes the march land and start again: the answer moves by the step's error, not more."""
    event = '[[events]]\ntime = "2 h"\nset = { "cooling.set_point" = "45 degC" }\n'
    points = pd.DataFrame(index=[0])
    same(numbers(TEXT, points), numbers(TEXT.replace("[[events]]", event + "[[events]]"), points), 1e-5)
