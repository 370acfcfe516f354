"""A study's structure as the kernel's tables: stoichiometry, rate terms, the operations of a sparse LU, the method's tableau."""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from sweep.kernel import layout as at
from sweep.kernel import method, sparse

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


class Watch(NamedTuple):
    """A condition that breaks a march off: sign (quantity - level) reaches zero from below, or is not below it to begin with.

    kind 0: the quantity is linear in states, volume (m3) and one species' amount (mol; -1: none); `weights` (z and then T, jacket),
    `volume`, `species` say how; with `per_volume` the level is a concentration (mol/m3). kind 1: heat release (W), 2: cooling duty (W).
    """

    kind: int
    sign: float
    weights: tuple[float, ...]
    species: int = -1
    volume: float = 0.0
    per_volume: bool = False


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
    watches: tuple[Watch, ...] = ()

    @property
    def rows(self) -> int:
        """Number of states: z, temperature, jacket, controller integral, energy over the boundary."""
        return int(self.sources.shape[0]) + 4


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


def _touched(structure: Structure) -> NDArray[np.bool_]:
    """Return which rates depend on which chemical states, (reactions, z)."""
    touched = np.zeros((len(structure.reactions), structure.sources.shape[0]), dtype=bool)
    for j, terms in enumerate(structure.reactions):
        for term in terms:
            for factor in term.factors:
                touched[j] |= structure.amounts[factor.species] != 0.0
    return touched


def _pattern(structure: Structure) -> NDArray[np.bool_]:
    """Return which entries of the Jacobian may differ from zero, shape (rows, rows)."""
    nz, rows = structure.sources.shape[0], structure.rows
    t, jacket, integral, energy = nz, nz + 1, nz + 2, nz + 3
    pattern = np.zeros((rows, rows), dtype=bool)
    pattern[:nz, :nz] = (np.abs(structure.sources) @ _touched(structure)) > 0.0
    pattern[: nz + 1, t] = True
    pattern[t, : nz + 2] = True
    pattern[jacket, [t, jacket, integral]] = True
    pattern[integral, [t, integral]] = True
    pattern[energy, : nz + 2] = True
    np.fill_diagonal(pattern, True)
    return pattern


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


def _write_sparse(tables: _Tables, header: int, matrix: Floats) -> list[int]:
    """Append, row by row, the number of entries and then each entry's column with its coefficient; return where rows start."""
    tables.place(header)
    starts = []
    for row in matrix:
        starts.append(len(tables.integers))
        columns = np.flatnonzero(row)
        tables.add(len(columns))
        for column in columns:
            tables.add(int(column), row[column])
    return starts


def _write_reactions(tables: _Tables, structure: Structure, starts: list[int]) -> None:
    """Append per reaction its number of terms; per term [factors | sign], [whether any order is not whole]; per factor [species],
    [whole power | rest], [where the species' amount stands]."""
    tables.place(at.AT_REACTIONS)
    for terms in structure.reactions:
        tables.add(len(terms))
        for term in terms:
            tables.add(len(term.factors), term.sign)
            tables.add(int(any(factor.extra != 0.0 for factor in term.factors)))
            for factor in term.factors:
                tables.add(factor.species)
                tables.add(factor.power, factor.extra)
                tables.add(starts[factor.species])


def _write_chemical(tables: _Tables, structure: Structure, slots: Integers) -> None:
    """Append per chemical state [slot of its T column], [columns]; per column [slot], [entries], and per entry a place in the
    derivatives of the rates with the weight of that rate."""
    tables.place(at.AT_CHEMICAL)
    touched, nz = _touched(structure), structure.sources.shape[0]
    for k in range(nz):
        used = (structure.sources[k][:, None] != 0.0) & touched
        columns = np.flatnonzero(used.any(axis=0))
        tables.add(slots[k, nz])
        tables.add(len(columns))
        for l in columns:
            tables.add(slots[k, l])
            tables.add(used[:, l].sum())
            for j in np.flatnonzero(used[:, l]):
                tables.add(j * nz + l, structure.sources[k, j])


def _write_method(tables: _Tables) -> None:
    """Append per stage its time, its share of df/dt, its row of A and of C (one fewer than stages each); then the dense output's rows."""
    tables.place(at.AT_METHOD)
    for k in range(method.STAGES):
        for value in (method.TIMES[k], method.SLOPES[k], *method.A[k, :-1], *method.C[k, :-1]):
            tables.add(0, value)
    for value in method.DENSE.ravel():
        tables.add(0, value)


