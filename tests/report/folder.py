"""Invented results folders for the report's tests: plausible shapes from simple formulas, nothing computed by the program."""

import copy
import json
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd

from tests.report import chance_folder

STUDY = '# Invented data for a demonstration; not for any real vessel.\n[study]\ntitle = "Fed-batch acylation in vessel K-310"\nseed = 310\n'
SET = {
    "charge_temperature": {"value": 318.15, "unit": "K", "written_unit": "degC"},
    "dosing_time": {"value": 10800.0, "unit": "s", "written_unit": "h"},
    "amine": {"value": 2200.0, "unit": "mol/m^3", "written_unit": "mol/L"},
}
BINDING = ("mtsr", "cooling_duty", "conversion", "per_product_diamide", "tmr_ad")


def _limit(name: str, sense: str, bound: float, value: float | None, unit: str, reason: str = "") -> dict[str, Any]:
    margin = None if value is None else (bound - value if sense == "at_most" else value - bound)
    holds = margin is not None and margin >= 0
    return {
        "name": name,
        "sense": sense,
        "bound": bound,
        "value": value,
        "margin": margin,
        "unit": unit,
        "holds": holds,
        "reason": reason,
        "label": name,
    }


LIMITS = [
    _limit("max_temperature", "at_most", 343.15, 333.62, "K"),
    _limit("mtsr", "at_most", 353.15, 345.26, "K"),
    _limit("tmr_ad", "at_least", 86400.0, 1.02e6, "s"),
    _limit("cooling_duty", "at_most", 120e3, 61.4e3, "W"),
    _limit("per_product_diamide", "at_most", 0.004, 0.00162, "1"),
    _limit("conversion", "at_least", 0.985, 0.9893, "1"),
]
BATCH_TIME = {
    "time_to_target_s": 20150.0, "why_not": None, "highest_conversion": 0.9997, "conversion_target": 0.985, "batch_time_s": 21600.0,
    "cycle_time_s": 34200.0, "turnaround_s": 12600.0,
    "options": [
        {"name": name, "time_s": time, "cycle_time_s": time + 12600.0, "conversion": conversion, "productivity": made,
         "productivity_unit": "kg/m3/s"}
        for name, time, conversion, made in (
            ("as written", 21600.0, 0.9893, 0.004747), ("to target", 20150.0, 0.985, 0.004935), ("most productive", 12100.0, 0.9105, 0.006049),
        )
    ],
    "trade": {"productivity_lost_by_target": 0.1842, "conversion_lost_by_most_productive": 0.0745, "longer_to_target_s": 8050.0},
}  # fmt: skip
WINDOW = {
    "axes": ["charge_temperature", "dosing_time"], "at": {"amine": 2200.0}, "safe_share": 0.4127, "marches": 1184, "resolution": 0.005,
    "limits_binding": [{"name": "conversion", "share": 0.41}, {"name": "mtsr", "share": 0.27}, {"name": "max_temperature", "share": 0.21},
        {"name": "per_product_diamide", "share": 0.11}],
    "set_point": {
        "holds": True,
        "margins": [{"name": limit["name"], "margin": limit["margin"], "unit": limit["unit"]} for limit in LIMITS],
        "distances": [
            {"axis": "charge_temperature", "direction": "up", "distance": 8.5, "limit": "max_temperature", "unit": "K"},
            {"axis": "charge_temperature", "direction": "down", "distance": 3.74, "limit": "conversion", "unit": "K"},
            {"axis": "dosing_time", "direction": "up", "distance": 9819.0, "limit": "conversion", "unit": "s"},
            {"axis": "dosing_time", "direction": "down", "distance": 5888.0, "limit": "mtsr", "unit": "s"},
        ],
    },
    "pieces": 1, "holes": 0,
}  # fmt: skip
FAILURE = {
    "mtsr_K": 345.26, "mtsr_time_s": 11232.0, "tmr_ad_s": 1.02e6, "tmr_ad_censored": False, "tmr_ad_time_s": 11232.0, "tmr_ad_closed_form_s": 9.4e5,
    "td24_K": 372.42, "td24_censored": False, "mtt_K": 383.15, "criticality_class": 2,
    "class_reason": "MTSR 72.1 degC is below T_D24 99.3 degC, and T_D24 is below MTT 110.0 degC", "accumulation": 0.312,
    "adiabatic_rise_synthesis_K": 92.4, "adiabatic_rise_decomposition_K": 214.5,
    "path": {"failure_time_s": 11232.0, "reaches": [
        {"name": "limit max_temperature", "temperature_K": 343.15, "after_s": 3368.0},
        {"name": "MTT", "temperature_K": 383.15, "after_s": 8.1406e5},
        {"name": "maximum rate", "temperature_K": 423.3, "after_s": 1.02e6}]},
    "feeds": "stop", "wall": False, "horizon_s": 2592000.0,
}  # fmt: skip
SUMMARY: dict[str, Any] = {
    "schema": 1,
    "study": {"name": "acylation", "title": "Fed-batch acylation in vessel K-310", "digest": "3f9a" * 16, "seed": 310},
    "set_point": {"inputs": SET, "status": "done", "reason": "", "responses": {
        "conversion": 0.9893, "max_temperature_K": 333.62, "time_of_max_temperature_s": 16800.0, "cooling_duty_W": 61.4e3, "heat_release_W": 48.9e3,
        "accumulation": 0.312, "yield_amide": 0.9871, "per_product_diamide": 0.00162, "energy_balance_error": 3.1e-7, "cycle_time_s": 34200.0,
        "productivity_kg_per_m3_s": 0.004747, "criticality_class": 2, "tmr_ad_censored": False, "mtsr_K": 345.26,
        "adiabatic_rise_synthesis_K": 92.4}},
    "limits": LIMITS,
    "nearest_limit": {"name": "conversion", "sense": "at_least", "margin": 0.0043, "unit": "1", "label": "conversion", "share": 0.018,
        "of": "the spread of conversion over the plan's points"},
    "batch_time": BATCH_TIME, "window": WINDOW, "failure": FAILURE, "risk": chance_folder.RISK,
    "sensitivity": chance_folder.SENSITIVITY,
    "points": {"planned": 2025, "done": 2025, "runaway": 0, "failed": 0, "all_hold": 611},
    "warnings": ["The temperature leaves the valid range of acylation's rate constant at 12 points."],
    "cautions": ["The closed form of TMRad is shorter than the integrated one."],
    "not_assessed": ["Pressure: no vapour pressure is given.", "Scenarios: none are given."],
    "assumptions": ["Well mixed, one liquid phase.", "The liquid's volume is what was charged and fed; reaction does not change it."],
}  # fmt: skip
MANIFEST = {
    "schema": 1, "study": STUDY, "study_name": "acylation", "study_digest": "3f9a" * 16, "seed": 310, "state": "complete",
    "versions": {"sweep": "0.1.0", "python": "3.11.9", "numpy": "2.3.1", "numba": "0.61.2"}, "files": {"points/0.parquet": "ab12" * 16},
}  # fmt: skip


