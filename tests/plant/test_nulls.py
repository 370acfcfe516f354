"""Responses without a value are null with their reason, and a point's value is its own whatever its neighbours are."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from sweep.plant import evaluate
from sweep.study import read_text
from tests.texts import isothermal

FED_BATCH = Path(__file__).parents[1] / "external" / "fed_batch.toml"
SERIES = "A -> R | 1e-3 1/s\nR -> S | 1e-3 1/s"


def test_a_product_that_is_not_there_gives_no_ratio(set_point):
    none = set_point(isothermal("A -> R | 0 1/s", conversion=0.5))
    assert "done" == none["status"]
    assert np.isnan(none["per_product_A"])
    assert "per_product: there is no product" in none["reason"]
    some = set_point(isothermal(SERIES, species="A R S", batch_time="1000 s", conversion=0.5))
    assert np.e - 2.0 == pytest.approx(some["per_product_S"], rel=1e-6)  # at k t = 1: (1 - 2/e) over 1/e
    assert "per_product" not in some["reason"]


def test_order_of_completion_is_each_points_own():
    """Which reaction completes first follows the heats of the point, not those of the company it is marched in."""
    study = read_text(FED_BATCH.read_text())
    heats = {"reactions.acylation.heat.value": [-112e3, -20e3, -112e3], "reactions.overacylation.heat.value": [-70e3, -300e3, -71e3]}
    points = pd.DataFrame(heats)
    whole = evaluate(study, points)["accumulation"]
    alone = [evaluate(study, points.iloc[[n]])["accumulation"].iloc[0] for n in range(3)]
    assert alone == whole.tolist()
