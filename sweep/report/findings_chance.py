"""The sections on risk and sensitivity: with which probability the limits hold, what drives failures, which input decides."""

from collections.abc import Mapping
from typing import Any

import pandas as pd

from sweep.report.answers import SENSES, batch_time_line, limit_scale, probability, stated
from sweep.report.blocks import Block, Cell, Section, Table, Words, figure, heads, row, table
from sweep.report.display import NONE, number, scale_for, share
from sweep.report.results import Results
from sweep.report.wording import input_name, sentence, split_unit, words

_PERCENTILES = {"p01": "1 %", "p05": "5 %", "p25": "25 %", "p50": "median", "p75": "75 %", "p95": "95 %", "p99": "99 %"}


def risk(results: Results, pictures: list[Block]) -> Section:
    """Return the section on the probability that the limits hold at the set-point."""
    title = "Risk at the set-point"
    if why := results.why_not("risk"):
        return Section("risk", title, (Words((f"Not assessed: {sentence(why)}",), look="warning"), *pictures))
    found = results.block("risk")
    blocks: list[Block] = [_headline(found)]
    if found.get("limits"):
        rows = tuple(_limit_row(limit, found) for limit in found["limits"])
        head = (*heads("Limit", "Must be", "Holds in", "Probability", f"{share(found['confidence'])} interval"), Cell("Fails where"))
        note = "Draws that failed, ran away or have no value do not hold. Also in analyses/risk_limits.csv and risk_drivers.csv."
        blocks.append(Table("Probability that each limit holds", head, rows, note))
    blocks += [Words((sentence(line),)) for line in batch_time_line(found)]
    if rare := _rare(found):
        blocks.append(rare)
    blocks += pictures
    if percentiles := _percentiles(results):
        blocks.append(percentiles)
    drivers = results.table("risk_drivers")
    if drivers is not None:
        shown = drivers.assign(limit=drivers["limit"].map(words), input=drivers["input"].map(input_name))
        blocks.append(table(shown, "What the draws that fail have in common", "analyses/risk_drivers.csv"))
        blocks.append(Words((sentence(str(found.get("definition") or "")),)))
    blocks.append(Words(tuple(sentence(text) for text in found.get("cautions") or ()), listed=True, look="warning"))
    return Section("risk", title, tuple(blocks))


def _headline(found: Mapping[str, Any]) -> Words:
    drawn = f"from {found['draws']:,} draws of {len(found['inputs'])} uncertain inputs ({found['sampling']})"
    together = found.get("all_hold")
    if not together:
        return Words((f"The study has no limits: percentiles only, {drawn}.",), look="warning")
    interval = f"{share(found['confidence'])} interval {probability(together['low'])} to {probability(together['high'])}"
    said = f"All limits hold with a probability of {stated(together)} ({interval}), {drawn}."
    if together["holding"] == together["draws"]:
        said += f" No draw failed, which is not never: the probability of failing is at most {probability(1.0 - together['low'])}."
    return Words((said,), look="good" if together["low"] >= 0.95 else "warning" if together["probability"] >= 0.5 else "bad")


def _limit_row(limit: Mapping[str, Any], found: Mapping[str, Any]) -> tuple[Cell, ...]:
    scale = limit_scale(limit)
    ends = [f"{input_name(one['input'])} {_direction(one['shift'])}" for one in limit.get("drivers") or ()][:3]
    why = ", ".join(ends) or ("too few draws fail to tell" if limit["probability"] > 0.5 else "nothing drives it beyond chance")
    cells = row(
        words(limit["label"]), f"{SENSES[limit['sense']]} {scale.text(limit['bound'])}", f"{limit['holding']:,} of {limit['draws']:,}",
        stated(limit), f"{probability(limit['low'])} to {probability(limit['high'])}",
    )  # fmt: skip
    return (*cells, Cell(why))


def _direction(shift: float) -> str:
    return "high" if shift > 0.1 else "low" if shift < -0.1 else "far from its middle"


