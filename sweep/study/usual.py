"""The usual deviations of a recipe, as scenarios: written from its cooling, its charge and its feeds, with sizes that a study may change."""

from typing import Any

from sweep.study.model import Reaction, Species
from sweep.study.reader import Reader

Table = dict[str, Any]
SIZES: Table = {
    "at": None,  # when failures begin: a time, "worst", or a feed's edge; default the end of the first feed, the start without one
    "outage": "30 min", "warmer_coolant": "15 K", "wrong_temperature": "10 K", "overcharge": 1.1, "undercharge": 0.9,
    "faster": 2.0, "wide_open": 10.0, "overrun": 1.2, "unstirred_U": 0.3, "unstirred_rate": 0.1, "late": "30 min", "late_rate": 0.02,
    "insulation": 5.0,
}  # fmt: skip


def read_sizes(reader: Reader, table: Table) -> Table | None:
    """Return the sizes of the usual deviations; None where they are not asked for."""
    reader.only(table, "deviations", ("usual", *SIZES))
    asked = table.get("usual", False)
    if not isinstance(asked, bool):
        reader.fault("deviations.usual", repr(asked), "true or false", "the usual deviations are written, or they are not")
        return None
    if not asked:
        if table:
            reader.warn("deviations", "sizes", "usual = true", "without it they are the sizes of nothing")
        return None
    return {**SIZES, **{key: value for key, value in table.items() if key in SIZES}}


def tables(sizes: Table, species: tuple[Species, ...], reactions: tuple[Reaction, ...], kind: str, written: Table) -> dict[str, Table]:
    """Return the usual scenarios as they would stand in the file; written: the study's document."""
    recipe = written.get("recipe", {}) if isinstance(written.get("recipe"), dict) else {}
    feeds = [name for name, feed in recipe.get("feeds", {}).items() if isinstance(feed, dict)] if isinstance(recipe.get("feeds"), dict) else []
    at = sizes["at"] if sizes["at"] is not None else ({"end_of": feeds[0]} if feeds else "0 s")
    if at == "worst":
        moment: Table = {"at": "worst", "worst_for": "max_temperature"}
    else:
        moment = {"at": at}
    synthesis = [f"reactions.{r.name}.rate_constant.value" for r in reactions if r.purpose == "synthesis"]
    charged = recipe.get("charge", {}) if isinstance(recipe.get("charge"), dict) else {}
    return {
        **_cooling(sizes, kind, moment, written), **_stirring(sizes, kind, moment, synthesis, written), **_feeds(sizes, feeds, recipe),
        **_charge(sizes, charged, species), **_late(sizes, synthesis, feeds),
    }  # fmt: skip


def _cooling(sizes: Table, kind: str, moment: Table, written: Table) -> dict[str, Table]:
    """Return what befalls the cooling: lost for good and for a while, drained, warm."""
    found: dict[str, Table] = {}
    if kind == "adiabatic":
        return found
    lost: Table = {"cooling.flow": "0 m3/h"} if kind == "jacket" else {"cooling.kind": "adiabatic"}
    back = dict.fromkeys(lost, "restored")
    found["coolant_lost"] = {**moment, "events": [{"time": "0 s", "set": lost}]}
    found["coolant_lost_for_a_while"] = {**moment, "events": [{"time": "0 s", "set": lost}, {"time": sizes["outage"], "set": back}]}
    if kind == "jacket":
        found["jacket_drained"] = {**moment, "events": [{"time": "0 s", "set": {"cooling.kind": "adiabatic"}}]}
    path = {"jacket": "cooling.inlet", "coolant": "cooling.temperature"}.get(kind)
    if path is not None:
        found["coolant_warm"] = {"set": {path: {"plus": sizes["warmer_coolant"]}}}
    vessel = written.get("vessel", {})
    if isinstance(vessel, dict) and isinstance(vessel.get("heat_loss"), dict):
        found["insulation_lost"] = {**moment, "events": [{"time": "0 s", "set": {"vessel.heat_loss.UA": {"times": sizes["insulation"]}}}]}
    return found


def _stirring(sizes: Table, kind: str, moment: Table, synthesis: list[str], written: Table) -> dict[str, Table]:
    """Return the stirrer stopped, and started again on what has gathered: heat transfer and reactions slow down meanwhile."""
    vessel = written.get("vessel", {}) if isinstance(written.get("vessel"), dict) else {}
    stopped: Table = {path: {"times": sizes["unstirred_rate"]} for path in synthesis}
    if kind in ("jacket", "coolant") and "U" in vessel:
        stopped["vessel.U"] = {"times": sizes["unstirred_U"]}
    if "stirrer_power" in vessel:
        stopped["vessel.stirrer_power"] = "0 W"
    if not stopped:
        return {}
    back = dict.fromkeys(stopped, "restored")
    return {"stirrer_stopped": {**moment, "events": [{"time": "0 s", "set": stopped}, {"time": sizes["outage"], "set": back}]}}


def _feeds(sizes: Table, feeds: list[str], recipe: Table) -> dict[str, Table]:
    """Return, of each feed: too fast, wide open, does not stop, does not come."""
    found: dict[str, Table] = {}
    for name in feeds:
        path = f"recipe.feeds.{name}"
        amount = recipe["feeds"][name].get("amount")
        found[f"{name}_too_fast"] = {"set": {f"{path}.rate_factor": {"times": sizes["faster"]}}}
        found[f"{name}_wide_open"] = {"set": {f"{path}.rate_factor": {"times": sizes["wide_open"]}}}
        more = {f"{path}.amount.{s}": {"times": sizes["overrun"]} for s in amount} if isinstance(amount, dict) else {}
        found[f"{name}_does_not_stop"] = {"set": {**more, f"{path}.duration": {"times": sizes["overrun"]}}}
        found[f"no_{name}"] = {"set": {f"{path}.rate_factor": 0}}
    return found


def _charge(sizes: Table, charge: Table, species: tuple[Species, ...]) -> dict[str, Table]:
    """Return a charge that is too hot, too cold, and too much or too little of each of its reactants."""
    path, found = "recipe.charge", dict[str, Table]()
    if "temperature" in charge:
        for name, sign in (("hotter", ""), ("colder", "-")):
            found[f"charge_{name}"] = {"set": {f"{path}.temperature": {"plus": f"{sign}{sizes['wrong_temperature']}"}}}
    solvents = {s.name for s in species if s.role is not None}
    for key in ("concentration", "amount"):
        part = charge.get(key, {})
        for name in part if isinstance(part, dict) else ():
            if name not in solvents:
                found[f"overcharge_{name}"] = {"set": {f"{path}.{key}.{name}": {"times": sizes["overcharge"]}}}
                found[f"undercharge_{name}"] = {"set": {f"{path}.{key}.{name}": {"times": sizes["undercharge"]}}}
    return found


def _late(sizes: Table, synthesis: list[str], feeds: list[str]) -> dict[str, Table]:
    """Return a synthesis that sets in late: slow at first, then as ever."""
    if not synthesis:
        return {}
    slow = {path: {"times": sizes["late_rate"]} for path in synthesis}
    back = dict.fromkeys(slow, "restored")
    moment: Table = {"at": {"start_of": feeds[0]}} if feeds else {"at": "0 s"}
    return {"late_initiation": {**moment, "events": [{"time": "0 s", "set": slow}, {"time": sizes["late"], "set": back}]}}
