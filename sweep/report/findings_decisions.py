"""The sections on acceptable ranges, optimum and probability map: what to write down, what was searched, and how sure it is."""

from collections.abc import Mapping
from typing import Any

from sweep.report.answers import limit_scale
from sweep.report.blocks import Block, Cell, Section, Table, Words, figure, heads, row, verdict
from sweep.report.decided import aim, aim_name, optimum_lines, percent, setting, sure
from sweep.report.display import NONE, pretty, share
from sweep.report.prepare_window import variable_scale
from sweep.report.results import Results
from sweep.report.wording import plain, sentence, words

FRONT = 60  # settings of a front on the page


def _span(ends: Mapping[str, Any] | None) -> str:
    return NONE if ends is None else f"{pretty(ends['low_written'])} to {pretty(ends['high_written'])}"


def _ended(ends: Mapping[str, Any] | None) -> str:
    if ends is None:
        return NONE
    return " / ".join(words(end) if end else "range studied" for end in ends["ended_by"])


def ranges(results: Results, pictures: list[Block]) -> Section:
    """Return the section on acceptable ranges."""
    title = "Acceptable ranges"
    if why := results.why_not("ranges"):
        return Section("ranges", title, (Words((f"Not assessed: {sentence(why)}",), look="warning"),))
    found = results.block("ranges")
    if found.get("reason"):
        return Section("ranges", title, (Words((f"No ranges: {sentence(found['reason'])}",), look="bad"), Words((found["words"],))))
    rows = tuple(
        (Cell(plain(one["variable"])), figure(pretty(one["set_point_written"])), figure(_span(one["normal"])), figure(_span(one["acceptable"])),
         Cell(_ended(one["acceptable"])), figure(_span(one["alone"])), figure(_span(one["studied"])))
        for one in found["variables"]
    )  # fmt: skip
    head = (*heads("Variable", "Set-point", "Normal operating", "Proven acceptable"), Cell("Ended below / above by"), figure("Changed alone"),
            figure("Studied"))  # fmt: skip
    note = "Acceptable ends are rounded inwards. Also in analyses/ranges.csv; the box's corners with every margin in ranges_corners.csv."
    bad = bool(found["searched"]["failing"])
    blocks: list[Block] = [
        Words((f"Within the acceptable ranges, in any combination, every limit holds {sure(found)}.",), look="bad" if bad else "good"),
        Table("Ranges, kept apart", head, rows, note), Words((_searched(found),)), *_alone(found), *pictures, Words((found["words"],)),
        Words(tuple(map(sentence, found["cautions"])), listed=True, look="warning"),
    ]  # fmt: skip
    return Section("ranges", title, tuple(blocks))


def _margin(low: Mapping[str, Any]) -> str:
    scale = limit_scale({"name": low["name"], "unit": low["unit"], "margin": low["margin"]})
    return "no value" if low["margin"] is None else scale.change(low["margin"], None, 3)


def _searched(found: Mapping[str, Any]) -> str:
    """Return what the hunt looked at, and the smallest margin that it met."""
    seen, low = found["searched"], found["smallest"]
    what = f"{seen['corners']:,} corners, {seen['faces']:,} points on faces, {seen['inside']:,} inside, {seen['downhill']:,} on the way downhill"
    none = "no counter-example" if not seen["failing"] else f"{seen['failing']:,} counter-examples"
    chance = "" if low["share"] is None else f" ({percent(low['share'])} of the draws hold there)"
    return (
        f"Searched for a setting within the ranges that fails: {what}; {none}. Smallest margin met: {_margin(low)} of {words(low['limit'])}{chance}, "
        f"at {setting(low['at'])}. The box is {share(found['share_of_space'])} of the space studied."
    )


def _alone(found: Mapping[str, Any]) -> list[Block]:
    """Return the warning where the ranges of each variable alone do not hold together."""
    apart = found["alone_together"]
    low = apart["smallest"]
    if apart["holds"]:
        return [Words((f"The ranges of each variable changed alone hold together too, at the {apart['looked_at']:,} settings looked at.",))]
    said = f"Do not use the ranges changed alone together: at {setting(low['at'])} the margin of {words(low['limit'])} is {_margin(low)}."
    return [Words((said,), look="bad")]


