"""Every null has its reason."""

import pandas as pd
import pytest

from sweep.plant import evaluate, responses
from sweep.study import read_text
from tests.texts import SMALL, isothermal

STUDIES = {"without heats": isothermal("A -> R | 1e-3 1/s"), "too slow": isothermal("A -> R | 1e-7 1/s"), "whole": SMALL}


@pytest.mark.parametrize("name", STUDIES)
def test_every_null_is_named_in_the_reason(name):
    study = read_text(STUDIES[name])
    row = evaluate(study, pd.DataFrame(index=[0])).iloc[0]
    for response in responses(study):
        stem = response.column.removesuffix("_K").removesuffix("_s").removesuffix("_W")
        if pd.isna(row[response.column]) and not stem.startswith(("at_target", "tmr_ad_closed_form")):
            assert stem in row["reason"], (response.column, row["reason"])
