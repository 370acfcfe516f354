"""What `sweep run` prints of probability map, acceptable ranges and optimum."""

from typing import Any

from sweep.cli.tell_batch import difference, in_words
from sweep.cli.tell_chance import percent
from sweep.cli.terminal import Terminal


def tell_map(block: dict[str, Any], terminal: Terminal) -> None:
    """Print how much of the plane holds with which probability; nothing where the study does not ask."""
    if "not_assessed" in block:
        return
    terminal.heading("Probability over the window")
    shares = ", ".join(f"{percent(one['probability'])} in {percent(one['share'])}" for one in block["levels"])
    terminal.item(f"all limits hold with at least {shares} of the plane; nominally in {percent(block['nominal_share'])}")
    least = block["least_where_nominal_holds"]
    if least is not None:
        terminal.item(f"where they hold nominally the probability falls to {percent(least)}")
    terminal.item(f"{block['marches']:,} batches; {block['checked']:,} answers foreseen were checked, {block['wrong']:,} were wrong")


def _sure(block: dict[str, Any]) -> str:
    asked = block["assurance"]
    if asked is None:
        return "nominally"
    return f"with a probability of at least {percent(asked['probability'])} (confidence {percent(asked['confidence'])})"


def _place(inputs: dict[str, Any]) -> str:
    return ", ".join(f"{name} {one['written']}" for name, one in inputs.items())


def tell_ranges(block: dict[str, Any], terminal: Terminal) -> None:
    """Print the acceptable ranges and what was searched; nothing where the study does not ask."""
    if "not_assessed" in block:
        return
    terminal.heading("Acceptable ranges")
    if block["reason"] is not None:
        terminal.item(f"none: {block['reason']}")
        return
    for one in block["variables"]:
        ends, alone = one["acceptable"], one["alone"]
        by_itself = f"changed alone: {alone['low_written']} to {alone['high_written']}"
        terminal.item(f"{one['variable']}: {ends['low_written']} to {ends['high_written']} ({by_itself})")
    low, seen = block["smallest"], block["searched"]
    none = "no counter-example" if not seen["failing"] else f"{seen['failing']:,} counter-examples: do not use these ranges"
    terminal.item(f"in any combination every limit holds {_sure(block)}: {none} at {seen['all']:,} settings")
    margin = "no value" if low["margin"] is None else difference(low["margin"], low["unit"], None)
    terminal.item(f"smallest margin: {low['limit']} {margin}, at {_place(low['at'])}")
    if block["worst_setting"] is not None:
        worst = block["worst_setting"]
        terminal.item(f"there {percent(worst['probability'])} of {worst['draws']:,} fresh draws hold, at least {percent(worst['low'])}")
    if not block["alone_together"]["holds"]:
        bad = block["alone_together"]["smallest"]
        terminal.item(f"the ranges alone do not hold together: {bad['limit']} fails at {_place(bad['at'])}")


def tell_optimum(block: dict[str, Any], terminal: Terminal) -> None:
    """Print the best setting, or why there is none; nothing where the study does not ask."""
    if "not_assessed" in block:
        return
    terminal.heading("Best setting within the limits")
    aims = block["objectives"]
    if block["reason"] is not None:
        terminal.item(block["reason"])
        terminal.item(f"nearest: {_place(block['least_bad']['inputs'])}")
        return
    if block["front"] is not None:
        traded = f"{len(block['front'])} settings trade {aims[0]['name']} against {aims[1]['name']}"
        terminal.item(f"{traded}, every limit holding {_sure(block)}; the ends:")
    for one in [block["best"]] if block["front"] is None else [block["front"][0], block["front"][-1]]:
        values = ", ".join(f"{a['name']} {_aim(a, value)}" for a, value in zip(aims, one["objectives"], strict=True))
        terminal.item(f"{_place(one['inputs'])}: {values}")
        if one["verified"] is not None:
            seen = one["verified"]
            terminal.item(f"{percent(seen['probability'])} of {seen['draws']:,} fresh draws hold, at least {percent(seen['low'])}")
    here = ", ".join(_aim(a, value) for a, value in zip(aims, block["set_point"]["objectives"], strict=True))
    terminal.item(f"at the set-point: {here}" + ("" if block["set_point_acceptable"] else " (not every limit holds so)"))


def _aim(objective: dict[str, Any], value: float | None) -> str:
    """Return an objective's value; a margin as a difference, a cost in its currency."""
    if value is None:
        return "no value"
    if objective["name"].startswith("margin_"):
        return difference(value, objective["unit"], None)
    if objective["name"] == "cost":
        return f"{value:.4g} {objective['unit']}"
    unit = str(objective["unit"])
    return in_words(value, unit or "1", unit.replace("^3/s", "3/h") if unit.endswith("/m^3/s") else None)
