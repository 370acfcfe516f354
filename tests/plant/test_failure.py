"""Cooling failure: the search for the worst moments against dense scans, feeds that run on, the wall, what is null and why."""

import numpy as np
import pandas as pd
import pytest

from sweep.plant import evaluate, failure_path, failure_times
from sweep.study import read_study, read_text
from tests.texts import SMALL

COOLED = SMALL.replace('temperature = "46 degC"', 'temperature = "20 degC"')


def _row(text):
    return evaluate(read_text(text), pd.DataFrame(index=[0])).iloc[0]


@pytest.fixture(scope="module")
def demo():
    return read_study("studies/acylation.toml")


@pytest.mark.parametrize("seed", range(3))
def test_worst_moments_are_those_of_a_dense_scan(demo, seed):
    """Over random points of the demo: MTSR to 0.02 K, its moment to 1 % of the batch time, the least time to maximum rate to 1 %."""
    rng = np.random.default_rng(seed)
    point = {v.name: rng.uniform(v.low, v.high) for v in demo.variables}
    row = evaluate(demo, pd.DataFrame([point])).iloc[0]
    end = row["cycle_time_s"] - 12_600.0
    scan = failure_times(demo, point, np.linspace(0.0, end, 1501))
    worst = scan["mtsr_K"].idxmax()
    assert scan["mtsr_K"].max() - 0.02 <= row["mtsr_K"]
    near = scan[np.abs(scan["time_s"] - row["mtsr_time_s"]) <= 0.01 * end]
    assert scan["mtsr_K"][worst] - 0.02 <= near["mtsr_K"].max()
    assert scan["tmr_ad_s"].min() * 1.01 >= row["tmr_ad_s"]


def test_mtsr_of_a_batch_is_charge_plus_the_whole_rise():
    """Everything charged at once: the worst moment is the start, MTSR = T0 + rise (equal heat capacities)."""
    row = _row(COOLED)
    assert 313.15 + row["adiabatic_rise_synthesis_K"] == pytest.approx(row["mtsr_K"], abs=0.02)
    assert 0.0 == row["mtsr_time_s"]


def test_wall_lowers_mtsr():
    """With the wall counted the rise is shared: rise C/(C + wall)."""
    with_wall = COOLED.replace('volume = "2 m3"', 'volume = "2 m3"\nheat_capacity = "1 MJ/K"')
    bare = _row(with_wall)["mtsr_K"]
    counted = _row(with_wall.replace("[failure]", "[failure]\nwall = true"))["mtsr_K"]
    capacity = 1500.0 * 190.0 + (1.0 - 1500.0 * 0.1 / 900.0) / (0.018 / 1000.0) * 75.0
    assert (bare - 313.15) * capacity / (capacity + 1e6) == pytest.approx(counted - 313.15, rel=1e-4)


def test_feeds_that_run_on_bring_more_heat(demo):
    text = demo.text
    stop, late, on = (
        _row(text.replace("[failure]", f"[failure]\n{more}")) for more in ("", 'feeds_stop_after = "10 min"', 'feeds = "run on"')
    )
    assert stop["mtsr_K"] + 1.0 < late["mtsr_K"] < on["mtsr_K"]


def test_without_decomposition_nothing_is_assessed():
    text = SMALL[: SMALL.index("[reactions.bad]")] + SMALL[SMALL.index("[vessel]") :]
    row = _row(text)
    assert row["mtsr_K"] > 313.0
    for name in ("tmr_ad_s", "td24_K", "criticality_class", "tmr_ad_censored"):
        assert pd.isna(row[name])
    assert "tmr_ad, td24: not assessed" in row["reason"]


def test_class_needs_mtt():
    row = _row(SMALL.replace('mtt = "100 degC"', ""))
    assert pd.isna(row["criticality_class"])
    assert "MTT not known" in row["reason"]


def test_td24_from_testing_counts():
    row = _row(SMALL.replace("[failure]", '[failure]\ntd24 = "60 degC"'))
    assert 333.15 == pytest.approx(row["td24_K"])
    assert 5 == row["criticality_class"]


def test_path_reaches_its_levels_in_order():
    study = read_text(SMALL)
    path = failure_path(study, {}, 0.0, {"low": 330.0, "high": 350.0, "never": 900.0})
    after = {name: when for name, _, when in path.reaches}
    assert 0.0 < after["low"] < after["high"]
    assert after["never"] is None
    T = path.lines["temperature_K"].to_numpy()
    assert 313.15 == pytest.approx(T[0])
    assert (np.diff(T) >= -1e-6).all()