def profile_table() -> pd.DataFrame:
    """A fed batch: dosing from 10 min to 190 min, the set-point raised at 4 h."""
    time = np.linspace(0.0, 21600.0, 401)
    fed = np.clip((time - 600.0) / 10800.0, 0.0, 1.0)
    warm = 1.0 / (1.0 + np.exp(-(time - 15400.0) / 420.0))
    built = np.interp(time, [0, 600, 3600, 8000, 11400, 14400, 16000, 21600], [0, 0, 0.19, 0.27, 0.312, 0.115, 0.05, 0.012])
    heat = np.interp(time, [0, 600, 1800, 6000, 11400, 11900, 14400, 15400, 17000, 21600], [0, 0, 30, 44, 48.9, 33, 13, 17, 6, 0.8]) * 1e3
    return pd.DataFrame({
        "time_s": time, "temperature_K": 318.15 + 0.9 * np.sin(time / 2600.0) * (fed > 0) * (1 - warm) + 15.3 * warm,
        "jacket_temperature_K": 318.15 - 13.0 * heat / 48.9e3 * (1 - warm) + 15.0 * warm, "volume_m3": 2.0 + 0.44 * fed,
        "n_amine_mol": 4400.0 * (1 - fed * 0.98),
        "conversion": np.clip(0.9893 * (fed * 1.06 - built) / (1.06 - 0.012), 0, 0.9893), "heat_release_W": heat,
        "cooling_duty_W": 1e3 * np.interp(
            time, [0, 600, 1800, 6000, 11400, 12200, 14200, 14800, 15400, 16500, 21600], [4, 4, 27, 46, 61.4, 40, 17, -28, 5, 9, 3]),
        "accumulation": built,
    })  # fmt: skip


