"""Why a target is never reached, and what a batch to its target gives."""

import pandas as pd
import pytest

from sweep.plant import evaluate, limits, margins
from sweep.study import read_text
from tests.texts import SMALL, isothermal


def _row(text):
    return evaluate(read_text(text), pd.DataFrame(index=[0])).iloc[0]


def test_equilibrium_is_named_with_the_highest_conversion():
    """A <=> R with K = 4 stands still at 0.8."""
    text = isothermal("A <=> R | 2e-3 1/s | equilibrium_constant = { value = 4 }", conversion=0.9)
    row = _row(text)
    assert pd.isna(row["time_to_target_s"])
    assert "never reached, equilibrium; the highest conversion is 0.8" in row["reason"]
    assert "done" == row["status"]


def test_not_enough_reactant_is_named():
    text = isothermal("A + B -> R | 1e-3 L/mol/s", species="A B R", charge='A = "2 mol/L", B = "1 mol/L"', conversion=0.9)
    row = _row(text)
    assert "never reached, not enough reactant" in row["reason"]
    assert 0.5 == pytest.approx(row["highest_conversion"], rel=1e-3)


def test_too_slow_is_named():
    row = _row(isothermal("A -> R | 1e-6 1/s", conversion=0.9))
    assert "never reached, too slow" in row["reason"]


def test_batch_to_target_ends_there_and_holds_it():
    text = SMALL.replace('batch_time = "6 h"', 'batch_time = "to target"')
    study = read_text(text)
    table = evaluate(study, pd.DataFrame(index=[0]))
    row = table.iloc[0]
    assert row["time_to_target_s"] + 7200.0 == pytest.approx(row["cycle_time_s"])
    names = [r.label for r in limits(study)]
    assert 0.0 == margins(study, table)[0, names.index("conversion")]
    assert row["productivity_kg_per_m3_s"] == pytest.approx(row["at_target_kg_per_m3_s"], rel=1e-9)


def test_batch_to_a_target_never_reached_has_no_cycle_time():
    text = SMALL.replace('batch_time = "6 h"', 'batch_time = "to target"').replace('longest = "24 h"', 'longest = "1 h"')
    row = _row(text)
    assert pd.isna(row["cycle_time_s"])
    assert pd.isna(row["productivity_kg_per_m3_s"])
    assert "too slow" in row["reason"]


def test_product_at_a_target_reached_before_the_last_feed_is_counted_when_that_ends():
    """The batch does not end before its last feed: productivity "at target" is then that of the batch ended there."""
    from pathlib import Path

    text = (Path(__file__).parents[1] / "external" / "fed_batch.toml").read_text().replace("conversion = 0.985", "conversion = 0.5")
    whole = _row(text)
    to_target = _row(text.replace('batch_time = "6 h"', 'batch_time = "to target"'))
    assert whole["time_to_target_s"] < 11_400.0
    assert to_target["productivity_kg_per_m3_s"] == pytest.approx(whole["at_target_kg_per_m3_s"], rel=1e-6)


def test_a_swept_event_that_passes_another_comes_after_it():
    from sweep.plant import profile

    first = '[[events]]\ntime = "1 h"\nset = { "cooling.temperature" = "30 degC" }\n'
    events = first + first.replace("1 h", "2 h").replace("30", "60")
    study = read_text(SMALL.replace("[target]", events + "[target]"))
    swapped = events.replace('"1 h"', '"3 h"')
    moved = profile(study, {"events.0.time": 10_800.0}, [21_600.0])["jacket_temperature_K"][0]
    written = profile(read_text(SMALL.replace("[target]", swapped + "[target]")), {}, [21_600.0])["jacket_temperature_K"][0]
    assert 303.15 == pytest.approx(moved)
    assert written == pytest.approx(moved)