def _write_watches(tables: _Tables, structure: Structure) -> None:
    """Append per watch [kind | sign], [species | whether the level is per volume], [- | weight of the volume], then its weights."""
    tables.integers[at.N_WATCHES] = len(structure.watches)
    tables.place(at.AT_WATCHES)
    for watch in structure.watches:
        tables.add(watch.kind, watch.sign)
        tables.add(watch.species, 1.0 if watch.per_volume else 0.0)
        tables.add(0, watch.volume)
        for weight in watch.weights:
            tables.add(0, weight)


def _lay_out(head: list[int], structure: Structure) -> None:
    """Write into the header at which row of scratch memory each array starts."""
    species, nz = structure.amounts.shape
    rows, reactions = structure.rows, len(structure.reactions)
    sizes = {
        at.W_LANE: at.LANE_ROWS, at.W_Y: rows, at.W_NEW: rows, at.W_F: rows, at.W_SLOPE: rows, at.W_K: method.STAGES * rows,
        at.W_P: rows, at.W_Q: rows, at.W_DENSE: rows, at.W_BEFORE: rows, at.W_BEST: rows,
        at.W_SLOTS: head[at.N_SLOTS], at.W_N: species, at.W_C: species, at.W_CP: species,
        at.W_R: reactions, at.W_HEAT: reactions, at.W_REFERENCE: reactions, at.W_R_T: reactions, at.W_R_TIME: reactions,
        at.W_D: reactions * nz, at.W_CP_Z: nz, at.W_HEAT_Z: nz, at.W_REFERENCE_Z: nz, at.W_BLOCK: head[at.BLOCK_LENGTH],
        at.W_LEVEL: len(structure.watches),
    }  # fmt: skip
    start = 0
    for entry, size in sizes.items():
        head[entry] = start
        start += size
    head[at.W_END] = start


def _write_sizes(head: list[int], structure: Structure) -> None:
    """Write the counts into the header, and where each part of a segment's block starts."""
    species, nz = structure.amounts.shape
    n_terms = sum(len(terms) for terms in structure.reactions)
    head[at.N_SPECIES], head[at.N_STATES], head[at.N_REACTIONS], head[at.N_ROWS] = species, nz, len(structure.reactions), structure.rows
    head[at.HEAT_TERMS], head[at.CP_TERMS], head[at.RATE_TERMS] = structure.heat_terms, structure.cp_terms, structure.rate_terms
    head[at.HAS_DUTY] = int(structure.has_duty)
    sizes = (species, species, n_terms * structure.rate_terms, len(structure.reactions) * structure.heat_terms, species * structure.cp_terms)
    starts = at.BLOCK_FIXED + np.concatenate(([0], np.cumsum(sizes)))
    for header, start in zip(range(at.BLOCK_FEED, at.BLOCK_LENGTH + 1), starts, strict=True):
        head[header] = int(start)


def compile_tables(structure: Structure) -> Program:
    """Return the kernel's tables for a study's structure."""
    tables = _Tables()
    lu = sparse.operations(_pattern(structure))
    starts = _write_sparse(tables, at.AT_AMOUNTS, structure.amounts)
    _write_reactions(tables, structure, starts)
    _write_sparse(tables, at.AT_SOURCES, structure.sources)
    _write_sparse(tables, at.AT_COLUMNS, structure.amounts.T)
    _write_sparse(tables, at.AT_TOUCHED, _touched(structure).astype(np.float64))
    _write_chemical(tables, structure, lu.slots)
    for header, stream in ((at.AT_SLOTS, lu.slots.ravel()), (at.AT_FACTOR, lu.factor), (at.AT_FORWARD, lu.forward), (at.AT_BACKWARD, lu.backward)):
        tables.place(header)
        for entry in stream:
            tables.add(int(entry))
    for header, weights in ((at.AT_TARGET, structure.target), (at.AT_PRODUCT, structure.product)):
        tables.place(header)
        for weight in weights:
            tables.add(0, weight)
    _write_method(tables)
    _write_watches(tables, structure)
    tables.integers[at.N_SLOTS] = lu.total
    _write_sizes(tables.integers, structure)
    _lay_out(tables.integers, structure)
    return Program(np.array(tables.integers, dtype=np.int64), np.array(tables.floats), structure)