def _margins(kelvin: np.ndarray, seconds: np.ndarray) -> dict[str, np.ndarray]:
    """Invented: hot and fast crosses MTSR, cold and short of time misses the target, hot and slow makes by-product."""
    celsius, hours = kelvin - 273.15, seconds / 3600.0
    return {
        "max_temperature": 343.15 - (kelvin + 15.5 + 3.0 / hours),
        "mtsr": 353.15 - (kelvin + 7.0 + 55.0 / (hours + 0.6) * np.exp(-0.006 * (celsius - 45.0))),
        "tmr_ad": (10 ** (5.9 - 0.035 * (celsius - 45.0) - 0.4 / hours) - 86400.0),
        "cooling_duty": 120e3 - 150e3 / (hours + 0.4) * np.exp(0.012 * (celsius - 45.0)),
        "per_product_diamide": 0.004 - 0.00162 * np.exp(0.085 * (celsius - 45.0)) * (0.7 + 0.1 * hours),
        "conversion": 1.0 - 0.0107 * np.exp(-0.085 * (celsius - 45.0)) * (0.6 + 0.14 * hours) - 0.985,
    }


def grid_table() -> pd.DataFrame:
    kelvin, seconds = (a.ravel() for a in np.meshgrid(np.linspace(303.15, 338.15, 15), np.linspace(3600.0, 21600.0, 15), indexing="ij"))
    margins = _margins(kelvin, seconds)
    scaled = np.stack([m / np.abs(m).max() for m in margins.values()])
    names = np.array(list(margins))
    table = pd.DataFrame({"charge_temperature_K": kelvin, "dosing_time_s": seconds, **{f"margin_{k}": v for k, v in margins.items()}})
    return table.assign(holds=(scaled >= 0).all(axis=0), binding=names[scaled.argmin(axis=0)])


def boundary_table() -> pd.DataFrame:
    """The edge by a fine scan: for each dosing time the coldest and hottest place that still holds."""
    rows, fine = [], np.linspace(303.15, 338.15, 3501)
    for line, side in enumerate((0, -1)):
        for order, seconds in enumerate(np.linspace(3600.0, 21600.0, 61)):
            margins = _margins(fine, np.full_like(fine, seconds))
            held = np.flatnonzero(np.stack(list(margins.values())).min(axis=0) >= 0)
            if held.size:
                outside = np.clip(held[side] + (1 if side else -1), 0, fine.size - 1)
                crossed = [name for name, m in margins.items() if m[outside] < 0]
                rows.append((line, order, fine[held[side]], seconds, crossed[0] if crossed else "conversion"))
    return pd.DataFrame(rows, columns=["line", "order", "charge_temperature_K", "dosing_time_s", "limit"])


def batch_time_tables() -> dict[str, pd.DataFrame]:
    time = np.linspace(600.0, 86400.0, 144)
    conversion = np.where(time < 11400, 0.89 * time / 11400, 1.0 - 0.11 * np.exp(-(time - 11400) / 4400.0))
    grid = grid_table()[["charge_temperature_K", "dosing_time_s"]]
    celsius, dosing = grid["charge_temperature_K"] - 273.15, grid["dosing_time_s"]
    target = dosing + 9000.0 * np.exp(-0.06 * (celsius - 45.0)) + 600.0
    reached = target <= 30000.0
    best = dosing * 0.9 + 2400.0
    return {
        "batch_time": pd.DataFrame({"time_s": time, "conversion": conversion, "productivity_kg_per_m3_s": 162.3 * conversion / (time + 12600.0)}),
        "batch_time_map": grid.assign(
            time_to_target_s=target.where(reached), most_productive_time_s=best,
            at_target_kg_per_m3_s=(162.3 * 0.985 / (target + 12600.0)).where(reached),
            most_productive_kg_per_m3_s=162.3 * 0.91 / (best + 12600.0), conversion=0.985,
        ),
    }  # fmt: skip