def _rare(found: Mapping[str, Any]) -> Table | None:
    rows = []
    for one in found.get("rare") or ():
        value = NONE if one["probability"] is None else number(one["probability"], None, 3)
        ends = f"{number(one['low'], None, 3)} to {number(one['high'], None, 3)}"
        name = "any limit" if one["label"] == "all limits" else words(one["label"])
        rows.append((Cell(name), figure(value), figure(ends), figure(f"{one['draws']:,}"), Cell(sentence(one["reason"] or ""))))
    if not rows:
        return None
    note = "By subset simulation, where fewer than one draw in a thousand fails. Such figures rest on the tails of the distributions written."
    head = (*heads("Failing of", "Probability", "Interval", "Draws marched"), Cell("Note"))
    return Table("Rare failures, sought on purpose", head, tuple(rows), note)


def _percentiles(results: Results) -> Table | None:
    given = results.table("risk_percentiles")
    if given is None:
        return None
    rows = []
    for _, one in given.iterrows():
        name, unit = split_unit(str(one["response"]))
        scale = scale_for(unit, name, float(one["p50"]) if pd.notna(one["p50"]) else 0.0)
        values = [scale.text(one[column], None, 4) for column in _PERCENTILES]
        rows.append(row(words(name), *values, f"{int(one['without']):,}"))
    note = "Over the draws that are done and have a value; the last column counts the others. Also in analyses/risk_percentiles.csv, SI."
    return Table("Percentiles of every response over the draws", heads("Response", *_PERCENTILES.values(), "Without"), tuple(rows), note, folded=True)


def sensitivity(results: Results, pictures: list[Block]) -> Section:
    """Return the section on which inputs decide."""
    title = "Which inputs decide"
    if why := results.why_not("sensitivity"):
        return Section("sensitivity", title, (Words((f"Not assessed: {sentence(why)}",), look="warning"), *pictures))
    found = results.block("sensitivity")
    blocks: list[Block] = [_worth(found)]
    undefined = [one for one in found.get("responses") or () if one.get("undefined")]
    if undefined:
        lines = (f"{words(split_unit(one['response'])[0])}: undefined, {one['undefined']}" for one in undefined)
        blocks.append(Words(("No shares of variance:", *map(sentence, lines)), listed=True))
    blocks += pictures
    captions = {
        "sensitivity_screening": "Screening: mean size of each input's effect over its whole range (Morris), and its scatter",
        "sensitivity_local": "Slopes at the set-point: elasticity, and the change by one spread of the input",
    }
    for name, caption in captions.items():
        given = results.table(name)
        if given is not None:
            shown = given.assign(response=given["response"].map(lambda text: words(split_unit(text)[0])), input=given["input"].map(input_name))
            blocks.append(table(shown.rename(columns=lambda column: str(column).replace("_", " ")), caption, f"analyses/{name}.csv"))
    if found.get("cautions"):
        blocks.append(Words(tuple(map(sentence, found["cautions"])), listed=True, look="warning"))
    return Section("sensitivity", title, tuple(blocks))


def _worth(found: Mapping[str, Any]) -> Words:
    """Return which constant should be measured better."""
    spread = found.get("halved_spread") or {}
    if "not_assessed" in spread:
        return Words((f"Which input should be known better was not assessed: {sentence(spread['not_assessed'])}",))
    surely = [one for one in spread.get("inputs") or () if one["rise_low"] > 0.0]
    if not surely:
        return Words(("Halving the spread of any one input would not raise the probability that all limits hold beyond the noise of the draws.",))
    best = surely[0]
    ends = f"{number(100.0 * best['rise_low'], 1)} to {number(100.0 * best['rise_high'], 1)} percentage points"
    before, after = stated(spread), probability(best["probability"])
    return Words((
        f"Measuring {input_name(best['input'])} better buys most: with half its spread the probability that all limits hold rises from {before} to "
        f"{after} (by {ends}).",
    ))  # fmt: skip
