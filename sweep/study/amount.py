"""A quantity's text to SI, where it may be given per mass or by mass or volume of its species."""

from collections.abc import Mapping

from sweep.base.units import UnitFault, kind_of, to_si


def converted(path: str, text: str, dimension: str, values: Mapping[str, float]) -> float:
    """Return a text in SI. A heat capacity per mass, and an amount as mass or volume, are turned with the species' own
    molar mass and density out of `values`; UnitFault where that cannot be done."""
    try:
        return to_si(text, dimension)
    except UnitFault as error:
        if dimension not in ("molar heat capacity", "amount"):
            raise
        first = error
    species = path.split(".")[1] if dimension == "molar heat capacity" else path.removesuffix(".equivalents").split(".")[-1]
    for other in ("specific heat capacity",) if dimension == "molar heat capacity" else ("mass", "volume"):
        try:
            value = to_si(text, other)
        except UnitFault:
            continue
        mass = values.get(f"species.{species}.molar_mass", 0.0)
        density = values.get(f"species.{species}.density", 0.0) if other == "volume" else 1.0
        if mass <= 0.0 or density <= 0.0:
            missing = "molar_mass" if mass <= 0.0 else "density"
            raise UnitFault(f"{kind_of(dimension)} in mol", f"a {other} needs species.{species}.{missing}")
        return value * mass if dimension == "molar heat capacity" else value * density / mass
    raise first