def failure_tables() -> dict[str, pd.DataFrame]:
    """MTSR as temperature plus a share of 89.9 K; the path to it, then a slow decomposition that runs away after 11.8 d."""
    table = profile_table().iloc[::8]
    mtsr = table["temperature_K"] + 90.155 * table["accumulation"]
    reach = 10 ** (6.0086 - 0.03 * (mtsr - 345.26))
    time = np.concatenate([np.geomspace(20.0, 6000.0, 40), np.geomspace(7000.0, 1.02e6, 120)])
    synthesis = 317.2 + 28.06 * (1 - np.exp(-time[:40] / 1300.0))
    decomposition = 345.26 - 27.0 * np.log(1.0 - time[40:] / 1.08e6)
    return {
        "failure_times": pd.DataFrame({
            "time_s": table["time_s"], "temperature_K": table["temperature_K"], "mtsr_K": mtsr, "tmr_ad_s": np.minimum(reach, 2592000.0),
            "tmr_ad_censored": (reach >= 2592000.0).astype(float), "accumulation": table["accumulation"]}),
        "failure_path": pd.DataFrame({
            "time_after_failure_s": time, "temperature_K": np.concatenate([synthesis, decomposition]),
            "stage": ["synthesis"] * 40 + ["decomposition"] * 120}),
    }  # fmt: skip


def tables() -> dict[str, pd.DataFrame]:
    inputs = pd.DataFrame({
        "path": ["reactions.acylation.rate_constant.value", "reactions.acylation.heat.value", "vessel.U", "recipe.charge.temperature"],
        "written": ["2.6e-3 L/mol/s", "-112 kJ/mol", "310 W/m2/K", "45 degC"], "value_si": [2.6e-6, -112000.0, 310.0, 318.15],
        "unit_si": ["mol**(-1)*m**(3)*s**(-1)", "J/mol", "W/m^2/K", "K"], "source": ["runs 3 to 7", "", "", ""]})  # fmt: skip
    return {
        "set_point_profile": profile_table(), "window_grid": grid_table(), "window_boundary": boundary_table(),
        **batch_time_tables(), **failure_tables(), **chance_folder.tables(),
        "limits": pd.DataFrame(LIMITS), "inputs": inputs,
        "failed_points": pd.DataFrame({"charge_temperature_K": [], "dosing_time_s": [], "amine_mol_per_m3": [], "status": [], "reason": []}),
    }  # fmt: skip


def whole() -> tuple[dict[str, Any], dict[str, Any], dict[str, pd.DataFrame]]:
    """Return summary, manifest and tables of a run in which everything was assessed; copies, to be changed at will."""
    return copy.deepcopy(SUMMARY), copy.deepcopy(MANIFEST), tables()


def write(folder: Path, summary: dict[str, Any], manifest: dict[str, Any] | None, found: dict[str, pd.DataFrame]) -> Path:
    (folder / "analyses").mkdir(parents=True, exist_ok=True)
    (folder / "summary.json").write_text(json.dumps(summary))
    if manifest is not None:
        (folder / "manifest.json").write_text(json.dumps(manifest))
    for name, table in found.items():
        table.to_csv(folder / "analyses" / f"{name}.csv", index=False)
    return folder


def without(summary: dict[str, Any], found: dict[str, pd.DataFrame], block: str, reason: str) -> None:
    """Take an analysis out of a run: its block says why, its tables are gone."""
    summary[block] = {"not_assessed": reason}
    gone = {"window": ("window_", "batch_time_map"), "failure": ("failure_",), "batch_time": ("batch_time",), "risk": ("risk_",),
            "sensitivity": ("sensitivity_",)}[block]
    for name in [name for name in found if name.startswith(gone)]:
        del found[name]


