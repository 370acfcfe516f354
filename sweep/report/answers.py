"""The answers, first on the page: what to set, how long to run, how near the limits are, what a failure does."""

from collections.abc import Mapping
from typing import Any

from sweep.report.blocks import Answers, Block, Cell, Section, Table, Words, figure, heads, row, verdict
from sweep.report.decided import optimum_lines, ranges_lines
from sweep.report.display import PERCENT, Scale, conversion, decimals_for, duration, reach, scale_for, share, temperature
from sweep.report.prepare_window import limit_label, variable_scale
from sweep.report.results import Results
from sweep.report.wording import input_name, listed, plain, sentence, several, split_unit, words

SENSES = {"at_most": "at most", "at_least": "at least"}


def limit_scale(limit: Mapping[str, Any]) -> Scale:
    """Return how a limit is shown: one unit for bound, value and margin, fitted to the bound."""
    return scale_for(str(limit.get("unit") or ""), str(limit["name"]), float(limit.get("bound") or limit.get("margin") or 0.0))


def _decimals(limit: Mapping[str, Any], scale: Scale) -> int:
    """Return decimals that show the margin to two digits, and bound and value alike."""
    bound, margin = scale.one(limit["bound"]), limit.get("margin")
    wanted = decimals_for(bound, 3)
    return min(max(wanted, decimals_for(margin * scale.factor, 2) if margin else 0), 7)


def lower_bound(results: Results, name: str) -> bool:
    """Return whether a response's number is only a lower bound, because what it looks for did not come within its range."""
    responses = results.block("set_point").get("responses") or {}
    own = {"tmr_ad": "tmr_ad_censored", "td24": "td24_censored"}.get(name)
    return responses.get(f"{name}_censored") is True or (own is not None and results.block("failure").get(own) is True)


def _limit_row(limit: Mapping[str, Any], results: Results) -> tuple[Cell, ...]:
    scale = limit_scale(limit)
    decimals = _decimals(limit, scale)
    value, margin = limit.get("value"), limit.get("margin")
    reason = str(limit.get("reason") or "").removeprefix(f"{limit['name']}: ")
    least = "at least " if lower_bound(results, limit["name"]) else ""
    shown = least + scale.text(value, decimals) if value is not None else f"no value{f': {reason}' if reason else ''}"
    bound = f"{SENSES[limit['sense']]} {scale.text(limit['bound'], decimals)}"
    spare = (least if margin is not None else "") + scale.change(margin, decimals)
    cells = (figure(bound), figure(shown) if value is not None else Cell(shown), figure(spare))
    return (Cell(words(limit_label(limit, results))), *cells, verdict(bool(limit["holds"])))


def limits_table(results: Results) -> Block:
    """Return every limit with bound, value at the set-point, margin and verdict."""
    limits = results.summary.get("limits") or ()
    if not limits:
        return Words(("The study sets no limits, so none was judged.",), look="warning")
    head = (*heads("Limit", "Must be", "At the set-point", "Margin"), Cell("Verdict"))
    rows = tuple(_limit_row(limit, results) for limit in limits)
    return Table("Every limit at the set-point. A positive margin holds; equality holds.", head, rows, "Also in analyses/limits.csv.")


def headline(results: Results) -> Words:
    """Return the verdict over all limits, in one sentence."""
    limits = results.summary.get("limits") or ()
    status, reason = results.block("set_point").get("status"), results.block("set_point").get("reason")
    if status not in (None, "done"):
        return Words((f"The set-point could not be judged: {status}{f', {reason}' if reason else ''}. No limit holds there.",), look="bad")
    if not limits:
        return Words(("No limits are set: the figures below stand without a verdict.",), look="warning")
    broken = [words(limit_label(limit, results)) for limit in limits if not limit["holds"]]
    if not broken:
        every = "The limit holds" if len(limits) == 1 else f"All {len(limits)} limits hold"
        together = results.block("risk").get("all_hold")
        surely = f" With what is uncertain drawn, all hold with a probability of {stated(together)}." if together else ""
        return Words((f"{every} at the set-point, on the kinetics given.{surely}",), look="good")
    do = "does" if len(broken) == 1 else "do"
    return Words((f"{len(broken)} of {several(len(limits), 'limit')} {do} not hold at the set-point: {listed(broken)}.",), look="bad")


