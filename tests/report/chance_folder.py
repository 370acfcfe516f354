"""Risk and sensitivity of the made-up run in `folder`: blocks and tables, numbers invented."""

import numpy as np
import pandas as pd

INPUTS = ["k_acylation", "Ea_acylation", "U", "variables.charge_temperature.error"]
_UNITS = {"mtsr": ("at_most", 353.15, "K"), "conversion": ("at_least", 0.985, "")}


def _limit(name: str, holding: int, low: float, high: float, drivers: list[dict[str, object]]) -> dict[str, object]:
    sense, bound, unit = _UNITS[name]
    return {"label": name, "name": name, "sense": sense, "bound": bound, "unit": unit, "holding": holding, "draws": 4096,
            "probability": holding / 4096, "low": low, "high": high, "drivers": drivers}  # fmt: skip


RISK = {
    "draws": 4096, "sampling": "latin-hypercube", "confidence": 0.95, "interval": "wilson", "done": 4090, "runaway": 1, "failed": 5,
    "inputs": INPUTS,
    "limits": [
        _limit("mtsr", 4096, 0.99906, 1.0, []),
        _limit("conversion", 3799, 0.919, 0.935, [{"input": "k_acylation", "distance": 0.66, "shift": -1.3},
               {"input": "variables.charge_temperature.error", "distance": 0.2, "shift": -0.4}]),
    ],
    "all_hold": {"holding": 3799, "draws": 4096, "probability": 3799 / 4096, "low": 0.919, "high": 0.935, "drivers": []},
    "batch_time": {"coverage": 0.95, "confidence": 0.95, "time_s": 21960.0, "bound_s": 22032.0, "rank": 3915, "draws": 4096, "never": 0,
        "reason": None},
    "rare": [{"label": "mtsr", "probability": 3.2e-5, "low": 1.1e-5, "high": 9.3e-5, "levels": 5, "draws": 4600, "reason": None},
             {"label": "all limits", "probability": None, "low": 0.0, "high": 2e-8,
              "levels": 8, "draws": 7300, "reason": "no failure down to 1e-08"}],
    "definition": "distance: how far two distributions are apart", "cautions": ["5 of 4096 draws could not be computed and count as not holding"],
}  # fmt: skip


def _shares(*totals: tuple[str, float]) -> list[dict[str, object]]:
    return [{"input": name, "first": 0.95 * total, "first_low": 0.9 * total, "first_high": total, "total": total, "total_low": 0.9 * total,
             "total_high": 1.1 * total} for name, total in totals]  # fmt: skip


SENSITIVITY = {
    "over": "uncertain", "inputs": ["k_acylation + Ea_acylation", "U", INPUTS[3]], "grouped": True, "confidence": 0.95,
    "responses": [
        {"response": "mtsr_K", "unit": "K", "undefined": None, "blocks": 512, "used": 510,
         "shares": _shares(("k_acylation + Ea_acylation", 0.957), (INPUTS[3], 0.035), ("U", 0.001))},
        {"response": "criticality_class", "unit": "", "undefined": "the response does not move beyond the march's tolerance", "blocks": 512,
         "used": 510, "shares": []},
    ],
    "halved_spread": {"holding": 950, "draws": 1024, "probability": 950 / 1024, "low": 0.91, "high": 0.942, "inputs": [
        {"input": "k_acylation", "probability": 0.9707, "rise": 0.042, "rise_low": 0.0295, "rise_high": 0.0543},
        {"input": "U", "probability": 0.9287, "rise": 0.001, "rise_low": -0.004, "rise_high": 0.006}]},
    "marches": 7000, "cautions": ["correlated inputs are varied together"],
}  # fmt: skip


def tables() -> dict[str, pd.DataFrame]:
    parts = []
    for name, values in (("mtsr", np.linspace(344.0, 349.0, 30)), ("conversion", np.linspace(0.978, 0.996, 30))):
        sense, bound, unit = _UNITS[name]
        beyond = np.linspace(1.0, 0.0, 30) if sense == "at_most" else np.linspace(0.0, 1.0, 30)
        part = {"limit": name, "sense": sense, "value": values, "unit": unit, "bound": bound, "beyond": beyond, "low": 0.9 * beyond}
        parts.append(pd.DataFrame({**part, "high": np.minimum(1.0, 1.1 * beyond + 1e-3)}))
    percentiles = {"p01": 343.9, "p05": 344.2, "p25": 344.9, "p50": 345.3, "p75": 345.7, "p95": 346.4, "p99": 346.8}
    return {
        "risk_exceedance": pd.concat(parts, ignore_index=True),
        "risk_percentiles": pd.DataFrame([{"response": "mtsr_K", "with_value": 4090, "without": 6, **percentiles},
                                          {"response": "mtt_K", "with_value": 0, "without": 4096}]),
        "risk_drivers": pd.DataFrame([{"limit": "conversion", "input": INPUTS[3], "distance": 0.2, "shift": -0.4, "noise": 0.08}]),
        "sensitivity_screening": pd.DataFrame([{"response": "mtsr_K", "unit": "K", "input": "U", "mean_size": 0.18, "mean_size_interval": 0.06,
                                                "mean": 0.17, "deviation": 0.13}]),
        "sensitivity_local": pd.DataFrame([{"response": "mtsr_K", "unit": "K", "input": "U", "input_unit": "W/m^2/K", "slope": -0.0028,
                                            "elasticity": None, "by_one_spread": -0.06}]),
    }  # fmt: skip