def no_target() -> tuple[dict[str, Any], dict[str, Any], dict[str, pd.DataFrame]]:
    """A study without a target: no conversion, no time to it."""
    summary, manifest, found = whole()
    summary["limits"] = [limit for limit in summary["limits"] if limit["name"] != "conversion"]
    summary["nearest_limit"] = {
        "name": "mtsr",
        "sense": "at_most",
        "margin": 7.89,
        "unit": "K",
        "share": 0.11,
        "of": "the spread of mtsr over the plan's points",
    }
    without(summary, found, "batch_time", "the study names no target species")
    found["set_point_profile"] = found["set_point_profile"].drop(columns="conversion")
    found["window_grid"] = found["window_grid"].drop(columns="margin_conversion").assign(binding="mtsr")
    return summary, manifest, found


def not_reached() -> tuple[dict[str, Any], dict[str, Any], dict[str, pd.DataFrame]]:
    """A batch that never reaches its target: limits fail, options without a value."""
    summary, manifest, found = whole()
    batch = summary["batch_time"]
    batch |= {"time_to_target_s": None, "highest_conversion": 0.951, "cycle_time_s": None, "trade": None}
    batch["why_not"] = {"cause": "not enough reactant", "sentence": "The feed brings 0.95 equivalents; at most 95.1 % of the amine can be converted."}
    batch["options"][0] |= {"conversion": 0.951, "cycle_time_s": None, "productivity": None}
    batch["options"][1] |= {"time_s": None, "cycle_time_s": None, "conversion": None, "productivity": None}
    summary["limits"][-1] = _limit("conversion", "at_least", 0.985, 0.951, "1")
    summary["limits"][2] = _limit("tmr_ad", "at_least", 86400.0, None, "s", "no decomposition reaction is given")
    summary["nearest_limit"] = None
    summary["window"]["set_point"] |= {"holds": False, "distances": []}
    found["batch_time_map"]["time_to_target_s"] = np.nan
    return summary, manifest, found


def failed_points() -> tuple[dict[str, Any], dict[str, Any], dict[str, pd.DataFrame]]:
    """A run in which points failed and one ran away: no margin there, rows that say why."""
    summary, manifest, found = whole()
    summary["points"] |= {"done": 2010, "runaway": 3, "failed": 12}
    found["failed_points"] = pd.DataFrame({
        "charge_temperature_K": np.linspace(330.0, 338.0, 60), "dosing_time_s": 3600.0, "amine_mol_per_m3": 2800.0,
        "status": ["failed"] * 57 + ["runaway"] * 3, "reason": "the step fell below the spacing of numbers"})  # fmt: skip
    grid = found["window_grid"]
    bad = (grid["charge_temperature_K"].between(308, 321)) & (grid["dosing_time_s"].between(14000, 18000))
    grid.loc[bad, [name for name in grid.columns if name.startswith("margin_")]] = np.nan
    grid.loc[bad, "holds"] = False
    grid["binding"] = grid["binding"].astype(object).where(~bad, None)
    return summary, manifest, found


HOSTILE = '<script>alert("x")</script>&"\'$\\frac{$ \u202e\x07 {{ 7*7 }} --> ]]> \n end'


def hostile() -> tuple[dict[str, Any], dict[str, Any], dict[str, pd.DataFrame]]:
    """Names and reasons that hold markup, control signs, mathematics and template syntax."""
    summary, manifest, found = whole()
    summary["study"]["title"] = HOSTILE
    summary["warnings"] = [HOSTILE]
    summary["failure"]["class_reason"] = HOSTILE
    summary["set_point"]["inputs"] = {HOSTILE: SET["charge_temperature"], "dosing_time": SET["dosing_time"]}
    summary["window"]["axes"] = [HOSTILE, "dosing_time"]
    manifest["study"] = f'title = "{HOSTILE}"'
    for name in ("window_grid", "window_boundary", "batch_time_map"):
        found[name] = found[name].rename(columns={"charge_temperature_K": f"{HOSTILE}_K"})
    summary["limits"].append(_limit(f"per_product_{HOSTILE}", "at_most", 1.0, 0.5, "1"))
    summary["window"]["limits_binding"].append({"name": f"per_product_{HOSTILE}", "share": 0.1})
    found["inputs"].loc[0, "source"] = HOSTILE
    return summary, manifest, found
