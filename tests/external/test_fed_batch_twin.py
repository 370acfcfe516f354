"""The demo fed-batch against a twin written from the balances alone and marched by SciPy's Radau (an integrator from outside)."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from scipy.integrate import solve_ivp

from sweep.plant import evaluate, profile
from sweep.study import read_study

STUDY = Path(__file__).parents[2] / "studies" / "acylation.toml"
R = 8.31446261815324
CP = {"amine": 205.0, "anhydride": 190.0, "solvent": 157.0, "amide": 265.0, "acid": 123.0, "diamide": 330.0, "tar": 265.0}
NAMES = list(CP)
NU = np.array([[-1, -1, 0, 1, 1, 0, 0], [0, -1, 0, -1, 1, 1, 0], [0, 0, 0, -1, 0, 0, 1]], dtype=float)
HEAT = np.array([-112e3, -70e3, -260e3])
LIMIT = 200_000  # evaluations; a twin that needs more is stuck


def _right_side(t: float, y: np.ndarray, feeding: bool, set_point: float, rate: float, calls: list[int]) -> np.ndarray:
    calls[0] += 1
    assert calls[0] < LIMIT
    n, T, Tj = y[:7], y[7], y[8]
    fed = rate * (min(t, 11400.0) - 600.0 if t > 600.0 else 0.0)
    V = 2.0 + fed * 0.1021 / 1080.0
    c = n / V
    k = [1.3e-6, 7.0e-10] * np.exp(-np.array([58e3, 74e3]) / R * (1 / T - 1 / 318.15))
    k3 = 9e-5 * np.exp(-135e3 / R * (1 / T - 1 / 393.15))
    r = np.array([k[0] * c[0] * c[1], k[1] * c[3] * c[1], k3 * c[3]])
    cp = np.array(list(CP.values()))
    dH = HEAT + (NU @ cp) * (T - 298.15)
    F = rate if feeding else 0.0
    area = 1.5 + (8.2 - 1.5) * V / 4.0
    through = 310.0 * area * (T - Tj)
    heat = V * (-dH) @ r - through - F * 190.0 * (T - 293.15) + 3000.0 - 12.0 * (T - 293.15)
    opening = np.clip(0.08 * (T - set_point), 0.0, 1.0)
    flow = opening * 9.0 / 3600.0
    dTj = flow / 0.6 * (278.15 - Tj) + through / (998.0 * 0.6 * 4180.0)
    dn = V * r @ NU
    dn[1] += F
    return np.array([*dn, heat / (n @ cp + 1.1e6), dTj])


@pytest.fixture(scope="module")
def twin() -> dict[float, np.ndarray]:
    """Return the twin's state at the recipe's boundaries and some hours."""
    solvent = (2.0 - 4400.0 * 0.1072 / 980.0) / (0.0921 / 870.0)
    y = np.array([4400.0, 0.0, solvent, 0.0, 0.0, 0.0, 0.0, 318.15, 318.15])
    rate, calls, found = 1.06 * 4400.0 / 10800.0, [0], {}
    for t0, t1, feeding, set_point in [
        (0.0, 600.0, False, 318.15),
        (600.0, 3600.0, True, 318.15),
        (3600.0, 11400.0, True, 318.15),
        (11400.0, 14400.0, False, 318.15),
        (14400.0, 21600.0, False, 333.15),
    ]:
        done = solve_ivp(
            _right_side, (t0, t1), y, "Radau", args=(feeding, set_point, rate, calls), rtol=1e-9, atol=1e-7, max_step=60.0
        )
        assert done.success
        assert np.isfinite(done.y).all()
        y = done.y[:, -1]
        found[t1] = y
    return found


def test_amounts_and_temperatures_at_default_accuracy(twin):
    """The promise: responses right to 1e-4 relative, temperatures to 0.01 K."""
    lines = profile(read_study(STUDY), {}, sorted(twin)).set_index("time_s")
    for time, y in twin.items():
        line = lines.loc[time]
        assert y[7] == pytest.approx(line["temperature_K"], abs=0.01)
        assert y[8] == pytest.approx(line["jacket_temperature_K"], abs=0.01)
        for i, name in enumerate(NAMES):
            assert y[i] == pytest.approx(line[f"n_{name}_mol"], rel=1e-4, abs=1e-4 * 4400.0 * 1e-3)


def test_responses_of_the_set_point(twin):
    found = evaluate(read_study(STUDY), pd.DataFrame(index=[0])).iloc[0]
    end = twin[21600.0]
    assert (4400.0 - end[0]) / 4400.0 == pytest.approx(found["conversion"], rel=1e-4)
    assert end[5] / end[3] == pytest.approx(found["per_product_diamide"], rel=1e-4)
    assert "done" == found["status"]
    assert 1e-5 > found["energy_balance_error"]


def test_neighbours_do_not_matter():
    """The same point gives the same bytes alone, in company, and in any place."""
    study = read_study(STUDY)
    low, high = (np.array([getattr(v, end) for v in study.variables]) for end in ("low", "high"))
    points = pd.DataFrame(np.random.default_rng(7).uniform(low, high, (37, low.size)), columns=[v.name for v in study.variables])
    whole = evaluate(study, points)
    alone = evaluate(study, points.iloc[[20]])
    turned = evaluate(study, points.iloc[::-1])
    pd.testing.assert_frame_equal(whole.loc[[20]], alone, check_exact=True)
    pd.testing.assert_frame_equal(whole, turned.loc[whole.index], check_exact=True)