def _set(results: Results) -> tuple[str, ...]:
    inputs = results.block("set_point").get("inputs") or {}
    lines = [f"{plain(name)}: {setting(results, name)}" for name in inputs]
    return tuple(lines) or ("as written in the study; it names no variables",)


def setting(results: Results, name: str) -> str:
    """Return a variable's value at the set-point in the study's own unit."""
    return variable_scale(results, name).text((results.block("set_point").get("inputs") or {})[name].get("value"))


def _run(results: Results) -> tuple[str, ...]:
    why, batch = results.why_not("batch_time"), results.block("batch_time")
    if why:
        return (f"not assessed: {why}",)
    lines = [f"batch time {duration(batch.get('batch_time_s'))}; with turnaround, a cycle of {duration(batch['cycle_time_s'])}"
             if batch.get("cycle_time_s") is not None else f"batch time {duration(batch.get('batch_time_s'))}"]  # fmt: skip
    target = batch.get("conversion_target")
    if batch.get("time_to_target_s") is not None:
        lines.append(f"target conversion of {conversion(target)} reached at {duration(batch['time_to_target_s'])}")
    elif batch.get("why_not"):
        lines.append(f"target conversion of {conversion(target)} not reached: {why_not(batch['why_not'])}")
    best = next((o for o in batch.get("options") or () if o["name"] == "most productive" and o.get("time_s") is not None), None)
    if best is not None:
        lines.append(f"most productive at {duration(best['time_s'])}, with a conversion of {conversion(best.get('conversion'))}")
    return tuple(lines)


def why_not(given: Mapping[str, Any]) -> str:
    """Return why a target is not reached: the cause, and the sentence where it says more than the point's own record."""
    cause, said = str(given.get("cause") or ""), str(given.get("sentence") or "")
    return cause or said if "time_to_target:" in said or not said else f"{cause}: {said}"


def _nearest(results: Results) -> tuple[str, ...]:
    near = results.summary.get("nearest_limit")
    if not near:
        return ("none can be named",)
    scale = limit_scale(near | {"bound": near.get("margin")})
    of = near.get("of") or "its spread over the plan's points"
    name = str(near.get("label") or near["name"]).removesuffix(" at most").removesuffix(" at least")
    margin = f"{words(name)} ({SENSES.get(near['sense'], near['sense'])}): margin {scale.change(near.get('margin'), digits=3)}"
    return margin, f"that is {share(near['share'])} of {of}" if near.get("share") is not None else "it has no value"


def held_elsewhere(results: Results) -> list[str]:
    """Return the variables that the window's slice holds at another value than the set-point does, each with that value."""
    inputs = results.block("set_point").get("inputs") or {}
    at = results.block("window").get("at") or {}
    moved = {name: value for name, value in at.items() if name in inputs and value != inputs[name].get("value")}
    return [f"{plain(name)} {variable_scale(results, name).text(value)}" for name, value in moved.items()]


def _window(results: Results) -> tuple[str, ...]:
    why, window = results.why_not("window"), results.block("window")
    if why:
        return (f"not assessed: {why}",)
    axes = listed([plain(axis) for axis in window.get("axes") or ()])
    inside = "inside" if (window.get("set_point") or {}).get("holds") else "outside"
    fixed = held_elsewhere(results)
    slice_ = f" at {listed(fixed)}, where the set-point does not lie" if fixed else ""
    point = "its place on these axes lies" if fixed else "the set-point lies"
    return (f"{point} {inside} the window of {axes}{slice_}", f"every limit holds in {share(window.get('safe_share'))} of the range of these two")


def _failure(results: Results) -> tuple[str, ...]:
    why, failure = results.why_not("failure"), results.block("failure")
    if why:
        return (f"not assessed: {why}",)
    lines = [f"MTSR {temperature(failure.get('mtsr_K'))}, failure at {duration(failure.get('mtsr_time_s'))}"]
    if failure.get("tmr_ad_s") is not None:
        lines.append(f"TMRad {reach(failure['tmr_ad_s'], bool(failure.get('tmr_ad_censored')))}")
    number = failure.get("criticality_class")
    reason = f": {failure['class_reason']}" if failure.get("class_reason") else ""
    lines.append(f"criticality class {number}" if number is not None else f"criticality class not given{reason}")
    return tuple(lines)


def probability(value: float) -> str:
    """Return a probability in per cent, with the digits that tell it from none and from all."""
    away = min(value, 1.0 - value)
    return share(value) if away >= 1e-3 or away == 0.0 else PERCENT.text(value, decimals_for(100.0 * away, 2))


