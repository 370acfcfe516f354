"""What `sweep batch` prints."""

import math
from typing import Any

from sweep.analysis.overlay import Overlay
from sweep.base.units import from_si, show
from sweep.cli.tell_deviations import tell_deviations
from sweep.cli.terminal import Terminal, duration
from sweep.workflow.batch import OneBatch

_SENSE = {"at_most": "at most", "at_least": "at least"}
_OWN = {"K": "degC", "s": "h", "W": "kW"}
_MEASURED = (("_mol_per_m3", "mol/m^3"), ("_mol", "mol"), ("_K", "K"), ("_W", "W"), ("_m3", "m^3"))


def in_words(value: float | None, unit: str, own: str | None = None, digits: int = 5) -> str:
    """Return an SI value in the unit an engineer reads it in."""
    if value is None or math.isnan(value):
        return "-"
    return show(value, own or _OWN.get(unit, "" if unit == "1" else unit), digits)


def difference(value: float | None, unit: str, own: str | None = None) -> str:
    """Return a margin: a difference of temperatures stays in K."""
    if value is None:
        return "-"
    if unit == "K":
        return f"{value:+.4g} K"
    own = own or _OWN.get(unit, "" if unit == "1" else unit)
    return f"{from_si(value, own):+.4g} {own}" if own else f"{value:+.4g}"


def limit_sentence(line: dict[str, Any], own: str | None = None, at_least: bool = False) -> str:
    """Return one limit with its value and margin as a sentence; `at_least`: the value is only a lower bound."""
    verdict = "holds" if line["holds"] else "DOES NOT HOLD"
    bound = in_words(line["bound"], line["unit"], own)
    if line["value"] is None:
        return f"{line['name']} {_SENSE[line['sense']]} {bound}: {verdict}, no value: {line['reason'].removeprefix(line['name'] + ': ')}"
    least = "at least " if at_least else ""
    return (
        f"{line['name']} {_SENSE[line['sense']]} {bound}: {verdict}, {least}{in_words(line['value'], line['unit'], own)}, "
        f"margin {difference(line['margin'], line['unit'], own)}"
    )


def tell_batch(found: OneBatch, terminal: Terminal) -> None:
    """Print one batch."""
    row, study = found.seen.row, found.study
    terminal.title(study.title)
    terminal.heading("Batch")
    for name, given in found.seen.inputs().items():
        terminal.item(f"{name}: {given['written']}")
    terminal.item(f"status: {row['status']}" + (f" ({row['reason']})" if row["reason"] else ""))
    terminal.item(f"highest temperature: {in_words(row['max_temperature_K'], 'K')} after {duration(float(row['time_of_max_temperature_s']))}")
    if study.target is not None:
        reached = f"target reached after {in_words(row['time_to_target_s'], 's')}" if row["time_to_target_s"] > 0.0 else "target not reached"
        terminal.item(f"conversion at the end: {in_words(row['conversion'], '1')}; {reached}")
    largest = (("cooling duty", "cooling_duty_W", "W"), ("accumulation", "accumulation", "1"))
    known = [f"largest {name}: {in_words(row[column], unit)}" for name, column, unit in largest if not math.isnan(row[column])]
    if known:
        terminal.item("; ".join(known))
    if found.failed is not None:
        tell_failure(found.failed.summary(), terminal)
    if found.overlay is not None:
        tell_overlay(found.overlay, terminal)
    if found.deviations is not None:
        tell_deviations(found.deviations.lines(), terminal)
    terminal.heading("Limits")
    for line in found.seen.limit_lines():
        censored = f"{line['name']}_censored"
        at_least = censored in row and bool(row[censored] == True)  # noqa: E712 - a null is no bound
        terminal.item(limit_sentence(line, study.units.get(f"limits.{line['name']}.{line['sense']}"), at_least))
    if not found.seen.rows:
        terminal.item("none are written")
    terminal.line("")
    terminal.line(f"written to {found.folder}")
    terminal.line("This screens; it does not approve. Figures rest on the kinetics given; have hazards tested and reviewed by qualified people.")


def _split(column: str) -> tuple[str, str]:
    """Return a measured quantity's name and SI unit."""
    for ending, unit in _MEASURED:
        if column.endswith(ending):
            return column.removesuffix(ending), unit
    return column, "1"


def tell_overlay(found: Overlay, terminal: Terminal) -> None:
    """Print how far a measured batch lies from the model."""
    terminal.heading("Measured against the model (measured less model)")
    for line in found.lines():
        name, unit = _split(line["name"])
        if not line["values"]:
            terminal.item(f"{name}: no measured value within the batch")
            continue
        mean, rms, largest = (difference(line[key], unit) for key in ("mean", "rms", "largest"))
        when = duration(line["largest_at_s"])
        terminal.item(f"{name}: {line['values']} values, mean {mean}, root mean square {rms.lstrip('+')}, largest {largest} after {when}")
    if found.beyond:
        terminal.item(f"{found.beyond} moments lie beyond the computed batch and were not compared")


def tell_failure(block: dict[str, Any], terminal: Terminal) -> None:
    """Print what a cooling failure does."""
    terminal.heading("Cooling failure")
    terminal.item(f"MTSR {in_words(block['mtsr_K'], 'K')}, were cooling lost after {in_words(block['mtsr_time_s'], 's')}")
    if block["tmr_ad_s"] is None:
        terminal.item("time to maximum rate, T_D24: not assessed")
    else:
        bound = "at least " if block["tmr_ad_censored"] else ""
        terminal.item(f"shortest adiabatic time to maximum rate: {bound}{in_words(block['tmr_ad_s'], 's')}")
        above = "above " if block["td24_censored"] else ""
        terminal.item(f"T_D24: {above}{in_words(block['td24_K'], 'K')}")
    number = block["criticality_class"]
    terminal.item(f"criticality class {number}: {block['class_reason']}" if number is not None else f"criticality class: {block['class_reason']}")
    for reach in block.get("path", {}).get("reaches", []):
        after = "not reached" if reach["after_s"] is None else f"after {duration(reach['after_s'])}"
        level = "" if reach["temperature_K"] is None else f" ({in_words(reach['temperature_K'], 'K')})"
        terminal.item(f"after the worst failure, {reach['name']}{level}: {after}")
    for caution in block["cautions"]:
        terminal.item(f"caution: {caution}")
