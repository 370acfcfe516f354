"""Structures, blocks and states for the kernel's tests: random within what a plant can have, and the awkward ones. All invented."""

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.program import Factor, Program, Structure, Term, compile_tables

NU = np.array([[-1.0, 0.0, 0.0], [-1.0, -1.0, 0.0], [1.0, -1.0, -1.0], [0.0, 1.0, 0.0], [0.0, 0.0, 1.0]])
PLAIN = (
    (Term(1.0, (Factor(0, 1, 0.0), Factor(1, 1, 0.0))),),
    (Term(1.0, (Factor(2, 1, 0.0), Factor(1, 2, 0.0))),),
    (Term(1.0, (Factor(2, 1, 0.0),)),),
)
REVERSIBLE = (
    (Term(1.0, (Factor(0, 1, 0.0), Factor(1, 1, 0.5))), Term(-1.0, (Factor(2, 1, 0.0),))),
    (Term(1.0, (Factor(2, 1, -0.3), Factor(1, 1, -1.0))),),
    (Term(1.0, (Factor(2, 2, 0.0), Factor(4, 1, 0.0))), Term(-1.0, (Factor(4, 3, 0.0),))),
)


def _structure(reactions: tuple, extents: bool, duty: bool, wide: bool) -> Structure:
    amounts = NU if extents else np.eye(5)
    sources = np.eye(3) if extents else NU
    return Structure(reactions, sources, amounts, -amounts[0], amounts[2], 5 if wide else 2, 4 if wide else 1, 6 if wide else 2, duty)


STRUCTURES = {
    "extents": _structure(PLAIN, True, False, False),
    "amounts": _structure(PLAIN, False, False, False),
    "reversible, fractional": _structure(REVERSIBLE, True, False, True),
    "reversible in amounts": _structure(REVERSIBLE, False, True, True),
    "ideal cooling": _structure(PLAIN, True, True, False),
}


def block_of(program: Program, rng: np.random.Generator, kind: str = "jacket") -> np.ndarray:
    """Return one segment's block: a vessel of some 2 m3 with a feed, cooled as `kind` says."""
    head, structure = program.integers, program.structure
    block = np.zeros(program.block)
    block[[at.T_START, at.T_END, at.VOLUME, at.VOLUME_RATE]] = 100.0, 4000.0, rng.uniform(1.5, 2.5), rng.uniform(0.0, 1e-4)
    block[[at.UA_CONSTANT, at.UA_PER_VOLUME]] = rng.uniform(300.0, 600.0), rng.uniform(300.0, 600.0)
    block[at.FREE] = kind != "held"
    block[[at.DUTY_ON, at.DUTY, at.SET_POINT, at.HOLD_RATE]] = kind == "duty", 6e4, rng.uniform(310.0, 340.0), 1.0
    if kind == "jacket":
        block[[at.JACKET_CAPACITY_INVERSE, at.JACKET_RENEWAL, at.INLET]] = 4e-7, 4e-3, 280.0
        block[[at.GAIN, at.RESET_INVERSE, at.OPENING]] = 0.08, 1.0 / 1200.0, 0.0
    block[[at.WALL, at.STIRRER, at.LOSS, at.AMBIENT]] = 2e6, 2500.0, 12.0, 293.15
    cp = np.zeros((5, 4))
    cp[:, 0] = rng.uniform(150.0, 300.0, 5)
    if structure.cp_terms == 4:
        cp[:, 1:] = rng.uniform(0.0, 1.0, (5, 3)) * [0.3, 1e-4, 1e-7]
    feed = rng.uniform(0.0, 0.6, 5)
    flow = feed @ cp
    block[at.FEED_CP : at.FEED_CP + 4] = flow
    block[at.FEED_HEAT] = sum(flow[k] * 293.15 ** (k + 1) / (k + 1) for k in range(4))
    block[head[at.BLOCK_FEED] : head[at.BLOCK_BASE]] = feed
    base = rng.uniform(100.0, 4000.0, 5) * (structure.amounts.shape[1] == 3)
    block[head[at.BLOCK_BASE] : head[at.BLOCK_RATE]] = base
    terms = np.zeros(((head[at.BLOCK_HEAT] - head[at.BLOCK_RATE]) // structure.rate_terms, 6))
    terms[:, 1] = -rng.uniform(5000.0, 14000.0, terms.shape[0])
    terms[:, 0] = rng.uniform(-16.0, -11.0, terms.shape[0]) - terms[:, 1] / 330.0
    terms[:, 2:] = rng.uniform(-1.0, 1.0, (terms.shape[0], 4)) * [0.5, 1e-3, 1e-6, 1e-9]
    block[head[at.BLOCK_RATE] : head[at.BLOCK_HEAT]] = terms[:, : structure.rate_terms].ravel()
    heats = np.zeros((3, 5))
    heats[:, 0] = rng.uniform(-2e5, 3e4, 3)
    heats[:, 1:] = rng.uniform(-1.0, 1.0, (3, 4)) * [20.0, 0.05, 1e-5, 1e-8]
    block[head[at.BLOCK_HEAT] : head[at.BLOCK_CP]] = heats[:, : structure.heat_terms].ravel()
    block[head[at.BLOCK_CP] : head[at.BLOCK_LENGTH]] = cp[:, : structure.cp_terms].ravel()
    return block


def state_of(program: Program, block: np.ndarray, rng: np.random.Generator, kind: str = "mixed") -> np.ndarray:
    """Return a state: "mixed" anywhere, "empty" no moles of some species, "negative" a species overshot, "tiny" traces, "hot"."""
    structure, head = program.structure, program.integers
    n = rng.uniform(10.0, 4000.0, 5)
    odd = rng.integers(5)
    n[odd] = {"mixed": n[odd], "empty": 0.0, "negative": -3e-3, "tiny": 1e-9, "hot": n[odd]}[kind]
    base = block[head[at.BLOCK_BASE] : head[at.BLOCK_RATE]]
    nz = structure.sources.shape[0]
    z = n if nz == 5 else np.linalg.lstsq(structure.amounts, n - base, rcond=None)[0]
    T = rng.uniform(700.0, 1400.0) if kind == "hot" else rng.uniform(280.0, 420.0)
    return np.array([*z, T, rng.uniform(278.0, 350.0), rng.uniform(-3e4, 3e4), rng.uniform(-1e8, 1e8)])


def program_of(name: str) -> Program:
    """Return the tables of one of the structures."""
    return compile_tables(STRUCTURES[name])
