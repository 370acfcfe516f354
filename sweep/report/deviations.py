"""The section on deviations: a line a scenario, the most dangerous first."""

from collections.abc import Mapping
from typing import Any

from sweep.report.blocks import Cell, Section, Table, Words, figure, heads
from sweep.report.display import NONE, conversion, duration, kelvins, number, reach, temperature
from sweep.report.results import Results
from sweep.report.wording import listed, reach_name, sentence, words


def to_act(line: Mapping[str, Any]) -> str:
    """Return when the levels are reached, counted from the deviation's begin."""
    parts = [f"{reach_name(entry['name'])} after {duration(entry['after_s'])}" for entry in line["reaches"] if entry["after_s"] is not None]
    return "; ".join(parts) if parts else ("nothing reached" if line["reaches"] else NONE)


def interlocks(line: Mapping[str, Any]) -> str:
    """Return what the recipe's events by condition did."""
    did = [f"{e['cause']}: " + (f"after {duration(e['acts_s'])}" if e["acts_s"] is not None else "no") for e in line["events"]]
    return "; ".join(did) or NONE


def verdict(line: Mapping[str, Any]) -> tuple[Cell, Cell]:
    """Return whether the limits hold, and which do not (or why nothing is known)."""
    if line["status"] != "done":
        return Cell(str(line["status"]), "bad"), Cell(str(line["reason"]))
    if line["holds"]:
        return Cell("yes", "good"), Cell(NONE)
    return Cell("no", "bad"), Cell(listed([words(name) for name in line["broken"]]))


def _dangers(line: Mapping[str, Any]) -> tuple[Cell, ...]:
    number_of = line["criticality_class"]
    return (
        Cell(words(line["scenario"])), *verdict(line), figure(temperature(line["max_temperature_K"])), figure(kelvins(line["margin_K"])),
        figure(temperature(line["mtsr_K"])), figure(reach(line["tmr_ad_s"], bool(line["tmr_ad_censored"]))),
        figure(NONE if number_of is None else str(number_of)), Cell(to_act(line)),
    )  # fmt: skip


def _outcome(line: Mapping[str, Any]) -> tuple[Cell, ...]:
    product = NONE if line["per_product"] is None else f"{words(line['by_product'])} {number(line['per_product'])}"
    return Cell(words(line["scenario"])), figure(conversion(line["conversion"])), figure(product), Cell(interlocks(line))


def section(results: Results) -> Section:
    """Return the section on deviations: what is dangerous, then how each batch went."""
    title = "Deviations"
    lines = results.block("deviations").get("table") or ()
    if not lines:
        why = results.why_not("deviations") or "the results hold no scenario"
        return Section("deviations", title, (Words((f"Not assessed: {sentence(why)}",), look="warning"),))
    _, *numbers = heads("", "Highest", "Margin", "MTSR", "TMRad", "Class")
    head = (Cell("Scenario"), Cell("Limits hold"), Cell("Not held"), *numbers, Cell("Time to act"))
    note = (
        "Margin: of the highest temperature to the lower of its limit and MTT. Time to act: from the moment the deviation begins. MTSR, TMRad and "
        "class: were cooling lost altogether at the worst moment of that batch. Also in analyses/deviations.csv."
    )
    dangers = Table("What each deviation does, at the set-point; the most dangerous first", head, tuple(_dangers(line) for line in lines), note)
    head = (*heads("Scenario", "Conversion", "By-product per product"), Cell("Interlocks and other events by condition, and when they acted"))
    outcomes = Table("How each of these batches went", head, tuple(_outcome(line) for line in lines))
    deviates = [f"{words(line['scenario'])}: {line['deviates']}." for line in lines if line["deviates"]]
    return Section("deviations", title, (dangers, outcomes, Words(("What they are:", *deviates), listed=True)))
