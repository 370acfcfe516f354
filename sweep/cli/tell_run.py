"""What `sweep run` prints at its end: the answers."""

from typing import Any

from sweep.base.units import show
from sweep.cli.tell_batch import difference, in_words, limit_sentence, tell_failure
from sweep.cli.tell_chance import tell_risk, tell_sensitivity
from sweep.cli.tell_decisions import tell_map, tell_optimum, tell_ranges
from sweep.cli.tell_deviations import tell_deviations
from sweep.cli.terminal import Terminal
from sweep.study.model import Study
from sweep.workflow.run import Run


def tell_run(found: Run, study: Study, terminal: Terminal) -> None:
    """Print the answers of a run."""
    summary = found.summary
    terminal.title(study.title)
    points = summary["points"]
    held = "" if points["all_hold"] is None else f"; {points['all_hold']:,} hold every limit"
    counts = ", ".join(f"{points[status]:,} {status}" for status in ("done", "runaway", "failed"))
    terminal.item(f"{points['planned']:,} points ({points['plan']}): {counts}{held}")
    terminal.heading("Set-point")
    inputs = summary["set_point"]["inputs"]
    for variable in study.variables:  # in the study's order, whether the block was computed now or is kept from an earlier run
        terminal.item(f"{variable.name}: {inputs[variable.name]['written']}")
    for line in summary["limits"]:
        bound = bool(summary["set_point"]["responses"].get(f"{line['name']}_censored"))
        terminal.item(limit_sentence(line, study.units.get(f"limits.{line['name']}.{line['sense']}"), bound))
    if summary["nearest_limit"] is not None:
        terminal.item(_nearest(summary["nearest_limit"], study))
    _tell_batch_time(summary["batch_time"], terminal)
    _tell_window(summary["window"], study, terminal)
    _tell_failure(summary["failure"], terminal)
    if "not_assessed" not in summary["deviations"]:
        tell_deviations(summary["deviations"]["table"], terminal)
    tell_risk(summary["risk"], terminal)
    tell_sensitivity(summary["sensitivity"], terminal)
    tell_map(summary["probability_map"], terminal)
    tell_ranges(summary["ranges"], terminal)
    tell_optimum(summary["optimum"], terminal)
    terminal.line("")
    terminal.line(f"report: {found.folder / 'report.html'}")
    terminal.line("This screens; it does not approve. Figures rest on the kinetics given; have hazards tested and reviewed by qualified people.")


def _nearest(block: dict[str, Any], study: Study) -> str:
    if block["margin"] is None:
        return f"nearest limit: {block['name']}, which has no value at the set-point"
    own = study.units.get(f"limits.{block['name']}.{block['sense']}")
    return f"nearest limit: {block['name']}, margin {difference(block['margin'], block['unit'], own)}"


def _tell_batch_time(block: dict[str, Any], terminal: Terminal) -> None:
    terminal.heading("Batch time")
    if "not_assessed" in block:
        terminal.item(f"not assessed: {block['not_assessed']}")
        return
    if block["why_not"] is not None:
        terminal.item(f"the target is never reached: {block['why_not']['cause']}")
    for option in block["options"]:
        made = "" if option["productivity"] is None else f", {option['productivity'] * 3600.0:.4g} {option['productivity_unit'].split('/')[0]}/m3/h"
        terminal.item(f"{option['name']}: {in_words(option['time_s'], 's')}, conversion {in_words(option['conversion'], '1')}{made}")


def _tell_window(block: dict[str, Any], study: Study, terminal: Terminal) -> None:
    terminal.heading("Operating window")
    if "not_assessed" in block:
        terminal.item(f"not assessed: {block['not_assessed']}")
        return
    units = {v.name: study.units.get(v.sets[0]) or v.unit for v in study.variables}
    fixed = ", ".join(f"{name} {show(value, units[name])}" for name, value in block["at"].items())
    at = f", at {fixed}" if fixed else ""
    terminal.item(f"over {' and '.join(block['axes'])}{at}: every limit holds in {100.0 * block['safe_share']:.3g} % of the area")
    if block["set_point"]["reason"] is not None:
        terminal.item(f"set-point: {block['set_point']['reason']}")
    for edge in block["set_point"]["distances"]:
        if edge["distance"] is None:
            terminal.item(f"{edge['axis']} {edge['direction']}: no edge within its range")
        else:
            distance = difference(edge["distance"], edge["unit"], None if edge["unit"] == "K" else units[edge["axis"]]).lstrip("+")
            terminal.item(f"{edge['axis']} {edge['direction']}: {distance} to the edge, where {edge['limit']} ends it")


def _tell_failure(block: dict[str, Any], terminal: Terminal) -> None:
    if "not_assessed" in block:
        terminal.heading("Cooling failure")
        terminal.item(f"not assessed: {block['not_assessed']}")
        return
    tell_failure(block, terminal)
