"""The sections on batch time, window and cooling failure: what was found, in words and tables."""

from collections.abc import Mapping
from typing import Any

from sweep.report.answers import held_elsewhere, limit_scale, responses_table, why_not
from sweep.report.blocks import Block, Cell, Section, Table, Words, figure, heads, row
from sweep.report.display import NONE, PERCENT, conversion, decimals_for, duration, kelvins, number, reach, scale_for, share, temperature
from sweep.report.prepare_failure import feeds
from sweep.report.prepare_window import variable_scale
from sweep.report.results import Results
from sweep.report.wording import pieces, plain, reach_name, sentence, several, words


def _not_assessed(why: str) -> Words:
    return Words((f"Not assessed: {sentence(why)}",), look="warning")


def _option_row(option: Mapping[str, Any]) -> tuple[Cell, ...]:
    made = scale_for(str(option.get("productivity_unit") or ""))
    return row(
        option["name"], duration(option.get("time_s")), duration(option.get("cycle_time_s")), conversion(option.get("conversion")),
        made.text(option.get("productivity")),
    )  # fmt: skip


def trade(batch: Mapping[str, Any]) -> tuple[str, ...]:
    """Return what each choice of batch time costs against the other."""
    given = batch.get("trade") or {}
    lost, missed = given.get("productivity_lost_by_target"), given.get("conversion_lost_by_most_productive")
    lines = []
    if lost is not None:
        longer = given.get("longer_to_target_s")
        later = f" and takes {duration(longer)} longer" if longer is not None and longer > 0.0 else ""
        lines.append(f"Running to the target gives away {share(lost)} of the highest productivity{later}.")
    if missed is not None:
        lines.append(f"Stopping at the most productive time gives away {PERCENT.change(missed, digits=3)} of conversion against the target.")
    return tuple(lines)


def batch_time(results: Results, pictures: list[Block]) -> Section:
    """Return the section on the batch and its time."""
    batch, blocks = results.block("batch_time"), list[Block]()
    if why := results.why_not("batch_time"):
        blocks.append(_not_assessed(why))
    else:
        if batch.get("why_not"):
            blocks.append(Words((sentence(f"The target is not reached: {why_not(batch['why_not'])}"),), look="bad"))
        head = heads("Choice", "Batch time", "Cycle time", "Conversion", "Productivity")
        rows = tuple(_option_row(option) for option in batch.get("options") or ())
        turnaround = duration(batch.get("turnaround_s"))
        note = f"Productivity is product per volume of vessel and hour of cycle; the cycle holds a turnaround of {turnaround}."
        blocks += [Table("Batch time: the choices side by side", head, rows, note)] if rows else []
        blocks += [Words(lines)] if (lines := trade(batch)) else []
        if batch.get("highest_conversion") is not None:
            blocks.append(Words((f"Highest conversion within the time marched: {conversion(batch['highest_conversion'])}.",)))
    responses = responses_table(results)
    return Section("batch", "The batch and its time", (*blocks, *pictures, *([responses] if responses else [])))


def _distance_row(distance: Mapping[str, Any], results: Results) -> tuple[Cell, ...]:
    name, up = distance["axis"], distance["direction"] == "up"
    scale, far = variable_scale(results, name, str(distance.get("unit") or "")), distance.get("distance")
    value = ((results.block("set_point").get("inputs") or {}).get(name) or {}).get("value")
    if far is None:
        return (Cell(f"{plain(name)}, {'up' if up else 'down'}"), figure("none within range"), figure(NONE), Cell(NONE))
    decimals = decimals_for(far * scale.factor, 3)
    edge = NONE if value is None else scale.text(value + (far if up else -far), decimals)
    limit = words(distance["limit"]) if distance.get("limit") else NONE
    return (Cell(f"{plain(name)}, {'up' if up else 'down'}"), figure(scale.change(abs(far), decimals)), figure(edge), Cell(limit))


def _window_tables(results: Results) -> list[Block]:
    window, blocks = results.block("window"), list[Block]()
    point = window.get("set_point") or {}
    if point.get("distances"):
        head = (*heads("Changed alone", "Distance to the edge", "Edge at"), Cell("Limit met there"))
        rows = tuple(_distance_row(distance, results) for distance in point["distances"])
        note = "One variable changed at a time; two at once may meet an edge sooner."
        blocks.append(Table("From the set-point to the edge, along each axis", head, rows, note))
    if window.get("limits_binding"):
        rows = tuple(row(words(entry["name"]), share(entry.get("share"))) for entry in window["limits_binding"])
        blocks.append(Table("What ends the window", heads("Limit", "Share of the edge"), rows))
    if point.get("margins"):
        rows = tuple(row(words(m["name"]), limit_scale(m).change(m.get("margin"))) for m in point["margins"])
        note = "A negative margin does not hold."
        blocks.append(Table("Margins at the set-point, as the window has them", heads("Limit", "Margin"), rows, note, folded=True))
    return blocks


