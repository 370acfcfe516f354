"""Risk and sensitivity, from results to numbers with labels: exceedance curves, ranked variance shares, halved spreads."""

from collections.abc import Mapping
from typing import Any

import numpy as np
import pandas as pd

from sweep.report.answers import limit_scale, probability, stated
from sweep.report.curves import Absent, Array, Facet, Facets, Ranking, Rankings
from sweep.report.results import Results
from sweep.report.wording import input_name, split_unit, words

EXCEEDANCE = ("exceedance", "How probable it is to lie beyond a value")
SHARES = ("variance_shares", "Which inputs decide: shares of each response's variance")
HALVED = ("spread_halved", "Which constant should be measured better")
MOST = 8  # panels of a figure
FEWEST = 1e-3  # %; the scale of probability never starts below


def _numbers(frame: pd.DataFrame, column: str) -> Array:
    return frame[column].to_numpy(dtype=np.float64)


def exceedance(results: Results) -> Facets | Absent:
    """Return an exceedance curve for each limited response."""
    table, why = results.table("risk_exceedance"), results.why_not("risk")
    if why or table is None:
        return Absent(*EXCEEDANCE, why or "analyses/risk_exceedance.csv is missing or empty")
    risk = results.block("risk")
    limits = {limit["label"]: limit for limit in risk.get("limits") or ()}
    facets, tables = list[Facet](), list[pd.DataFrame]()
    for label, part in list(table.groupby("limit", sort=False))[:MOST]:
        if label in limits:
            facets.append(_facet(limits[str(label)], part))
            shown = facets[-1]
            columns = {"limit": words(str(label)), "value": shown.x, "unit": shown.x_label.rsplit("(", 1)[-1].rstrip(")"), "beyond (%)": shown.y}
            tables.append(pd.DataFrame({**columns, "low (%)": shown.low, "high (%)": shown.high}))
    if not facets:
        return Absent(*EXCEEDANCE, "no limit of the study has draws with a value")
    caption = (
        f"Share of {risk['draws']:,} draws in which each limited response lies beyond the value on the axis: above it for a limit \"at most\", below "
        "it for one \"at least\"; draws without a value lie beyond every one. Dashed: the limit. Band: binomial interval of each share."
    )
    description = f"{len(facets)} panels, one a limit: probability on a logarithmic scale against the response's value, the limit as a vertical line."
    least = max(FEWEST, 50.0 / max(int(risk["draws"]), 1))
    return Facets(*EXCEEDANCE, caption, description, tuple(facets), least, {"exceedance": pd.concat(tables, ignore_index=True)})


def _facet(limit: Mapping[str, Any], part: pd.DataFrame) -> Facet:
    scale = limit_scale(limit)
    name = words(limit["label"])
    failing, high = 1.0 - limit["probability"], 1.0 - limit["low"]
    beyond = probability(failing) if failing > 0.0 else f"none, at most {probability(high)}"
    said = f"limit {scale.text(limit['bound'])}; beyond: {beyond}"
    return Facet(
        name[0].upper() + name[1:], f"{name} ({scale.unit})" if scale.unit else name, scale.of(_numbers(part, "value")),
        100.0 * _numbers(part, "beyond"), 100.0 * _numbers(part, "low"), 100.0 * _numbers(part, "high"), scale.one(limit["bound"]), said,
    )  # fmt: skip


def shares(results: Results) -> Rankings | Absent:
    """Return the inputs ranked by their share of each response's variance."""
    block, why = results.block("sensitivity"), results.why_not("sensitivity")
    known = [one for one in block.get("responses") or () if one.get("shares")]
    if why or not known:
        return Absent(*SHARES, why or "no response moves with what is uncertain, or too many points failed")
    panels = tuple(_ranked(one) for one in known[:MOST])
    caption = (
        "Bar: total share, the part of the variance that would be left were all other inputs known (with what the input does together with others). "
        f"Dot: first-order share, the input by itself. Lines: {100.0 * block['confidence']:.3g} % intervals by bootstrap."
    )
    caption += " Correlated inputs stand together: their share is that of the group." if block.get("grouped") else ""
    rows = [
        {"response": words(split_unit(one["response"])[0]), "input": input_name(row["input"]),
         **{f"{key} (%)": 100.0 * row[key] for key in ("total", "total_low", "total_high", "first", "first_low", "first_high")}}
        for one in known for row in one["shares"]
    ]  # fmt: skip
    description = f"{len(panels)} panels of horizontal bars, one a response, the inputs ranked by their total share of its variance."
    return Rankings(*SHARES, caption, description, "Share of the variance (%)", panels, {"variance_shares": pd.DataFrame(rows)})


def _ranked(one: Mapping[str, Any]) -> Ranking:
    rows = pd.DataFrame(one["shares"])
    name = words(split_unit(one["response"])[0])
    columns = [100.0 * _numbers(rows, key) for key in ("total", "total_low", "total_high", "first")]
    return Ranking(name[0].upper() + name[1:], tuple(map(input_name, rows["input"])), columns[0], columns[1], columns[2], columns[3])


def halved(results: Results) -> Rankings | Absent:
    """Return by how much the probability that all limits hold rises with each input's spread halved."""
    block, why = results.block("sensitivity"), results.why_not("sensitivity")
    spread = block.get("halved_spread") or {}
    why = why or str(spread.get("not_assessed") or "")
    if why or not spread.get("inputs"):
        return Absent(*HALVED, why or "no input is uncertain")
    rows = pd.DataFrame(spread["inputs"])
    values = [100.0 * _numbers(rows, key) for key in ("rise", "rise_low", "rise_high")]
    caption = (
        f"Rise of the probability that all limits hold, now {stated(spread)}, were the spread of one input halved; the same "
        f"{spread['draws']:,} draws for each. Lines: {100.0 * block['confidence']:.3g} % intervals."
    )
    numbers = pd.DataFrame({
        "input": rows["input"].map(input_name), "probability (%)": 100.0 * _numbers(rows, "probability"), "rise (percentage points)": values[0],
        "low": values[1], "high": values[2],
    })  # fmt: skip
    panel = Ranking("", tuple(map(input_name, rows["input"])), values[0], values[1], values[2])
    description = "Horizontal bars with intervals, the inputs ranked by the rise of the probability."
    return Rankings(*HALVED, caption, description, "Rise of the probability (percentage points)", (panel,), {"spread_halved": numbers})
