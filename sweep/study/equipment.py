"""Sections [vessel] and [cooling]."""

from typing import Any

from sweep.study.reader import Reader

KINDS = ("adiabatic", "isothermal", "duty", "coolant", "jacket")
_COOLING = {
    "adiabatic": (),
    "isothermal": (),
    "duty": ("duty", "set_point"),
    "coolant": ("temperature",),
    "jacket": ("inlet", "flow", "hold_up", "start", "coolant", "set_point", "gain", "reset_time"),
}
_NEEDED = {"duty": ("duty", "set_point"), "coolant": ("temperature",), "jacket": ("inlet", "flow", "hold_up")}
_DIMENSIONS = {
    "cooling.duty": "power",
    "cooling.set_point": "temperature",
    "cooling.temperature": "temperature",
    "cooling.inlet": "temperature",
    "cooling.start": "temperature",
    "cooling.flow": "volume flow",
    "cooling.hold_up": "volume",
    "cooling.gain": "inverse temperature",
    "cooling.reset_time": "time",
}
_STRICT = ("cooling.hold_up", "cooling.reset_time")


def read_vessel(reader: Reader, table: dict[str, Any]) -> None:
    """Read the vessel: all of it may be left out where the question does not need it."""
    reader.only(table, "vessel", ("volume", "heat_capacity", "U", "area", "heat_loss", "stirrer_power"))
    single = {
        "volume": "volume",
        "heat_capacity": "heat capacity",
        "U": "heat transfer coefficient",
        "stirrer_power": "power",
    }
    for key, dimension in single.items():
        if key in table:
            reader.quantity(f"vessel.{key}", table[key], dimension)
            reader.at_least(f"vessel.{key}", 0.0, key == "volume", f"a vessel's {key} is not negative")
    area = table.get("area")
    if isinstance(area, dict):
        reader.only(area, "vessel.area", ("full", "at_volume", "bottom"))
        for key, dimension in (("full", "area"), ("at_volume", "volume"), ("bottom", "area")):
            if key in area:
                reader.quantity(f"vessel.area.{key}", area[key], dimension)
                reader.at_least(f"vessel.area.{key}", 0.0, key != "bottom", "an area, and the volume that wets it, are positive")
        for key in ("full", "at_volume"):
            reader.needed(f"vessel.area.{key}", "the wetted area runs from bottom to full at a volume")
        bottom, full = (reader.values.get(f"vessel.area.{key}", 0.0) for key in ("bottom", "full"))
        if bottom > full > 0.0:
            reader.fault("vessel.area.full", f"{full:g} m2", f"at least the bottom, {bottom:g} m2", "more liquid wets more wall")
    elif area is not None:
        reader.quantity("vessel.area", area, "area")
        reader.at_least("vessel.area", 0.0, False, "an area is not negative")
    if "heat_loss" in table:
        loss = reader.table(table, "heat_loss", "vessel.heat_loss")
        reader.only(loss, "vessel.heat_loss", ("UA", "ambient"))
        for key, dimension in (("UA", "heat loss"), ("ambient", "temperature")):
            if key in loss:
                reader.quantity(f"vessel.heat_loss.{key}", loss[key], dimension)
            reader.needed(f"vessel.heat_loss.{key}", "a heat loss is UA times a difference to ambient")
        reader.at_least("vessel.heat_loss.UA", 0.0, False, "heat is lost to what is colder")


def read_cooling(reader: Reader, table: dict[str, Any] | None, later_kinds: set[str], heats: bool) -> str:
    """Return the kind of cooling. Left out: isothermal where no heats are given; a fault where they are."""
    if table is None:
        if heats:
            reader.fault(
                "cooling",
                "nothing",
                '[cooling] with kind = "adiabatic" or another',
                "heats are given, so it matters how they go",
            )
        return "isothermal"
    if "kind" not in table:
        reader.fault("cooling.kind", "nothing", " or ".join(f'"{k}"' for k in KINDS), "a cooling has a kind")
        return "isothermal"
    kind = reader.choice(table, "cooling", "kind", KINDS, "isothermal")
    kinds = {kind, *later_kinds} & set(KINDS)
    allowed = {key for k in kinds for key in _COOLING[k]}
    for key in [key for key in table if f"cooling.{key}" in _DIMENSIONS or key == "coolant"]:
        if key not in allowed and table.get("kind") == kind:
            reader.fault(f"cooling.{key}", key, f"no such key with kind {kind!r}", f"a cooling of kind {kind} does not use it")
    reader.only(table, "cooling", ("kind", *(p.split(".")[1] for p in _DIMENSIONS), "coolant"))
    for path, dimension in _DIMENSIONS.items():
        key = path.split(".")[1]
        if key in table:
            reader.quantity(path, table[key], dimension)
            if dimension != "temperature":
                reader.at_least(path, 0.0, path in _STRICT, f"{path} is not negative")
    _coolant(reader, table, "jacket" in kinds)
    for k in sorted(kinds):
        for key in _NEEDED.get(k, ()):
            reader.needed(f"cooling.{key}", f"a cooling of kind {k} needs it")
    if kinds & {"coolant", "jacket"}:
        reader.needed("vessel.U", "heat flows to the jacket over U A")
        if "vessel.area.full" not in reader.values:
            reader.needed("vessel.area", "heat flows to the jacket over U A")
    if "gain" in table:
        reader.needed("cooling.set_point", "a controller with a gain holds a set-point")
    elif "jacket" in kinds and "duty" not in kinds and "set_point" in table:
        reader.warn(
            "cooling.set_point",
            table["set_point"],
            "a gain beside it",
            "without a gain the flow is what is written, whatever the set-point",
        )
    return kind


def _coolant(reader: Reader, table: dict[str, Any], jacket: bool) -> None:
    coolant = reader.table(table, "coolant", "cooling.coolant")
    reader.only(coolant, "cooling.coolant", ("density", "heat_capacity"))
    for key, dimension, default in (("density", "density", 998.0), ("heat_capacity", "specific heat capacity", 4180.0)):
        path = f"cooling.coolant.{key}"
        if key in coolant:
            reader.quantity(path, coolant[key], dimension)
        elif jacket:
            reader.keep(path, default, "kg/m^3" if key == "density" else "J/kg/K", dimension)
        reader.at_least(path, 0.0, True, "a coolant has a density and a heat capacity")
