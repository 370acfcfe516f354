"""What `sweep run` prints of risk and sensitivity."""

from typing import Any

from sweep.cli.tell_batch import in_words
from sweep.cli.terminal import Terminal


def percent(value: float) -> str:
    """Return a probability in per cent, with the digits that tell it from none and from all."""
    away = min(value, 1.0 - value)
    return f"{100.0 * value:.3g} %" if away >= 1e-3 or away == 0.0 else f"{100.0 * value:.4f} %"


def tell_risk(block: dict[str, Any], terminal: Terminal) -> None:
    """Print with which probability the limits hold; nothing where the study does not ask."""
    if "not_assessed" in block:
        return
    terminal.heading("Risk at the set-point")
    terminal.item(f"{block['draws']:,} draws of {', '.join(block['inputs'])}: {block['failed']} failed, {block['runaway']} ran away")
    for line in block["limits"]:
        drivers = ", ".join(one["input"] for one in line["drivers"][:2])
        terminal.item(f"{line['label']}: {_share(line)}" + (f"; driven by {drivers}" if drivers else ""))
    if block["all_hold"] is not None:
        terminal.item(f"all limits together: {_share(block['all_hold'])}")
    for one in block["rare"]:
        what = "any limit" if one["label"] == "all limits" else one["label"]
        if one["probability"] is None:
            terminal.item(f"failing of {what}: below {one['high']:.2g}; {one['reason']}")
        else:
            terminal.item(f"failing of {what}: {one['probability']:.2g}, {one['low']:.2g} to {one['high']:.2g} (subset simulation)")
    time = block["batch_time"]
    if time is not None:
        terminal.item(_batch_time(time))


def _batch_time(time: dict[str, Any]) -> str:
    if time["time_s"] is None:
        return f"no batch time reaches the target in {percent(time['coverage'])} of batches: {time['reason']}"
    sure = time["reason"]
    if time["bound_s"] is not None:
        sure = f"at most {in_words(time['bound_s'], 's')} with {percent(time['confidence'])} confidence"
    return f"{percent(time['coverage'])} of batches reach the target within {in_words(time['time_s'], 's')} ({sure})"


def _share(line: dict[str, Any]) -> str:
    """Return a share with its interval; where no draw failed, what failing is bounded by."""
    if line["holding"] == line["draws"]:
        return f"holds in all {line['draws']:,} draws; the probability of failing is at most {percent(1.0 - line['low'])}"
    return f"{percent(line['probability'])} ({percent(line['low'])} to {percent(line['high'])})"


def tell_sensitivity(block: dict[str, Any], terminal: Terminal) -> None:
    """Print which inputs decide; nothing where the study does not ask."""
    if "not_assessed" in block:
        return
    terminal.heading("Which inputs decide")
    for one in block["responses"]:
        if one["undefined"] is not None:
            terminal.item(f"{one['response']}: undefined, {one['undefined']}")
        else:
            ranked = ", ".join(f"{row['input']} {100.0 * row['total']:.3g} %" for row in one["shares"][:3])
            terminal.item(f"{one['response']}, shares of its variance: {ranked}")
    spread = block["halved_spread"]
    if "not_assessed" in spread:
        terminal.item(f"which input should be known better: not assessed, {spread['not_assessed']}")
        return
    terminal.item(f"all limits together, with one input's spread halved (now {_share(spread)}):")
    for row in spread["inputs"]:
        rise = f"{100.0 * row['rise']:+.2g} points ({100.0 * row['rise_low']:+.2g} to {100.0 * row['rise_high']:+.2g})"
        terminal.item(f"  {row['input']}: {percent(row['probability'])}, {rise}")
