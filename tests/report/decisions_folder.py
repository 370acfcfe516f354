"""Ranges, optimum and probability map of the made-up run in `folder`: blocks and tables, numbers invented."""

import numpy as np
import pandas as pd


def _range(low: float, high: float, written: tuple[str, str], **more: object) -> dict[str, object]:
    return {"low": low, "high": high, "low_written": written[0], "high_written": written[1], **more}


def _place(temperature: float, hours: float) -> dict[str, dict[str, object]]:
    return {"charge_temperature": {"value": temperature + 273.15, "unit": "K", "written": f"{temperature:g} degC"},
            "dosing_time": {"value": 3600.0 * hours, "unit": "s", "written": f"{hours:g} h"}}  # fmt: skip


_SMALLEST = {"limit": "mtsr", "name": "mtsr", "margin": 0.31, "unit": "K", "at": _place(47.5, 2.6), "share": 0.961}
RANGES = {
    "assurance": {"probability": 0.95, "confidence": 0.95, "draws": 256, "need": 250}, "reason": None,
    "variables": [
        {"variable": "charge_temperature", "unit": "K", "set_point": 318.15, "set_point_written": "45 degC",
         "studied": _range(303.15, 338.15, ("30 degC", "65 degC")), "normal": _range(317.17, 319.13, ("44.02 degC", "45.98 degC"), holds=0.95),
         "acceptable": _range(315.65, 320.65, ("42.5 degC", "47.5 degC"), ended_by=["conversion", "mtsr"]),
         "alone": _range(313.15, 323.15, ("40 degC", "50 degC"), ended_by=["conversion", "mtsr"])},
        {"variable": "dosing_time", "unit": "s", "set_point": 10800.0, "set_point_written": "3 h",
         "studied": _range(3600.0, 21600.0, ("1 h", "6 h")), "normal": None,
         "acceptable": _range(9360.0, 21600.0, ("2.6 h", "6 h"), ended_by=["cooling_duty", None]),
         "alone": _range(7920.0, 21600.0, ("2.2 h", "6 h"), ended_by=["cooling_duty", None])},
    ],
    "share_of_space": 0.097, "searched": {"corners": 4, "faces": 64, "inside": 64, "downhill": 320, "all": 452, "failing": 0},
    "smallest": _SMALLEST, "worst_setting": {"holding": 988, "draws": 1024, "probability": 988 / 1024, "low": 0.954},
    "alone_together": {"holds": False, "looked_at": 260, "smallest": {**_SMALLEST, "margin": -2.2, "at": _place(50.0, 2.2)}},
    "marches": 120_000, "words": "Normal operating range: where the plant holds a setting.", "cautions": ["a hunt is evidence, not a proof"],
}  # fmt: skip


def _setting(temperature: float, hours: float, aims: list[float], low: float | None = 0.953, margin: float = 0.2) -> dict[str, object]:
    seen = {"holding": 990, "draws": 1024, "probability": 990 / 1024, "low": low, "percentiles": [[aims[0], aims[0], aims[0]]] * len(aims)}
    return {"inputs": _place(temperature, hours), "nearest": "mtsr", "objectives": aims, "share": 0.97, "verified": None if low is None else seen,
            "limits": [{"name": "mtsr", "label": "mtsr", "margin": margin, "unit": "K", "holds": margin >= 0.0}]}  # fmt: skip


OPTIMUM = {
    "objectives": [{"name": "cycle_time", "sense": "minimise", "unit": "s"}], "variables": ["charge_temperature", "dosing_time"],
    "assurance": RANGES["assurance"], "reason": None, "best": _setting(48.2, 2.45, [31500.0]), "exact": None,
    "set_point": _setting(45.0, 3.0, [34200.0], None), "set_point_acceptable": True, "least_bad": None, "front": None,
    "search": {"method": "differential evolution", "polished_by": "COBYQA", "tightened": 1, "generations": 30, "settings": 900, "marches": 99_000},
    "cautions": ["the best of what was searched"],
}  # fmt: skip
NONE = {**OPTIMUM, "best": None, "reason": "no setting was found that holds every limit; at the one that comes nearest mtsr is in the way",
        "least_bad": _setting(32.0, 6.0, [50000.0], None, -3.0)}  # fmt: skip
TWO = {
    **OPTIMUM, "best": None,
    "objectives": [{"name": "cost", "sense": "minimise", "unit": "EUR/kg"}, {"name": "margin_mtsr", "sense": "maximise", "unit": "K"}],
    "set_point": _setting(45.0, 3.0, [20.0, 2.0], None),
    "front": [_setting(48.0, 2.5, [18.0, 0.4]), _setting(44.0, 3.0, [21.0, 4.0], None), _setting(40.0, 4.0, [25.0, 7.0], None)],
}  # fmt: skip
MAP = {
    "axes": ["charge_temperature", "dosing_time"], "at": {"amine": 2200.0}, "steps": 10, "draws": 512, "confidence": 0.95,
    "levels": [{"probability": p, "share": s} for p, s in ((0.5, 0.4), (0.9, 0.3), (0.95, 0.25), (0.99, 0.18))], "nominal_share": 0.38,
    "least_where_nominal_holds": 0.47,
    "best": {"probability": 0.999, "at": {"charge_temperature": {"value": 316.15, "unit": "K"}, "dosing_time": {"value": 14400.0, "unit": "s"}}},
    "marches": 9000, "brute_force": 61_952, "checked": 512, "wrong": 0, "cautions": ["between nodes"],
}  # fmt: skip


def tables() -> dict[str, pd.DataFrame]:
    x, y = (grid.ravel() for grid in np.meshgrid(np.linspace(303.15, 338.15, 11), np.linspace(3600.0, 21600.0, 11), indexing="ij"))
    p = 1.0 / (1.0 + np.exp((x - 322.0) / 1.5 + (9000.0 - y) / 2000.0))
    return {"probability_map": pd.DataFrame({"charge_temperature_K": x, "dosing_time_s": y, "probability": p, "low": 0.95 * p,
                                             "high": np.minimum(1.0, 1.05 * p), "nominal_holds": p > 0.5})}  # fmt: skip