def stated(counted: Mapping[str, Any]) -> str:
    """Return a counted probability; where no draw failed, or none held, only what bounds it: none of many is not never."""
    if counted["holding"] == counted["draws"]:
        return f"above {probability(counted['low'])}"
    return f"below {probability(counted['high'])}" if counted["holding"] == 0 else probability(counted["probability"])


def risk(results: Results) -> tuple[str, ...]:
    """Return the probability that all limits hold, and the time that nearly all batches need."""
    if why := results.why_not("risk"):
        return (f"not assessed: {why}",)
    found, lines = results.block("risk"), list[str]()
    together = found.get("all_hold")
    if together:
        interval = f"{probability(together['low'])} to {probability(together['high'])}"
        lines.append(f"all limits hold with a probability of {stated(together)} ({share(found['confidence'])} interval {interval})")
    worst = min(found.get("limits") or (), key=lambda limit: limit["probability"], default=None)
    if worst is not None and worst["probability"] < 1.0:
        lines.append(f"least sure: {words(worst['label'])}, {stated(worst)}")
    lines += batch_time_line(found)
    return tuple(lines) or ("no limits are set: percentiles only",)


def batch_time_line(found: Mapping[str, Any]) -> list[str]:
    """Return the batch time that most batches need, with its bound; nothing without a target."""
    time = found.get("batch_time")
    if not time:
        return []
    if time.get("time_s") is None:
        return [f"no batch time reaches the target in {share(time['coverage'])} of batches: {time.get('reason')}"]
    bound = f"at most {duration(time['bound_s'])} with {share(time['confidence'])} confidence" if time.get("bound_s") is not None else time["reason"]
    return [f"{share(time['coverage'])} of batches reach the target within {duration(time['time_s'])} ({bound})"]


def decides(results: Results) -> tuple[str, ...]:
    """Return the input whose better knowledge buys most, and what moves the least sure limit."""
    if why := results.why_not("sensitivity"):
        return (f"not assessed: {why}",)
    found, lines = results.block("sensitivity"), list[str]()
    halved = (found.get("halved_spread") or {}).get("inputs") or ()
    best = next((one for one in halved if one["rise_low"] > 0.0), None)
    if best is not None:
        gain = PERCENT.change(best["rise"], digits=2)
        lines.append(f"{input_name(best['input'])}: with half its spread the probability that all limits hold rises by {gain}")
    elif halved:
        lines.append("no input whose halved spread would raise the probability that all limits hold beyond the noise of the draws")
    for one in found.get("responses") or ():
        if one.get("shares") and len(lines) < 4:
            first = one["shares"][0]
            name = words(split_unit(one["response"])[0])
            lines.append(f"{name}: {input_name(first['input'])} has {share(first['total'])} of its variance")
    return tuple(lines) or ("nothing moves any of the responses",)


def section(results: Results) -> Section:
    """Return the page's first section."""
    asked = (
        ("What to set", _set(results)), ("Within which ranges", ranges_lines(results)), ("Best setting within the limits", optimum_lines(results)),
        ("How long to run", _run(results)), ("Nearest limit", _nearest(results)),
        ("Operating window", _window(results)), ("If cooling fails at the worst moment", _failure(results)),
        ("With what probability the limits hold", risk(results)),
        ("What decides", decides(results)),
    )  # fmt: skip
    blocks: list[Block] = [headline(results), Answers(asked), limits_table(results)]
    warnings = tuple(sentence(text) for text in results.summary.get("warnings") or ())
    if warnings:
        blocks.append(Words(("Warnings of this run:", *warnings), listed=True, look="warning"))
    return Section("answers", "Answers", tuple(blocks))


def responses_table(results: Results) -> Table | None:
    """Return every response at the set-point, folded."""
    rows = []
    for column, value in (results.block("set_point").get("responses") or {}).items():
        name, unit = split_unit(column)
        if isinstance(value, bool):
            rows.append(row(words(name), "yes" if value else "no"))
        elif isinstance(value, int | float):
            least = "at least " if lower_bound(results, name) else ""
            rows.append(row(words(name), least + scale_for(unit, name, float(value)).text(float(value))))
        else:
            rows.append((Cell(words(name)), Cell("no value" if value is None else str(value))))
    if not rows:
        return None
    return Table("Every response at the set-point", heads("Response", "Value"), tuple(rows), "Also in summary.json, SI.", folded=True)
