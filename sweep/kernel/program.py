"""A study's structure as the kernel's tables: stoichiometry, rate terms, and the operations of a sparse LU."""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sweep.kernel import layout as at

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]


class Factor(NamedTuple):
    """One concentration in a rate product: c**power times (|c| + delta)**extra."""

    species: int
    power: int
    extra: float


class Term(NamedTuple):
    """One direction of a reaction."""

    sign: float
    factors: tuple[Factor, ...]


@dataclass(frozen=True)
class Structure:
    """What the kernel must know of a study beside numbers.

    sources: (z, reactions), dz/dt = V sources @ r; amounts: (species, z), n = base + feed + amounts @ z;
    target, product: (z,), moles of the target consumed and of the product formed, up to a constant.
    """

    reactions: tuple[tuple[Term, ...], ...]
    sources: Floats
    amounts: Floats
    target: Floats
    product: Floats
    heat_terms: int
    cp_terms: int
    rate_terms: int
    has_duty: bool

    @property
    def rows(self) -> int:
        """Number of states: z, temperature, jacket, controller integral, energy over the boundary."""
        return self.sources.shape[0] + 4


@dataclass(frozen=True)
class Program:
    """The two tables, and the sizes that the caller needs."""

    integers: Integers
    floats: Floats
    structure: Structure

    @property
    def block(self) -> int:
        """Doubles per segment block."""
        return int(self.integers[at.BLOCK_LENGTH])


def _pattern(structure: Structure) -> NDArray[np.bool_]:
    """Return which entries of the Jacobian may differ from zero, shape (rows, rows)."""
    nz, rows = structure.sources.shape[0], structure.rows
    t, jacket, integral, energy = nz, nz + 1, nz + 2, nz + 3
    touched = np.zeros((len(structure.reactions), nz), dtype=bool)
    for j, terms in enumerate(structure.reactions):
        for term in terms:
            for factor in term.factors:
                touched[j] |= structure.amounts[factor.species] != 0.0
    pattern = np.zeros((rows, rows), dtype=bool)
    pattern[:nz, :nz] = (np.abs(structure.sources) @ touched) > 0.0
    pattern[: nz + 1, t] = True
    pattern[t, : nz + 2] = True
    pattern[jacket, [t, jacket, integral]] = True
    pattern[integral, [t, integral]] = True
    pattern[energy, : nz + 2] = True
    np.fill_diagonal(pattern, True)
    return pattern


def _order(pattern: NDArray[np.bool_]) -> list[int]:
    """Return the order of elimination: chemical states by Markowitz's count, then integral, jacket, temperature, energy."""
    nz = pattern.shape[0] - 4
    left, order, work = list(range(nz)), [], pattern.copy()
    while left:
        pivot = min(left, key=lambda k: (work[k, left].sum() - 1) * (work[left, k].sum() - 1))
        order.append(pivot)
        left.remove(pivot)
        work |= np.outer(work[:, pivot], work[pivot])
    return [*order, nz + 2, nz + 1, nz, nz + 3]


def _factorise(pattern: NDArray[np.bool_]) -> tuple[Integers, list[int], list[int], list[int], int]:
    """Return the slot of each entry (-1: none), and the operations of factorisation, forward and backward solve."""
    order, filled = _order(pattern), pattern.copy()
    for step, k in enumerate(order):
        rest = [i for i in order[step + 1 :] if filled[i, k]]
        for i in rest:
            for j in order[step + 1 :]:
                filled[i, j] |= filled[k, j]
    slots = np.full(pattern.shape, -1, dtype=np.int64)
    slots[filled] = np.arange(filled.sum())
    factor: list[int] = []
    forward: list[int] = []
    backward: list[int] = []
    for step, k in enumerate(order):
        rest = order[step + 1 :]
        factor += [0, slots[k, k], 0, 0]
        for i in rest:
            if filled[i, k]:
                factor += [1, slots[i, k], slots[k, k], 0]
                forward += [i, k, slots[i, k]]
                for j in rest:
                    if filled[k, j]:
                        factor += [2, slots[i, j], slots[i, k], slots[k, j]]
    for step in range(len(order) - 1, -1, -1):
        k = order[step]
        for j in order[step + 1 :]:
            if filled[k, j]:
                backward += [1, k, j, slots[k, j]]
        backward += [0, k, 0, slots[k, k]]
    return slots, factor, forward, backward, int(filled.sum())


