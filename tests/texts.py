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

SMALL = """
[study]
title = "Small <b>study</b>"
[species.A]
molar_mass = "100 g/mol"
heat_capacity = "190 J/mol/K"
density = "0.9 kg/L"
[species.R]
molar_mass = "100 g/mol"
heat_capacity = "190 J/mol/K"
density = "0.9 kg/L"
[species.S]
molar_mass = "100 g/mol"
heat_capacity = "190 J/mol/K"
density = "0.9 kg/L"
[species.water]
role = "solvent"
molar_mass = "18 g/mol"
heat_capacity = "75 J/mol/K"
density = "1 kg/L"
[reactions.main]
equation = "A -> R"
rate_constant = { value = "2e-4 1/s", at = "50 degC", activation_energy = "70 kJ/mol" }
heat = { value = "-80 kJ/mol", at = "25 degC" }
source = "invented"
[reactions.bad]
equation = "R -> S"
purpose = "decomposition"
rate_constant = { value = "1e-5 1/s", at = "120 degC", activation_energy = "120 kJ/mol" }
heat = { value = "-150 kJ/mol", at = "25 degC" }
[vessel]
volume = "2 m3"
U = "300 W/m2/K"
area = "5 m2"
[cooling]
kind = "coolant"
temperature = "46 degC"
[recipe]
batch_time = "6 h"
turnaround = "2 h"
[recipe.charge]
temperature = "40 degC"
volume = "1 m3"
concentration = { A = "1.5 mol/L" }
balance = "water"
[target]
species = "A"
conversion = 0.9
product = "R"
[limits]
max_temperature = { at_most = "62 degC" }
mtsr = { at_most = "85 degC" }
[variables]
dose = { sets = "recipe.charge.concentration.A", from = "0.5 mol/L", to = "2.5 mol/L", levels = 20 }
start = { sets = "recipe.charge.temperature", from = "25 degC", to = "65 degC", levels = 30 }
[window]
axes = ["dose", "start"]
[batch_time]
longest = "24 h"
[failure]
mtt = "100 degC"
"""
