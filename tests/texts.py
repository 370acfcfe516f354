"""Study texts that the tests build on; all invented."""

ISOTHERMAL = """
{species}
{reactions}
[recipe]
batch_time = "{batch_time}"
turnaround = "{turnaround}"
[recipe.charge]
temperature = "{temperature}"
volume = "1 m3"
concentration = {{ {charge} }}
[target]
species = "A"
conversion = {conversion}
product = "R"
[accuracy]
relative = {relative}
"""


def isothermal(
    reactions: str,
    species: str = "A R",
    charge: str = 'A = "2 mol/L"',
    batch_time: str = "60000 s",
    conversion: float = 0.99,
    relative: float = 1e-9,
    turnaround: str = "0 s",
    temperature: str = "25 degC",
) -> str:
    """Return an isothermal study without heats; each reaction line reads "equation | value unit | extra keys"."""
    tables = []
    for k, line in enumerate(reactions.strip().splitlines()):
        equation, value, *extra = (part.strip() for part in line.split("|"))
        tables.append("\n".join([f"[reactions.r{k}]", f'equation = "{equation}"', f'rate_constant = {{ value = "{value}" }}', *extra]))
    return ISOTHERMAL.format(
        species="\n".join(f"[species.{s}]" for s in species.split()),
        reactions="\n".join(tables),
        charge=charge,
        batch_time=batch_time,
        conversion=conversion,
        relative=relative,
        turnaround=turnaround,
        temperature=temperature,
    )


ADIABATIC = """
[species.A]
heat_capacity = "{cp}"
[species.R]
heat_capacity = "{cp}"
[reactions.r]
equation = "A -> R"
rate_constant = {{ value = "{k}", at = "{at}", activation_energy = "{energy}" }}
heat = {{ value = "{heat}", at = "25 degC" }}
{extra}
[vessel]
volume = "2 m3"
[cooling]
kind = "adiabatic"
[recipe]
batch_time = "{batch_time}"
[recipe.charge]
temperature = "{temperature}"
volume = "1 m3"
concentration = {{ A = "1 mol/L" }}
[target]
species = "A"
conversion = {conversion}
product = "R"
[accuracy]
relative = {relative}
"""