def test_level_already_passed_is_reached_at_once():
    path = failure_path(read_text(SMALL), {}, 0.0, {"below": 300.0})
    assert 0.0 == {n: w for n, _, w in path.reaches}["below"]


def test_scan_beyond_the_batch_is_null():
    lines = failure_times(read_text(SMALL), {}, [0.0, 30_000.0])
    assert lines["mtsr_K"].notna().tolist() == [True, False]


def test_study_without_failure_is_refused():
    from sweep.base.errors import SweepError

    text = SMALL[: SMALL.index("[failure]")].replace('mtsr = { at_most = "85 degC" }', "")
    with pytest.raises(SweepError, match=r"\[failure\]"):
        failure_times(read_text(text))


def test_endothermic_synthesis_is_no_trouble():
    """The estimates may run cold; the figures stay those of marches: nothing is hotter than the batch itself."""
    row = _row(COOLED.replace('"-80 kJ/mol"', '"400 kJ/mol"'))
    assert row["max_temperature_K"] == pytest.approx(row["mtsr_K"], abs=0.02)


def test_closed_form_without_heat_is_null():
    row = _row(SMALL.replace('"-150 kJ/mol"', '"150 kJ/mol"'))
    assert pd.isna(row["tmr_ad_closed_form_s"])
    assert row["tmr_ad_censored"]


AUTOCATALYTIC = (
    SMALL.replace('equation = "R -> S"', 'equation = "R + S -> S + S"')
    .replace('"1e-5 1/s", at = "120 degC", activation_energy = "120', '"2e-5 L/mol/s", at = "80 degC", activation_energy = "90')
    .replace('concentration = { A = "1.5 mol/L" }', 'concentration = { A = "1.5 mol/L", S = "1 mmol/L" }')
)


def test_autocatalytic_decomposition_is_marched_and_its_closed_form_warned_of():
    """The closed form is many times too long for A + B -> 2 B with little B."""
    from sweep.analysis.failure import fail_cooling

    study = read_text(AUTOCATALYTIC)
    row = evaluate(study, pd.DataFrame(index=[0])).iloc[0]
    scan = failure_times(study, {}, np.linspace(0.0, 21_600.0, 401))
    assert scan["tmr_ad_s"].min() * 1.01 >= row["tmr_ad_s"] >= scan["tmr_ad_s"].min() * 0.99
    assert row["tmr_ad_closed_form_s"] > 5.0 * row["tmr_ad_s"]
    cautions = fail_cooling(study, row).summary()["cautions"]
    assert "times longer than the march" in cautions[0]


def test_worst_moments_of_competing_reactions_are_found(demo):
    """Where reactions compete, completion on paper misleads; no moment of a fine scan is worse than the worst one found."""
    study = demo
    ranges = np.array([[v.low, v.high] for v in study.variables])
    points = pd.DataFrame(np.random.default_rng(1).uniform(*ranges.T, (512, len(ranges))), columns=[v.name for v in study.variables])
    points = points.iloc[[121, 370, 383]]
    table = evaluate(study, points)
    for (_, point), (_, row) in zip(points.iterrows(), table.iterrows(), strict=True):
        scan = failure_times(study, point.to_dict(), np.linspace(0.0, 21600.0, 241).tolist())
        assert scan["tmr_ad_s"].min() >= row["tmr_ad_s"] * (1.0 - 1e-3)
        assert scan["mtsr_K"].max() <= row["mtsr_K"] + 0.01


def test_a_rate_that_still_rises_at_the_horizon_is_a_bound(demo):
    study = demo
    for celsius in (30.0, 35.0, 40.0, 45.0):
        found = failure_times(study, {"charge_temperature": 273.15 + celsius}, np.linspace(0.0, 21600.0, 25).tolist())
        at_horizon = found["tmr_ad_s"] >= 2_592_000.0
        assert at_horizon.any()
        assert (found["tmr_ad_censored"] == 1.0)[at_horizon].all()


def test_mtsr_is_nowhere_below_the_temperature_of_the_batch(demo):
    """Batches that nearly run away are hottest within seconds, between the samples."""
    text = COOLED.replace('"-80 kJ/mol"', '"-300 kJ/mol"').replace('value = "2e-4 1/s"', 'value = "3e-3 1/s"')
    study = read_text(text)
    table = evaluate(study, pd.DataFrame({"start": np.linspace(300.0, 330.0, 24)}))
    assert (table["status"] == "done").all()
    assert (table["mtsr_K"] >= table["max_temperature_K"] - 0.01).all()
