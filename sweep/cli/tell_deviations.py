"""What `sweep batch` and `sweep run` print of deviations."""

from collections.abc import Mapping
from typing import Any

from sweep.base.units import show
from sweep.cli.terminal import Terminal, duration


def _line(line: Mapping[str, Any]) -> str:
    """Return a scenario in one line."""
    if line["max_temperature_K"] is None:
        return f"{line['scenario']}: {line['status']}: {line['reason']}"
    parts = [f"highest {show(line['max_temperature_K'], 'degC')}" + ("" if line["margin_K"] is None else f" (margin {line['margin_K']:+.3g} K)")]
    if line["mtsr_K"] is not None:
        parts.append(f"MTSR {show(line['mtsr_K'], 'degC')}")
    if line["tmr_ad_s"] is not None:
        parts.append(f"TMRad {'at least ' if line['tmr_ad_censored'] else ''}{show(line['tmr_ad_s'], 'h')}")
    if line["criticality_class"] is not None:
        parts.append(f"class {line['criticality_class']}")
    parts += [f"{r['name']} reached after {duration(r['after_s'])}" for r in line["reaches"] if r["after_s"] is not None]
    acted = [e["cause"] for e in line["events"] if e["acts_s"] is not None]
    parts += [f"interlocks that acted: {'; '.join(acted)}"] if acted else []
    if line["status"] != "done":
        verdict = f"{line['status'].upper()}: {line['reason']}"
    else:
        verdict = "limits hold" if line["holds"] else f"DOES NOT HOLD: {', '.join(line['broken'])}"
    return f"{line['scenario']}: {', '.join(parts)}; {verdict}"


def tell_deviations(lines: list[dict[str, Any]], terminal: Terminal) -> None:
    """Print the deviation table, the most dangerous first."""
    terminal.heading("Deviations, the most dangerous first")
    for line in lines:
        terminal.item(_line(line))
