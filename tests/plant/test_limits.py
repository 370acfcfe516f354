"""Limits and margins."""

import numpy as np
import pandas as pd
import pytest

from sweep.plant import holds, limits, margins
from sweep.study import read_text
from tests.texts import SMALL


def _table(study, **columns):
    names = {row.response for row in limits(study)}
    return pd.DataFrame({"status": ["done"], **{name: [0.0] for name in names}, **{k: [v] for k, v in columns.items()}})


def test_target_is_a_limit_everywhere():
    rows = limits(read_text(SMALL))
    assert ["conversion", "max_temperature", "mtsr"] == [row.label for row in rows]
    assert ("at_least", 0.9) == (rows[0].sense, rows[0].bound)


def test_sign_unit_and_equality():
    study = read_text(SMALL)
    found = margins(study, _table(study, conversion=0.95, max_temperature_K=335.15, mtsr_K=360.0))
    assert pytest.approx([0.05, 0.0, 358.15 - 360.0]) == found[0].tolist()
    assert not holds(found)[0]
    assert holds(margins(study, _table(study, conversion=0.9, max_temperature_K=335.15, mtsr_K=358.15)))[0]


def test_null_and_unfinished_points_do_not_hold():
    study = read_text(SMALL)
    table = _table(study, conversion=0.95, max_temperature_K=300.0, mtsr_K=np.nan)
    assert not holds(margins(study, table))[0]
    for status in ("runaway", "failed"):
        table = _table(study, conversion=0.95, max_temperature_K=300.0, mtsr_K=300.0).assign(status=status)
        assert np.isnan(margins(study, table)).all()
        assert not holds(margins(study, table))[0]


def test_two_sides_are_two_rows_with_their_own_labels():
    study = read_text(SMALL.replace('max_temperature = { at_most = "62 degC" }', 'max_temperature = { at_least = "30 degC", at_most = "62 degC" }'))
    labels = [row.label for row in limits(study)]
    assert ["conversion", "max_temperature at_least", "max_temperature at_most", "mtsr"] == labels


def test_stricter_of_target_and_limit_counts():
    study = read_text(SMALL.replace("[limits]", "[limits]\nconversion = { at_least = 0.95 }"))
    assert [("conversion", 0.95)] == [(row.label, row.bound) for row in limits(study) if row.name == "conversion"]