def optimum(results: Results, pictures: list[Block]) -> Section:
    """Return the section on the optimum."""
    title = "Best setting within the limits"
    if why := results.why_not("optimum"):
        return Section("optimum", title, (Words((f"Not assessed: {sentence(why)}",), look="warning"),))
    found = results.block("optimum")
    aims = found["objectives"]
    asked = " and ".join(f"{'least' if one['sense'] == 'minimise' else 'largest'} {aim_name(one)}" for one in aims)
    look = "bad" if found["reason"] else "good"
    blocks: list[Block] = [Words((f"Asked for: {asked}, with every limit holding {sure(found)}.", *map(sentence, optimum_lines(results))), look=look)]
    shown = found["least_bad"] if found["reason"] else found["best"]
    if shown is not None:
        rows = tuple(
            (Cell(words(one["label"])), figure(limit_scale(one).change(one["margin"], None, 3)), verdict(one["holds"])) for one in shown["limits"]
        )
        what = "Margins at the setting that comes nearest" if found["reason"] else "Margins at the best setting"
        asked_of = found["assurance"]
        note = "" if not asked_of else f"Such as {asked_of['need']:,} of {asked_of['draws']:,} draws reach, each limit by itself."
        blocks.append(Table(what, (*heads("Limit", "Margin"), Cell("Verdict")), rows, note))
    if found["front"]:
        blocks.append(_front(found))
    searched = found["search"]
    by = f", then {searched['polished_by']}" if searched["polished_by"] else ""
    blocks.append(Words((
        f"Sought by {searched['method']}{by}: {searched['settings']:,} settings, {searched['marches']:,} batches. Settings are round numbers near "
        "what was found, and hold as they stand. Also in analyses/optimum_search.csv.",
    )))  # fmt: skip
    blocks += [*pictures, Words(tuple(map(sentence, found["cautions"])), listed=True, look="warning")]
    return Section("optimum", title, tuple(blocks))


def _front(found: Mapping[str, Any]) -> Table:
    aims, front = found["objectives"], found["front"]
    names = [plain(name) for name in front[0]["inputs"]]
    rows = []
    for one in front[:FRONT]:
        checked = NONE if not one["verified"] else f"at least {percent(one['verified']['low'])}"
        values = [aim(objective, value) for objective, value in zip(aims, one["objectives"], strict=True)]
        rows.append(row(values[0], *values[1:], *(pretty(place["written"]) for place in one["inputs"].values()), checked))
    note = f"{len(front)} settings of which none betters another in both; all in analyses/optimum_front.csv."
    head = heads(aim_name(aims[0]), *(aim_name(one) for one in aims[1:]), *names, "Probability, fresh draws")
    return Table("The trade between the two", head, tuple(rows), note)


def chance_map(results: Results, pictures: list[Block]) -> Section:
    """Return the section on the probability over the window's axes."""
    title = "Probability over the window"
    if why := results.why_not("probability_map"):
        return Section("probability-map", title, (Words((f"Not assessed: {sentence(why)}",), look="warning"),))
    found = results.block("probability_map")
    rows = tuple(row(percent(one["probability"]), share(one["share"])) for one in found["levels"])
    place = ", ".join(f"{plain(name)} {variable_scale(results, name).text(one['value'])}" for name, one in found["best"]["at"].items())
    lines = [
        f"Nominally every limit holds in {share(found['nominal_share'])} of the plane; {_inside(found)}",
        f"The largest probability mapped is {percent(found['best']['probability'])}, at {place}.",
        f"{found['draws']:,} draws at {(found['steps'] + 1) ** 2:,} nodes took {found['marches']:,} batches in place of {found['brute_force']:,}: "
        f"the others were foreseen from their neighbours; {found['checked']:,} of those were checked, and {found['wrong']:,} were wrong.",
    ]
    table = Table("How much of the plane holds with which probability", heads("All limits hold with at least", "Share of the plane"), rows,
                  "Also in analyses/probability_map.csv, with an interval at each node.")  # fmt: skip
    return Section("probability-map", title, (Words(tuple(lines)), table, *pictures, Words(tuple(map(sentence, found["cautions"])), listed=True)))


def _inside(found: Mapping[str, Any]) -> str:
    least = found["least_where_nominal_holds"]
    return "no node holds nominally." if least is None else f"within that the probability falls to {percent(least)}."