def window(results: Results, pictures: list[Block]) -> Section:
    """Return the section on the operating window."""
    if why := results.why_not("window"):
        return Section("window", "Operating window", (_not_assessed(why), *pictures))
    found = results.block("window")
    inside = (found.get("set_point") or {}).get("holds")
    axes = " and ".join(plain(axis) for axis in found.get("axes") or ())
    fixed = "; ".join(f"{plain(name)} {variable_scale(results, name).text(value)}" for name, value in (found.get("at") or {}).items())
    lines = [f"Window of {axes}{f', at {fixed}' if fixed else ''}: every limit holds in {share(found.get('safe_share'))} of the range."]
    point = "The set-point's place on these axes" if held_elsewhere(results) else "The set-point"
    lines.append(f"{point} lies inside." if inside else f"{point} lies outside: at least one limit does not hold there.")
    if found.get("pieces") is not None:
        lines.append(pieces(found))
    lines += [resolved(found)] if found.get("resolution") and found.get("marches") else []
    if note := (found.get("set_point") or {}).get("reason"):
        lines.append(sentence(str(note)))
    return Section("window", "Operating window", (Words((" ".join(lines),), look="" if inside else "bad"), *_window_tables(results), *pictures))


def resolved(found: Mapping[str, Any]) -> str:
    """Return how finely the window was traced: the edge's place as a share of an axis, or the levels of a grid."""
    fine, marched = found["resolution"], several(found["marches"], "batch", "batches")
    return f"Found with {marched}, the edge to within {share(fine)} of each axis." if fine < 1 else f"Found with {marched}, {fine} levels an axis."


def _failure_rows(failure: Mapping[str, Any]) -> tuple[tuple[Cell, ...], ...]:
    least, least_td24 = bool(failure.get("tmr_ad_censored")), bool(failure.get("td24_censored"))
    none = f"no maximum rate within {duration(failure.get('horizon_s'))}, or too little left to decompose"
    horizon = none if least else f"failure at {duration(failure.get('tmr_ad_time_s'))}"
    closed = "c_p R T²/(q E_a), for comparison; many times too long where decomposition accelerates itself"
    vessel = "vessel's wall counted" if failure.get("wall") else "vessel's wall not counted"
    entries = (
        ("MTSR, highest", temperature(failure.get("mtsr_K")), f"failure at {duration(failure.get('mtsr_time_s'))}; {vessel}"),
        ("Accumulation", share(failure.get("accumulation")), "of the heat of the whole batch's complete synthesis"),
        ("TMRad, shortest", reach(failure.get("tmr_ad_s"), least), horizon),
        ("TMRad, closed form", reach(failure.get("tmr_ad_closed_form_s")), closed),
        ("T_D24", temperature(failure.get("td24_K"), least_td24), "end of the range searched" if least_td24 else "TMRad is 24 h from here"),
        ("MTT", temperature(failure.get("mtt_K")), "maximum temperature for technical reasons"),
        ("Adiabatic rise, synthesis", kelvins(failure.get("adiabatic_rise_synthesis_K")), ""),
        ("Adiabatic rise, decomposition", kelvins(failure.get("adiabatic_rise_decomposition_K")), ""),
    )  # fmt: skip
    return tuple((Cell(name), figure(value if value != NONE else "no value"), Cell(note if value != NONE else "")) for name, value, note in entries)


def _reach_row(entry: Mapping[str, Any]) -> tuple[Cell, ...]:
    after = "not reached within the horizon" if entry.get("after_s") is None else reach(entry["after_s"])
    return row(reach_name(entry["name"]), temperature(entry.get("temperature_K")), after)


def failure(results: Results, pictures: list[Block]) -> Section:
    """Return the section on the loss of cooling."""
    if why := results.why_not("failure"):
        return Section("failure", "Cooling failure", (_not_assessed(why), *pictures))
    found = results.block("failure")
    number_ = found.get("criticality_class")
    reason = sentence(str(found["class_reason"])) if found.get("class_reason") else ""
    said = "Criticality class: none given." if number_ is None else f"Criticality class {number(number_)}."
    blocks: list[Block] = [Words((f"{said} {reason}".strip(),))]
    head = (Cell("Quantity"), figure("Value"), Cell("Note"))
    note = f"{feeds(found)} Adiabatic from the failure on.".strip()
    blocks.append(Table("Were cooling lost at the worst moment", head, _failure_rows(found), note))
    path = found.get("path") or {}
    if path.get("reaches"):
        caption = f"Times to act, failure at {duration(path.get('failure_time_s'))}"
        rows = tuple(_reach_row(entry) for entry in path["reaches"])
        blocks.append(Table(caption, heads("Reached", "Temperature", "Time after the failure"), rows))
    return Section("failure", "Cooling failure", (*blocks, *pictures))
