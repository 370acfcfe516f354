"""How the march's cost grows: with points from 10^3 to 10^5, and with species and reactions: python -m tests.benchmarks.growth

Points: the benchmark's fed-batch. Size: a reagent is fed to a chain that takes it up link by link, A_i + B -> A_(i+1); beyond the chain's
length reactions run between further pairs, which makes cycles, so that amounts are the states as in a study (DEVELOPERS.md, Equations).
"""

import time

import numpy as np

from sweep.kernel import layout as at
from sweep.kernel.engine import march
from sweep.kernel.program import Factor, Program, Structure, Term, compile_tables
from tests.benchmarks import measure

SIZES = ((3, 1), (5, 3), (8, 6), (12, 8), (12, 10), (20, 8), (20, 18), (20, 25))
END, FED = 14400.0, 7200.0


def chain(species: int, reactions: int) -> Program:
    """Return the tables of a chain: species 0 is the reagent, reaction j turns A_i into A_(i+1)."""
    links, nu = species - 2, np.zeros((species, reactions))
    terms = []
    for j in range(reactions):
        first = 1 + j % links
        last = 1 + (first + j // links) % (species - 1)
        nu[[0, first, last], j] = -1.0, -1.0, 1.0
        terms.append((Term(1.0, (Factor(0, 1, 0.0), Factor(first, 1, 0.0))),))
    extents = np.linalg.matrix_rank(nu) == reactions
    amounts, sources = (nu, np.eye(reactions)) if extents else (np.eye(species), nu)
    return compile_tables(Structure(tuple(terms), sources, amounts, -amounts[1], amounts[2], 2, 1, 2, False))


def points(program: Program, count: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return blocks, starts and constants of batches that differ in temperature, charge and rates (seed 3)."""
    rng, head, structure = np.random.default_rng(3), program.integers, program.structure
    species, reactions, nz = structure.amounts.shape[0], len(structure.reactions), structure.sources.shape[0]
    blocks, charge, T = np.zeros((count, 2, program.block)), rng.uniform(3000.0, 5000.0, count), rng.uniform(310.0, 340.0, count)
    blocks[:, :, at.T_END], blocks[:, 1, at.T_START] = (FED, END), FED
    rate = charge * reactions / (species - 1) / FED
    blocks[:, 0, at.VOLUME], blocks[:, 0, at.VOLUME_RATE], blocks[:, 1, at.VOLUME] = 2.0, 5e-5, 2.0 + 5e-5 * FED
    values = {
        at.UA_CONSTANT: 450.0, at.UA_PER_VOLUME: 400.0, at.FREE: 1.0, at.JACKET_CAPACITY_INVERSE: 4e-7, at.JACKET_RENEWAL: 4e-3, at.INLET: 280.0,
        at.GAIN: 0.05, at.RESET_INVERSE: 1.0 / 3600.0, at.WALL: 5e6, at.STIRRER: 2500.0, at.LOSS: 10.0, at.AMBIENT: 293.15,
    }  # fmt: skip
    for name, value in values.items():
        blocks[:, :, name] = value
    blocks[:, :, at.SET_POINT] = T[:, None]
    blocks[:, 0, at.FEED_CP], blocks[:, 0, at.FEED_HEAT] = rate * 180.0, rate * 180.0 * 293.15
    blocks[:, 0, head[at.BLOCK_FEED]] = rate
    base = blocks[:, :, head[at.BLOCK_BASE] : head[at.BLOCK_RATE]]
    starts = np.zeros((count, structure.rows))
    starts[:, nz : nz + 2] = T[:, None]
    if nz == species:  # amounts are the states: the feed is a source, and the kernel adds it as base and feed to states that leave it out
        starts[:, 1] = charge
    else:
        base[:, :, 1] = charge[:, None]
    base[:, 1, 0] = rate * FED
    terms = blocks[:, :, head[at.BLOCK_RATE] : head[at.BLOCK_HEAT]].reshape(count, 2, reactions, 2)
    energies = rng.uniform(5e3, 9e3, (count, 1, reactions))
    terms[..., 1], terms[..., 0] = -energies, np.log(3e-7) + energies / 323.15
    blocks[:, :, head[at.BLOCK_HEAT] : head[at.BLOCK_CP]].reshape(count, 2, reactions, 2)[..., 0] = -8e4
    blocks[:, :, head[at.BLOCK_CP] : head[at.BLOCK_LENGTH]] = 200.0
    constants = np.tile([END, FED, 0.0, 3600.0, 0.0, 1500.0, 1e-6, END], (count, 1))
    constants[:, at.TARGET_AMOUNT], constants[:, at.ATOL_AMOUNT] = 0.9 * charge, 1e-3 * charge
    return blocks, starts, constants


def seconds(program: Program, blocks: np.ndarray, starts: np.ndarray, constants: np.ndarray) -> tuple[float, float]:
    """Return the least of three times of marching all points in chunks, and the trials a point."""
    least, trials = np.inf, 0.0
    for _ in range(3):
        begun, trials = time.thread_time(), 0.0
        for k in range(0, len(blocks), measure.CHUNK):
            part = slice(k, k + measure.CHUNK)
            out = march(program, blocks[part], starts[part], constants[part]).out
            trials += out[:, at.OUT_STEPS].sum() + out[:, at.OUT_REJECTED].sum()
            assert (out[:, at.OUT_STATUS] == 0).all()
        least = min(least, time.thread_time() - begun)
    return least, trials / len(blocks)


def main() -> None:
    """Print both."""
    for count in (1_000, 10_000, 100_000):
        plant = measure.prepare(measure.draw(count))
        took, trials = seconds(plant.program, plant.blocks, plant.starts, plant.constants)
        print(f"{count:8,} points: {1e6 * took / count:6.2f} us a point, {trials:.1f} trials")
    print("species  reactions  rows  slots  scratch, KiB  trials  us/point  us/trial")
    for species, reactions in SIZES:
        program = chain(species, reactions)
        took, trials = seconds(program, *points(program, 2048))
        head, each = program.integers, 1e6 * took / 2048
        sizes = f"{program.structure.rows:6d} {head[at.N_SLOTS]:6d} {head[at.W_END] * at.STRIDE / 1024:10.0f}"
        print(f"{species:7d} {reactions:10d} {sizes} {trials:10.1f} {each:9.2f} {each / trials:9.3f}")


if __name__ == "__main__":
    main()
