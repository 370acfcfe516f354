"""Published stiff problems written as studies: every coefficient is a rate constant or a stoichiometric number.

Mazzia and Magherini, Test Set for IVP Solvers, rel. 2.4 (2008), HIRES, OREGO and ROBER; digits recomputed in 113 bits.
"""

import numpy as np

from sweep.plant import profile
from sweep.study import read_text

STUDY = """
{species}
{reactions}
[recipe]
batch_time = "{end!r} s"
[recipe.charge]
temperature = "25 degC"
volume = "1 m3"
amount = {{ {charge} }}
[accuracy]
relative = 1e-9
"""


def study(species: str, lines: str, charge: dict[str, float], end: float) -> str:
    """Return a study in 1 m3; a line reads "equation | rate constant and unit [| orders]"."""
    reactions = []
    for k, line in enumerate(lines.strip().splitlines()):
        equation, value, *orders = (part.strip() for part in line.split("|"))
        reactions += [f"[reactions.r{k}]", f'equation = "{equation}"', f'rate_constant = {{ value = "{value}" }}']
        reactions += [f"orders = {{ {part} }}" for part in orders]
    return STUDY.format(
        species="\n".join(f"[species.{s}]" for s in species.split()),
        reactions="\n".join(reactions),
        charge=", ".join(f'{s} = "{n!r} mol"' for s, n in charge.items()),
        end=end,
    )


HIRES = """
y1 -> y2      | 1.71 1/s
y2 -> y1      | 0.43 1/s
y2 -> y4      | 8.32 1/s
y3 -> y1      | 8.32 1/s
y3 -> y4      | 1.71 1/s
y4 -> y3      | 0.43 1/s
y4 -> y6      | 0.69 1/s
y5 -> y3      | 0.035 1/s
y5 -> y6      | 1.71 1/s
y6 -> y5      | 0.43 1/s
y6 + y8 -> y7 | 280 m3/mol/s
y7 -> y6 + y8 | 0.69 1/s
y7 -> y5 + y8 | 0.43 1/s
y7 -> y8      | 0.69 1/s
-> y1         | 0.0007 mol/m3/s
"""


def test_hires():
    text = study("y1 y2 y3 y4 y5 y6 y7 y8", HIRES, {"y1": 1.0, "y8": 0.0057}, 500.0)
    lines = profile(read_text(text), {}, [321.8122, 421.8122])
    expected = [
        [7.371312573325667807e-4, 1.442485726316184658e-4, 5.888729740967575007e-5, 1.175651343283149146e-3,
         2.386356198831330469e-3, 6.238968252742795787e-3, 2.849998395185768658e-3, 2.850001604814231342e-3],
        [6.703055035818635051e-4, 1.309968469863468930e-4, 4.686223159773258144e-5, 1.044668020551704804e-3,
         5.948838309514850516e-4, 1.399628833942774029e-3, 1.014492757718479681e-3, 4.685507242281520319e-3],
    ]  # fmt: skip
    found = lines[[f"n_y{i}_mol" for i in range(1, 9)]].to_numpy()
    np.testing.assert_allclose(found, expected, rtol=1e-6)
    np.testing.assert_allclose(found[:, 6] + found[:, 7], 0.0057, rtol=1e-10)  # y7 + y8 is conserved


OREGO = f"""
-> y1             | 77.27 1/s | y2 = 1
y1 -> 2 y1        | 77.27 1/s
2 y1 -> y1        | {77.27 * 8.375e-6!r} m3/mol/s
77.27 y1 + {1.0 / 77.27!r} y2 -> | 1 m3/mol/s | y1 = 1, y2 = 1
-> y2             | {1.0 / 77.27!r} 1/s | y3 = 1
y2 ->             | {1.0 / 77.27!r} 1/s
-> y3             | 0.161 1/s | y1 = 1
y3 ->             | 0.161 1/s
"""


def test_orego():
    text = study("y1 y2 y3", OREGO, {"y1": 1.0, "y2": 2.0, "y3": 3.0}, 360.0)
    lines = profile(read_text(text), {}, [30.0, 300.0, 330.0, 360.0])
    expected = [
        [1.000661467180496718, 1.512778937348250419e3, 1.035854312767227567e4],
        [1.779724751937019509, 2.281852385542401831, 1.613754023671725033],
        [1.000889326903503317, 1.125438585746599656e3, 1.641049483777162325e4],
        [1.000814870318522716, 1.228178521549887984e3, 1.320554942846508288e2],
    ]
    np.testing.assert_allclose(lines[["n_y1_mol", "n_y2_mol", "n_y3_mol"]].to_numpy(), expected, rtol=1e-5)


ROBER = """
A -> B         | 0.04 1/s
2 B -> B + C   | 3e7 m3/mol/s
B + C -> A + C | 1e4 m3/mol/s
"""


def test_rober_to_the_end():
    lines = profile(read_text(study("A B C", ROBER, {"A": 1.0}, 1e11)), {}, [0.4, 4e3, 4e5, 1e11])
    expected = [
        [9.851721138609898624e-1, 3.386395378974904136e-5, 1.479402218522038854e-2],
        [1.832022577767093113e-1, 8.942371252775909260e-7, 8.167968479861654111e-1],
        [4.938274520979815560e-3, 1.984994087954375437e-8, 9.950617056290793049e-1],
        [2.083340149701294231e-8, 8.333360770334783401e-14, 9.999999791665151694e-1],
    ]
    found = lines[["n_A_mol", "n_B_mol", "n_C_mol"]].to_numpy()
    np.testing.assert_allclose(found[:3], expected[:3], rtol=1e-6)
    np.testing.assert_allclose(found[3], expected[3], rtol=1e-5)  # A is 2e-8 of what was charged
    np.testing.assert_allclose(found.sum(axis=1), 1.0, rtol=1e-12)
