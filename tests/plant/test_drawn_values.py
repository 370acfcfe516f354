"""Uncertain inputs and control errors in a table of points: what they act on, and that equivalents are of the design point."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest

import sweep
from sweep.base.errors import SweepError
from sweep.plan import draw, set_point
from sweep.plant import evaluate
from sweep.plant.charge import brought_in
from sweep.plant.values import values_of
from sweep.study import read_text
from sweep.workflow.batch import point_of

TEXT = (Path(__file__).parents[1] / "study" / "fedbatch.toml").read_text()
FEED = "recipe.feeds.anhydride.amount.anhydride.equivalents"
STUDY = read_text(
    TEXT.replace('"2.8 mol/L", levels = 9', '"2.8 mol/L", levels = 9, tolerance = { relative_sd = 0.02 }')
    .replace("levels = 15 }\ndosing", 'levels = 15, tolerance = { sd = "0.5 K" } }\ndosing')
    .replace("[accuracy]", f"""[uncertain]
charged = {{ of = "recipe.charge.volume", distribution = "normal", relative_sd = 0.01 }}
ratio = {{ of = "{FEED}", distribution = "normal", relative_sd = 0.01 }}
U = {{ of = "vessel.U", distribution = "normal", relative_sd = 0.1 }}
[accuracy]""")
)  # fmt: skip
AMINE, ANHYDRIDE = ([s.name for s in STUDY.species].index(name) for name in ("amine", "anhydride"))


def moles(points):
    brought = brought_in(STUDY, values_of(STUDY, pd.DataFrame(points, index=[0])))
    total = brought.total()[0]
    return total[AMINE], total[ANHYDRIDE]


def test_equivalents_are_of_the_design_point():
    """2.2 mol/L in 2 m3, 1.06 equivalents: 4,664 mol fed, whatever is really charged."""
    assert pytest.approx((4400.0, 4664.0)) == moles({})
    assert pytest.approx((4488.0, 4664.0)) == moles({"charged": 2.04})
    assert pytest.approx((4488.0, 4757.28)) == moles({"recipe.charge.volume": 2.04})
    assert pytest.approx((4000.0, 4240.0)) == moles({"amine": 2000.0})
    assert pytest.approx((4080.0, 4240.0)) == moles({"amine": 2000.0, "charged": 2.04})
    assert pytest.approx((4080.0, 4240.0)) == moles({"amine": 2000.0, "variables.amine.error": 40.0})


def test_the_ratio_itself_may_be_uncertain():
    assert pytest.approx((4488.0, 4840.0)) == moles({"ratio": 1.1, "charged": 2.04})


def test_an_uncertain_input_is_what_its_path_is():
    by_name, by_path = (evaluate(STUDY, pd.DataFrame({name: [250.0, 350.0]})).drop(columns=name) for name in ("U", "vessel.U"))
    pd.testing.assert_frame_equal(by_name, by_path)


def test_a_control_error_is_added_to_everything_that_the_variable_sets():
    found = values_of(STUDY, pd.DataFrame({"charge_temperature": [310.0, 320.0], "variables.charge_temperature.error": [1.0, -2.0]}))
    for path in ("recipe.charge.temperature", "cooling.set_point", "cooling.start"):
        assert [311.0, 318.0] == list(found.get(path))
    written = values_of(STUDY, pd.DataFrame({"variables.charge_temperature.error": [0.5]}))
    assert pytest.approx(318.65) == written.get("cooling.start")[0]


def test_no_error_changes_nothing():
    plain = evaluate(STUDY, pd.DataFrame({"amine": [2000.0]}))
    zero = evaluate(STUDY, pd.DataFrame({"amine": [2000.0], "variables.amine.error": [0.0], "U": [310.0]}))
    pd.testing.assert_frame_equal(plain, zero[plain.columns])


@pytest.mark.parametrize(
    ("points", "reason"),
    [
        ({"U": [300.0], "vessel.U": [300.0]}, "points: columns U and vessel.U both set vessel.U"),
        ({"U": [np.nan]}, "points: U is nan in row 0"),
        ({"UU": [300.0]}, "UU is neither a variable, an uncertain input nor a quantity of this study; did you mean U"),
        ({"variables.dosing_time.error": [300.0]}, "is neither a variable"),
    ],
)
def test_refused_whole(points, reason):
    with pytest.raises(SweepError) as caught:
        evaluate(STUDY, pd.DataFrame(points))
    assert reason in str(caught.value)


def test_a_draw_that_makes_no_sense_fails_alone():
    found = evaluate(STUDY, pd.DataFrame({"U": [-10.0, 300.0, 300.0], "charged": [2.0, 2.0, 9.0], "variables.amine.error": [0.0, -9e3, 0.0]}))
    assert ["failed"] * 3 == found["status"].tolist()
    assert "vessel.U is -10, and should be at least 0" in found["reason"][0]
    assert "recipe.charge.concentration.amine is -6800" in found["reason"][1]
    assert "the fill is above the vessel's volume" in found["reason"][2]
    good = evaluate(STUDY, pd.DataFrame({"U": [-10.0, 300.0], "charged": [2.0, 2.01]}))
    alone = evaluate(STUDY, pd.DataFrame({"U": [300.0], "charged": [2.01]}))
    assert alone["max_temperature_K"][0] == good["max_temperature_K"][1]


def test_same_bytes_for_any_number_of_workers():
    points = draw(STUDY, 600, "latin-hypercube", "test").at(set_point(STUDY))
    one, two = (sweep.simulate(STUDY, points, workers) for workers in (1, 2))
    pd.testing.assert_frame_equal(one, two, check_exact=True)


def test_batch_takes_uncertain_inputs_and_control_errors():
    found = point_of(STUDY, {"U": "280 W/m2/K", "variables.charge_temperature.error": "0.5 K"})
    assert (280.0, 0.5, 318.15) == (found["U"], found["variables.charge_temperature.error"], found["charge_temperature"])
    with pytest.raises(SweepError, match=r"vessel\.U and U both set vessel\.U"):
        point_of(STUDY, {"vessel.U": "280 W/m2/K", "U": "290 W/m2/K"})
    with pytest.raises(SweepError, match="found '280 K', expected a heat transfer coefficient"):
        point_of(STUDY, {"U": "280 K"})