class _Tables:
    """The two tables while they grow."""

    def __init__(self) -> None:
        self.integers: list[int] = [0] * at.HEADER
        self.floats: list[float] = [0.0] * at.HEADER

    def place(self, header: int) -> None:
        """Note in the header that a stream starts here."""
        self.integers[header] = len(self.integers)

    def add(self, integer: int, value: float = 0.0) -> None:
        """Append an integer and the coefficient beside it."""
        self.integers.append(int(integer))
        self.floats.append(float(value))


def _write_sparse(tables: _Tables, matrix: Floats) -> None:
    """Append, row by row, the number of entries and then each entry's column with its coefficient."""
    for row in matrix:
        columns = np.flatnonzero(row)
        tables.add(len(columns))
        for column in columns:
            tables.add(column, row[column])


def _write_reactions(tables: _Tables, structure: Structure) -> None:
    for terms in structure.reactions:
        tables.add(len(terms))
        for term in terms:
            logs = any(factor.extra != 0.0 for factor in term.factors)
            tables.add(len(term.factors), term.sign)
            tables.add(int(logs))
            for factor in term.factors:
                tables.add(factor.species)
                tables.add(factor.power, factor.extra)


def _lay_out(head: list[int], structure: Structure) -> None:
    """Write into the header at which row of scratch memory each array starts."""
    species, nz = structure.amounts.shape
    rows, reactions = structure.rows, len(structure.reactions)
    sizes = {
        at.W_BLOCK: head[at.BLOCK_LENGTH], at.W_Y: rows, at.W_NEW: rows, at.W_F: rows, at.W_SLOPE: rows, at.W_K: 6 * rows,
        at.W_X: rows, at.W_SLOTS: head[at.N_SLOTS], at.W_N: species, at.W_C: species, at.W_CP: species, at.W_R: reactions,
        at.W_R_T: reactions, at.W_R_TIME: reactions, at.W_HEAT: reactions, at.W_D: reactions * nz, at.W_LANE: at.LANE_ROWS,
    }  # fmt: skip
    start = 0
    for entry, size in sizes.items():
        head[entry] = start
        start += size
    head[at.W_END] = start


def compile_tables(structure: Structure) -> Program:
    """Return the kernel's tables for a study's structure."""
    tables = _Tables()
    slots, factor, forward, backward, n_slots = _factorise(_pattern(structure))
    tables.place(at.AT_REACTIONS)
    _write_reactions(tables, structure)
    tables.place(at.AT_SOURCES)
    _write_sparse(tables, structure.sources)
    tables.place(at.AT_AMOUNTS)
    _write_sparse(tables, structure.amounts)
    for header, stream in ((at.AT_SLOTS, slots.ravel()), (at.AT_FACTOR, factor), (at.AT_FORWARD, forward), (at.AT_BACKWARD, backward)):
        tables.place(header)
        for entry in stream:
            tables.add(entry)
    for header, weights in ((at.AT_TARGET, structure.target), (at.AT_PRODUCT, structure.product)):
        tables.place(header)
        for weight in weights:
            tables.add(0, weight)
    head = tables.integers
    species, nz = structure.amounts.shape
    n_terms = sum(len(terms) for terms in structure.reactions)
    head[at.N_SPECIES], head[at.N_STATES], head[at.N_REACTIONS], head[at.N_ROWS] = species, nz, len(structure.reactions), structure.rows
    head[at.ROW_T], head[at.ROW_JACKET], head[at.ROW_INTEGRAL], head[at.ROW_ENERGY] = nz, nz + 1, nz + 2, nz + 3
    head[at.LU_FACTORS], head[at.N_LU_FORWARD], head[at.N_LU_BACKWARD] = len(factor) // 4, len(forward) // 3, len(backward) // 4
    head[at.N_SLOTS], head[at.HAS_DUTY] = n_slots, int(structure.has_duty)
    head[at.HEAT_TERMS], head[at.CP_TERMS], head[at.RATE_TERMS] = structure.heat_terms, structure.cp_terms, structure.rate_terms
    sizes = (species, species, n_terms * structure.rate_terms, len(structure.reactions) * structure.heat_terms, species * structure.cp_terms)
    starts = at.BLOCK_FIXED + np.concatenate(([0], np.cumsum(sizes)))
    for header, start in zip(range(at.BLOCK_FEED, at.BLOCK_LENGTH + 1), starts, strict=True):
        head[header] = int(start)
    _lay_out(head, structure)
    return Program(np.array(tables.integers, dtype=np.int64), np.array(tables.floats), structure)
